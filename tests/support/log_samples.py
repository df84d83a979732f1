"""Samples for tests that touch the log: records and rows of every type, made up here."""

import os
import sqlite3
import types
from dataclasses import fields, is_dataclass
from pathlib import Path
from typing import Any, Final, Union, get_args, get_origin, get_type_hints

from hypothesis import strategies as st

from storage.records import (
    BytesIn,
    BytesOut,
    CommandExpired,
    Correction,
    NoteRecord,
    PlannedCommand,
    Record,
    SessionOpened,
)
from storage.rows import (
    TABLES,
    CommandRow,
    ModuleRow,
    MotionRow,
    OrderRow,
    Row,
    TelemetryRow,
)

OPENED: Final = SessionOpened(
    t_ns=5_000_000_000,
    utc="2026-03-02T08:00:00Z",
    operator="Mira",
    epoch=1_772_438_400,
    pace=1.0,
    program="tumblewire 0.1.0",
)
CLOSED_UTC: Final = "2026-03-02T09:30:00Z"

FAST_FOLDER: Final = "/dev/shm" if os.access("/dev/shm", os.W_OK) else None
"""A folder in memory, or None for the system's folder of temporary files."""

NOTE_TYPES: Final[tuple[type[Any], ...]] = get_args(NoteRecord)
RECORD_TYPES: Final[tuple[type[Any], ...]] = (BytesIn, BytesOut, *NOTE_TYPES)
ROW_TYPES: Final[tuple[type[Any], ...]] = get_args(Row)

_INT64: Final = st.integers(-(2**63), 2**63 - 1)
_VALUES: Final[dict[Any, st.SearchStrategy[Any]]] = {
    int: _INT64,
    bool: st.booleans(),
    str: st.text(max_size=40),
    bytes: st.binary(max_size=80),
    float: st.floats(allow_nan=False, allow_infinity=False),
    type(None): st.none(),
}


def values_for(hint: Any) -> st.SearchStrategy[Any]:
    """A strategy for one annotation of a record or row."""
    if get_origin(hint) in (Union, types.UnionType):
        return st.one_of([values_for(each) for each in get_args(hint)])
    if get_origin(hint) is tuple:
        return st.lists(values_for(get_args(hint)[0]), max_size=3).map(tuple)
    if is_dataclass(hint):
        return built(hint)
    return _VALUES[hint]


def built(cls: Any) -> st.SearchStrategy[Any]:
    """A strategy for a record or row type. A record's time must fit SQLite's integer."""
    hints = get_type_hints(cls)
    return st.builds(cls, **{name: values_for(hint) for name, hint in hints.items()})


def any_record() -> st.SearchStrategy[Record]:
    """Any record of any type."""
    return st.one_of([built(each) for each in RECORD_TYPES])


def any_row() -> st.SearchStrategy[Row]:
    """Any row of any table."""
    return st.one_of([built(each) for each in TABLES])


def telemetry(record: int, part: int = 0, module: int = 1) -> TelemetryRow:
    """A telemetry row like a still module's."""
    return TelemetryRow(
        record=record,
        part=part,
        t_ns=record * 1_000_000,
        module=module,
        boot=77,
        sequence=record % 65_536,
        module_time_ms=record * 500,
        activity=0,
        flags=0,
        face_up=1,
        wheel_rpm=0,
        battery_mV=3_905,
        temperature_cC=2_410,
        tilt_ddeg=-3,
    )


def bytes_in(number: int) -> BytesIn:
    """Bytes whose content tells which record they are."""
    return BytesIn(number * 1_000_000, 0, number.to_bytes(4, "little") * 8)


def module_row(module: int, name: str, *, simulated: int = 0, kind: str = "paver") -> ModuleRow:
    """A module whose identity ends in its count."""
    return ModuleRow(
        module=module,
        identity=identity(module, simulated),
        simulated=simulated,
        address=0x10 + module,
        name=name,
        kind=kind,
        firmware=3,
        wheel_max_rpm=9_000,
        boot=77,
        boots_seen=1,
        locked_by=None,
    )


def identity(module: int, simulated: int = 0) -> str:
    """The 16 digits of a sample module's identity; bit 63 is the simulated mark."""
    return f"{(simulated << 63) | (0xA0 + module):016x}"


def motion_rows(
    command: int,
    outcome: str,
    *,
    module: int = 1,
    speed_rpm: int = 4_350,
    trial: int = 0,
    source: str = "typed",
    simulated: int = 0,
    brake_ms: float | None = 41.5,
) -> list[Row]:
    """An order, its command and its motion, as a reducer leaves them."""
    t_ns = OPENED.t_ns + command * 10_000_000_000
    order = OrderRow(command, t_ns, source, "birch pivot forward", 1)
    row = CommandRow(
        command=command,
        order_no=command,
        t_ns=t_ns,
        module=module,
        identity=identity(module, simulated),
        boot=77,
        epoch=OPENED.epoch,
        number=command + 100,
        motion="pivot",
        setting="floor",
        direction="forward",
        speed_rpm=speed_rpm,
        duration_ms=0,
        trial=trial,
        sends=1,
        repeats_ignored=0,
        ending="finished",
        reason=None,
        final=1,
        ended_t_ns=t_ns + 2_000_000_000,
        latest_ms=25_000,
        stage=0,
        person="",
        value=0,
    )
    motion = MotionRow(
        command=command,
        module=module,
        motion="pivot",
        setting="floor",
        direction="forward",
        speed_rpm=speed_rpm,
        trial=trial,
        simulated=simulated,
        outcome=outcome,
        turned_deg=90.1,
        peak_tilt_deg=95.0,
        face_before=1,
        face_after=2,
        settled=1,
        peak_rate_dps=410,
        wheel_at_brake_rpm=speed_rpm - 20,
        brake_ms=brake_ms,
        spin_up_ms=900,
        settle_ms=350,
        sag_V=0.21,
        started_ms=20_500,
    )
    return [order, row, motion]


def planned(command: int) -> PlannedCommand:
    """A planned command; its identity needs all 64 bits."""
    return PlannedCommand(
        command=command,
        module=1,
        identity=2**64 - command,
        boot=2**32 - 1,
        epoch=OPENED.epoch,
        number=65_535,
        motion="pivot",
        setting=1,
        direction=-1,
        speed_rpm=4_350,
        duration_ms=0,
        trial=command,
        latest_ms=2**32 - 1,
        stage=255,
        person="Ada",
        value=-(2**31),
    )


def expired(number: int) -> CommandExpired:
    """A small record that is not bytes."""
    return CommandExpired(number * 1_000_000, number)


def correction(number: int, outcome: str) -> Correction:
    """A correction of the first sample module's command of that wire number."""
    return Correction(1, "2026-03-02T08:20:00Z", 0xA1, 77, number, outcome, "Mira", "saw it")


def ask(path: Path, question: str, *values: Any) -> list[tuple[Any, ...]]:
    """Ask a log as any SQLite tool would."""
    connection = sqlite3.connect(path)
    try:
        return connection.execute(question, values).fetchall()
    finally:
        connection.close()


def record_fields(cls: type[Any]) -> list[str]:
    """Names of a record's fields."""
    return [field.name for field in fields(cls)]
