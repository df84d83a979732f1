"""Vectors of whom a module follows, and when its permit ends: WIRE.md's line, worked by hand.

A step is a module time in milliseconds, what is heard then, and what is so afterwards: epoch,
console, how long it is owned, how long it is permitted.
"""

from tests.support.wire_by_hand import ANNA, BERT, BITS, BOOT, EPOCH, Vector, named, vector

Step = tuple[int, bytes, int, int, int, int]
WRAP = 2**32
OWNER, PERMIT = "Owner", "Drive permit"


def call(epoch: int = EPOCH, console: int = ANNA) -> bytes:
    """A RollCall."""
    return named("RollCall", (epoch, console))


def tell(offset_ms: int, bound_ms: int, console: int = ANNA) -> bytes:
    """A Probe that tells the module its clock."""
    return named("Probe", (console, BOOT, 1, BITS, offset_ms % WRAP, bound_ms))


def permit(expiry_ms: int, console: int = ANNA) -> bytes:
    """A Permit until this fleet time."""
    return named("Permit", (console, expiry_ms % WRAP))


def release(console: int = ANNA) -> bytes:
    """A Release."""
    return named("Release", (console,))


def owner_scripts() -> list[tuple[str, list[Step]]]:
    """Who is followed."""
    ours, theirs = (EPOCH, ANNA), (EPOCH + 9, BERT)
    return [
        ("nobody-at-first", [(0, b"", 0, 0, 0, 0), (90_000, b"", 0, 0, 0, 0)]),
        (
            "adopts-and-is-owned-for-three-seconds",
            [(10, call(), *ours, 3000, 0), (3009, b"", *ours, 1, 0), (3010, b"", *ours, 0, 0)],
        ),
        (
            "refuses-another-console-while-owned",
            [
                (0, call(), *ours, 3000, 0),
                (2999, call(*theirs), *ours, 1, 0),
                (3000, call(*theirs), *theirs, 3000, 0),
            ],
        ),
        (
            "its-own-console-may-take-a-newer-epoch",
            [
                (0, call(), *ours, 3000, 0),
                (5, call(EPOCH + 1), EPOCH + 1, ANNA, 3000, 0),
                (6, call(), EPOCH + 1, ANNA, 2999, 0),
            ],
        ),
        (
            "an-equal-epoch-is-not-newer",
            [
                (0, call(), *ours, 3000, 0),
                (1, call(), *ours, 2999, 0),
                (4000, call(EPOCH, BERT), *ours, 0, 0),
                (4001, call(EPOCH - 1, BERT), *ours, 0, 0),
                (4002, call(EPOCH, ANNA), *ours, 0, 0),
            ],
        ),
        (
            "owned-as-long-as-permitted",
            [
                (0, call(), *ours, 3000, 0),
                (0, tell(0, 0), *ours, 3000, 0),
                (1000, permit(9000), *ours, 7999, 7999),
                (8997, call(*theirs), *ours, 1, 1),
                (8998, call(*theirs), *theirs, 3000, 0),
            ],
        ),
        (
            "another-console-forgets-clock-and-permit",
            [
                (0, call(), *ours, 3000, 0),
                (0, tell(0, 5), *ours, 3000, 0),
                (0, permit(50_000), *ours, 49_994, 49_994),
                (1, release(), *ours, 0, 0),
                (2, call(*theirs), *theirs, 3000, 0),
                (3, permit(50_000, BERT), *theirs, 2999, 0),
                (3, tell(0, 5), *theirs, 2999, 0),
                (4, tell(0, 7, BERT), *theirs, 49_988, 49_988),
            ],
        ),
        (
            "a-permit-without-a-clock-is-forgotten-too",
            [
                (0, call(), *ours, 3000, 0),
                (0, permit(50_000), *ours, 3000, 0),
                (3000, call(*theirs), *theirs, 3000, 0),
                (3000, tell(0, 5, BERT), *theirs, 3000, 0),
                (3001, permit(9000, BERT), *theirs, 5993, 5993),  # ends at 9000 - 5 - 0 - 1
            ],
        ),
        (
            "a-new-consoles-permit-may-be-earlier-in-its-own-time",
            [
                (0, call(), *ours, 3000, 0),
                (0, tell(0, 0), *ours, 3000, 0),
                (0, permit(9000), *ours, 8999, 8999),
                (8998, call(*theirs), *theirs, 3000, 0),
                (8998, tell(8000, 5, BERT), *theirs, 3000, 0),
                (9000, permit(2000, BERT), *theirs, 2998, 994),  # 2000 + 8000 - 5 - 0 - 1
            ],
        ),
        (
            "zero-is-nobodys-number",
            [
                (0, call(EPOCH, 0), 0, 0, 0, 0),
                (0, tell(0, 5, 0), 0, 0, 0, 0),
                (0, permit(5000, 0), 0, 0, 0, 0),
                (1, release(0), 0, 0, 0, 0),
                (2, call(), *ours, 3000, 0),
                (3002, call(EPOCH + 1, 0), *ours, 0, 0),
            ],
        ),
        (
            "the-same-console-keeps-clock-and-permit",
            [
                (0, call(), *ours, 3000, 0),
                (0, tell(0, 5), *ours, 3000, 0),
                (0, permit(10_000), *ours, 9994, 9994),
                (50, call(EPOCH + 1), EPOCH + 1, ANNA, 9944, 9944),
            ],
        ),
        (
            "release",
            [
                (0, call(), *ours, 3000, 0),
                (1, release(BERT), *ours, 2999, 0),
                (2, release(), *ours, 0, 0),
                (3, call(*theirs), *theirs, 3000, 0),
            ],
        ),
        (
            "release-ends-the-permit-until-the-next",
            [
                (0, call(), *ours, 3000, 0),
                (0, tell(0, 5), *ours, 3000, 0),
                (0, permit(9000), *ours, 8994, 8994),
                (5000, release(BERT), *ours, 3994, 3994),
                (5001, release(), *ours, 0, 0),
                (5002, permit(9100), *ours, 4092, 4092),
            ],
        ),
        (
            "owned-across-the-wrap",
            [
                (WRAP - 1000, call(), *ours, 3000, 0),
                (0, call(*theirs), *ours, 2000, 0),
                (1999, call(*theirs), *ours, 1, 0),
                (2000, call(*theirs), *theirs, 3000, 0),
            ],
        ),
    ]


