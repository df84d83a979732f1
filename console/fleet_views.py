"""From the fleet's state to the immutable pictures that screens and sheets read.

Owns the pictures' making and their reuse: a part is made anew only where it changed. Must not
know rows or how the state came about.
"""

from dataclasses import fields
from typing import Any, Final

from console.fleet_endings import in_words
from console.fleet_modules import signal
from console.fleet_parts import BridgeState
from console.fleet_state import CommandState, FleetState, LinkState, ModuleState
from console.view import BridgeView, CommandView, LinkView, ModuleView
from protocol.clock import DRIFT_LIMIT_PPM
from protocol.codes import Activity, Flags, SettingId

PPM: Final = 1_000_000
NS_PER_MS: Final = 1_000_000
_PERMITTED: Final = int(Flags.PERMITTED)
_STAGED: Final = int(Activity.STAGED)


_SET_FIELDS: Final = tuple(getattr(ModuleView, each.name).__set__ for each in fields(ModuleView))
"""Setters of a module's picture, in the order of its fields. A frozen dataclass's own constructor
takes 11 us for so many, this way 6 (CPython 3.11, measured): with telemetry coming in, a picture
of a large fleet makes most of its modules' anew."""


def module_view(module: ModuleState) -> ModuleView:
    """A module's picture, the last one again where nothing changed."""
    if module.view is None:
        module.view = view = object.__new__(ModuleView)
        for set_field, value in zip(_SET_FIELDS, _values(module), strict=True):
            set_field(view, value)
    return module.view


def _values(module: ModuleState) -> tuple[Any, ...]:
    """What a module's picture shows, in the order of its fields."""
    offset_ms, bound_ms, round_trip_ms = _clock_ms(module)
    return (
        module.module,
        module.identity,
        module.simulated,
        module.address,
        module.link,
        module.name,
        module.kind,
        module.boot,
        module.epoch,
        module.wheel_max_rpm,
        module.wheel_rpm,
        module.battery_mV / 1000,
        module.temperature_cC / 100,
        module.face_up,
        module.activity,
        module.flags,
        module.latched,
        module.stop_number,
        module.heard_t_ns,
        signal(module),
        tuple(each.outcome for each in module.ribbon if each.outcome is not None),
        _doing(module),
        module.shares_address,
        module.console,
        module.owner_left_ms,
        module.owner_heard_ns,
        module.locked_out_by,
        module.faults_shown,
        bound_ms,
        offset_ms,
        round_trip_ms,
        _groups(module),
        module.settings.shown,
        module.settings.total,
        bool(module.flags & _PERMITTED),
        module.activity == _STAGED,
    )


def _clock_ms(module: ModuleState) -> tuple[float | None, float | None, float | None]:
    figures = module.clock.figures
    if figures is None:
        return None, None, None
    at_ns, offset_ns, bound_ns, delay_ns = figures
    # Grown since by the limit, and not by what the drift was measured to be: that takes 10 us.
    bound_ns += (module.heard_t_ns - at_ns) * DRIFT_LIMIT_PPM // PPM
    return offset_ns / NS_PER_MS, bound_ns / NS_PER_MS, delay_ns / NS_PER_MS


def _groups(module: ModuleState) -> int:
    read = module.settings.read.get(SettingId.GROUPS)
    return 0 if read is None else read.value & 0xFFFF_FFFF


def _doing(module: ModuleState) -> str:
    """The oldest command in hand that was sent, or else the oldest that waits."""
    in_hand = module.in_hand.values()
    first = next((each for each in in_hand if each.sends), next(iter(in_hand), None))
    return "" if first is None else in_words(first.planned)


def module_views(state: FleetState) -> tuple[ModuleView, ...]:
    """All modules' pictures, in the order in which they were first heard."""
    return tuple(map(module_view, state.modules.values()))


def command_view(command: CommandState) -> CommandView:
    """A command's picture, the last one again where nothing changed."""
    if command.view is None:
        command.view = CommandView(
            command=command.planned.command,
            module=command.planned.module,
            motion=command.planned.motion,
            trial=command.planned.trial,
            sends=command.sends,
            repeats_ignored=command.repeats_ignored,
            ending=command.ending or "",
            reason=command.reason or "",
            final=command.final,
            outcome=command.outcome,
            accepted=command.accepted,
        )
    return command.view


def link_view(link: LinkState) -> LinkView:
    """A link's picture."""
    return LinkView(
        link.link,
        link.url,
        link.state,
        link.frames_in,
        link.frames_out,
        link.dropped,
        link.bytes_in,
        link.bytes_out,
    )


def bridge_view(link: int, bridge: BridgeState) -> BridgeView:
    """A link's bridge, as it last said of itself."""
    return BridgeView(link, *bridge.status[1:], heard_t_ns=bridge.heard_t_ns)
