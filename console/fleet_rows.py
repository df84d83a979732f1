"""From the fleet's state to the rows of the derived tables.

Owns units and wording of rows: identities as hexadecimal digits, codes as words, angles in
degrees. Must not know dispatch or SQL; changes nothing of the state but a module's last row.
"""

from typing import Final

from console.fleet_state import CommandState, ModuleState, Moment
from protocol.codes import Direction, Fault, Reason, Setting, SettingId, is_simulated
from protocol.message import BridgeStatus, Facts, SettingValue
from protocol.trace import Trace, pack_trace
from storage.records import (
    Correction,
    LinkChanged,
    OrderGiven,
    PlannedCommand,
    Remark,
    SheetOpened,
)
from storage.rows import (
    AlarmRow,
    BridgeStatusRow,
    CommandEventRow,
    CommandRow,
    CorrectionRow,
    LinkEventRow,
    ModuleRow,
    MotionRow,
    OrderRow,
    RemarkRow,
    SettingRow,
    SheetRow,
    TraceRow,
)

SETTING_NAMES: Final = {int(code): code.name.lower() for code in Setting}
DIRECTION_NAMES: Final = {int(code): code.name.lower() for code in Direction}
REASON_NAMES: Final = {int(code): code.name.lower() for code in Reason}
SETTING_ID_NAMES: Final = {int(code): code.name.lower() for code in SettingId}
FAULT_NAMES: Final = {int(code): code.name.lower() for code in Fault}
FAULT_DETAILS: Final[dict[int, tuple[int, str]]] = {
    Fault.BROWN_OUT: (1, "mV"),
    Fault.OVERHEATED: (10, "°C"),
    Fault.BRAKE_WEAK: (1, "ms"),
}
"""By what a fault's figure on the wire is divided, and its unit then."""

SAMPLE_BYTES: Final = 8
"""Of one sample of a trace, on the wire and in the log."""

_Measured = tuple[
    float | None,
    float | None,
    int | None,
    int | None,
    int | None,
    int | None,
    int | None,
    float | None,
    int | None,
    int | None,
    float | None,
    int | None,
]
_NOTHING_MEASURED: Final[_Measured] = (None,) * 12


def identity_text(identity: int) -> str:
    """An identity as 16 hexadecimal digits: SQLite's integers are signed and would turn it."""
    return f"{identity:016x}"


def reason_text(reason: int) -> str:
    """A reason code as its name in lower case, or as a number where it has none."""
    return REASON_NAMES.get(reason, f"reason {reason}")


def fault_text(fault: int) -> str:
    """A fault as its name in lower case, or as a number where it has none."""
    return FAULT_NAMES.get(fault, f"fault {fault}")


def setting_id_text(setting: int) -> str:
    """A module's setting as its name in lower case, or as a number where it has none."""
    return SETTING_ID_NAMES.get(setting, f"setting {setting}")


def _setting_of(planned: PlannedCommand) -> str:
    """What stands in the column ``setting``: of a write what it changes, else a pivot's."""
    if planned.motion == "set":
        return setting_id_text(planned.setting)
    return SETTING_NAMES.get(planned.setting, "")


def write_module(at: Moment, module: ModuleState) -> None:
    """Add the module's row to the step, if it differs from the last one."""
    row = ModuleRow(
        module=module.module,
        identity=identity_text(module.identity),
        simulated=int(module.simulated),
        address=module.address,
        name=module.name,
        kind=module.kind,
        firmware=module.firmware,
        wheel_max_rpm=module.wheel_max_rpm,
        boot=module.boot,
        boots_seen=len(module.boots),
        locked_by=module.locked_out_by,
    )
    if row != module.row:
        module.row = row
        at.step.rows.append(row)


def write_order(at: Moment, record: OrderGiven) -> None:
    """Add an order's row."""
    count = len(record.commands)
    at.step.rows.append(OrderRow(record.order, at.t_ns, record.source, record.text, count))


