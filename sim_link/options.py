"""The options of a simulated fleet: one table, used by ``sim://`` URLs and the command line.

Owns names, ranges, defaults and help texts, and the faults that can be asked for. Knows
nothing of what the options do. Texts in, one frozen SimOptions out.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from enum import StrEnum
from pathlib import Path
from typing import Any, Final, NamedTuple
from urllib.parse import parse_qsl, urlsplit

from sim_link.errors import SimInputError

MAX_MODULES: Final = 2000

_MAX_SEED: Final = (1 << 64) - 1
"""As in randomness.py, which takes longer to import than a command line should."""


class FaultKind(StrEnum):
    """What can be wrong with a module, for practice and for tests."""

    SILENT = "silent"
    """Hears and obeys, but after its first answer to a roll call nothing it sends gets out."""
    WEAK_BRAKE = "weak_brake"
    """Its brake has a little over half of the torque that its kind states."""
    LOW_BATTERY = "low_battery"
    """Starts almost empty and refuses to drive."""
    RESTART_ON_BRAKE = "restart_on_brake"
    """Its controller restarts right after the first time the brake is applied."""
    LOST_GYRO = "lost_gyro"
    """Its inertial unit no longer answers after the first time the brake is applied."""
    STUCK_WHEEL = "stuck_wheel"
    """Its wheel does not turn as the motor drives it, which is noticed at the first try."""
    BROWN_OUT = "brown_out"
    """Its supply breaks down the first time its wheel has come to speed, and it restarts."""
    SAME_ADDRESS = "same_address"
    """Answers at the address of its neighbour in the fleet file, as after a slip of the hand."""


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault of one module, by the module's name."""

    kind: FaultKind
    module: str

    def __str__(self) -> str:
        return f"{self.kind}:{self.module}"


@dataclass(frozen=True, slots=True)
class SimOptions:
    """What a simulated fleet is made of and how its radio behaves.

    ``loss``, ``damage``, ``repeat`` and ``reorder`` are probabilities a frame, each way;
    ``modules`` None: as many as the fleet file has; ``fleet`` None: the practice fleet;
    ``keys`` None: frames are not sealed.
    """

    modules: int | None = None
    seed: int = 1
    loss: float = 0.0
    damage: float = 0.0
    repeat: float = 0.0
    reorder: float = 0.0
    delay_ms: float = 0.0
    rate: int = 921_600
    pace: float = 1.0
    fleet: Path | None = None
    fault: tuple[Fault, ...] = ()
    keys: Path | None = None

    @classmethod
    def from_texts(
        cls, texts: Mapping[str, object], where: str = "simulated fleet"
    ) -> "SimOptions":
        """Read options from texts or plain values by name; a value of None is left out.

        Raises SimInputError for an unknown name (naming the known ones) and for a value that
        its option does not take; ``where`` is named in the error.
        """
        values: dict[str, Any] = {}
        for name, value in texts.items():
            option = OPTIONS.get(name)
            if option is None:
                known = ", ".join(OPTIONS)
                raise SimInputError(where, name, f"no such option; known are {known}")
            if value is not None:
                values[name] = option.read(str(value), where)
        return cls(**values)

    @classmethod
    def from_url(cls, url: str) -> "SimOptions":
        """Read ``sim://?modules=8&seed=7``. Raises SimInputError as ``from_texts`` does."""
        parts = urlsplit(url)
        if parts.netloc or parts.path not in {"", "/"}:
            raise SimInputError("sim://", parts.netloc + parts.path, "options start with a ?")
        texts: dict[str, object] = {}
        for name, value in parse_qsl(parts.query, keep_blank_values=True):
            if name in texts:
                raise SimInputError("sim://", name, "is given twice")
            texts[name] = value
        return cls.from_texts(texts, "sim://")

    def as_texts(self) -> dict[str, str]:
        """Return the options that differ from their defaults, as ``from_texts`` takes them."""
        texts = {}
        for field in fields(self):
            value = getattr(self, field.name)
            if value != field.default:
                texts[field.name] = _as_text(value)
        return texts


class Option(NamedTuple):
    """One option: how its text is read, what is expected, and what it is for."""

    name: str
    parse: Callable[[str], object]
    expected: str
    help: str

    def read(self, text: str, where: str) -> object:
        """Read the option's value. Raises SimInputError saying what was expected."""
        try:
            return self.parse(text)
        except ValueError as error:
            raise SimInputError(where, self.name, f"{self.expected}, not {text!r}") from error


def _as_text(value: object) -> str:
    return ",".join(str(part) for part in value) if isinstance(value, tuple) else str(value)


def _integer(low: int, high: int) -> Callable[[str], int]:
    def parse(text: str) -> int:
        value = int(text)
        if not low <= value <= high:
            raise ValueError(text)
        return value

    return parse


def _number(low: float, high: float) -> Callable[[str], float]:
    def parse(text: str) -> float:
        value = float(text)
        if not low <= value <= high:
            raise ValueError(text)
        return value

    return parse


def _path(text: str) -> Path:
    if not text:
        raise ValueError(text)
    return Path(text)


def _faults(text: str) -> tuple[Fault, ...]:
    faults = []
    for part in text.split(","):
        kind, colon, module = part.strip().partition(":")
        if not (colon and module):
            raise ValueError(part)
        faults.append(Fault(FaultKind(kind), module))
    return tuple(faults)


_CHANCE: Final = "a probability from 0 to 1 is needed"
_FAULT_NAMES: Final = ", ".join(FaultKind)

OPTIONS: Final[dict[str, Option]] = {
    option.name: option
    for option in (
        Option(
            "modules",
            _integer(1, MAX_MODULES),
            f"a whole number from 1 to {MAX_MODULES} is needed",
            "how many modules; more than the fleet has are made up",
        ),
        Option(
            "seed",
            _integer(0, _MAX_SEED),
            "a whole number from 0 to 2**64 - 1 is needed",
            "one seed, one history",
        ),
        Option("loss", _number(0, 1), _CHANCE, "part of the frames lost, each way"),
        Option("damage", _number(0, 1), _CHANCE, "part of the frames with bits turned over"),
        Option("repeat", _number(0, 1), _CHANCE, "part of the frames that arrive twice"),
        Option("reorder", _number(0, 1), _CHANCE, "part of the frames overtaken by later ones"),
        Option(
            "delay_ms",
            _number(0, 10_000),
            "milliseconds from 0 to 10000 are needed",
            "how long a frame is under way, each way",
        ),
        Option(
            "rate",
            _integer(300, 100_000_000),
            "a rate in baud of at least 300 is needed",
            "rate of the serial line in baud",
        ),
        Option(
            "pace",
            _number(0.01, 1000),
            "a number from 0.01 to 1000 is needed",
            "how many times faster than real time the fleet lives",
        ),
        Option("fleet", _path, "the name of a fleet file is needed", "fleet file (TOML)"),
        Option(
            "fault",
            _faults,
            f"KIND:MODULE, separated by commas, is needed, KIND one of {_FAULT_NAMES}",
            "faults as KIND:MODULE, separated by commas",
        ),
        Option("keys", _path, "the name of a key file is needed", "key file of a sealed fleet"),
    )
}
"""All options by name, in the order in which help shows them."""
