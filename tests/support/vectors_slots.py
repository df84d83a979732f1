"""Vectors of telemetry slots: when a module that was given one reports, worked by hand.

A step is a module time in milliseconds, what is heard then, and the times of the telemetry sent
since the step before; None: not looked at, since modules begin at a phase of their own. The
module's clock is a second ahead of the fleet's, as in vectors_words.py.
"""

from tests.support.vectors_words import FOLLOWS, LATER, call, probe
from tests.support.wire_by_hand import (
    ANNA,
    BERT,
    BIRCH,
    BITS,
    BOOT,
    EVERYONE,
    IDENTITY,
    Vector,
    named,
    vector,
)

Step = tuple[int, bytes, list[int] | None]
RULE = "Telemetry slots"
WRAP = 2**32


def slot(period_ms: int, phase_ms: int, console: int = ANNA, **other: int) -> bytes:
    """A Slot."""
    boot, bits = other.get("boot", BOOT), other.get("bits", BITS)
    return named("Slot", (console, boot, period_ms, bits, phase_ms), other.get("to"))


def tell(offset_ms: int, console: int = ANNA) -> bytes:
    """A Probe that tells another offset than the usual second."""
    return named("Probe", (console, BOOT, 9, BITS, offset_ms % WRAP, 5))


BEGUN: list[Step] = [(at_ms, heard, None) for at_ms, heard, _ in FOLLOWS]
TOLD: list[Step] = [*BEGUN, (10, probe(1), None)]
KEPT: list[Step] = [*TOLD, (20, slot(400, 150), None), (3000, b"", None)]
"""Fleet times 150, 550, 950 and so on are module times 1,150, 1,550, 1,950."""


def plain_scripts() -> list[tuple[str, list[Step]]]:
    """A slot and a clock that stay."""
    return [
        ("in-its-slot", [*KEPT, (4000, b"", [3150, 3550, 3950])]),
        ("a-slot-at-phase-zero", [*TOLD, (20, slot(1000, 0), None), (2500, b"", None),
                                  (5999, b"", [3000, 4000, 5000]), (6000, b"", [6000])]),
        ("slower-than-the-setting", [*TOLD, (20, slot(3000, 2999), None), (4500, b"", None),
                                     (10_000, b"", [6999, 9999])]),
        ("faster-than-the-setting", [*TOLD, (20, slot(50, 7), None), (2000, b"", None),
                                     (2200, b"", [2007, 2057, 2107, 2157])]),
        ("the-same-slot-again", [*KEPT, (3200, slot(400, 150), [3150]),
                                 (3560, slot(400, 150), [3550]), (4000, b"", [3950])]),
        ("fleet-time-wraps",
         # Module time 4,000 is fleet time 0, which is no place in the old count: 2^32 is 296 more
         # than a multiple of 1,000. The last before it is 2^32 - 296 + 100, at 3,804.
         [*BEGUN, (10, tell(4000), None), (20, slot(1000, 100), None), (2500, b"", None),
          (3900, b"", [2804, 3804]), (6200, b"", [5100, 6100])]),
    ]  # fmt: skip


def change_scripts() -> list[tuple[str, list[Step]]]:
    """Another slot, another word on the clock. The last slot before 3,000 was at 2,750."""
    return [
        ("a-later-slot", [*KEPT, (3000, slot(400, 250), []), (4000, b"", [3250, 3650])]),
        ("an-earlier-slot-is-not-sooner-than-half-a-period",
         # At 3,200 the last was due at 3,150, so the next not before 3,350: 3,300 is left out.
         [*KEPT, (3200, slot(400, 300), [3150]), (3699, b"", []), (4200, b"", [3700, 4100])]),
        ("told-a-little-earlier", [*KEPT, (3200, tell(990), [3150]), (4000, b"", [3540, 3940])]),
        ("told-a-little-later", [*KEPT, (3200, tell(1010), [3150]), (4000, b"", [3560, 3960])]),
        ("told-earlier-just-before-its-slot",
         # The slot at 3,550 becomes 3,540 at 3,545: made up for at once, whose millisecond is not
         # looked at, and only once.
         [*KEPT, (3545, tell(990), [3150]), (3550, b"", None), (4000, b"", [3940])]),
        ("told-later-just-after-its-slot",
         [*KEPT, (3555, tell(1010), [3150, 3550]), (4000, b"", [3960])]),
        ("told-an-unknown-clock-keeps-the-last-word",
         [*KEPT, (3200, probe(2, bound=0xFFFF), [3150]), (4000, b"", [3550, 3950])]),
    ]  # fmt: skip


def end_scripts() -> list[tuple[str, list[Step]]]:
    """Whose slot it is, and how it ends: from its last time on, every 500 ms."""
    own = (4500, b"", [3650, 4150])
    return [
        ("taken-away", [*KEPT, (3200, slot(0, 0), [3150]), own]),
        ("released", [*KEPT, (3200, named("Release", (ANNA,)), [3150]), own]),
        ("another-console-ends-it",
         [*KEPT, (3200, call(LATER, BERT), [3150]), own]),
        ("a-newer-epoch-of-its-console-keeps-it",
         [*KEPT, (3200, call(LATER), [3150]), (4000, b"", [3550, 3950])]),
        ("a-slot-waits-for-the-clock",
         [*BEGUN, (20, slot(400, 150), None), (2000, b"", None), (2001, probe(1), None),
          (3000, b"", None), (4000, b"", [3150, 3550, 3950])]),
        ("not-its-consoles", [*KEPT, (3200, slot(400, 300, BERT), [3150]),
                              (4000, b"", [3550, 3950])]),
        ("another-consoles-release-and-end",
         [*KEPT, (3200, named("Release", (BERT,)), [3150]), (3201, slot(0, 0, BERT), []),
          (4000, b"", [3550, 3950])]),
        ("for-another-box-boot-or-more-than-one",
         [*KEPT, (3200, slot(400, 300, bits=BITS + 1), [3150]),
          (3201, slot(400, 300, boot=BOOT + 1), []), (3202, slot(400, 300, to=EVERYONE), []),
          (3203, slot(400, 300, to=0xF000), []), (4000, b"", [3550, 3950])]),
        ("a-phase-outside-its-period",
         [*KEPT, (3200, slot(400, 400), [3150]), (4000, b"", [3550, 3950])]),
    ]  # fmt: skip


def slot_vectors() -> list[Vector]:
    """All of them."""
    return [
        vector(
            f"slot-{name}",
            RULE,
            "telemetry",
            "by hand: from the rules, step by step",
            identity=IDENTITY,
            boot=BOOT,
            address=BIRCH,
            steps=[
                {"at_ms": at_ms, "in": heard.hex(), "times": times} for at_ms, heard, times in steps
            ],
        )
        for name, steps in [*plain_scripts(), *change_scripts(), *end_scripts()]
    ]