def write_command(at: Moment, command: CommandState) -> None:
    """Add a command's row as it now stands; drops its picture, which is no longer true."""
    command.view = None
    planned = command.planned
    at.step.rows.append(
        CommandRow(
            command=planned.command,
            order_no=command.order,
            t_ns=command.t_ns,
            module=planned.module,
            identity=identity_text(planned.identity),
            boot=planned.boot,
            epoch=planned.epoch,
            number=planned.number,
            motion=planned.motion,
            setting=_setting_of(planned),
            direction=DIRECTION_NAMES.get(planned.direction, ""),
            speed_rpm=planned.speed_rpm,
            duration_ms=planned.duration_ms,
            trial=planned.trial,
            sends=command.sends,
            repeats_ignored=command.repeats_ignored,
            ending=command.ending,
            reason=command.reason,
            final=int(command.final),
            ended_t_ns=command.ended_t_ns,
            latest_ms=planned.latest_ms,
            stage=planned.stage,
            person=planned.person,
            value=planned.value,
        )
    )


def write_event(at: Moment, command: CommandState, event: str, detail: str = "") -> None:
    """Add one step in a command's life."""
    number = command.planned.command
    at.step.rows.append(CommandEventRow(at.number, at.part, at.t_ns, number, event, detail))


def write_motion(at: Moment, command: CommandState) -> None:
    """Add a motion's row: its outcome, and what was measured where a report came."""
    if command.outcome is None:
        return
    planned = command.planned
    at.step.rows.append(
        MotionRow(
            planned.command,
            planned.module,
            planned.motion,
            SETTING_NAMES.get(planned.setting, ""),
            DIRECTION_NAMES.get(planned.direction, ""),
            planned.speed_rpm,
            planned.trial,
            int(is_simulated(planned.identity)),
            command.outcome.value,
            *_measured(command.facts),
        )
    )


def _measured(facts: Facts | None) -> _Measured:
    """A motion row's measured columns, in their order."""
    if facts is None:
        return _NOTHING_MEASURED
    return (
        facts.turned_ddeg / 10,
        facts.peak_tilt_ddeg / 10,
        facts.face_before,
        facts.face_after,
        facts.settled,
        facts.peak_rate_dps,
        facts.wheel_at_brake_rpm,
        facts.brake_us / 1000,
        facts.spin_up_ms,
        facts.settle_ms,
        facts.sag_mV / 1000,
        facts.started_ms,
    )


def write_alarm(at: Moment, module: ModuleState | None, alarm: str, detail: str) -> None:
    """Add something that a person should know; ``alarm`` is one of the words of AlarmRow."""
    about = None if module is None else module.module
    at.step.rows.append(AlarmRow(at.number, at.part, at.t_ns, about, alarm, detail))


def write_link_event(at: Moment, record: LinkChanged) -> None:
    """Add a link's opening, loss or closing."""
    at.step.rows.append(
        LinkEventRow(at.number, at.t_ns, record.link, record.url, record.state, record.detail)
    )


def write_sheet(
    at: Moment, sheet: SheetOpened, closed_t_ns: int | None, stopped: str | None
) -> None:
    """Add a sheet's row; ``stopped`` is NULL while it runs, empty where it ran to its end."""
    at.step.rows.append(
        SheetRow(
            sheet.sheet,
            sheet.t_ns,
            closed_t_ns,
            sheet.name,
            sheet.seed,
            sheet.planned,
            stopped,
            sheet.text,
        )
    )


def write_remark(at: Moment, record: Remark) -> None:
    """Add a remark."""
    at.step.rows.append(RemarkRow(at.number, at.t_ns, record.utc, record.person, record.text))


def write_correction(at: Moment, record: Correction) -> None:
    """Add a person's correction; the drawn verdict stays as it is."""
    at.step.rows.append(
        CorrectionRow(
            at.number,
            at.t_ns,
            record.utc,
            identity_text(record.identity),
            record.boot,
            record.number,
            record.outcome,
            record.person,
            record.reason,
        )
    )


def write_setting(at: Moment, module: ModuleState, read: SettingValue) -> None:
    """Add what a module says of one of its settings."""
    name = setting_id_text(read.setting)
    key = module.module, name, at.number, at.part
    at.step.rows.append(SettingRow(*key, at.t_ns, read.value, read.lowest, read.highest))


def write_trace(at: Moment, command: CommandState, trace: Trace) -> None:
    """Add a motion's trace, whole."""
    data = b"".join(pack_trace(*trace)[1:])
    number = command.planned.command
    at.step.rows.append(TraceRow(number, *trace.head, data[: trace.head.samples * SAMPLE_BYTES]))


def write_bridge_status(at: Moment, status: BridgeStatus) -> None:
    """Add what a bridge says of itself."""
    at.step.rows.append(BridgeStatusRow(at.number, at.part, at.t_ns, at.link, *status[1:]))
