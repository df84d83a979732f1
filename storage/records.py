"""Records: what a session is made of, in the order in which it happened.

Owns the record types and their stored form. Everything that the reducer uses is one of these;
fold them again and the same fleet and the same tables come out. Knows no tables and no fleet.

Bytes are stored as they crossed the link (table ``wire``); every other record as its sort and
a JSON body (table ``records``). Both share one count within a session, which gives the order.
"""

import json
from dataclasses import asdict, dataclass, fields
from typing import Any, Final

from storage.errors import LogUnavailableError


@dataclass(frozen=True, slots=True)
class BytesIn:
    """Bytes read from a link; ``t_ns`` is the session's monotonic time at which they came."""

    t_ns: int
    link: int
    data: bytes


@dataclass(frozen=True, slots=True)
class BytesOut:
    """Bytes handed to a link, at the moment before the write."""

    t_ns: int
    link: int
    data: bytes


@dataclass(frozen=True, slots=True)
class SessionOpened:
    """First record of a session. ``utc`` is ISO 8601; ``pace`` is fleet seconds per second;
    ``sealed``: whether a fleet key was set; ``console``: the session's random number on the wire,
    0 in logs from before it was recorded."""

    t_ns: int
    utc: str
    operator: str
    epoch: int
    pace: float
    program: str
    sealed: bool = False
    console: int = 0


@dataclass(frozen=True, slots=True)
class SessionClosed:
    """Last record of a session that ended in order."""

    t_ns: int
    utc: str
    why: str


@dataclass(frozen=True, slots=True)
class LinkChanged:
    """A link was opened, lost or closed. ``state``: open, lost, closed."""

    t_ns: int
    link: int
    url: str
    state: str
    detail: str


@dataclass(frozen=True, slots=True)
class FramesRefused:
    """What the gate said of the next bytes from a link: which of the pieces that they complete
    are not obeyed (counted from 0), and why. The key that it needed is in no record."""

    t_ns: int
    link: int
    pieces: tuple[int, ...]
    faults: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class EpochChosen:
    """The console takes a newer epoch, because a module has reported a higher one."""

    t_ns: int
    epoch: int


@dataclass(frozen=True, slots=True)
class PlannedCommand:
    """One command of an order, complete before its first byte is sent.

    ``command`` counts within the session; ``number`` is the one on the wire. ``motion``: pivot,
    hop, twist, spin, rest, flash, lock, unlock, set. ``setting`` and ``direction`` are wire codes,
    0 where the motion has none; of a ``set``, ``setting`` is the setting's number and ``value``
    what it is set to. ``trial`` is 0 outside a sheet and for a sheet's return motions.
    ``latest_ms``: module time after which it must not start; ``stage`` 0: it starts at once;
    ``person``: who locks or unlocks.
    """

    command: int
    module: int
    identity: int
    boot: int
    epoch: int
    number: int
    motion: str
    setting: int
    direction: int
    speed_rpm: int
    duration_ms: int
    trial: int
    latest_ms: int = 0
    stage: int = 0
    person: str = ""
    value: int = 0


@dataclass(frozen=True, slots=True)
class OrderGiven:
    """What a person or a sheet asked for, with the commands it became. One transaction.

    ``source``: typed, sheet.
    """

    t_ns: int
    order: int
    text: str
    source: str
    commands: tuple[PlannedCommand, ...]


@dataclass(frozen=True, slots=True)
class OrderVoided:
    """An order whose commands were never sent, because the log could not take them first."""

    t_ns: int
    order: int
    why: str


@dataclass(frozen=True, slots=True)
class CommandExpired:
    """A timer ran out: no answer came to a command within all tries."""

    t_ns: int
    command: int


@dataclass(frozen=True, slots=True)
class StageStarted:
    """The start of a staged order's motions was agreed, ``start_ms`` of fleet time; or it was
    given up (None), because not all modules accepted. Said with Go from now on."""

    t_ns: int
    order: int
    start_ms: int | None


