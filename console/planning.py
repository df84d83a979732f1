"""From an order to numbered commands, and from a command to its message. Pure functions.

Knows names, addresses and wire numbers; sends nothing and records nothing.
"""

from collections.abc import Callable, MutableMapping, Sequence
from typing import Final

from console.errors import InputError
from console.orders import Order
from console.view import ModuleView
from protocol.codes import Direction, Setting, identity_bits
from protocol.command_memory import next_number
from protocol.message import Command, Flash, Pivot, Rest, Spin
from storage.records import PlannedCommand


def resolve(order: Order, modules: Sequence[ModuleView]) -> tuple[ModuleView, ...]:
    """Find the modules that an order names; no names mean everyone.

    Raises InputError for a name that no module bears, or where there is no module at all.
    """
    if not modules:
        raise InputError("no module has answered yet")
    if not order.subjects:
        return tuple(modules)
    by_name = {module.name: module for module in modules}
    strange = [name for name in order.subjects if name not in by_name]
    if strange:
        raise InputError(f"no module is called {strange[0]}; there are {', '.join(by_name)}")
    return tuple(by_name[name] for name in order.subjects)


def count_on(numbers: MutableMapping[int, int], module: int) -> int:
    """Count a module's wire numbers on, each module by itself (WIRE.md: never jump far)."""
    numbers[module] = next_number(numbers.get(module, 0))
    return numbers[module]


def build_commands(
    order: Order,
    modules: Sequence[ModuleView],
    *,
    last_command: int,
    numbers: MutableMapping[int, int],
    epoch: int,
    trial: int,
) -> tuple[PlannedCommand, ...]:
    """Make an order's commands, one a module, numbered on from ``last_command``."""
    return tuple(
        PlannedCommand(
            command=last_command + count,
            module=module.module,
            identity=module.identity,
            boot=module.boot,
            epoch=epoch,
            number=count_on(numbers, module.module),
            motion=order.motion,
            setting=order.setting or 0,
            direction=order.direction or 0,
            speed_rpm=order.speed_rpm,
            duration_ms=order.duration_ms,
            trial=trial,
        )
        for count, module in enumerate(modules, start=1)
    )


def _pivot(planned: PlannedCommand, bits: int) -> Command:
    setting, direction = Setting(planned.setting), Direction(planned.direction)
    envelope = (planned.epoch, planned.boot, planned.number, bits)
    return Pivot(*envelope, setting, direction, planned.speed_rpm)


def _spin(planned: PlannedCommand, bits: int) -> Command:
    speed_rpm = planned.speed_rpm * (planned.direction or Direction.FORWARD)
    envelope = (planned.epoch, planned.boot, planned.number, bits)
    return Spin(*envelope, speed_rpm, planned.duration_ms)


def _rest(planned: PlannedCommand, bits: int) -> Command:
    return Rest(planned.epoch, planned.boot, planned.number, bits)


def _flash(planned: PlannedCommand, bits: int) -> Command:
    return Flash(planned.epoch, planned.boot, planned.number, bits, planned.duration_ms)


_MESSAGES: Final[dict[str, Callable[[PlannedCommand, int], Command]]] = {
    "pivot": _pivot,
    "spin": _spin,
    "rest": _rest,
    "flash": _flash,
}


def to_message(planned: PlannedCommand) -> Command:
    """Build the message that carries a planned command. Raises InputError for a motion that
    has none in this version."""
    try:
        make = _MESSAGES[planned.motion]
    except KeyError as error:
        raise InputError(f"{planned.motion} cannot be sent in this version") from error
    return make(planned, identity_bits(planned.identity))
