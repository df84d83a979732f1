"""From the fleet's state to the immutable pictures that screens and sheets read.

Owns the pictures' making and their reuse: a part is made anew only where it changed. Must not
know rows or how the state came about.
"""

from console.fleet_endings import in_words
from console.fleet_modules import signal
from console.fleet_state import CommandState, FleetState, LinkState, ModuleState
from console.view import CommandView, LinkView, ModuleView


def module_view(module: ModuleState) -> ModuleView:
    """A module's picture, the last one again where nothing changed."""
    if module.view is None:
        module.view = ModuleView(
            module=module.module,
            identity=module.identity,
            simulated=module.simulated,
            address=module.address,
            link=module.link,
            name=module.name,
            kind=module.kind,
            boot=module.boot,
            epoch=module.epoch,
            wheel_max_rpm=module.wheel_max_rpm,
            wheel_rpm=module.wheel_rpm,
            battery_V=module.battery_mV / 1000,
            temperature_C=module.temperature_cC / 100,
            face_up=module.face_up,
            activity=module.activity,
            flags=module.flags,
            latched=module.latched,
            stop_number=module.stop_number,
            heard_t_ns=module.heard_t_ns,
            signal=signal(module),
            outcomes=tuple(each.outcome for each in module.ribbon if each.outcome is not None),
            doing=_doing(module),
            shares_address=module.shares_address,
        )
    return module.view


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
