"""Derived rows: what the reducer makes of the records, table by table.

Owns the row types and which table and key each belongs to. A row is a plain NamedTuple, since
telemetry rows are made at the line's full rate. Rows are written whole: a later row of the same
key takes the place of the earlier one, so that live and rebuilt tables end alike.

Every key begins with the session, which the writer puts in front; ``module`` counts modules
within a session in the order in which they were first heard.
"""

from typing import Any, Final, NamedTuple


class ModuleRow(NamedTuple):
    """One module as last known in the session. ``identity``: 16 hexadecimal digits;
    ``locked_by``: NULL where nobody has locked it out, empty where the name is not known."""

    module: int
    identity: str
    simulated: int
    address: int
    name: str
    kind: str
    firmware: int
    wheel_max_rpm: int
    boot: int
    boots_seen: int
    locked_by: str | None


class TelemetryRow(NamedTuple):
    """One telemetry message; ``part`` counts the messages within one wire record."""

    record: int
    part: int
    t_ns: int
    module: int
    boot: int
    sequence: int
    module_time_ms: int
    activity: int
    flags: int
    face_up: int
    wheel_rpm: int
    battery_mV: int
    temperature_cC: int
    tilt_ddeg: int


class OrderRow(NamedTuple):
    """One order, as typed or as a sheet gave it."""

    order_no: int
    t_ns: int
    source: str
    text: str
    commands: int


class CommandRow(NamedTuple):
    """One command. ``ending`` is NULL until it has one: finished, refused, cut, unseen.

    ``setting`` is a pivot's, or the name of what a ``set`` changes to ``value``; ``latest_ms`` is
    module time, 0 where the command has no latest start; ``stage`` is 0 where it waits for no Go.
    """

    command: int
    order_no: int
    t_ns: int
    module: int
    identity: str
    boot: int
    epoch: int
    number: int
    motion: str
    setting: str
    direction: str
    speed_rpm: int
    duration_ms: int
    trial: int
    sends: int
    repeats_ignored: int
    ending: str | None
    reason: str | None
    final: int
    ended_t_ns: int | None
    latest_ms: int
    stage: int
    person: str
    value: int


class CommandEventRow(NamedTuple):
    """One step in a command's life: ordered, sent, resent, asked, accepted, go, no go, finished,
    refused, cut, unseen, repeat ignored, trace."""

    record: int
    part: int
    t_ns: int
    command: int
    event: str
    detail: str


class MotionRow(NamedTuple):
    """One motion: what was measured of it, and the outcome drawn from that.

    Facts are NULL where no report came (refused, unseen). ``started_ms``: module time.
    """

    command: int
    module: int
    motion: str
    setting: str
    direction: str
    speed_rpm: int
    trial: int
    simulated: int
    outcome: str
    turned_deg: float | None
    peak_tilt_deg: float | None
    face_before: int | None
    face_after: int | None
    settled: int | None
    peak_rate_dps: int | None
    wheel_at_brake_rpm: int | None
    brake_ms: float | None
    spin_up_ms: int | None
    settle_ms: int | None
    sag_V: float | None
    started_ms: int | None


class LinkEventRow(NamedTuple):
    """A link opened, lost, closed."""

    record: int
    t_ns: int
    link: int
    url: str
    state: str
    detail: str


class SheetRow(NamedTuple):
    """One run sheet as it was run, with its text whole."""

    sheet: int
    opened_t_ns: int
    closed_t_ns: int | None
    name: str
    seed: int
    planned: int
    stopped: str | None
    text: str


class AlarmRow(NamedTuple):
    """Something a person should know: all-stop, clear, restart, address conflict, damage, link
    lost, clock, fault, locked out, unlocked, owned by another console, setting differs, bridge
    restart."""

    record: int
    part: int
    t_ns: int
    module: int | None
    alarm: str
    detail: str


class RemarkRow(NamedTuple):
    """A person's remark."""

    record: int
    t_ns: int
    utc: str
    person: str
    text: str


class CorrectionRow(NamedTuple):
    """A person's verdict over the drawn one, with a reason; the first stays."""

    record: int
    t_ns: int
    utc: str
    identity: str
    boot: int
    number: int
    outcome: str
    person: str
    reason: str


class SettingRow(NamedTuple):
    """A module's setting as read: a row for the first reading and for each that says something
    else. ``setting``: a name with its unit. Read only where all three figures are equal."""

    module: int
    setting: str
    record: int
    part: int
    t_ns: int
    value: int
    lowest: int
    highest: int


class TraceRow(NamedTuple):
    """The trace of one motion, whole. ``data``: 8 bytes a sample, little-endian: wheel speed in
    rpm i16, body rate in degrees a second i16, tilt in 0.1 degrees i16, battery in mV u16."""

    command: int
    period_us: int
    samples: int
    brake_sample: int
    started_ms: int
    data: bytes


class BridgeStatusRow(NamedTuple):
    """What a link's bridge said of itself; counts are since its start."""

    record: int
    part: int
    t_ns: int
    link: int
    uptime_ms: int
    frames_from_console: int
    frames_to_console: int
    dropped: int
    queue: int
    queue_most: int
    signal_dBm: int
    noise_dBm: int


Row = (
    ModuleRow
    | TelemetryRow
    | OrderRow
    | CommandRow
    | CommandEventRow
    | MotionRow
    | LinkEventRow
    | SheetRow
    | AlarmRow
    | RemarkRow
    | CorrectionRow
    | SettingRow
    | TraceRow
    | BridgeStatusRow
)


class Table(NamedTuple):
    """Where a row type is stored. ``key`` leaves out the session, which always comes first."""

    name: str
    key: tuple[str, ...]


TABLES: Final[dict[type[Any], Table]] = {
    ModuleRow: Table("modules", ("module",)),
    TelemetryRow: Table("telemetry", ("record", "part")),
    OrderRow: Table("orders", ("order_no",)),
    CommandRow: Table("commands", ("command",)),
    CommandEventRow: Table("command_events", ("record", "part")),
    MotionRow: Table("motions", ("command",)),
    LinkEventRow: Table("link_events", ("record",)),
    SheetRow: Table("sheets", ("sheet",)),
    AlarmRow: Table("alarms", ("record", "part")),
    RemarkRow: Table("remarks", ("record",)),
    CorrectionRow: Table("corrections", ("record",)),
    SettingRow: Table("settings", ("module", "setting", "record", "part")),
    TraceRow: Table("traces", ("command",)),
    BridgeStatusRow: Table("bridge_status", ("record", "part")),
}
