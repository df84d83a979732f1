"""Vectors of a whole module, as far as no physics is in them: what goes in, what comes out.

Owns the scripts of what is staged and of two consoles, and the making of all vectors.
"""

from tests.support.vectors_interlocks import lock_scripts, refusal_scripts, setting_scripts
from tests.support.vectors_words import (
    BUSY,
    CLOCK_UNKNOWN,
    FOLLOWS,
    LATER,
    LOCKED_OUT,
    NO_PERMIT,
    NUMBER_PASSED,
    OTHER_EPOCH,
    OVER_SPEED,
    OWNED,
    READY,
    RESTED,
    STAGED,
    STOPPED,
    TOO_LATE,
    Step,
    accepted,
    call,
    done,
    echo,
    go,
    lock,
    locked,
    pivot,
    probe,
    refused,
    rest,
    stop,
    stopped,
    write,
)
from tests.support.wire_by_hand import (
    BERT,
    BIRCH,
    BITS,
    BOOT,
    CUT,
    ELM,
    EPOCH,
    EVERYONE,
    FINISHED,
    IDENTITY,
    REFUSED,
    UNKNOWN,
    Vector,
    answer,
    named,
    query,
    vector,
)


def staged_scripts() -> list[tuple[str, list[Step]]]:
    """What is staged and never begins."""
    late = [answer(1, CUT, TOO_LATE)]
    return [
        (
            "staged-and-stopped",
            [
                *STAGED,
                (40, stop(), [stopped(1, 1), answer(1, CUT, STOPPED)]),
                (41, go(60), []),
                (61, bytes.fromhex(query(1)), [answer(1, CUT, STOPPED)]),
                (62, pivot(1), [answer(1, CUT, STOPPED)]),
                (20_001, b"", []),
            ],
        ),
        (
            "staged-and-rested",
            [*STAGED, (40, rest(2), [done(2), answer(1, CUT, RESTED)]), (20_001, b"", [])],
        ),
        (
            "staged-and-locked-out",
            [
                *STAGED,
                (40, lock(2), [done(2), locked(), answer(1, CUT, LOCKED_OUT)]),
                (20_001, b"", []),
            ],
        ),
        ("staged-and-no-go", [*STAGED, (20_000, b"", []), (20_001, b"", late)]),
        (
            "staged-and-a-newer-epoch",
            [*STAGED, (40, call(EPOCH + 1), []), (41, go(60), []), (20_001, b"", [])],
        ),
        (
            "a-repeat-of-what-is-staged",
            [
                *STAGED,
                (40, pivot(1), accepted(1)),
                (41, bytes.fromhex(query(1)), accepted(1)),
                (42, pivot(2), refused(2, BUSY)),
                (43, named("Flash", (EPOCH, BOOT, 3, BITS, 500)), refused(3, BUSY)),
                (20_001, b"", late),
            ],
        ),
        (
            "a-go-that-starts-nothing",
            [
                *STAGED,
                (40, go(100, stage=4), []),
                (41, go(100, console=BERT), []),
                (42, go(41), []),
                (43, go(20_001), []),
                (44, go(100, to=0xF000), []),
                (20_000, b"", []),
                (20_001, b"", late),
            ],
        ),
        (
            "a-start-without-a-permit",
            [*READY, (30, pivot(1, 50_000), accepted(1)), (40, go(31_000), []),
             (30_999, b"", []), (31_000, b"", [answer(1, CUT, NO_PERMIT)])],
        ),
        (
            "a-start-at-the-latest-time-is-in-time",
            [*READY, (30, pivot(1, 31_000), accepted(1)), (40, go(31_000), []),
             (30_999, b"", []), (31_000, b"", [answer(1, CUT, NO_PERMIT)]), (31_001, b"", [])],
        ),
        (
            "the-last-go-heard-in-time-counts",
            [*READY, (30, pivot(1, 50_000), accepted(1)), (40, go(31_000), []),
             (50, go(32_000), []), (31_001, b"", []),
             (32_000, b"", [answer(1, CUT, NO_PERMIT)])],
        ),
        (
            "a-start-above-the-limit",
            [
                *STAGED,
                (40, write(2, 1, 4000), [done(2)]),
                (41, go(100), []),
                (100, b"", [answer(1, CUT, OVER_SPEED)]),
            ],
        ),
    ]  # fmt: skip


