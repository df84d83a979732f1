"""Random scripts of commands for the whole console core, and what must be true of each.

One console core with its reducer against the simulated fleet, in virtual time on one thread:
pivots, spins, flashes, rests, all-stops and clears over a bad radio, with restarts of modules
and of the console. Afterwards the modules' own tally is held against the console's rows.
"""

import hashlib
from collections import Counter
from dataclasses import dataclass, field

from console.errors import InputError
from sim_link.options import SimOptions
from storage.records import SessionClosed
from storage.rows import CommandRow, Row
from tests.support.virtual import VirtualSession

NAMES = ("alder", "birch", "cedar", "elm", "hazel", "larch", "maple", "rowan")
MOTIONS = (
    ("pivot forward at 5200", 5),
    ("pivot back at 4350", 5),
    ("spin at 1500 for 1 s", 3),
    ("flash for 1 s", 3),
    ("rest", 3),
)
DONE_IN_A_SCRIPT = "finished"


class Luck:
    """Draws that no library's release changes."""

    def __init__(self, seed: int) -> None:
        self._seed = seed
        self._count = 0

    def below(self, limit: int) -> int:
        """A whole number from 0 to ``limit`` - 1."""
        self._count += 1
        key = f"{self._seed}/{self._count}".encode()
        return int.from_bytes(hashlib.blake2b(key, digest_size=8).digest(), "big") % limit

    def chance(self, percent: int) -> bool:
        """True so often."""
        return self.below(100) < percent

    def motion(self) -> str:
        """One of the motions, by weight."""
        at = self.below(sum(weight for _, weight in MOTIONS))
        for text, weight in MOTIONS:
            if at < weight:
                return text
            at -= weight
        raise AssertionError("weights do not add up")


@dataclass
class Outcome:
    """What one script came to. ``breaches`` in words; empty where law 1 held."""

    commands: int = 0
    carried_out: int = 0
    module_restarts: int = 0
    console_restarts: int = 0
    stops: int = 0
    breaches: list[str] = field(default_factory=list)


def run_script(seed: int, commands: int, loss: float = 0.3) -> Outcome:
    """Run one script of about so many commands."""
    luck = Luck(seed)
    options = SimOptions(
        seed=seed, loss=loss, damage=0.05, repeat=0.15, reorder=0.1, delay_ms=float(luck.below(40))
    )
    session = VirtualSession(options)
    outcome = Outcome()
    epoch = 1_000_000
    while outcome.commands < commands:
        before = len(session.tally)
        _sitting(session, luck, outcome, min(commands - outcome.commands, 150))
        _compare(session, before, outcome)
        epoch += 1
        session.reconnect(epoch)
        outcome.console_restarts += 1
    return outcome


def _sitting(session: VirtualSession, luck: Luck, outcome: Outcome, commands: int) -> None:
    """One console, from its opening until its last record."""
    session.until_drivable()
    given = 0
    while given < commands:
        given += _order(session, luck)
        if luck.chance(2):
            module = session.world.modules[luck.below(len(session.world.modules))]
            module.restart(session.now_ns)
            outcome.module_restarts += 1
        if luck.chance(1):
            _stop_and_clear(session, luck)
            outcome.stops += 1
        session.run_for(luck.below(30) / 10)
    if luck.chance(50):
        session.run_for(20)  # else the console ends with commands in the air
    session.core.note(SessionClosed(session.now_ns, "2026-01-01T01:00:00Z", "closed"))
    outcome.commands += given


def _order(session: VirtualSession, luck: Luck) -> int:
    name = NAMES[luck.below(len(NAMES))]
    try:
        return len(session.order(f"{name} {luck.motion()}").commands)
    except InputError:
        session.run_for(0.2)  # an interlock stands in the way, as it should now and then
        return 0


def _stop_and_clear(session: VirtualSession, luck: Luck) -> None:
    number = session.core.stop_all("script", session.now_ns)
    session.run_for(luck.below(40) / 10)
    session.core.lift_stop(number, "script", session.now_ns)


def _compare(session: VirtualSession, before: int, outcome: Outcome) -> None:
    """Hold the tally of this sitting against the rows of its log."""
    session.run_for(8)  # what is in the air arrives, and nothing of it may be carried out twice
    tally = Counter((e.identity, e.boot, e.number, e.motion) for e in session.tally[before:])
    outcome.carried_out += sum(tally.values())
    outcome.breaches += [f"{key} carried out {n}x" for key, n in tally.items() if n > 1]
    rows = _last_rows(session.log.rows)
    for row in rows:
        key = (int(row.identity, 16), row.boot, row.number, row.motion)
        if row.ending is None or not row.final:
            outcome.breaches.append(f"{key} has no final ending: {row.ending}")
        if row.ending == DONE_IN_A_SCRIPT and not tally[key]:
            outcome.breaches.append(f"{key} told as finished, but not carried out")
        if row.ending == "refused" and tally[key]:
            outcome.breaches.append(f"{key} told as refused, but carried out")
    known = {(int(row.identity, 16), row.boot, row.number, row.motion) for row in rows}
    outcome.breaches += [f"{key} carried out, but not in the log" for key in tally.keys() - known]


def _last_rows(rows: list[Row]) -> list[CommandRow]:
    return list({row.command: row for row in rows if isinstance(row, CommandRow)}.values())
