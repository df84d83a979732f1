"""The long proofs: each a size, a piece of it that one process does, and how pieces add up.

A piece is named by its seed, so that a red one can be had again by itself.
"""

from collections import Counter
from collections.abc import Callable
from dataclasses import asdict
from typing import NamedTuple

from tests.support.console_scripts import run_script
from tests.support.exchange_world import FAIR, FOUL, World
from tests.support.forgery import assault
from tests.support.fuzz_runs import Fuzzed, fuzz_decoder, fuzz_kit
from tests.support.mutations import run_mutations
from tests.support.wear_trial import LEVEL, SHOWN_BY, alarmed, corrected, fleet_trial

Figures = dict[str, int]


class Proof(NamedTuple):
    """One proof. ``piece(seed, size)`` returns figures; ``breaches`` among them must be 0."""

    name: str
    size: int
    piece_size: int
    piece: Callable[[int, int], Figures]
    unit: str


def exchange_piece(seed: int, size: int) -> Figures:
    """Law 1 between two consoles' exchanges and modules that follow one of them, over fair and foul
    air in turn."""
    world = World(seed, FOUL if seed % 2 else FAIR).run(size)
    wrong = [*world.breaches(), *map(str, world.false_refusals())]
    for each in wrong:
        print(f"seed {seed}: {each}")
    endings = {how.value: count for how, count in world.endings().items()}
    return {
        "commands": len(world.sent),
        "carried_out": sum(world.deeds.carried_out.values()),
        "restarts": world.deeds.restarts,
        "repeats": world.deeds.repeats,
        "console_restarts": world.console_restarts,
        "takeovers": world.deeds.takeovers,
        "permits_lapsed": world.deeds.lapses,
        "breaches": len(wrong),
        **endings,
    }


def console_piece(seed: int, size: int) -> Figures:
    """Law 1 for the whole console core against the simulated fleet."""
    outcome = run_script(seed, size, loss=(0.1, 0.25, 0.4)[seed % 3])
    for each in outcome.breaches:
        print(f"seed {seed}: {each}")
    figures = {name: value for name, value in asdict(outcome).items() if name != "breaches"}
    return {**figures, "breaches": len(outcome.breaches)}


def seal_piece(seed: int, size: int) -> Figures:
    """Forged, altered, cut, replayed frames against a gate: none accepted, no honest one lost."""
    result = asdict(assault(seed, size))
    return {**result, "breaches": result["forged_accepted"] + result["honest_refused"]}


def decoder_piece(seed: int, size: int) -> Figures:
    """The decoder on mutated frames: no error but the documented one, memory bounded."""
    found = asdict(run_mutations(seed, size))
    del found["most_held"]
    return {**found, "breaches": 0}


def decoder_coverage_piece(seed: int, size: int) -> Figures:
    """The Python side under a fuzzer that looks at which branches it reaches."""
    return _fuzzed(seed, fuzz_decoder(seed, size))


def kit_coverage_piece(seed: int, size: int) -> Figures:
    """The whole C module under such a fuzzer, with the sanitizers."""
    return _fuzzed(seed, fuzz_kit(seed, size))


def wear_piece(seed: int, size: int) -> Figures:
    """Healthy fleets of which at most one may look worn, and as many worn ones that all must."""
    first = 5_000 * seed
    alarms = sum(alarmed(fleet_trial(first + i)) for i in range(size))
    kinds = [list(SHOWN_BY)[i % len(SHOWN_BY)] for i in range(size)]
    missed = sum(
        corrected(fleet_trial(first + i, [kind]))[SHOWN_BY[kind]] >= LEVEL
        for i, kind in enumerate(kinds)
    )
    return {
        "fleets": size,
        "alarms": alarms,
        "missed": missed,
        "breaches": max(0, alarms - 1) + missed,
    }


def _fuzzed(seed: int, found: Fuzzed) -> Figures:
    if found.report:
        print(f"seed {seed}: {found.report}")
    return {"frames": found.frames, "breaches": int(bool(found.report))}


PROOFS = (
    Proof("law_one_exchange", 200_000, 1_000, exchange_piece, "commands"),
    Proof("law_one_console", 20_000, 300, console_piece, "commands"),
    Proof("seal_forgeries", 1_000_000, 20_000, seal_piece, "frames"),
    Proof("decoder_mutations", 10_000_000, 100_000, decoder_piece, "frames"),
    Proof("decoder_coverage", 4_000_000, 400_000, decoder_coverage_piece, "frames"),
    Proof("kit_coverage", 400_000, 40_000, kit_coverage_piece, "frames"),
    Proof("wear_trends", 100, 100, wear_piece, "fleets"),
)


def add_up(pieces: list[Figures]) -> Figures:
    """Sum the figures of all pieces."""
    total: Counter[str] = Counter()
    for piece in pieces:
        total.update(piece)
    return dict(total)
