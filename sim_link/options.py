"""The options of a simulated fleet: one table, used by ``sim://`` URLs and the command line.

Owns names, ranges, defaults and help texts. Knows nothing of what the options do; what a fault
may be is fault_kinds.py's. Texts in, one frozen SimOptions out.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from enum import StrEnum
from pathlib import Path
from typing import Any, Final, NamedTuple
from urllib.parse import parse_qsl, urlsplit

from sim_link.errors import SimInputError
from sim_link.fault_kinds import FORMS, Fault, FaultKind, FaultTextError, fault_from_text

__all__ = [
    "MAX_MODULES",
    "OPTIONS",
    "SHIPPED",
    "Access",
    "BridgeKind",
    "Fault",
    "FaultKind",
    "Option",
    "SimOptions",
]

MAX_MODULES: Final = 5000
SHIPPED: Final = ("practice", "orangery", "depot")
"""Fleets that come with the program, by the names under which they are found."""

_MAX_SEED: Final = (1 << 64) - 1
"""As in randomness.py, which takes longer to import than a command line should."""


class Access(StrEnum):
    """When a radio that shares the channel sends."""

    AT_ONCE = "at_once"
    LISTEN = "listen"


class BridgeKind(StrEnum):
    """What the bridge is."""

    FILTERING = "filtering"
    """Passes good frames on, to the module addressed, and answers questions about itself."""
    TRANSPARENT = "transparent"
    """A modem: passes on whatever comes, and adds nothing of its own."""


@dataclass(frozen=True, slots=True)
class SimOptions:
    """What a simulated fleet is made of and how its radio behaves.

    ``loss``, ``damage``, ``repeat`` and ``reorder`` are probabilities a frame, each way;
    ``burst``: mean length of a run of losses; ``modules`` None: as many as the fleet file has;
    ``fleet`` None: the practice fleet; ``keys`` None: frames are not sealed; ``range_m`` None: all
    are in range; ``air_rate`` None: frames take no time on the air and never collide.
    """

    modules: int | None = None
    seed: int = 1
    loss: float = 0.0
    damage: float = 0.0
    repeat: float = 0.0
    reorder: float = 0.0
    delay_ms: float = 0.0
    spread_ms: float = 0.0
    burst: float = 1.0
    range_m: float | None = None
    air_rate: int | None = None
    access: Access = Access.LISTEN
    bridge: BridgeKind = BridgeKind.FILTERING
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
        except FaultTextError as error:
            raise SimInputError(where, self.name, str(error)) from error
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
    return tuple(fault_from_text(part) for part in text.split(","))


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
            "spread_ms",
            _number(0, 10_000),
            "milliseconds from 0 to 10000 are needed",
            "up to so much longer, each frame by its own luck",
        ),
        Option(
            "burst",
            _number(1, 1000),
            "a number from 1 to 1000 is needed",
            "mean number of frames lost in a row, at least loss/(1-loss); 1: each has its own luck",
        ),
        Option(
            "range_m",
            _number(0.1, 100_000),
            "metres from 0.1 to 100000 are needed",
            "distance from the bridge at which half of the frames are lost; left out: no limit",
        ),
        Option(
            "air_rate",
            _integer(300, 100_000_000),
            "a rate in bits a second of at least 300 is needed",
            "rate on the air, bits a second: all share one half-duplex channel, and may collide; "
            "left out: frames take no time there",
        ),
        Option(
            "access",
            Access,
            f"one of {', '.join(Access)} is needed",
            "with air_rate, when a radio sends: at once, or when it hears nobody else",
        ),
        Option(
            "bridge",
            BridgeKind,
            f"one of {', '.join(BridgeKind)} is needed",
            "filtering: passes good frames on and tells of itself; transparent: a mere modem",
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
        Option(
            "fleet",
            _path,
            "the name of a fleet file is needed, or of a shipped fleet",
            f"fleet file (TOML), or a shipped fleet by its name: {', '.join(SHIPPED)}",
        ),
        Option(
            "fault",
            _faults,
            f"{FORMS} is needed, separated by commas",
            "what goes wrong, separated by commas: KIND:MODULE from the start on, "
            "KIND:MODULE@12.5s from a time on (or at it), KIND:MODULE@12.5s-20s from a time to "
            f"another; MODULE is a module's name, or bridge; KIND is one of {_FAULT_NAMES}",
        ),
        Option("keys", _path, "the name of a key file is needed", "key file of a sealed fleet"),
    )
}
"""All options by name, in the order in which help shows them."""
