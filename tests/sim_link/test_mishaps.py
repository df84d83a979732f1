"""What is made to go wrong: each kind at its turn, told as the wire has it, and harmless."""

import pytest

from protocol.codes import Activity, AnswerState, Fault, Flags, Reason
from protocol.message import Answer, Facts, FaultNotice, Message, RollCall, Stop, Telemetry
from sim_link.drive import STALLED_NS
from sim_link.mishaps import BROWN_OUT_mV, Mishaps, Restart
from sim_link.options import FaultKind
from tests.support.boxes import boxed
from tests.support.module_bench import Bench, of
from tests.support.virtual_console import CONSOLE, EPOCH, MS, S, pivot, rest, spec_of, spin, to_all


def bench_with(*kinds: FaultKind) -> Bench:
    return Bench(faults=frozenset(kinds))


def notices(said: list[Message]) -> list[tuple[int, int, int]]:
    return [(m.fault, m.standing, m.detail) for m in said if isinstance(m, FaultNotice)]


def activities(said: list[Message]) -> list[int]:
    return [m.activity for m in said if isinstance(m, Telemetry)]


# -- a wheel that is stuck -------------------------------------------------------------------


@pytest.mark.parametrize("speed_rpm", [500, 9000])
def test_a_stuck_wheel_is_given_up_and_the_motion_cut(speed_rpm: int) -> None:
    bench = bench_with(FaultKind.STUCK_WHEEL)
    bench.order(pivot(bench.me, 1, speed_rpm))
    bench.run(STALLED_NS - MS)
    assert bench.module.drive.activity is Activity.SPINNING_UP
    assert bench.module.drive.wheel.rpm(bench.t_ns) == 0.0
    said = bench.run(2 * MS)
    assert notices(said) == [(Fault.WHEEL_STUCK, 1, 0)]
    assert activities(said) == [Activity.RESTING, Activity.STILL]
    [facts] = of(Facts, said)
    assert isinstance(facts, Facts)
    assert (facts.reason, facts.face_before, facts.face_after) == (Reason.FAULT, 1, 1)
    assert (facts.wheel_at_brake_rpm, facts.brake_us, facts.settled) == (0, 0, 1)
    assert facts.spin_up_ms == STALLED_NS // MS
    assert bench.tally == []
    assert bench.module.drive.body.posture(bench.t_ns) == (1, 0.0, True)


def test_a_spin_of_a_stuck_wheel_is_cut_too() -> None:
    bench = bench_with(FaultKind.STUCK_WHEEL)
    bench.order(spin(bench.me, 1, -4000, 9_000))
    [end] = of(Answer, bench.run())
    assert isinstance(end, Answer)
    assert (end.state, end.reason) == (AnswerState.CUT, Reason.FAULT)


def test_a_stuck_wheel_is_told_once_stands_over_a_restart_and_blocks() -> None:
    bench = bench_with(FaultKind.STUCK_WHEEL)
    bench.order(pivot(bench.me, 1))
    noticed_ms = next(m.time_ms for m in bench.run() if isinstance(m, FaultNotice))
    assert noticed_ms == STALLED_NS // MS
    for again in range(2):
        said = bench.say(to_all(RollCall(EPOCH + again, CONSOLE)))
        assert notices(said) == [(Fault.WHEEL_STUCK, 1, 0)]
        assert of(FaultNotice, said)[0].time_ms == noticed_ms  # type: ignore[union-attr]
    said = [each.message for each in bench.module.restart(bench.t_ns)]
    assert notices(said) == [(Fault.WHEEL_STUCK, 1, 0)]
    assert of(FaultNotice, said)[0].time_ms == 0  # type: ignore[union-attr]
    me = bench.roll()
    assert me.flags & Flags.FAULTY
    [refused] = bench.order(spin(me, 1))
    assert isinstance(refused, Answer)
    assert refused.reason == Reason.FAULT


@pytest.mark.parametrize("how", ["stop", "rest"])
def test_who_rests_a_stuck_wheel_first_is_the_reason_and_no_fault_is_noticed(how: str) -> None:
    bench = bench_with(FaultKind.STUCK_WHEEL)
    bench.order(pivot(bench.me, 1))
    bench.run(100 * MS)
    said = bench.say(to_all(Stop(1))) if how == "stop" else bench.order(rest(bench.me, 2))
    said += bench.run()
    [facts] = of(Facts, said)
    assert isinstance(facts, Facts)
    assert facts.reason == (Reason.STOPPED if how == "stop" else Reason.RESTED)
    assert notices(said) == []


# -- a supply that breaks down ---------------------------------------------------------------


