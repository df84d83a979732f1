"""The all-stop, as presses, clears and the modules' own reports leave it.

Owns which stop number is the newest, whether it is in force, and who has confirmed it. A module
keeps its latch through anything the console does, so its word counts: a latch reported with a
number that this session never lifted is in force, whoever pressed it (law 5).
"""

from console.fleet_commands import stop_commands
from console.fleet_rows import write_alarm
from console.fleet_state import LATCHED, FleetState, ModuleState, Moment
from console.view import StopView
from protocol.message import Stopped
from storage.records import StopLifted, StopPressed


def press_stop(state: FleetState, at: Moment, record: StopPressed) -> None:
    """A stop was pressed here."""
    state.stop.newest = max(state.stop.newest, record.stop_number)
    state.stop.in_force = True
    write_alarm(at, None, "all-stop", f"number {record.stop_number}, by {record.source}")
    state.notice(at, f"all-stop {record.stop_number} by {record.source}")
    stop_commands(state, at)


def lift_stop(state: FleetState, at: Moment, record: StopLifted) -> None:
    """A person cleared a stop; only a clear that names the newest lifts it."""
    stop = state.stop
    stop.lifted = max(stop.lifted, record.stop_number)
    if record.stop_number >= stop.newest:
        stop.newest, stop.in_force = record.stop_number, False
    write_alarm(at, None, "clear", f"number {record.stop_number}, by {record.source}")
    state.notice(at, f"all-stop {record.stop_number} cleared by {record.source}")


def take_stopped(state: FleetState, at: Moment, address: int, message: Stopped) -> None:
    """A module confirms a stop or a clear."""
    module = state.by_sender.get((at.link, address, message.identity_bits))
    if module is None or message.boot != module.boot:
        state.unknown_heard = True
        return
    module.activity = message.activity
    module.wheel_rpm = message.wheel_rpm
    module.heard_t_ns = at.t_ns
    state.touch(module)
    hear_latch(state, at, module, message.stop_number, bool(message.latched))


def hear_latch(
    state: FleetState, at: Moment, module: ModuleState, stop_number: int | None, latched: bool
) -> None:
    """Take a module's word on its latch. ``stop_number`` is None where it came without one, in
    telemetry: then a latch that nothing here explains is a reason to call the roll."""
    stop = state.stop
    if stop_number is None:
        module.set_condition(LATCHED, latched)
        state.unknown_heard |= latched and not stop.in_force
        return
    if stop_number < module.stop_number:
        return  # A module's number only rises: this was said before what is known already.
    module.set_condition(LATCHED, latched)
    module.stop_number = stop_number
    stop.newest = max(stop.newest, stop_number)
    if latched and stop_number > stop.lifted and not stop.in_force:
        stop.in_force = True
        text = f"number {stop_number} is in force, says {module.name}"
        write_alarm(at, module, "all-stop", text)
        state.notice(at, f"all-stop {text}")
    _tell_all_confirmed(state, at)


def _tell_all_confirmed(state: FleetState, at: Moment) -> None:
    stop = state.stop
    if stop.in_force and stop.told < stop.newest and not stop_view(state).missing:
        stop.told = stop.newest
        state.notice(at, f"all-stop {stop.newest}: all {len(state.modules)} modules confirmed")


def stop_view(state: FleetState) -> StopView:
    """The all-stop as a picture. While it is in force a module has confirmed if it is latched
    by the newest number; once lifted, if it is latched no more."""
    stop = state.stop
    if not stop.newest:
        return StopView(0, False, (), ())
    confirmed: list[int] = []
    missing: list[int] = []
    for module in state.modules.values():
        at_rest = module.latched and module.stop_number == stop.newest
        done = at_rest if stop.in_force else not module.latched
        (confirmed if done else missing).append(module.module)
    return StopView(stop.newest, stop.in_force, tuple(confirmed), tuple(missing))
