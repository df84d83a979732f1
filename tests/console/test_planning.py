"""From orders to numbered commands and their messages."""

import pytest

from console.errors import InputError
from console.orders import Order, parse_order
from console.planning import build_commands, count_on, resolve, to_message
from protocol.codes import Direction, Setting
from protocol.message import Flash, Pivot, Rest, Spin
from storage.records import PlannedCommand
from tests.support.fake_fleet import NAMES, eight


def planned(text: str, **numbers: int) -> tuple[PlannedCommand, ...]:
    order = parse_order(text, NAMES)
    modules = resolve(order, eight())
    return build_commands(order, modules, last_command=40, numbers={}, epoch=9, trial=3, **numbers)


def test_no_names_mean_everyone() -> None:
    assert [module.name for module in resolve(parse_order("all rest", NAMES), eight())] == [*NAMES]


def test_names_keep_their_order() -> None:
    found = resolve(parse_order("elm, birch rest", NAMES), eight())
    assert [module.name for module in found] == ["elm", "birch"]


def test_a_stranger_is_named_with_those_who_are_there() -> None:
    order = Order(("oak",), "rest", None, None, 0, 0)
    with pytest.raises(InputError, match=r"oak; there are alder, birch"):
        resolve(order, eight())


def test_nobody_there() -> None:
    with pytest.raises(InputError, match="no module has answered"):
        resolve(parse_order("all rest", NAMES), ())


def test_wire_numbers_wrap_from_65535_to_1_and_never_use_0() -> None:
    numbers = {1: 65_533}
    assert [count_on(numbers, 1) for _ in range(4)] == [65_534, 65_535, 1, 2]
    assert count_on(numbers, 2) == 1


def test_commands_are_numbered_on_and_carry_who_they_are_for() -> None:
    commands = planned("birch, elm pivot back at 5200")
    assert [each.command for each in commands] == [41, 42]
    assert [each.module for each in commands] == [2, 4]
    assert all(
        (each.boot, each.epoch, each.number, each.trial) == (7, 9, 1, 3) for each in commands
    )
    assert all((each.setting, each.direction) == (1, -1) for each in commands)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("birch pivot back at 5200", Pivot(9, 7, 1, 0x1002, Setting.FLOOR, Direction.BACK, 5200)),
        ("birch spin at 3000 for 5 s", Spin(9, 7, 1, 0x1002, 3000, 5000)),
        ("birch spin back at 3000 for 5 s", Spin(9, 7, 1, 0x1002, -3000, 5000)),
        ("birch rest", Rest(9, 7, 1, 0x1002)),
        ("birch flash for 3 s", Flash(9, 7, 1, 0x1002, 3000)),
    ],
)
def test_each_motion_has_its_message(text: str, expected: object) -> None:
    [command] = planned(text)
    assert to_message(command) == expected


def test_a_motion_without_a_message_is_refused() -> None:
    [command] = planned("birch rest")
    hop = PlannedCommand(**{**{n: getattr(command, n) for n in command.__slots__}, "motion": "hop"})
    with pytest.raises(InputError, match="hop"):
        to_message(hop)
