"""The two schedules: calling the roll, and repeating stops and clears until confirmed."""

import itertools
from dataclasses import replace

from console.standing import (
    ROLL_CALM_PERIOD_NS,
    ROLL_HASTE_PERIOD_NS,
    ROLL_OPENING_PERIOD_NS,
    STOP_CALM_AFTER,
    STOP_CALM_PERIOD_NS,
    STOP_LOOK_NS,
    STOP_PERIOD_NS,
    RollCaller,
    StopKeeper,
    follows,
    owned_by_another,
    unexplained,
)
from console.view import FleetView, ModuleView, StopView
from tests.support.fake_fleet import eight, fleet_view

EPOCH = 1_760_000_000


def calls(roll: RollCaller, unexplained_now: bool, until_ns: int, step_ns: int) -> list[int]:
    return [t_ns for t_ns in range(0, until_ns, step_ns) if roll.due(lambda: unexplained_now, t_ns)]


def test_the_roll_is_called_often_at_first_and_then_calmly() -> None:
    times = calls(RollCaller(), False, 30_000_000_000, ROLL_OPENING_PERIOD_NS // 3)
    gaps = [later - earlier for earlier, later in itertools.pairwise(times)]
    assert times[0] == 0
    assert gaps[:3] == [ROLL_OPENING_PERIOD_NS] * 3
    assert all(gap == ROLL_CALM_PERIOD_NS for gap in gaps[3:])
    assert len(gaps) > 4


def test_a_stranger_hastens_the_roll() -> None:
    times = calls(RollCaller(), True, 10_000_000_000, 100_000_000)
    gaps = {later - earlier for earlier, later in itertools.pairwise(times[4:])}
    assert gaps == {ROLL_HASTE_PERIOD_NS}


def test_between_calls_the_fleet_is_looked_at_ten_times_a_second_at_most() -> None:
    roll, looks = RollCaller(), []
    for t_ns in range(0, 5_000_000_000, 1_000_000):
        roll.due(lambda: bool(looks.append(1)), t_ns)
    assert 20 < len(looks) <= 50


def test_hurry_calls_at_the_next_chance() -> None:
    roll = RollCaller()
    assert [roll.due(lambda: False, 300_000_000 * count) for count in range(5)] == [True] * 4 + [
        False
    ]
    roll.hurry()
    assert roll.due(lambda: False, 1_300_000_000)


CONSOLE = 0xC0C0


def following(**changes: object) -> tuple[ModuleView, ...]:
    first, *others = (replace(each, epoch=EPOCH, console=CONSOLE) for each in eight())
    return (replace(first, **changes), *others)  # type: ignore[arg-type]


def fleet_of(modules: tuple[ModuleView, ...]) -> FleetView:
    return fleet_view(*modules, epoch=EPOCH, console=CONSOLE)


def test_who_is_unexplained() -> None:
    assert not unexplained(fleet_of(following()), False)
    assert unexplained(fleet_of(following()), True)
    assert unexplained(fleet_of(following(epoch=EPOCH + 1)), False)
    assert unexplained(fleet_of(following(console=CONSOLE + 1)), False)
    assert unexplained(fleet_of(following(kind="")), False)


def test_a_module_that_another_console_owns_is_explained_until_that_one_s_time_is_over() -> None:
    now_ns = fleet_of(()).t_ns
    owned = {"console": CONSOLE + 1, "owner_left_ms": 2000}
    just_now = fleet_of(following(**owned, owner_heard_ns=now_ns - 1_000_000_000))
    assert owned_by_another(just_now.modules[0], just_now)
    assert not unexplained(just_now, False)
    before = fleet_of(following(**owned, owner_heard_ns=now_ns - 2_000_000_000))
    assert not owned_by_another(before.modules[0], before)
    assert unexplained(before, False)


def test_who_follows() -> None:
    fleet = fleet_of(following(console=0))
    assert not follows(fleet.modules[0], fleet)
    assert not owned_by_another(fleet.modules[0], fleet)
    assert follows(fleet.modules[1], fleet)


def stopped(missing: tuple[int, ...], in_force: bool = True) -> FleetView:
    return fleet_view(*eight(), stop=StopView(4, in_force, (), missing))


def due_names(keeper: StopKeeper, view: FleetView, t_ns: int) -> list[str]:
    return [module.name for module in keeper.due(lambda: view, t_ns)]


def test_a_stop_is_repeated_to_those_who_have_not_confirmed() -> None:
    keeper = StopKeeper()
    keeper.hurry(0)
    assert due_names(keeper, stopped((2, 4)), STOP_PERIOD_NS - 1) == []
    assert due_names(keeper, stopped((2, 4)), STOP_PERIOD_NS) == ["birch", "elm"]
    assert due_names(keeper, stopped((4,)), STOP_PERIOD_NS) == []
    assert due_names(keeper, stopped((4,)), 2 * STOP_PERIOD_NS) == ["elm"]
    assert due_names(keeper, stopped(()), 3 * STOP_PERIOD_NS) == []
    assert keeper.next_ns is None


def test_repeating_never_ends_but_grows_calm() -> None:
    keeper = StopKeeper()
    keeper.hurry(0)
    times = [
        t_ns
        for t_ns in range(0, 60_000_000_000, STOP_PERIOD_NS // 3)
        if keeper.due(lambda: stopped((1,)), t_ns)
    ]
    gaps = [later - earlier for earlier, later in itertools.pairwise(times)]
    assert gaps[: STOP_CALM_AFTER - 1] == [STOP_PERIOD_NS] * (STOP_CALM_AFTER - 1)
    assert set(gaps[STOP_CALM_AFTER:]) == {STOP_CALM_PERIOD_NS}


def test_a_module_that_comes_later_gets_the_stop_too() -> None:
    keeper = StopKeeper()
    assert due_names(keeper, stopped(()), 0) == []
    assert due_names(keeper, stopped((3,)), STOP_LOOK_NS) == []
    assert due_names(keeper, stopped((3,)), STOP_LOOK_NS + STOP_PERIOD_NS) == ["cedar"]


def test_the_fleet_is_not_looked_at_more_often_than_needed() -> None:
    keeper = StopKeeper()
    looks: list[int] = []

    def look() -> FleetView:
        looks.append(1)
        return stopped(())

    for t_ns in range(0, 1_000_000_000, 1_000_000):
        keeper.due(look, t_ns)
    assert len(looks) <= 1 + 1_000_000_000 // STOP_LOOK_NS


def test_a_clear_is_repeated_to_those_still_latched() -> None:
    keeper = StopKeeper()
    keeper.hurry(0)
    latched = tuple(replace(each, latched=each.name == "hazel") for each in eight())
    view = fleet_view(*latched, stop=StopView(4, False, (), ()))
    assert due_names(keeper, view, STOP_PERIOD_NS) == ["hazel"]
