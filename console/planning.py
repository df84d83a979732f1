"""From an order to numbered commands, and from a command to its message. Pure functions.

Knows names, addresses and wire numbers; sends nothing and records nothing.
"""

from collections.abc import Callable, MutableMapping, Sequence
from dataclasses import dataclass
from typing import Final

from console.errors import InputError
from console.orders import DRIVES, Order
from console.upkeep import ClockOf, latest_start_ms
from console.view import ModuleView
from protocol.codes import Direction, Setting, identity_bits
from protocol.command_memory import next_number
from protocol.message import (
    Command,
    Flash,
    Hop,
    LockOut,
    Pivot,
    Rest,
    SettingWrite,
    Spin,
    Twist,
    Unlock,
    text_field,
)
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


@dataclass(frozen=True, slots=True)
class Plan:
    """What the commands of one order share. ``stage`` 0: each starts at once; ``latest_ns``:
    fleet time after which no motion of it may start."""

    epoch: int
    trial: int = 0
    stage: int = 0
    latest_ns: int = 0


def build_commands(
    order: Order,
    modules: Sequence[ModuleView],
    plan: Plan,
    *,
    last_command: int,
    numbers: MutableMapping[int, int],
    clock_of: ClockOf,
) -> tuple[PlannedCommand, ...]:
    """Make an order's commands, one a module, numbered on from ``last_command``."""
    return tuple(
        PlannedCommand(
            command=last_command + count,
            module=module.module,
            identity=module.identity,
            boot=module.boot,
            epoch=plan.epoch,
            number=count_on(numbers, module.module),
            motion=order.motion,
            setting=order.item or order.setting or 0,
            direction=order.direction or 0,
            speed_rpm=order.speed_rpm,
            duration_ms=order.duration_ms,
            trial=plan.trial,
            latest_ms=_latest_ms(order, module, plan, clock_of),
            stage=plan.stage,
            person=order.person,
            value=order.value,
        )
        for count, module in enumerate(modules, start=1)
    )


def _latest_ms(order: Order, module: ModuleView, plan: Plan, clock_of: ClockOf) -> int:
    clock = clock_of(module.module) if order.motion in DRIVES else None
    return 0 if clock is None else latest_start_ms(clock, plan.latest_ns)


def _envelope(planned: PlannedCommand) -> tuple[int, int, int, int]:
    return planned.epoch, planned.boot, planned.number, identity_bits(planned.identity)


def _start(planned: PlannedCommand) -> tuple[int, int]:
    return planned.latest_ms, planned.stage


def _pivot(planned: PlannedCommand) -> Command:
    setting, direction = Setting(planned.setting), Direction(planned.direction)
    return Pivot(*_envelope(planned), *_start(planned), setting, direction, planned.speed_rpm)


def _hop(planned: PlannedCommand) -> Command:
    direction = Direction(planned.direction)
    return Hop(*_envelope(planned), *_start(planned), direction, planned.speed_rpm)


def _twist(planned: PlannedCommand) -> Command:
    direction = Direction(planned.direction)
    return Twist(*_envelope(planned), *_start(planned), direction, planned.speed_rpm)


def _spin(planned: PlannedCommand) -> Command:
    speed_rpm = planned.speed_rpm * (planned.direction or Direction.FORWARD)
    return Spin(*_envelope(planned), planned.latest_ms, speed_rpm, planned.duration_ms)


_MESSAGES: Final[dict[str, Callable[[PlannedCommand], Command]]] = {
    "pivot": _pivot,
    "hop": _hop,
    "twist": _twist,
    "spin": _spin,
    "rest": lambda planned: Rest(*_envelope(planned)),
    "flash": lambda planned: Flash(*_envelope(planned), planned.duration_ms),
    "lock": lambda planned: LockOut(*_envelope(planned), text_field(planned.person)),
    "unlock": lambda planned: Unlock(*_envelope(planned), text_field(planned.person)),
    "set": lambda planned: SettingWrite(*_envelope(planned), planned.setting, planned.value),
}


def to_message(planned: PlannedCommand) -> Command:
    """Build the message that carries a planned command. Raises InputError for a motion that
    has none in this version."""
    try:
        make = _MESSAGES[planned.motion]
    except KeyError as error:
        raise InputError(f"{planned.motion} cannot be sent in this version") from error
    return make(planned)