@dataclass(frozen=True, slots=True)
class SlotsPlanned:
    """A link's radio channel was shared out among its modules: how often the keenest of them was
    to report, and the common period that the channel has room for. ``left_out``: modules for
    which there is no room at all; ``load_percent``: time on the air that telemetry takes."""

    t_ns: int
    link: int
    air_rate_bps: int
    duty_percent: float
    modules: int
    left_out: int
    asked_ms: int
    period_ms: int
    load_percent: float


@dataclass(frozen=True, slots=True)
class StopPressed:
    """All-stop, numbered. ``source``: who or what asked for it."""

    t_ns: int
    stop_number: int
    source: str


@dataclass(frozen=True, slots=True)
class StopLifted:
    """A person cleared the all-stop of this number."""

    t_ns: int
    stop_number: int
    source: str


@dataclass(frozen=True, slots=True)
class SheetOpened:
    """A run sheet begins: its name and its text, whole; ``planned`` counts its trials."""

    t_ns: int
    sheet: int
    name: str
    text: str
    seed: int
    planned: int


@dataclass(frozen=True, slots=True)
class SheetClosed:
    """A run sheet ended; ``stopped`` says why before its time, or is empty."""

    t_ns: int
    sheet: int
    stopped: str


@dataclass(frozen=True, slots=True)
class Remark:
    """Something a person wants to remember, tied to the moment."""

    t_ns: int
    utc: str
    person: str
    text: str


@dataclass(frozen=True, slots=True)
class Correction:
    """A person overrules a verdict; the motion is named by what never repeats."""

    t_ns: int
    utc: str
    identity: int
    boot: int
    number: int
    outcome: str
    person: str
    reason: str


WireRecord = BytesIn | BytesOut
NoteRecord = (
    SessionOpened
    | SessionClosed
    | LinkChanged
    | FramesRefused
    | EpochChosen
    | OrderGiven
    | OrderVoided
    | CommandExpired
    | StageStarted
    | SlotsPlanned
    | StopPressed
    | StopLifted
    | SheetOpened
    | SheetClosed
    | Remark
    | Correction
)
Record = WireRecord | NoteRecord

_NOTE_TYPES: Final[dict[str, type[Any]]] = {
    cls.__name__: cls
    for cls in (
        SessionOpened,
        SessionClosed,
        LinkChanged,
        FramesRefused,
        EpochChosen,
        OrderGiven,
        OrderVoided,
        CommandExpired,
        StageStarted,
        SlotsPlanned,
        StopPressed,
        StopLifted,
        SheetOpened,
        SheetClosed,
        Remark,
        Correction,
    )
}


def note_sort(record: NoteRecord) -> str:
    """Name under which a record that is not bytes is stored."""
    return type(record).__name__


def note_body(record: NoteRecord) -> str:
    """JSON body under which a record that is not bytes is stored; ``t_ns`` stands beside it."""
    body = asdict(record)
    del body["t_ns"]
    text = json.dumps(body, ensure_ascii=False, separators=(",", ":"))
    try:
        text.encode()
    except UnicodeEncodeError:  # a device's name in another encoding; JSON's escapes can hold it
        text = json.dumps(body, separators=(",", ":"))
    return text


def read_note(sort: str, t_ns: int, body: str) -> NoteRecord:
    """Build a record from its stored form. Raises LogUnavailableError where that is damaged."""
    try:
        cls = _NOTE_TYPES[sort]
        values: dict[str, Any] = json.loads(body)
        if cls is OrderGiven:
            values["commands"] = tuple(PlannedCommand(**each) for each in values["commands"])
        elif cls is FramesRefused:
            values.update({name: tuple(values[name]) for name in ("pieces", "faults")})
        record: NoteRecord = cls(t_ns=t_ns, **values)
    except (KeyError, TypeError, ValueError) as error:
        known = [field.name for field in fields(_NOTE_TYPES[sort])] if sort in _NOTE_TYPES else []
        raise LogUnavailableError(
            f"a stored record of sort {sort!r} cannot be read ({error}); expected {known}"
        ) from error
    return record
