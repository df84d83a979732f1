"""From orders to numbered commands and their messages."""

from dataclasses import replace

import pytest

from console.errors import InputError
from console.limits import NS_PER_MS
from console.orders import Order, parse_order
from console.planning import Plan, build_commands, count_on, resolve, to_message
from protocol.clock import ModuleClock
from protocol.codes import Direction, Setting, SettingId
from protocol.message import (
    Flash,
    Hop,
    LockOut,
    Pivot,
    Rest,
    SettingWrite,
    Spin,
    Twist,
    Unlock,
)
from storage.records import PlannedCommand
from tests.support.fake_fleet import NAMES, eight


def clock_of(module: int) -> ModuleClock:
    """Module time is as many seconds ahead as the module's count, known to 2 ms."""
    clock = ModuleClock(0)
    heard_ns = module * 10**9 + 2 * NS_PER_MS
    clock.sample(0, heard_ns, heard_ns, 4 * NS_PER_MS)
    return clock


PLAN = Plan(epoch=9, trial=3, stage=0, latest_ns=4 * NS_PER_MS)


def planned(text: str, plan: Plan = PLAN) -> tuple[PlannedCommand, ...]:
    order = parse_order(text, NAMES)
    modules = resolve(order, eight())
    return build_commands(order, modules, plan, last_command=40, numbers={}, clock_of=clock_of)


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


ENVELOPE = (9, 7, 1, 0x1002)
LATEST_MS = 2001  # 4 ms of fleet time, 2 s ahead, less a bound of 2 ms and what 4 ms may drift


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (
            "birch pivot back at 5200",
            Pivot(*ENVELOPE, LATEST_MS, 0, Setting.FLOOR, Direction.BACK, 5200),
        ),
        ("birch hop at 7000", Hop(*ENVELOPE, LATEST_MS, 0, Direction.FORWARD, 7000)),
        ("birch twist back at 4000", Twist(*ENVELOPE, LATEST_MS, 0, Direction.BACK, 4000)),
        ("birch spin at 3000 for 5 s", Spin(*ENVELOPE, LATEST_MS, 3000, 5000)),
        ("birch spin back at 3000 for 5 s", Spin(*ENVELOPE, LATEST_MS, -3000, 5000)),
        ("birch rest", Rest(*ENVELOPE)),
        ("birch flash for 3 s", Flash(*ENVELOPE, 3000)),
        ("birch lock by Ada", LockOut(*ENVELOPE, b"Ada")),
        ("birch unlock by Ada", Unlock(*ENVELOPE, b"Ada")),
        ("birch set groups to 5", SettingWrite(*ENVELOPE, SettingId.GROUPS, 5)),
    ],
)
def test_each_motion_has_its_message(text: str, expected: object) -> None:
    [command] = planned(text)
    assert to_message(command) == expected


def test_each_module_s_latest_start_is_in_its_own_time() -> None:
    commands = planned("birch, elm pivot back at 5200")
    assert [each.latest_ms for each in commands] == [2_001, 4_001]


def test_a_stage_goes_to_all_of_an_order() -> None:
    plan = Plan(epoch=9, stage=17)
    commands = planned("birch, elm twist back at 5200 together", plan)
    assert {to_message(each).stage for each in commands} == {17}  # type: ignore[union-attr]


def test_what_drives_no_wheel_needs_no_clock() -> None:
    order = parse_order("birch flash", NAMES)
    [command] = build_commands(
        order, eight()[1:2], PLAN, last_command=0, numbers={}, clock_of=lambda _: None
    )
    assert command.latest_ms == 0


def test_a_motion_without_a_message_is_refused() -> None:
    [command] = planned("birch rest")
    with pytest.raises(InputError, match="somersault"):
        to_message(replace(command, motion="somersault"))
