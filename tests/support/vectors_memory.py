"""Vectors of the command memory, line by line of its list, and of all-stop's numbers."""

from typing import Any

from tests.support.wire_by_hand import (
    ANNA,
    BITS,
    BOOT,
    EPOCH,
    FINISHED,
    REFUSED,
    UNKNOWN,
    Vector,
    answer,
    flash,
    named,
    query,
    vector,
)


def memory_vectors() -> list[Vector]:
    """The command memory, line by line of its list. A fresh command here is finished at once, and
    Answer FINISHED remembered."""
    call = named("RollCall", (EPOCH, ANNA)).hex()
    later = named("RollCall", (EPOCH + 1, ANNA)).hex()
    done, refused, unknown = FINISHED, REFUSED, UNKNOWN
    scripts: list[tuple[str, list[list[Any]]]] = [
        ("fresh", [[call, None], [flash(1), "fresh", answer(1, done)]]),
        (
            "repeat",
            [[call, None], [flash(1), "fresh", answer(1, done)], [flash(1), answer(1, done)]],
        ),
        ("other-identity", [[call, None], [flash(1, bits=0x9999), answer(1, refused, 3)]]),
        ("other-boot", [[call, None], [flash(1, boot=5), answer(1, refused, 1, boot=5)]]),
        ("other-epoch", [[call, None], [flash(1, epoch=5), answer(1, refused, 2, epoch=5)]]),
        ("before-any-epoch", [[flash(1), answer(1, refused, 2)]]),
        ("number-zero", [[call, None], [flash(0), answer(0, refused, 14)]]),
        (
            "passed",
            [
                [call, None],
                [flash(5), "fresh", answer(5, done)],
                [flash(4), answer(4, refused, 4)],
            ],
        ),
        (
            "wraps",
            [
                [call, None],
                [flash(65535), "fresh", answer(65535, done)],
                [flash(1), "fresh", answer(1, done)],
                [flash(65535), answer(65535, done)],
                [flash(65534), answer(65534, refused, 4)],
            ],
        ),
        (
            "half-the-space-is-not-newer",
            [
                [call, None],
                [flash(1), "fresh", answer(1, done)],
                [flash(32769), answer(32769, refused, 4)],
                [flash(32768), "fresh", answer(32768, done)],
            ],
        ),
        (
            "a-new-epoch-empties-it",
            [
                [call, None],
                [flash(5), "fresh", answer(5, done)],
                [later, None],
                [flash(5), answer(5, refused, 2)],
                [flash(1, epoch=EPOCH + 1), "fresh", answer(1, done, epoch=EPOCH + 1)],
                [call, None],
                [flash(2, epoch=EPOCH + 1), "fresh", answer(2, done, epoch=EPOCH + 1)],
            ],
        ),
        (
            "query",
            [
                [call, None],
                [flash(1), "fresh", answer(1, done)],
                [query(1), answer(1, done)],
                [query(1, boot=5), answer(1, unknown, 1, boot=5)],
                [query(1, epoch=5), answer(1, unknown, 2, epoch=5)],
            ],
        ),
        (
            "a-query-closes-its-number",
            [
                [call, None],
                [query(3), answer(3, unknown)],
                [flash(3), answer(3, refused, 4)],
                [flash(4), "fresh", answer(4, done)],
            ],
        ),
        (
            "forgotten-is-refused",
            [
                [call, None],
                *([flash(n), "fresh", answer(n, done)] for n in range(1, 10)),
                [flash(1), answer(1, refused, 4)],
                *([flash(n), answer(n, done)] for n in range(2, 10)),
                [query(1), answer(1, unknown)],
            ],
        ),
        (
            "more-than-half-behind-is-forgotten",
            [
                [call, None],
                [flash(1), "fresh", answer(1, done)],
                [flash(20000), "fresh", answer(20000, done)],
                [flash(40000), "fresh", answer(40000, done)],
                [query(20000), answer(20000, done)],
                [query(1), answer(1, unknown)],
            ],
        ),
        (
            "owned",
            [
                [call, None],
                [flash(1), "owned", "fresh", answer(1, done)],
                [flash(1, epoch=5), "owned", answer(1, refused, 15, epoch=5)],
                [flash(1, epoch=EPOCH + 9), "owned", answer(1, refused, 15, epoch=EPOCH + 9)],
                [flash(0, epoch=5), "owned", answer(0, refused, 15, epoch=5)],
                [flash(1, epoch=5), answer(1, refused, 2, epoch=5)],
                [flash(2), "fresh", answer(2, done)],
            ],
        ),
        (
            "owned-comes-after-identity-and-boot",
            [
                [call, None],
                [flash(1, epoch=5, bits=0x9999), "owned", answer(1, refused, 3, epoch=5)],
                [flash(1, epoch=5, boot=5), "owned", answer(1, refused, 1, epoch=5, boot=5)],
                [flash(0), "owned", answer(0, refused, 14)],
                [query(1, epoch=5), "owned", answer(1, unknown, 2, epoch=5)],
            ],
        ),
    ]
    return [
        vector(
            f"memory-{name}",
            "The module: at most once",
            "memory",
            "by hand: from the list",
            identity_bits=BITS,
            boot=BOOT,
            steps=[
                {
                    "in": step[0],
                    "owned": "owned" in step,
                    "fresh": "fresh" in step,
                    "out": step[-1],
                }
                for step in steps
            ],
        )
        for name, steps in scripts
    ]


def stop_vectors() -> list[Vector]:
    """All-stop and clear at a module: the newest number it knows, and its latch, after each."""

    def stop(number: int) -> str:
        return named("Stop", (number,)).hex()

    def clear(number: int) -> str:
        return named("Clear", (number,)).hex()

    scripts = [
        ("stop-and-clear", [(stop(3), 3, 1), (clear(3), 3, 0)]),
        ("repeated", [(stop(3), 3, 1), (stop(3), 3, 1)]),
        (
            "older-stop-is-obeyed-and-newest-kept",
            [(stop(5), 5, 1), (clear(5), 5, 0), (stop(2), 5, 1)],
        ),
        (
            "clear-of-an-older-one",
            [(stop(3), 3, 1), (stop(4), 4, 1), (clear(3), 4, 1), (clear(4), 4, 0)],
        ),
        ("clear-of-a-newer-one", [(stop(3), 3, 1), (clear(9), 3, 1)]),
    ]
    return [
        vector(
            f"stop-{name}",
            "All-stop",
            "stop",
            "by hand: from the rule",
            steps=[{"in": s, "stop_number": n, "latched": latched} for s, n, latched in steps],
        )
        for name, steps in scripts
    ]
