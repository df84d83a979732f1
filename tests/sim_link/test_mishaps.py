"""What is made to go wrong: each kind at its turn, told as the wire has it, and harmless."""

import pytest

from protocol.codes import Activity, AnswerState, Fault, Flags, Reason
from protocol.message import Answer, Facts, FaultNotice, Message, RollCall, Stop, Telemetry
from sim_link.drive import STALLED_NS
from sim_link.mishaps import BROWN_OUT_mV, Mishaps, Restart
from sim_link.module import VirtualModule
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


# -- begun and ended while it runs ------------------------------------------------------------


def begin(bench: Bench, kind: FaultKind) -> list[Message]:
    return [packet.message for packet in bench.module.begin(kind, bench.t_ns)]


def end(bench: Bench, kind: FaultKind) -> list[Message]:
    return [packet.message for packet in bench.module.end(kind, bench.t_ns)]


def turned_by(bench: Bench, number: int, speed_rpm: int = 6000) -> Facts | Answer:
    """Order a pivot and let it end; its last word."""
    said = bench.order(pivot(bench.me, number, speed_rpm)) + bench.run(12 * S)
    last = [each for each in said if isinstance(each, Facts | Answer)][-1]
    assert isinstance(last, Facts | Answer)
    return last


def test_silence_holds_at_once_and_goes() -> None:
    bench = Bench()
    assert len(bench.run(2 * S)) == 4
    assert begin(bench, FaultKind.SILENT) == []
    bench.order(pivot(bench.me, 1))
    assert bench.run(10 * S) == []
    assert len(bench.tally) == 1  # it hears and obeys
    assert end(bench, FaultKind.SILENT) == []
    assert len(bench.run(2 * S)) == 4


def test_silence_before_the_first_roll_call_is_silence() -> None:
    module = VirtualModule(spec_of(), 7)
    module.begin(FaultKind.SILENT, 0)
    assert module.receive(to_all(RollCall(EPOCH, CONSOLE)), S) == []


def test_a_brake_is_weak_for_a_time_and_then_exactly_what_it_was() -> None:
    bench, took = Bench(), []
    sound = bench.module.drive.body.kind
    for change in (None, bench.module.begin, bench.module.end):
        if change is not None:
            change(FaultKind.WEAK_BRAKE, bench.t_ns)
        facts = turned_by(bench, len(took) + 1)
        assert isinstance(facts, Facts)
        took.append(facts.brake_us)
    assert took[1] > 1.6 * took[0]  # 1 / 0.55 is 1.8
    assert took[2] == pytest.approx(took[0], rel=0.1)
    assert bench.module.drive.body.kind == sound


def test_a_wheel_gets_stuck_and_comes_free_which_is_told() -> None:
    bench = Bench()
    begin(bench, FaultKind.STUCK_WHEEL)
    facts = turned_by(bench, 1)
    assert (facts.reason, bench.module.drive.stuck) == (Reason.FAULT, True)
    assert turned_by(bench, 2).reason == Reason.FAULT
    [notice, telemetry] = end(bench, FaultKind.STUCK_WHEEL)
    assert isinstance(notice, FaultNotice)
    assert (notice.fault, notice.standing) == (Fault.WHEEL_STUCK, 0)
    assert notice.time_ms == bench.t_ns // MS
    assert isinstance(telemetry, Telemetry)
    assert not telemetry.flags & Flags.FAULTY
    facts = turned_by(bench, 3)
    assert (facts.reason, getattr(facts, "face_after", None)) == (Reason.NONE, 2)


def test_a_wheel_that_turns_gets_stuck_only_once_it_is_at_rest() -> None:
    bench = Bench()
    bench.order(spin(bench.me, 1, 3000, 1000))
    bench.run(500 * MS)
    begin(bench, FaultKind.STUCK_WHEEL)
    assert not bench.module.drive.stuck
    said = bench.run(10 * S)
    assert notices(said) == []
    [finished] = of(Answer, said)
    assert isinstance(finished, Answer)
    assert (finished.state, finished.reason) == (AnswerState.FINISHED, Reason.NONE)
    assert bench.module.drive.stuck