def test_a_brown_out_restarts_under_load_and_is_told_after_the_start() -> None:
    bench = bench_with(FaultKind.BROWN_OUT)
    bench.order(pivot(bench.me, 1))
    said = bench.run()
    [notice] = of(FaultNotice, said)
    assert isinstance(notice, FaultNotice)
    assert notice == FaultNotice(
        bench.me.boot + 1, notice.identity_bits, Fault.BROWN_OUT, 0, 0, BROWN_OUT_mV
    )
    first = next(m for m in said if isinstance(m, Telemetry) and m.boot == bench.me.boot + 1)
    assert (first.sequence, first.activity) == (1, Activity.RESTING)
    assert first.wheel_rpm > 5_900  # it came at full speed, where the load is greatest
    assert Activity.BRAKING not in activities(said)
    assert (of(Facts, said), bench.tally) == ([], [])
    assert bench.module.drive.activity is Activity.STILL
    assert bench.module.drive.body.posture(bench.t_ns) == (1, 0.0, True)


def test_a_brown_out_comes_once_and_does_not_stand() -> None:
    bench = bench_with(FaultKind.BROWN_OUT)
    bench.order(spin(bench.me, 1))
    bench.run()
    me = bench.roll()
    assert (me.boot, me.flags & Flags.FAULTY) == (bench.me.boot + 1, 0)
    bench.order(pivot(me, 1))
    [facts] = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert (facts.reason, facts.face_after) == (Reason.NONE, 2)


# -- the others ------------------------------------------------------------------------------


def test_a_restart_at_the_brake_says_that_the_watchdog_did_it() -> None:
    bench = bench_with(FaultKind.RESTART_ON_BRAKE)
    bench.order(pivot(bench.me, 1))
    assert notices(bench.run()) == [(Fault.WATCHDOG, 0, 0)]
    bench.roll()
    assert notices(bench.say(to_all(RollCall(EPOCH, CONSOLE)))) == []


def test_what_is_lost_and_restarts_at_one_brake_is_told_after_the_start() -> None:
    bench = bench_with(FaultKind.RESTART_ON_BRAKE, FaultKind.LOST_GYRO)
    bench.order(pivot(bench.me, 1))
    assert notices(bench.run()) == [(Fault.WATCHDOG, 0, 0), (Fault.SENSOR_LOST, 1, 0)]


def test_a_lost_gyro_lets_its_motion_end_and_no_other_begin() -> None:
    bench = bench_with(FaultKind.LOST_GYRO)
    bench.order(pivot(bench.me, 1))
    said = bench.run()
    assert notices(said) == [(Fault.SENSOR_LOST, 1, 0)]
    assert len(of(Facts, said)) == 1
    [refused] = bench.order(pivot(bench.me, 2))
    assert isinstance(refused, Answer)
    assert refused.reason == Reason.FAULT


def test_a_switching_off_and_on_is_no_fault() -> None:
    bench = Bench()
    assert notices([each.message for each in bench.module.restart(S)]) == []


def test_a_module_without_faults_meets_none() -> None:
    box = boxed()
    mishaps = Mishaps(box)
    box.drive.start_pivot(1, 6000, 0)
    assert mishaps.before_step() is None
    assert not mishaps.silent
    for activity in Activity:
        assert mishaps.after_step(activity) is None
        assert mishaps.noticed(activity) is None


def test_what_restarts_does_so_at_its_own_turn() -> None:
    box = boxed(spec_of(faults=frozenset({FaultKind.BROWN_OUT, FaultKind.RESTART_ON_BRAKE})))
    mishaps = Mishaps(box)
    assert mishaps.before_step() is None  # nothing turns
    assert mishaps.after_step(Activity.SETTLING) is None
    assert mishaps.after_step(Activity.BRAKING) == Restart(Fault.WATCHDOG, 0)
    box.drive.start_pivot(1, 6000, 0)
    assert mishaps.before_step() == Restart(Fault.BROWN_OUT, BROWN_OUT_mV)
    assert (mishaps.before_step(), mishaps.after_step(Activity.BRAKING)) == (None, None)


def test_outcomes_of_motions_do_not_hang_on_what_went_wrong_before() -> None:
    """A motion's luck is keyed by its count: the second one of two sound sittings, one of which
    had a restart at the first brake, goes the same way."""
    turned = []
    for kinds in ((), (FaultKind.RESTART_ON_BRAKE,)):
        bench = bench_with(*kinds)
        bench.order(pivot(bench.me, 1, 4600))
        bench.run(10 * S)
        me = bench.roll()
        bench.order(pivot(me, 2, 4600))
        [facts] = of(Facts, bench.run())
        assert isinstance(facts, Facts)
        turned.append((facts.turned_ddeg, facts.brake_us, facts.spin_up_ms))
    assert turned[0] == turned[1]
