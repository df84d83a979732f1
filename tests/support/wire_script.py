"""A session written by hand: records with real frames in them, numbered and timed.

Owns the making of messages with everyday values, so that a test names only what it is about.
"""

from collections.abc import Iterable
from typing import Any

from console.fleet import FleetReducer, Step
from console.view import FleetView
from protocol.codes import (
    CONSOLE_ADDRESS,
    EVERYONE_ADDRESS,
    SIMULATED_BIT,
    AnswerState,
    Direction,
    Reason,
    Setting,
    identity_bits,
)
from protocol.frame import frame
from protocol.message import (
    Answer,
    Facts,
    Message,
    Nameplate,
    Packet,
    Pivot,
    Presence,
    Query,
    Stopped,
    Telemetry,
    encode,
)
from storage.records import (
    BytesIn,
    BytesOut,
    LinkChanged,
    OrderGiven,
    PlannedCommand,
    Record,
    SessionOpened,
)
from storage.rows import TABLES, Row

EPOCH = 1_800_000_000
CONSOLE = 0x5EED_0001
STEP_NS = 1_000_000
ADDRESS = 0x0010
IDENTITY = SIMULATED_BIT | 0x0000_5A5A_0000_1111
BOOT = 7001


def from_module(message: Message, address: int = ADDRESS) -> bytes:
    """A frame that a module sends to the console."""
    return frame(encode(Packet(CONSOLE_ADDRESS, address, message)))


def to_module(message: Message, address: int = ADDRESS) -> bytes:
    """A frame that the console sends to a module."""
    return frame(encode(Packet(address, CONSOLE_ADDRESS, message)))


def to_everyone(message: Message) -> bytes:
    """A frame that the console sends to all."""
    return to_module(message, EVERYONE_ADDRESS)


def presence(**changes: Any) -> Presence:
    """A module that follows us, holds no latch and lies on face 1."""
    return Presence(IDENTITY, BOOT, EPOCH, CONSOLE, 0, 500, 3000, 0, 1)._replace(**changes)


def nameplate(name: str = "birch", kind: str = "paver", **changes: Any) -> Nameplate:
    """What is written on the box."""
    made = Nameplate(IDENTITY, 9000, 3, name.encode(), kind.encode())
    return made._replace(**changes)


def telemetry(sequence: int = 1, **changes: Any) -> Telemetry:
    """A module at rest on face 1: 3.91 V, 24.5 degrees C."""
    bits = identity_bits(IDENTITY)
    made = Telemetry(BOOT, sequence, sequence * 500, 0, 0, 1, 0, 3910, 2450, 0, bits)
    return made._replace(**changes)


def answer(number: int, state: AnswerState, reason: Reason = Reason.NONE, **more: Any) -> Answer:
    """What a module says of a command of ours."""
    return Answer(EPOCH, BOOT, number, state, reason, 0)._replace(**more)


def facts(number: int = 1, **changes: Any) -> Facts:
    """A quarter turn, landed: face 1 to face 2."""
    measured = (0, 1, 2, 1, 900, 612, 410, 4390, 8750, 1480, 640, 210, 20_500)
    made = Facts(EPOCH, BOOT, number, *measured)
    return made._replace(**changes)


def stopped(stop_number: int, latched: int = 1, **changes: Any) -> Stopped:
    """A confirmation."""
    return Stopped(stop_number, latched, 3, 0, BOOT, identity_bits(IDENTITY))._replace(**changes)


def planned(number: int = 1, **changes: Any) -> PlannedCommand:
    """A pivot for the first module; the command's count is its wire number."""
    values: dict[str, Any] = {
        "command": number,
        "module": 1,
        "identity": IDENTITY,
        "boot": BOOT,
        "epoch": EPOCH,
        "number": number,
        "motion": "pivot",
        "setting": int(Setting.FLOOR),
        "direction": int(Direction.FORWARD),
        "speed_rpm": 4400,
        "duration_ms": 0,
        "trial": 0,
        "latest_ms": 25_000,
    }
    return PlannedCommand(**(values | changes))


def pivot(number: int = 1, **changes: Any) -> Pivot:
    """The message that carries ``planned(number)``."""
    made = Pivot(EPOCH, BOOT, number, identity_bits(IDENTITY), 25_000, 0, 1, 1, 4400)
    return made._replace(**changes)


def query(number: int = 1, **changes: Any) -> Query:
    """The question about ``planned(number)``."""
    return Query(EPOCH, BOOT, number)._replace(**changes)


class Script:
    """A growing list of (number, record); time goes on by a millisecond a record."""

    def __init__(self) -> None:
        self.records: list[tuple[int, Record]] = []
        self.t_ns = 0

    def add(self, record_type: type[Any], *values: Any) -> Record:
        """Append a record of this type: its time is put in front of ``values``."""
        self.t_ns += STEP_NS
        record: Record = record_type(self.t_ns, *values)
        self.records.append((len(self.records) + 1, record))
        return record

    def open(self) -> "Script":
        """A session and its link."""
        opening = ("2026-03-04T09:00:00Z", "R. Ode", EPOCH, 1.0, "test", False, CONSOLE)
        self.add(SessionOpened, *opening)
        self.add(LinkChanged, 0, "sim://?modules=1", "open", "")
        return self

    def heard(self, *messages: Message, address: int = ADDRESS, link: int = 0) -> "Script":
        """The module says all of this, in one chunk."""
        self.add(BytesIn, link, b"".join(from_module(each, address) for each in messages))
        return self

    def sent(self, message: Message, address: int = ADDRESS, link: int = 0) -> "Script":
        """The console sends this."""
        self.add(BytesOut, link, to_module(message, address))
        return self

    def order(self, *commands: PlannedCommand, order: int | None = None) -> "Script":
        """An order of these commands, numbered as its first one."""
        number = commands[0].command if order is None else order
        self.add(OrderGiven, number, "birch pivot forward at 4400", "typed", commands)
        return self


Tables = dict[str, dict[tuple[Any, ...], Row]]


def tables_of(rows: Iterable[Row]) -> Tables:
    """What the log ends up with: of rows with the same key the last."""
    tables: Tables = {table.name: {} for table in TABLES.values()}
    for row in rows:
        table = TABLES[type(row)]
        tables[table.name][tuple(getattr(row, column) for column in table.key)] = row
    return tables


class Fold:
    """A script folded as far as it has been written; fold on after writing more."""

    def __init__(self, script: Script) -> None:
        self.script = script
        self.reducer = FleetReducer()
        self.rows: list[Row] = []
        self.steps: list[Step] = []
        self.on()

    def on(self) -> list[Row]:
        """Fold what is new; returns the rows that it gave."""
        new: list[Row] = []
        for number, record in self.script.records[len(self.steps) :]:
            step = self.reducer.apply(number, record)
            self.steps.append(step)
            new += step.rows
        self.rows += new
        return new

    @property
    def tables(self) -> Tables:
        """Tables as they now stand."""
        return tables_of(self.rows)

    def table(self, name: str) -> list[Any]:
        """One table's rows, in order of first writing."""
        return list(self.tables[name].values())

    def events(self, command: int = 1) -> list[str]:
        """A command's life, step by step."""
        return [row.event for row in self.table("command_events") if row.command == command]

    @property
    def ended(self) -> list[int]:
        """Commands that ended, in order, as told to whoever waits for them."""
        return [command for step in self.steps for command in step.ended]

    @property
    def view(self) -> FleetView:
        """The fleet now."""
        return self.reducer.view(self.script.t_ns)

    @property
    def alarms(self) -> list[str]:
        """Alarms, in order."""
        return [row.alarm for row in self.table("alarms")]