def permit_scripts() -> list[tuple[str, list[Step]]]:
    """When a permit ends: expiry + offset - bound - (age >> 13) - 1."""
    ours = (EPOCH, ANNA)
    begin: list[Step] = [(0, call(), *ours, 3000, 0)]
    return [
        (
            "offset-bound-and-a-millisecond",
            [
                *begin,
                (0, tell(1000, 5), *ours, 3000, 0),
                (10, permit(5000), *ours, 5984, 5984),  # ends at 5000 + 1000 - 5 - 0 - 1 = 5994
                (5993, b"", *ours, 1, 1),
                (5994, b"", *ours, 0, 0),
            ],
        ),
        (
            "offset-below-zero",
            [
                *begin,
                (0, tell(-1000, 0), *ours, 3000, 0),
                (0, permit(5000), *ours, 3999, 3999),
                (3500, b"", *ours, 499, 499),
                (3999, b"", *ours, 0, 0),
            ],
        ),
        (
            "doubt-grows-with-age",
            [
                *begin,
                (0, tell(0, 200), *ours, 3000, 0),
                (0, permit(20_000), *ours, 19_799, 19_799),
                (8191, b"", *ours, 11_608, 11_608),
                (8192, b"", *ours, 11_606, 11_606),  # 8192 >> 13 is 1
                (16_383, b"", *ours, 3415, 3415),
                (16_384, b"", *ours, 3413, 3413),
                (16_384, tell(0, 200), *ours, 3415, 3415),  # told anew: no age
            ],
        ),
        (
            "a-fresh-word-counts-at-once",
            [
                *begin,
                (0, tell(0, 5), *ours, 3000, 0),
                (0, permit(5000), *ours, 4994, 4994),
                (100, tell(500, 5), *ours, 5394, 5394),
                (200, tell(0, 105), *ours, 4694, 4694),
            ],
        ),
        (
            "an-older-permit-comes-late",
            [
                *begin,
                (0, tell(0, 5), *ours, 3000, 0),
                (0, permit(5000), *ours, 4994, 4994),
                (1, permit(4999), *ours, 4993, 4993),
                (2, permit(-20), *ours, 4992, 4992),
                (3, permit(5001), *ours, 4992, 4992),
            ],
        ),
        (
            "the-longest",
            [
                *begin,
                (0, tell(0, 0), *ours, 3000, 0),
                (0, permit(60_001), *ours, 60_000, 60_000),
                (0, permit(60_002), *ours, 3000, 0),
                (1, b"", *ours, 60_000, 60_000),
                (1, permit(2**31 - 1), *ours, 2999, 0),
            ],
        ),
        (
            "no-clock-no-permit",
            [
                *begin,
                (0, permit(5000), *ours, 3000, 0),
                (1, tell(0, 0xFFFF), *ours, 2999, 0),
                (2, tell(0, 0xFFFE), *ours, 2998, 0),
                (3, tell(0, 5), *ours, 4991, 4991),
                (4, tell(900, 0xFFFF), *ours, 4990, 4990),  # not known any more: nothing is taken
            ],
        ),
        (
            "another-consoles-words-are-not-taken",
            [
                *begin,
                (0, tell(0, 5), *ours, 3000, 0),
                (0, permit(4000), *ours, 3994, 3994),
                (1, permit(50_000, BERT), *ours, 3993, 3993),
                (2, tell(9000, 0, BERT), *ours, 3992, 3992),
            ],
        ),
        (
            "module-time-wraps",
            [
                (WRAP - 1000, call(), *ours, 3000, 0),
                (WRAP - 1000, tell(-800, 5), *ours, 3000, 0),  # fleet time is 2^32 - 200
                (WRAP - 1000, permit(4800), *ours, 4994, 4994),
                (WRAP - 1, b"", *ours, 3995, 3995),
                (0, b"", *ours, 3994, 3994),
                (3993, b"", *ours, 1, 1),
                (3994, b"", *ours, 0, 0),
            ],
        ),
        (
            "fleet-time-wraps",
            [
                *begin,
                (0, tell(500, 5), *ours, 3000, 0),  # fleet time is 2^32 - 500
                (0, permit(WRAP - 100), *ours, 3000, 394),
                (0, permit(1000), *ours, 3000, 1494),
                (1, permit(WRAP - 90), *ours, 2999, 1493),
                (1493, b"", *ours, 1507, 1),
                (1494, b"", *ours, 1506, 0),
            ],
        ),
        (
            "age-across-the-wrap",
            [
                (WRAP - 8000, call(), *ours, 3000, 0),
                (WRAP - 8000, tell(0, 0), *ours, 3000, 0),
                (WRAP - 8000, permit(2000), *ours, 9999, 9999),
                (191, b"", *ours, 1808, 1808),
                (192, b"", *ours, 1806, 1806),
            ],
        ),
    ]


def _vectors(rule: str, scripts: list[tuple[str, list[Step]]]) -> list[Vector]:
    names = ("epoch", "console", "owner_left_ms", "permit_left_ms")
    return [
        vector(
            f"allegiance-{name}",
            rule,
            "allegiance",
            "by hand: worked out from the rule",
            steps=[
                {
                    "at_ms": at_ms,
                    "payload": heard.hex(),
                    "expect": dict(zip(names, expected, strict=True)),
                }
                for at_ms, heard, *expected in steps
            ],
        )
        for name, steps in scripts
    ]


def allegiance_vectors() -> list[Vector]:
    """All of them."""
    return _vectors(OWNER, owner_scripts()) + _vectors(PERMIT, permit_scripts())
