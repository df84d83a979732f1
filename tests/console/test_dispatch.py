"""Carrying out a run sheet, against a scripted engine: no radio, no log, no real time."""

import itertools
from collections.abc import Callable
from dataclasses import replace

import pytest

from console.core import OnEnd
from console.dispatch import BLOCKED_WAIT_NS, LOG_WAIT_NS, SheetRun, TrialEnd, faces_away
from console.errors import InputError
from console.limits import Limits
from console.orders import Order
from console.sheet import parse_sheet, plan
from console.view import CommandView, FleetView, ModuleView, Outcome
from protocol.codes import Direction
from storage.records import OrderGiven, PlannedCommand
from tests.support.fake_fleet import fleet_view, module

SHEET = """
title = "test"
modules = ["alder", "birch"]
motion = "pivot"
speeds_rpm = [4000, 4700]
repeats = 2
order = "as written"
"""
STEP_NS = 10_000_000


class ScriptedEngine:
    """Ends each command at once with the outcome that ``judge`` gives, and moves the module."""

    def __init__(self, judge: Callable[[Order], Outcome]) -> None:
        self.fleet: FleetView = fleet_view(module(1, "alder"), module(2, "birch"))
        self.judge = judge
        self.time_ns = 0
        self.given: list[tuple[Order, int]] = []
        self.block = ""
        self.trouble = ""
        self.open = True
        self.beats_ns: list[int] = []
        self.hold = False
        self.in_hand: list[Callable[[], None]] = []

    def view(self) -> FleetView:
        return self.fleet

    def now_ns(self) -> int:
        self.time_ns += STEP_NS
        return self.time_ns

    def real_s(self, fleet_ns: int) -> float:
        self.time_ns += max(fleet_ns, 0)
        return 0.0

    def link_open(self) -> bool:
        return self.open

    def log_trouble(self) -> str:
        return self.trouble

    def beat(self) -> None:
        self.beats_ns.append(self.time_ns)

    def give(
        self, order: Order, source: str, trial: int = 0, on_end: OnEnd | None = None
    ) -> OrderGiven:
        if self.block:
            raise InputError(self.block)
        assert source == "sheet"
        assert on_end is not None
        self.given.append((order, trial))
        command = len(self.given)
        end = self._ender(order, command, trial, on_end)
        if self.hold:
            self.in_hand.append(end)
        else:
            end()
        planned = PlannedCommand(command, 1, 1, 1, 1, command, "pivot", 1, 1, 0, 0, trial)
        return OrderGiven(0, command, "", source, (planned,))

    def _ender(self, order: Order, command: int, trial: int, on_end: OnEnd) -> Callable[[], None]:
        def end() -> None:
            outcome = self.judge(order)
            moved = self.move(order, outcome)
            view = CommandView(command, moved.module, "pivot", trial, 2, 1, "finished", "", True,
                               outcome)  # fmt: skip
            on_end(view, moved)

        return end

    def move(self, order: Order, outcome: Outcome) -> ModuleView:
        faces = {Outcome.LANDED: 1, Outcome.OVER: 2}.get(outcome, 0) * (order.direction or 0)
        modules = []
        for each in self.fleet.modules:
            turned = (each.face_up - 1 + faces * (each.name in order.subjects)) % 4 + 1
            modules.append(module(each.module, each.name, face_up=turned))
        self.fleet = fleet_view(*modules)
        return next(each for each in modules if each.name in order.subjects)


def run(engine: ScriptedEngine, text: str = SHEET) -> tuple[SheetRun, list[TrialEnd]]:
    sheet = parse_sheet(text, "test.toml")
    ends: list[TrialEnd] = []
    sheet_run = SheetRun(engine, sheet, plan(sheet), ends.append)
    sheet_run.run()
    return sheet_run, ends


def always(outcome: Outcome) -> Callable[[Order], Outcome]:
    return lambda order: outcome


@pytest.mark.parametrize(
    ("home", "now", "away"),
    [(1, 1, 0), (1, 2, 1), (1, 4, -1), (1, 3, 2), (4, 1, 1), (4, 3, -1), (0, 2, 0), (1, 5, 0)],
)
def test_faces_away(home: int, now: int, away: int) -> None:
    assert faces_away(home, now) == away


def test_every_trial_is_started_once_and_counted() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    sheet_run, ends = run(engine)
    tally = sheet_run.tally
    assert (tally.planned, tally.started, tally.commands) == (8, 8, 8)
    assert (tally.resends, tally.repeats_ignored) == (8, 8)
    assert tally.ended == {"landed": 8}
    assert sorted(end.trial.trial for end in ends) == list(range(1, 9))
    assert tally.stopped is None


def test_turnabout_goes_forward_and_back_in_turn() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    run(engine)
    for name in ("alder", "birch"):
        ways = [order.direction for order, _ in engine.given if name in order.subjects]
        assert ways == [Direction.FORWARD, Direction.BACK] * 2


def test_turnabout_tries_the_same_way_again_after_a_short_one() -> None:
    engine = ScriptedEngine(always(Outcome.SHORT))
    run(engine)
    assert {order.direction for order, _ in engine.given} == {Direction.FORWARD}