def console_scripts() -> list[tuple[str, list[Step]]]:
    """Two consoles, and what is meant for whom."""
    theirs, no_trace = LATER, named("TraceChunk", (BOOT, 9, BITS, 0, 0, bytes(24))).hex()
    owned = [answer(1, REFUSED, OWNED, epoch=theirs)]
    return [
        (
            "a-second-console",
            [
                *FOLLOWS,
                (1, rest(1), [done(1)]),
                (2, call(theirs, BERT), []),
                (3, rest(1, theirs), owned),
                (4, bytes.fromhex(query(1, epoch=theirs)),
                 [answer(1, UNKNOWN, OTHER_EPOCH, epoch=theirs)]),
                (5, probe(7, BERT), [echo(7, 5)]),
                (6, pivot(2), refused(2, CLOCK_UNKNOWN)),
                (7, named("Release", (BERT,)), []),
                (8, rest(1, theirs), owned),
                (9, named("TraceAsk", (theirs, BOOT, 9, BITS, 0, 1)), [no_trace]),
                (10, stop(2), [stopped(2, 1)]),
                (11, named("Clear", (2,)), [stopped(2, 0)]),
                (2999, rest(1, theirs), owned),
                (3000, rest(1, theirs), [answer(1, REFUSED, OTHER_EPOCH, epoch=theirs)]),
                (3001, call(theirs, BERT), []),
                (3002, rest(1, theirs), [answer(1, FINISHED, epoch=theirs)]),
                (3003, rest(3), refused(3, OWNED)),
            ],
        ),
        (
            "owned-by-its-permit",
            [
                *READY,
                (30_990, call(theirs, BERT), []),
                (30_990, rest(1, theirs), owned),
                (30_991, call(theirs, BERT), []),
                (30_991, rest(1, theirs), [answer(1, FINISHED, epoch=theirs)]),
            ],
        ),
        (
            "a-query-closes-its-number",
            [
                *FOLLOWS,
                (1, bytes.fromhex(query(5)), [answer(5, UNKNOWN)]),
                (2, rest(5), refused(5, NUMBER_PASSED)),
                (3, rest(6), [done(6)]),
            ],
        ),
        (
            "what-is-for-one-module-is-dropped-where-it-goes-to-more",
            [
                *FOLLOWS,
                (1, rest(1, to=EVERYONE), []),
                (2, rest(1, to=0xF000), []),
                (3, rest(1, to=ELM), []),
                (4, write(1, 4, 1, EVERYONE), []),
                (5, rest(1, to=0xF000), []),
                (6, probe(1, to=EVERYONE), []),
                (7, named("Query", (EPOCH, BOOT, 1), EVERYONE), []),
                (8, named("TraceAsk", (EPOCH, BOOT, 9, BITS, 0, 1), EVERYONE), []),
                (9, rest(1), [done(1)]),
                (10, named("Stop", (1,), BIRCH), [stopped(1, 1)]),
                (11, named("Stop", (1,), ELM), []),
            ],
        ),
        (
            "a-probe-for-another-box-or-boot",
            [
                *FOLLOWS,
                (1, probe(1, bits=0x2212), []),
                (2, probe(2, boot=BOOT + 1), []),
                (3, probe(3, bound=0xFFFF), [echo(3, 3)]),
                (4, pivot(1), refused(1, CLOCK_UNKNOWN)),
                (5, probe(4), [echo(4, 5)]),
                (6, pivot(2), refused(2, NO_PERMIT)),
            ],
        ),
        (
            "what-it-does-not-know-is-dropped",
            [
                *FOLLOWS,
                (1, rest(1)[:1] + b"\x1f" + rest(1)[2:], []),
                (2, b"\x02" + rest(1)[1:], []),
                (3, rest(1) + b"\0", []),
                (4, named("Answer", (EPOCH, BOOT, 1, 3, 0, 0), BIRCH), []),
                (5, rest(1), [done(1)]),
            ],
        ),
        (
            "a-flash-needs-nothing-but-a-number",
            [
                *FOLLOWS,
                (1, stop(), [stopped(1, 1)]),
                (2, lock(1), [done(1), locked()]),
                (3, named("Flash", (EPOCH, BOOT, 2, BITS, 500)), accepted(2)),
                (500, b"", []),
                (503, b"", [done(2)]),
            ],
        ),
    ]  # fmt: skip


RULES = (
    ("The module's own interlocks", refusal_scripts),
    ("Lock-out", lock_scripts),
    ("Settings", setting_scripts),
    ("Together", staged_scripts),
    ("Owner", console_scripts),
)


def module_vectors() -> list[Vector]:
    """All of them."""
    return [
        vector(
            f"module-{name}",
            rule,
            "module",
            "by hand: from the rules, step by step",
            identity=IDENTITY,
            boot=BOOT,
            address=BIRCH,
            steps=[{"at_ms": at_ms, "in": heard.hex(), "out": out} for at_ms, heard, out in steps],
        )
        for rule, scripts in RULES
        for name, steps in scripts()
    ]
