"""Scripts of a module's own interlocks, of lock-out, and of settings: no physics in them."""

from tests.support.vectors_words import (
    BAD_FIELD,
    BUSY,
    CLOCK_UNKNOWN,
    FOLLOWS,
    LOCKED_OUT,
    NO_PERMIT,
    OTHER_PERSON,
    OVER_SPEED,
    READ_ONLY,
    READY,
    RESTED,
    STOP_IN_FORCE,
    STOPPED,
    TOLD,
    TOO_LATE,
    UNSUPPORTED,
    WALL,
    Step,
    accepted,
    call,
    done,
    echo,
    hop,
    lock,
    locked,
    permit,
    pivot,
    probe,
    refused,
    rest,
    spin,
    stop,
    stopped,
    twist,
    unlock,
    write,
)
from tests.support.wire_by_hand import (
    ANNA,
    BERT,
    BITS,
    BOOT,
    CUT,
    EPOCH,
    answer,
    named,
)


def refusal_scripts() -> list[tuple[str, list[Step]]]:
    """One command, and all that stands in its way; what comes first is told."""
    fast = {"speed": 9001, "stage": 3}
    return [
        (
            "refusals-in-their-order",
            [
                *FOLLOWS,
                (1, lock(1), [done(1), locked()]),
                (2, stop(), [stopped(1, 1)]),
                (3, pivot(2, 2, speed=0), refused(2, BAD_FIELD)),
                (4, pivot(3, 3, **fast), refused(3, STOP_IN_FORCE)),
                (5, named("Clear", (1,)), [stopped(1, 0)]),
                (6, pivot(4, 5, **fast), refused(4, LOCKED_OUT)),
                (7, unlock(5), [done(5), locked(b"")]),
                (8, pivot(6, 7, **fast), refused(6, CLOCK_UNKNOWN)),
                (9, probe(1), [echo(1, 9)]),
                (10, pivot(7, 9, **fast), refused(7, TOO_LATE)),
                (11, pivot(8, 9000, **fast), refused(8, NO_PERMIT)),
                (12, permit(), []),
                (13, pivot(9, 9000, **fast), refused(9, OVER_SPEED)),
                (14, pivot(10, 9000), accepted(10)),
                (15, pivot(11, 9000, **fast), refused(11, BUSY)),
            ],
        ),
        (
            "spin-meets-them-too",
            [
                *FOLLOWS,
                (2, stop(), [stopped(1, 1)]),
                (3, spin(1, 2, 0), refused(1, BAD_FIELD)),
                (4, spin(2, 3, 9001), refused(2, STOP_IN_FORCE)),
                (5, named("Clear", (1,)), [stopped(1, 0)]),
                (6, spin(3, 5, 9001), refused(3, CLOCK_UNKNOWN)),
                (7, probe(1), [echo(1, 7)]),
                (8, spin(4, 7, 9001), refused(4, TOO_LATE)),
                (9, spin(5, 9000, 9001), refused(5, NO_PERMIT)),
                (10, permit(), []),
                (11, spin(6, 9000, 9001), refused(6, OVER_SPEED)),
                (12, spin(7, 9000, -9001), refused(7, OVER_SPEED)),
            ],
        ),
        (
            "fields-without-a-meaning",
            [
                *READY,
                (30, pivot(1, setting=0), refused(1, BAD_FIELD)),
                (31, pivot(2, setting=9), refused(2, BAD_FIELD)),
                (32, pivot(3, direction=0), refused(3, BAD_FIELD)),
                (33, pivot(4, direction=2), refused(4, BAD_FIELD)),
                (34, lock(5, b""), refused(5, BAD_FIELD)),
                (35, unlock(6, b""), refused(6, BAD_FIELD)),
                (36, named("Flash", (EPOCH, BOOT, 7, BITS, 0)), refused(7, BAD_FIELD)),
                (37, spin(8, hold_ms=0), refused(8, BAD_FIELD)),
            ],
        ),
        (
            "motions-that-it-cannot-do",
            [
                *READY,
                (30, hop(1, speed=0), refused(1, BAD_FIELD)),
                (31, hop(2), refused(2, UNSUPPORTED)),
                (32, twist(3), refused(3, UNSUPPORTED)),
                (33, pivot(4, setting=WALL), refused(4, UNSUPPORTED)),
                (34, stop(), [stopped(1, 1)]),
                (35, pivot(5, setting=WALL), refused(5, UNSUPPORTED)),
                (36, pivot(6), refused(6, STOP_IN_FORCE)),
            ],
        ),
        (
            "no-permit-comes-before-busy",
            [
                *READY,
                (30, pivot(1, 50_000), accepted(1)),
                (31, pivot(2, 50_000), refused(2, BUSY)),
                (30_991, pivot(3, 50_000), refused(3, NO_PERMIT)),
            ],
        ),
        (
            "no-permit-after-release",
            [
                *READY,
                (30, named("Release", (BERT,)), []),
                (31, named("Release", (ANNA,)), []),
                (32, pivot(1), refused(1, NO_PERMIT)),
            ],
        ),
        (
            "no-permit-once-it-has-ended",
            [
                *READY,
                (30_990, pivot(1, 40_000), accepted(1)),
                (30_990, rest(2), [done(2), answer(1, CUT, RESTED)]),
                (30_991, pivot(3, 40_000), refused(3, NO_PERMIT)),
            ],
        ),
        (
            "the-permit-of-another-console",
            [*TOLD, (20, permit(30_000, BERT), []), (21, pivot(1), refused(1, NO_PERMIT))],
        ),
        (
            "the-latest-start-is-still-in-time",
            [
                *READY,
                (100, pivot(1, 99), refused(1, TOO_LATE)),
                (100, pivot(2, 100), accepted(2)),
                (101, b"", [answer(2, CUT, TOO_LATE)]),
            ],
        ),
    ]


