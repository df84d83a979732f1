"""The words in which a whole module's vectors are told, and how their scripts begin.

The module's clock is a second ahead of the fleet's and was told so within 5 ms; its permit, where
it has one, ends at 30,991 ms of its own time: 30,000 + 1,000 - 5 - (30,981 >> 13) - 1.
"""

from tests.support.wire_by_hand import (
    ACCEPTED,
    ANNA,
    BITS,
    BOOT,
    EPOCH,
    FINISHED,
    REFUSED,
    answer,
    named,
)

Step = tuple[int, bytes, list[str]]
AHEAD_MS, BOUND_MS = 1000, 5
LATER = EPOCH + 9
STOP_IN_FORCE, OVER_SPEED, STOPPED, RESTED, BAD_FIELD = 6, 7, 12, 13, 14
BUSY, OTHER_EPOCH, NUMBER_PASSED, OWNED, TOO_LATE = 5, 2, 4, 15, 16
UNSUPPORTED = 11
CLOCK_UNKNOWN, NO_PERMIT, LOCKED_OUT, OTHER_PERSON, READ_ONLY = 17, 18, 20, 21, 22
FLOOR, WALL = 1, 2
ANY_TIME = "****"
"""In place of the two bytes of expect_ms, where modules may differ."""


def call(epoch: int = EPOCH, console: int = ANNA) -> bytes:
    """A RollCall."""
    return named("RollCall", (epoch, console))


def probe(sequence: int, console: int = ANNA, **other: int) -> bytes:
    """A Probe that tells the module its clock."""
    boot, bits = other.get("boot", BOOT), other.get("bits", BITS)
    values = (console, boot, sequence, bits, AHEAD_MS, other.get("bound", BOUND_MS))
    return named("Probe", values, other.get("to"))


def echo(sequence: int, at_ms: int) -> str:
    """Its answer."""
    return named("Echo", (BOOT, sequence, BITS, at_ms * 1000, 0)).hex()


def permit(expiry_ms: int = 30_000, console: int = ANNA, to: int | None = None) -> bytes:
    """A Permit until this fleet time."""
    return named("Permit", (console, expiry_ms), to)


def pivot(number: int, latest_ms: int = 20_000, **other: int) -> bytes:
    """A Pivot on the floor, forward, staged where nothing else is said."""
    return named(
        "Pivot",
        (
            *(other.get("epoch", EPOCH), BOOT, number, BITS, latest_ms),
            *(other.get("stage", 3), other.get("setting", FLOOR), other.get("direction", 1)),
            other.get("speed", 5000),
        ),
        other.get("to"),
    )


def _staged(name: str, number: int, speed_rpm: int) -> bytes:
    return named(name, (EPOCH, BOOT, number, BITS, 20_000, 3, 1, speed_rpm))


def hop(number: int, speed: int = 5000) -> bytes:
    """A Hop, forward, staged."""
    return _staged("Hop", number, speed)


def twist(number: int, speed: int = 5000) -> bytes:
    """A Twist, forward, staged."""
    return _staged("Twist", number, speed)


def spin(number: int, latest_ms: int = 20_000, speed_rpm: int = 3000, hold_ms: int = 1000) -> bytes:
    """A Spin for a second."""
    return named("Spin", (EPOCH, BOOT, number, BITS, latest_ms, speed_rpm, hold_ms))


def rest(number: int, epoch: int = EPOCH, to: int | None = None) -> bytes:
    """A Rest."""
    return named("Rest", (epoch, BOOT, number, BITS), to)


def lock(number: int, person: bytes = b"Ada") -> bytes:
    """A LockOut."""
    return named("LockOut", (EPOCH, BOOT, number, BITS, person))


def unlock(number: int, person: bytes = b"Ada") -> bytes:
    """An Unlock."""
    return named("Unlock", (EPOCH, BOOT, number, BITS, person))


def write(number: int, setting: int, value: int, to: int | None = None) -> bytes:
    """A SettingWrite."""
    return named("SettingWrite", (EPOCH, BOOT, number, BITS, setting, value), to)


def go(start_ms: int, stage: int = 3, console: int = ANNA, to: int | None = None) -> bytes:
    """A Go whose start is this module time."""
    return named("Go", (console, stage, (start_ms - AHEAD_MS) % 2**32), to)


def stop(number: int = 1) -> bytes:
    """An all-stop."""
    return named("Stop", (number,))


def locked(person: bytes = b"Ada") -> str:
    """A LockState."""
    return named("LockState", (BOOT, BITS, int(bool(person)), person)).hex()


def stopped(number: int, latched: int) -> str:
    """A Stopped of a module at rest."""
    return named("Stopped", (number, latched, 0, 0, BOOT, BITS)).hex()


def refused(number: int, reason: int) -> list[str]:
    """One refusal."""
    return [answer(number, REFUSED, reason)]


def accepted(number: int) -> list[str]:
    """Accepted, to be finished whenever."""
    return [answer(number, ACCEPTED)[:-4] + ANY_TIME]


def done(number: int) -> str:
    """Finished."""
    return answer(number, FINISHED)


FOLLOWS: list[Step] = [(0, call(), [])]
TOLD: list[Step] = [*FOLLOWS, (10, probe(1), [echo(1, 10)])]
READY: list[Step] = [*TOLD, (20, permit(), [])]
STAGED: list[Step] = [*READY, (30, pivot(1), accepted(1))]