def test_a_wheel_that_comes_free_while_the_motor_tries_is_told_stuck_and_then_free() -> None:
    bench = Bench()
    begin(bench, FaultKind.STUCK_WHEEL)
    bench.order(pivot(bench.me, 1))
    bench.run(100 * MS)
    assert end(bench, FaultKind.STUCK_WHEEL) == []
    said = bench.run(5 * S)
    assert notices(said) == [(Fault.WHEEL_STUCK, 1, 0), (Fault.WHEEL_STUCK, 0, 0)]
    assert not bench.module.box.faults
    assert not bench.module.drive.stuck


@pytest.mark.parametrize("brake", [FaultKind.RESTART_ON_BRAKE, FaultKind.LOST_GYRO])
def test_what_waits_for_a_brake_waits_for_the_next_one_or_not_at_all(brake: FaultKind) -> None:
    bench = Bench()
    begin(bench, brake)
    end(bench, brake)
    facts = turned_by(bench, 1)
    assert isinstance(facts, Facts)
    begin(bench, brake)
    said = bench.order(pivot(bench.me, 2)) + bench.run(10 * S)
    assert len(notices(said)) == 1


def test_a_gyroscope_comes_back() -> None:
    bench = Bench()
    begin(bench, FaultKind.LOST_GYRO)
    facts = turned_by(bench, 1)
    assert isinstance(facts, Facts)
    assert (facts.turned_ddeg, facts.peak_rate_dps, facts.face_after) == (900, 0, 2)
    assert notices(end(bench, FaultKind.LOST_GYRO)) == [(Fault.SENSOR_LOST, 0, 0)]
    facts = turned_by(bench, 2)
    assert isinstance(facts, Facts)
    assert facts.peak_rate_dps > 0


def test_an_end_that_nobody_noticed_the_beginning_of_says_nothing() -> None:
    bench = Bench()
    for kind in (FaultKind.LOST_GYRO, FaultKind.STUCK_WHEEL, FaultKind.BROWN_OUT):
        begin(bench, kind)
        assert end(bench, kind) == []
    assert turned_by(bench, 1).reason == Reason.NONE


def test_a_cell_is_empty_for_a_time() -> None:
    bench = Bench()
    begin(bench, FaultKind.LOW_BATTERY)
    assert turned_by(bench, 1).reason == Reason.BATTERY_LOW
    end(bench, FaultKind.LOW_BATTERY)
    assert bench.module.drive.supply.battery.charge == bench.module.spec.charge
    assert turned_by(bench, 2).reason == Reason.NONE


def test_a_restart_is_a_new_boot_and_no_fault() -> None:
    bench = Bench()
    bench.order(spin(bench.me, 1))
    bench.run(S)
    said = begin(bench, FaultKind.RESTART)
    assert notices(said) == []
    assert [m.boot for m in said if isinstance(m, Telemetry)] == [bench.me.boot + 1]
    assert bench.module.drive.activity is Activity.RESTING


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
    box.drive.start_motion(1, 6000, 0)
    assert mishaps.before_step() is None
    assert not mishaps.silent
    for activity in Activity:
        assert mishaps.after_step(activity) is None
        assert mishaps.noticed(activity, 0) is None


def test_what_restarts_does_so_at_its_own_turn() -> None:
    box = boxed(spec_of(faults=frozenset({FaultKind.BROWN_OUT, FaultKind.RESTART_ON_BRAKE})))
    mishaps = Mishaps(box)
    assert mishaps.before_step() is None  # nothing turns
    assert mishaps.after_step(Activity.SETTLING) is None
    assert mishaps.after_step(Activity.BRAKING) == Restart(Fault.WATCHDOG, 0)
    box.drive.start_motion(1, 6000, 0)
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