def lock_scripts() -> list[tuple[str, list[Step]]]:
    """Lock-out."""
    return [
        (
            "lock-out-and-unlock",
            [
                *READY,
                (30, lock(1), [done(1), locked()]),
                (31, pivot(2), refused(2, LOCKED_OUT)),
                (32, spin(3), refused(3, LOCKED_OUT)),
                (33, lock(4, b"Bob"), refused(4, LOCKED_OUT)),
                (34, unlock(5, b"Bob"), refused(5, OTHER_PERSON)),
                (35, unlock(6, b"ada"), refused(6, OTHER_PERSON)),
                (36, lock(7), [done(7), locked()]),
                (37, rest(8), [done(8)]),
                (38, unlock(9), [done(9), locked(b"")]),
                (39, pivot(10), accepted(10)),
            ],
        ),
        ("unlock-where-there-is-no-lock", [*FOLLOWS, (1, unlock(1), [done(1), locked(b"")])]),
        (
            "a-repeated-lock-out-is-answered-again",
            [
                *FOLLOWS,
                (1, lock(1), [done(1), locked()]),
                (2, lock(1), [done(1)]),
                (3, unlock(2), [done(2), locked(b"")]),
                (4, lock(1), [done(1)]),
                (5, unlock(3, b"Bob"), [done(3), locked(b"")]),
            ],
        ),
        (
            "a-lock-out-is-told-at-a-roll-call",
            [*FOLLOWS, (1, lock(1), [done(1), locked()]), (2, call(), [locked()])],
        ),
        (
            "twelve-bytes-of-a-name",
            [
                *FOLLOWS,
                (1, lock(1, b"abcdefghijkl"), [done(1), locked(b"abcdefghijkl")]),
                (2, unlock(2, b"abcdefghijk"), refused(2, OTHER_PERSON)),
                (3, unlock(3, b"abcdefghijkl"), [done(3), locked(b"")]),
            ],
        ),
    ]


def setting_scripts() -> list[tuple[str, list[Step]]]:
    """Settings."""
    return [
        (
            "settings",
            [
                *READY,
                (30, write(1, 5, 4), refused(1, READ_ONLY)),
                (31, write(2, 0, 1), refused(2, BAD_FIELD)),
                (32, write(3, 99, 1), refused(3, BAD_FIELD)),
                (33, write(4, 1, 9001), refused(4, BAD_FIELD)),
                (34, write(5, 1, 0), refused(5, BAD_FIELD)),
                (35, write(6, 1, -6000), refused(6, BAD_FIELD)),
                (36, write(7, 2, 0), refused(7, BAD_FIELD)),
                (37, write(8, 1, 6000), [done(8)]),
                (38, write(8, 1, 6000), [done(8)]),
                (39, pivot(9, speed=6001), refused(9, OVER_SPEED)),
                (40, pivot(10, speed=6000), accepted(10)),
            ],
        ),
        (
            "the-ends-of-a-range-are-in-it",
            [
                *TOLD,
                (20, write(1, 1, 9000), [done(1)]),
                (21, write(2, 4, 2**31 - 1), [done(2)]),
                (22, permit(to=0xF01F), []),
                (23, pivot(3), refused(3, NO_PERMIT)),
                (24, write(4, 4, -(2**31)), [done(4)]),
                (25, permit(to=0xF01E), []),
                (26, pivot(5), refused(5, NO_PERMIT)),
                (27, permit(to=0xF01F), []),
                (28, pivot(6, speed=9000), accepted(6)),
            ],
        ),
        (
            "a-latch-does-not-stop-a-setting",
            [*FOLLOWS, (1, stop(), [stopped(1, 1)]), (2, write(1, 4, 5), [done(1)])],
        ),
        (
            "groups",
            [
                *TOLD,
                (20, permit(to=0xF001), []),
                (21, pivot(1), refused(1, NO_PERMIT)),
                (22, write(2, 4, 0b10), [done(2)]),
                (23, permit(to=0xF000), []),
                (24, pivot(3), refused(3, NO_PERMIT)),
                (25, permit(to=0xF001), []),
                (26, pivot(4), accepted(4)),
                (27, named("Stop", (1,), 0xF000), []),
                (
                    28,
                    named("Stop", (1,), 0xF001),
                    [stopped(1, 1), answer(4, CUT, STOPPED)],
                ),
            ],
        ),
    ]