def test_one_way_sheets_bring_modules_back_by_motions_that_are_no_trials() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    text = SHEET + 'direction = "forward"\nreturn_speed_rpm = 6000\n'
    sheet_run, ends = run(engine, text)
    returns = [order for order, trial in engine.given if trial == 0]
    assert len(returns) == 8
    assert {(order.direction, order.speed_rpm) for order in returns} == {(Direction.BACK, 6000)}
    assert sheet_run.tally.ended == {"landed": 8}
    assert len(ends) == 8
    assert [each.face_up for each in engine.fleet.modules] == [1, 1]


def test_a_module_that_went_over_is_brought_back_by_two_motions() -> None:
    engine = ScriptedEngine(
        lambda order: Outcome.OVER if order.direction == Direction.FORWARD else Outcome.LANDED
    )
    text = SHEET + 'direction = "forward"\nreturn_speed_rpm = 6000\n'
    sheet_run, _ = run(engine, text)
    assert len([order for order, trial in engine.given if trial == 0]) == 16
    assert sheet_run.tally.ended == {"over": 8}


def test_a_return_motion_that_fails_ends_the_sheet() -> None:
    engine = ScriptedEngine(
        lambda order: Outcome.LANDED if order.direction == Direction.FORWARD else Outcome.SHORT
    )
    text = SHEET + 'direction = "forward"\nreturn_speed_rpm = 6000\n'
    sheet_run, _ = run(engine, text)
    assert "did not come back" in str(sheet_run.tally.stopped)


@pytest.mark.parametrize("at_once", [1, 2])
def test_no_more_modules_move_at_once_than_the_sheet_says(at_once: int) -> None:
    engine = ScriptedEngine(always(Outcome.SHORT))
    engine.hold = True
    sheet = parse_sheet(SHEET + f"at_once = {at_once}\n", "test.toml")
    sheet_run = SheetRun(engine, sheet, plan(sheet), lambda end: None)
    most = 0

    def glance(fleet_ns: int) -> float:
        nonlocal most
        most = max(most, len(engine.in_hand))
        while engine.in_hand:
            engine.in_hand.pop()()
        engine.time_ns += max(fleet_ns, 0)
        return 0.0

    engine.real_s = glance  # type: ignore[method-assign]
    sheet_run.run()
    assert most == at_once
    assert sheet_run.tally.started == 8


def test_all_stop_ends_the_sheet_and_waits_for_what_is_in_hand() -> None:
    engine = ScriptedEngine(always(Outcome.CUT))
    move = engine.move

    def move_and_stop(order: Order, outcome: Outcome) -> ModuleView:
        moved = move(order, outcome)
        engine.fleet = replace(
            engine.fleet, stop=replace(engine.fleet.stop, stop_number=3, in_force=True)
        )
        return moved

    engine.move = move_and_stop  # type: ignore[method-assign]
    sheet_run, ends = run(engine)
    assert sheet_run.tally.stopped == "all-stop 3"
    assert sheet_run.tally.started < 8
    assert len(ends) == sheet_run.tally.started


def test_a_lost_link_ends_the_sheet() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    engine.open = False
    sheet_run, _ = run(engine)
    assert sheet_run.tally.stopped == "link lost"


def test_a_trial_that_stays_blocked_ends_refused_after_the_wait() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    engine.block = "alder: battery at 3.10 V, below 3.50 V"
    sheet_run, ends = run(engine)
    assert sheet_run.tally.ended == {"refused": 8}
    assert sheet_run.tally.started == 0
    assert all(end.reason == engine.block for end in ends)
    assert engine.time_ns > BLOCKED_WAIT_NS


def test_a_module_that_does_not_answer_is_named() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    engine.fleet = fleet_view(module(1, "alder"))
    with pytest.raises(InputError, match=r"birch did not answer the roll; alder did"):
        run(engine)


def test_a_log_that_stays_in_trouble_ends_the_sheet_and_uses_up_no_trial() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    engine.block = engine.trouble = "the disk is full"
    sheet_run, ends = run(engine)
    assert sheet_run.tally.stopped == "log lost: the disk is full"
    assert sheet_run.tally.lost
    assert ends == []
    assert LOG_WAIT_NS <= engine.time_ns < 2 * LOG_WAIT_NS


def test_a_log_that_writes_again_in_time_only_holds_the_sheet_up() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    engine.block = engine.trouble = "the disk is full"
    real_s = engine.real_s

    def mended(fleet_ns: int) -> float:
        if engine.time_ns > LOG_WAIT_NS // 2:
            engine.block = engine.trouble = ""
        return real_s(fleet_ns)

    engine.real_s = mended  # type: ignore[method-assign]
    sheet_run, _ = run(engine)
    assert sheet_run.tally.stopped is None
    assert sheet_run.tally.ended == {"landed": 8}


def test_a_sheet_gives_signs_of_life_more_often_than_a_permit_is_long() -> None:
    engine = ScriptedEngine(always(Outcome.LANDED))
    engine.block = "the module says that it holds no drive permit yet"
    run(engine)
    gaps = [later - earlier for earlier, later in itertools.pairwise(engine.beats_ns)]
    assert len(gaps) > 50
    assert max(gaps) < Limits().permit_ns // 2
