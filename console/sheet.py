"""Run sheets: written plans of trials, read from TOML, and the plan that follows from one.

Owns what a sheet may hold and the sequence of its trials. Knows no fleet: whether the modules
are there and may turn so fast is for the interlocks, at the moment of each trial. Runs nothing.

A plan is part of an experiment's record, so it must come out the same from the same sheet in ten
years: the shuffle is Fisher and Yates's (Knuth, The Art of Computer Programming 2, section 3.4.2,
algorithm P) over draws from BLAKE2b (RFC 7693), which no library's release changes.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum
from hashlib import blake2b
from pathlib import Path
from typing import Final, TypeVar

from console.errors import InputError
from console.order_words import LATER_WORDS
from console.orders import BRAKING, MAX_PIVOT_RPM, SETTINGS
from console.toml_file import TomlFile, is_whole, read_text
from protocol.codes import Setting

MAX_TRIALS: Final = 100_000
"""More is a slip of the keyboard: at ten seconds a trial this is eleven days and nights."""
MAX_SEED: Final = 2**63 - 1
"""What a database stores as a whole number."""
MAX_PAUSE_S: Final = 3_600.0
DEFAULT_PAUSE_S: Final = 0.0
DEFAULT_AT_ONCE: Final = 1

MOTIONS: Final = ("pivot",)

_T = TypeVar("_T")


class TrialOrder(StrEnum):
    """In which sequence the trials come."""

    SHUFFLED = "shuffled"
    AS_WRITTEN = "as written"


class Course(StrEnum):
    """Which way the trials of a module go. ``turnabout``: forward and back in turn, so that it
    stays in its place; else always one way, and a return motion brings it back."""

    TURNABOUT = "turnabout"
    FORWARD = "forward"
    BACK = "back"


@dataclass(frozen=True, slots=True)
class Sheet:
    """One run sheet. ``repeats`` stands beside ``speeds_rpm``: trials of each speed and module.
    ``return_speed_rpm`` is None where the course is turnabout. ``text`` is the sheet whole."""

    title: str
    modules: tuple[str, ...]
    motion: str
    setting: Setting
    speeds_rpm: tuple[int, ...]
    repeats: tuple[int, ...]
    order: TrialOrder
    seed: int
    direction: Course
    return_speed_rpm: int | None
    at_once: int
    pause_s: float
    text: str


@dataclass(frozen=True, slots=True)
class Trial:
    """One planned attempt; ``trial`` counts from 1 in the sequence in which they are begun."""

    trial: int
    module: str
    speed_rpm: int


def load_sheet(path: Path) -> Sheet:
    """Read a run sheet. Raises InputError: file, line, key, what was expected."""
    return parse_sheet(read_text(path), str(path))


def parse_sheet(text: str, where: str) -> Sheet:
    """Read a run sheet from its text; ``where`` stands first in every error. Raises InputError."""
    file = TomlFile.parse(text, where)
    file.only(KEYS)
    modules = _modules(file)
    speeds_rpm = _speeds(file)
    order = TrialOrder(file.choice("order", list(TrialOrder), TrialOrder.AS_WRITTEN))
    direction = Course(file.choice("direction", list(Course), Course.TURNABOUT))
    return Sheet(
        title=file.string("title", "a title of one line, in quotation marks"),
        modules=modules,
        motion=_word(file, "motion", MOTIONS, None),
        setting=SETTINGS[_word(file, "setting", tuple(SETTINGS), "floor")],
        speeds_rpm=speeds_rpm,
        repeats=_repeats(file, len(speeds_rpm), len(modules)),
        order=order,
        seed=_seed(file, order),
        direction=direction,
        return_speed_rpm=_return_speed(file, direction),
        at_once=_at_once(file, len(modules)),
        pause_s=file.number("pause_s", _PAUSE, 0.0, MAX_PAUSE_S, DEFAULT_PAUSE_S),
        text=text,
    )


def plan(sheet: Sheet) -> tuple[Trial, ...]:
    """Return the sheet's trials in sequence; the same sheet always gives the same.

    As written: speed by speed; within a speed round by round, each round going through the
    modules in their order. Shuffled: that list, shuffled whole under the sheet's seed.
    """
    written = [
        (module, speed_rpm)
        for speed_rpm, repeats in zip(sheet.speeds_rpm, sheet.repeats, strict=True)
        for _ in range(repeats)
        for module in sheet.modules
    ]
    sequence = _shuffled(written, sheet.seed) if sheet.order == TrialOrder.SHUFFLED else written
    return tuple(Trial(count, *each) for count, each in enumerate(sequence, start=1))


def draw(seed: int, count: int, below: int) -> int:
    """Draw a whole number from 0 to ``below`` - 1, evenly, keyed by seed and count.

    16 bytes of BLAKE2b over ``"<seed> <count>"`` in ASCII, read as a little-endian number and
    scaled down; so uneven only by ``below`` in 2 to the 128.
    """
    digest = blake2b(f"{seed} {count}".encode("ascii"), digest_size=16).digest()
    return int.from_bytes(digest, "little") * below >> 128


def _shuffled(items: Sequence[_T], seed: int) -> list[_T]:
    shuffled = list(items)
    for last in range(len(shuffled) - 1, 0, -1):
        other = draw(seed, last, last + 1)
        shuffled[last], shuffled[other] = shuffled[other], shuffled[last]
    return shuffled


def _modules(file: TomlFile) -> tuple[str, ...]:
    expected = 'a list of module names, such as ["birch", "elm"]'
    names: list[str] = []
    for value in file.items("modules", expected):
        if not isinstance(value, str) or not value:
            raise file.wrong("modules", expected, value)
        if value in names:
            raise file.wrong("modules", "each module once", value + " twice")
        names.append(value)
    return tuple(names)


def _word(file: TomlFile, key: str, choices: tuple[str, ...], default: str | None) -> str:
    value = file.table.get(key, default)
    if isinstance(value, str) and value in (LATER_WORDS | BRAKING) - set(choices):
        raise InputError(f"{file.wrong(key, ' or '.join(choices))}; {value} is not in this version")
    return file.choice(key, choices, default)


def _speeds(file: TomlFile) -> tuple[int, ...]:
    expected = "a list of whole speeds in rpm, each once, such as [4000, 4350]"
    speeds: list[int] = []
    for value in file.items("speeds_rpm", expected):
        if not is_whole(value, 1, MAX_PIVOT_RPM):
            raise file.wrong("speeds_rpm", expected, value)
        if value in speeds:
            raise file.wrong("speeds_rpm", expected, f"{value} twice")
        speeds.append(value)
    return tuple(speeds)


def _repeats(file: TomlFile, speeds: int, modules: int) -> tuple[int, ...]:
    expected = f"one whole number from 1, or a list of {speeds}, one beside each speed"
    value = file.table.get("repeats")
    values = value if isinstance(value, list) else [value] * speeds
    repeats = tuple(each for each in values if is_whole(each, 1, MAX_TRIALS))
    if len(values) != speeds:
        raise file.wrong("repeats", expected, value)
    if len(repeats) != speeds:
        wrong = next(each for each in values if not is_whole(each, 1, MAX_TRIALS))
        raise file.wrong("repeats", expected, wrong)
    if sum(repeats) * modules > MAX_TRIALS:
        found = f"{sum(repeats)} for each of {modules} modules"
        raise file.wrong("repeats", f"at most {MAX_TRIALS} trials in all", found)
    return repeats


def _seed(file: TomlFile, order: TrialOrder) -> int:
    expected = "a whole number from 0; a shuffled sheet needs one, to be repeatable"
    default = None if order == TrialOrder.SHUFFLED else 0
    return file.whole("seed", expected, 0, MAX_SEED, default)


def _return_speed(file: TomlFile, direction: Course) -> int | None:
    if direction != Course.TURNABOUT:
        expected = f'a whole speed in rpm, needed where direction is "{direction}"'
        return file.whole("return_speed_rpm", expected, 1, MAX_PIVOT_RPM)
    if "return_speed_rpm" in file.table:
        raise file.wrong("return_speed_rpm", "no such key where direction is turnabout")
    return None


def _at_once(file: TomlFile, modules: int) -> int:
    expected = f"a whole number from 1 to {modules}, the number of modules"
    return file.whole("at_once", expected, 1, modules, DEFAULT_AT_ONCE)


_PAUSE: Final = f"a number of seconds from 0 to {MAX_PAUSE_S:g}"
KEYS: Final = (
    "title",
    "modules",
    "motion",
    "setting",
    "speeds_rpm",
    "repeats",
    "order",
    "seed",
    "direction",
    "return_speed_rpm",
    "at_once",
    "pause_s",
)
