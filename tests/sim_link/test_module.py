"""A virtual module's answers: at most once, the latch, gentle rest, restart, telemetry."""

import itertools

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from protocol.codes import Activity, AnswerState, Flags, Reason
from protocol.message import (
    Answer,
    Clear,
    Facts,
    Nameplate,
    Presence,
    Query,
    RollCall,
    Spin,
    Stop,
    Stopped,
    Telemetry,
    field_text,
)
from sim_link.options import FaultKind
from tests.support.module_bench import Bench, of
from tests.support.virtual_console import (
    CONSOLE,
    EPOCH,
    LATEST_MS,
    MS,
    S,
    flash,
    pivot,
    rest,
    spin,
    to_all,
    to_module,
)


def test_roll_call_brings_presence_and_nameplate() -> None:
    bench = Bench()
    presence, nameplate = bench.say(to_all(RollCall(EPOCH + 1, CONSOLE)))
    assert isinstance(presence, Presence)
    assert presence.identity == bench.module.spec.identity
    assert (presence.epoch, presence.console, presence.face_up) == (EPOCH + 1, CONSOLE, 1)
    assert presence.flags == Flags.PERMITTED | Flags.CLOCK_TOLD
    assert presence.owner_left_ms > 40_000
    assert isinstance(nameplate, Nameplate)
    assert field_text(nameplate.name) == "alder"
    assert field_text(nameplate.kind) == "paver"
    assert nameplate.wheel_max_rpm == 9000


def test_an_older_epoch_is_not_adopted() -> None:
    bench = Bench()
    presence = bench.say(to_all(RollCall(EPOCH - 1, CONSOLE)))[0]
    assert isinstance(presence, Presence)
    assert presence.epoch == EPOCH


def test_packets_for_others_and_commands_to_everyone_are_ignored() -> None:
    bench = Bench()
    assert bench.say(to_module(pivot(bench.me, 1), 0x11)) == []
    assert bench.say(to_all(pivot(bench.me, 1))) == []
    assert bench.module.drive.activity is Activity.STILL


def test_a_pivot_is_accepted_and_ends_with_facts() -> None:
    bench = Bench()
    accepted, report = bench.order(pivot(bench.me, 1, 6000))
    assert isinstance(accepted, Answer)
    assert (accepted.state, accepted.reason) == (AnswerState.ACCEPTED, Reason.NONE)
    assert isinstance(report, Telemetry)
    assert report.activity == Activity.SPINNING_UP
    start_ns = bench.t_ns
    said = bench.run(accepted.expect_ms * MS)
    (facts,) = of(Facts, said)
    assert isinstance(facts, Facts)
    assert (facts.reason, facts.face_before, facts.face_after, facts.settled) == (0, 1, 2, 1)
    assert facts.turned_ddeg == pytest.approx(900, abs=30)
    assert facts.wheel_at_brake_rpm == pytest.approx(6000, abs=40)
    assert facts.brake_us > 0 < facts.settle_ms
    assert bench.t_ns - start_ns == accepted.expect_ms * MS


def test_a_slow_pivot_is_short_and_back_turns_the_other_way() -> None:
    bench = Bench()
    bench.order(pivot(bench.me, 1, 2500))
    (facts,) = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert (facts.face_after, facts.settled) == (1, 1)
    assert 0 < facts.peak_tilt_ddeg < 450
    bench.order(pivot(bench.me, 2, 6000, -1))
    (facts,) = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert facts.face_after == 4
    assert facts.turned_ddeg == pytest.approx(900, abs=30)


def test_a_command_said_again_is_carried_out_once_and_gets_its_reply_again() -> None:
    bench = Bench()
    command = pivot(bench.me, 1)
    accepted = bench.order(command)[0]
    assert of(Answer, bench.order(command)) == [accepted]
    (facts,) = of(Facts, bench.run())
    for _ in range(5):
        assert bench.order(command) == [facts]
        bench.run(3 * S)
    assert [(entry.number, entry.motion) for entry in bench.tally] == [(1, "pivot")]


@settings(max_examples=40, deadline=None)
@given(st.lists(st.tuples(st.integers(1, 6), st.integers(0, 4000)), max_size=25))
def test_no_order_of_repeats_carries_a_number_out_twice(calls: list[tuple[int, int]]) -> None:
    bench = Bench()
    for number, wait_ms in calls:
        make = (pivot, spin, rest, flash)[number % 4]
        bench.order(make(bench.me, number))
        bench.run(wait_ms * MS)
    bench.run()
    counted = [entry.number for entry in bench.tally]
    assert len(counted) == len(set(counted))


def test_a_query_brings_the_reply_and_causes_nothing() -> None:
    bench = Bench()
    (unknown,) = bench.order(Query(EPOCH, bench.me.boot, 9))
    assert isinstance(unknown, Answer)
    assert unknown.state == AnswerState.UNKNOWN
    bench.order(pivot(bench.me, 10))
    (facts,) = of(Facts, bench.run())
    assert bench.order(Query(EPOCH, bench.me.boot, 10)) == [facts]
    assert len(bench.tally) == 1


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"boot": 1}, Reason.OTHER_BOOT),
        ({"epoch": EPOCH - 1}, Reason.OWNED),
        ({"identity_bits": 0xFFFF}, Reason.OTHER_IDENTITY),
    ],
)
def test_a_wrong_envelope_is_refused(change: dict[str, int], reason: Reason) -> None:
    bench = Bench()
    (answer,) = bench.order(pivot(bench.me, 1)._replace(**change))
    assert isinstance(answer, Answer)
    assert (answer.state, answer.reason) == (AnswerState.REFUSED, reason)
    assert bench.module.drive.activity is Activity.STILL


def test_a_spin_holds_its_speed_rests_by_itself_and_moves_nothing() -> None:
    bench = Bench()
    accepted = bench.order(spin(bench.me, 1, -3000, 1500))[0]
    assert isinstance(accepted, Answer)
    said = bench.run()
    activities = [m.activity for m in said if isinstance(m, Telemetry)]
    seen = [activity for activity, _ in itertools.groupby(activities)]
    assert seen == [Activity.SPINNING_UP, Activity.HOLDING, Activity.RESTING, Activity.STILL]
    assert min(m.wheel_rpm for m in said if isinstance(m, Telemetry)) == pytest.approx(-3000, abs=1)
    (finished,) = of(Answer, said)
    assert isinstance(finished, Answer)
    assert finished.state == AnswerState.FINISHED
    assert bench.module.drive.body.posture(bench.t_ns) == (1, 0.0, True)


def test_a_spin_is_over_when_its_answer_said() -> None:
    bench = Bench()
    accepted = bench.order(spin(bench.me, 1, 4000, 700))[0]
    assert isinstance(accepted, Answer)
    # Two controllers' worth of difference: this module's wheel is not exactly its kind's, and
    # the speed is held a moment before holding counts.
    assert of(Answer, bench.run((accepted.expect_ms - 250) * MS)) == []
    assert len(of(Answer, bench.run(500 * MS))) == 1


def test_a_flash_ends_by_itself() -> None:
    bench = Bench()
    assert bench.order(flash(bench.me, 1, 500))[1].activity == Activity.FLASHING  # type: ignore[union-attr]
    assert of(Answer, bench.run(400 * MS)) == []
    (finished,) = of(Answer, bench.run(200 * MS))
    assert isinstance(finished, Answer)
    assert finished.state == AnswerState.FINISHED


def test_rest_of_a_still_module_is_finished_at_once() -> None:
    bench = Bench()
    (answer,) = bench.order(rest(bench.me, 1))
    assert isinstance(answer, Answer)
    assert answer.state == AnswerState.FINISHED


def test_rest_cuts_a_spin_and_both_are_answered_when_the_wheel_stands() -> None:
    bench = Bench()
    bench.order(spin(bench.me, 1, 5000, 60_000))
    bench.run(3 * S)
    accepted = bench.order(rest(bench.me, 2))[0]
    assert isinstance(accepted, Answer)
    assert accepted.state == AnswerState.ACCEPTED
    ends = of(Answer, bench.run((accepted.expect_ms + 100) * MS))
    assert [(a.number, a.state, a.reason) for a in ends if isinstance(a, Answer)] == [
        (1, AnswerState.CUT, Reason.RESTED),
        (2, AnswerState.FINISHED, Reason.NONE),
    ]


def test_rest_during_the_brake_waits_and_cuts_nothing() -> None:
    bench = Bench()
    bench.order(pivot(bench.me, 1))
    while bench.module.drive.activity is not Activity.BRAKING:
        bench.run(MS)
    bench.order(rest(bench.me, 2))
    assert bench.module.drive.activity is Activity.BRAKING
    said = bench.run()
    (facts,) = of(Facts, said)
    assert isinstance(facts, Facts)
    assert (facts.reason, facts.face_after) == (Reason.NONE, 2)
    assert [a.number for a in of(Answer, said) if isinstance(a, Answer)] == [2]


def test_stop_erases_a_spinning_up_motion_and_no_brake_is_applied() -> None:
    bench = Bench()
    bench.order(pivot(bench.me, 1))
    bench.run(500 * MS)
    stopped, report = bench.say(to_all(Stop(4)))
    assert isinstance(stopped, Stopped)
    assert (stopped.stop_number, stopped.latched, stopped.activity) == (4, 1, Activity.RESTING)
    assert isinstance(report, Telemetry)
    assert report.flags & Flags.LATCHED
    (facts,) = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert (facts.reason, facts.face_after, facts.settled) == (Reason.STOPPED, 1, 1)
    assert (facts.brake_us, facts.wheel_at_brake_rpm, facts.peak_rate_dps) == (0, 0, 0)
    assert bench.tally == []


def test_stop_leaves_an_engaged_brake_engaged() -> None:
    bench = Bench()
    bench.order(pivot(bench.me, 1))
    while bench.module.drive.activity is not Activity.BRAKING:
        bench.run(MS)
    bench.say(to_all(Stop(1)))
    (facts,) = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert (facts.reason, facts.face_after) == (Reason.NONE, 2)
    assert bench.module.latched


def test_only_a_clear_of_the_newest_stop_lifts_it() -> None:
    bench = Bench()
    bench.say(to_all(Stop(5)))
    bench.say(to_all(Stop(3)))
    for wrong in (3, 4, 6, 0):
        (answer,) = bench.say(to_all(Clear(wrong)))
        assert isinstance(answer, Stopped)
        assert (answer.stop_number, answer.latched) == (5, 1)
    refused = bench.order(spin(bench.me, 1))[0]
    assert isinstance(refused, Answer)
    assert refused.reason == Reason.STOP_IN_FORCE
    (answer,) = bench.say(to_all(Clear(5)))
    assert isinstance(answer, Stopped)
    assert not answer.latched
    assert bench.order(spin(bench.me, 2))[0].state == AnswerState.ACCEPTED  # type: ignore[union-attr]


def test_an_older_stop_is_obeyed_but_the_newest_number_kept() -> None:
    bench = Bench()
    bench.say(to_all(Stop(5)))
    bench.say(to_all(Clear(5)))
    bench.order(spin(bench.me, 1, 4000, 60_000))
    bench.run(2 * S)
    (stopped, _) = bench.say(to_all(Stop(2)))
    assert isinstance(stopped, Stopped)
    assert (stopped.stop_number, stopped.latched, stopped.activity) == (5, 1, Activity.RESTING)


def test_a_refusal_is_remembered_under_its_number() -> None:
    bench = Bench()
    bench.say(to_all(Stop(1)))
    refused = bench.order(pivot(bench.me, 1))[0]
    bench.say(to_all(Clear(1)))
    assert bench.order(pivot(bench.me, 1)) == [refused]


def test_restart_gives_a_new_boot_an_empty_memory_and_rests_the_wheel() -> None:
    bench = Bench()
    bench.say(to_all(Stop(9)))
    bench.say(to_all(Clear(9)))
    bench.order(spin(bench.me, 1, 4000, 60_000))
    bench.run(5 * S)
    (report,) = of(Telemetry, [p.message for p in bench.module.restart(bench.t_ns)])
    assert isinstance(report, Telemetry)
    assert report.boot == bench.me.boot + 1
    assert (report.sequence, report.time_ms, report.activity) == (1, 0, Activity.RESTING)
    old = bench.order(spin(bench.me, 1))[0]
    assert isinstance(old, Answer)
    assert old.reason == Reason.OTHER_BOOT
    assert of(Facts, bench.run()) == []
    assert bench.module.drive.activity is Activity.STILL
    me = bench.roll()
    assert (me.boot, me.epoch, me.stop_number) == (bench.me.boot + 1, EPOCH, 9)


def test_after_a_restart_it_follows_nobody_and_holds_nothing() -> None:
    bench = Bench()
    bench.module.restart(bench.t_ns)
    me = bench.say(to_all(RollCall(0, 0)))[0]  # nobody's: answered, not followed
    assert isinstance(me, Presence)
    assert (me.epoch, me.console, me.owner_left_ms, me.time_ms) == (0, 0, 0, 0)
    assert not me.flags & (Flags.PERMITTED | Flags.CLOCK_TOLD)
    early = bench.order(spin(me, 1)._replace(epoch=0))[0]
    assert isinstance(early, Answer)
    assert early.reason == Reason.OTHER_EPOCH


@pytest.mark.parametrize("moment", [Activity.SPINNING_UP, Activity.BRAKING, Activity.RESTING])
def test_a_boot_finds_the_wheel_turning_and_no_brake_of_its_own(moment: Activity) -> None:
    """A wheel that turns is rested with the motor; a brake that holds goes on holding."""
    bench = Bench()
    bench.order(pivot(bench.me, 1, 8000))
    if moment is Activity.RESTING:
        bench.run(800 * MS)
        bench.order(rest(bench.me, 2))
    while bench.module.drive.activity is not moment:
        bench.run(MS)
    bench.run(MS)
    said = [each.message for each in bench.module.restart(bench.t_ns)] + bench.run()
    seen = {each.activity for each in said if isinstance(each, Telemetry)}
    braked = moment is Activity.BRAKING
    assert (Activity.RESTING in seen, Activity.BRAKING in seen) == (not braked, braked)
    assert bench.module.drive.wheel.rpm(bench.t_ns) == 0.0
    assert bench.module.drive.body.posture(bench.t_ns).face_up == (2 if braked else 1)
    assert of(Facts, said) + of(Answer, said) == []


def test_a_restart_does_not_lift_an_all_stop() -> None:
    bench = Bench()
    bench.say(to_all(Stop(2)))
    bench.module.restart(bench.t_ns)
    me = bench.roll()
    assert (me.flags & Flags.LATCHED, me.stop_number) == (Flags.LATCHED, 2)


def test_fault_restart_on_brake_restarts_once_and_nothing_moves_twice() -> None:
    bench = Bench(faults=frozenset({FaultKind.RESTART_ON_BRAKE}))
    command = pivot(bench.me, 1)
    bench.order(command)
    assert of(Facts, bench.run()) == []
    assert bench.module.drive.body.posture(bench.t_ns).face_up == 2
    for _ in range(3):
        again = bench.order(command)[0]
        assert isinstance(again, Answer)
        assert again.reason == Reason.OTHER_BOOT
    me = bench.roll()
    assert me.boot == bench.me.boot + 1
    bench.order(pivot(me, 1))
    assert len(of(Facts, bench.run())) == 1
    assert [(e.boot, e.number) for e in bench.tally] == [(bench.me.boot, 1), (me.boot, 1)]


def test_fault_silent_answers_one_roll_call_and_then_obeys_without_a_word() -> None:
    bench = Bench(faults=frozenset({FaultKind.SILENT}))
    assert bench.order(pivot(bench.me, 1)) == []
    assert bench.run() == []
    assert bench.module.drive.body.posture(bench.t_ns).face_up == 2
    assert len(bench.tally) == 1


def test_fault_low_battery_refuses_to_drive_and_says_so() -> None:
    bench = Bench(faults=frozenset({FaultKind.LOW_BATTERY}))
    refused = bench.order(pivot(bench.me, 1))[0]
    assert isinstance(refused, Answer)
    assert refused.reason == Reason.BATTERY_LOW
    report = of(Telemetry, bench.run(S))[0]
    assert isinstance(report, Telemetry)
    assert report.flags & Flags.BATTERY_LOW


def test_fault_weak_brake_needs_more_speed() -> None:
    landed = {}
    for faults in (frozenset[FaultKind](), frozenset({FaultKind.WEAK_BRAKE})):
        bench = Bench(faults=faults)
        bench.order(pivot(bench.me, 1, 4700))
        (facts,) = of(Facts, bench.run())
        assert isinstance(facts, Facts)
        landed[bool(faults)] = facts.face_after
    assert landed == {False: 2, True: 1}


def test_telemetry_is_periodic_and_comes_at_once_on_a_change() -> None:
    bench = Bench(telemetry_hz=4.0)
    said = bench.run(10 * S)
    assert len(of(Telemetry, said)) == 40
    numbers = [m.sequence for m in said if isinstance(m, Telemetry)]
    assert numbers == list(range(numbers[0], numbers[0] + 40))
    times = [m.time_ms for m in said if isinstance(m, Telemetry)]
    assert {later - earlier for earlier, later in itertools.pairwise(times)} <= {249, 250, 251}


def test_waking_late_is_waking_often() -> None:
    often, late = Bench(), Bench()
    for bench in (often, late):
        bench.order(pivot(bench.me, 1))
    for _ in range(800):
        often.run(10 * MS)
    assert often.heard == late.heard + late.module.wake(late.t_ns + 8 * S)


def test_facts_of_a_motion_outlive_the_epoch_but_are_not_kept_in_the_next() -> None:
    bench = Bench()
    bench.order(pivot(bench.me, 1))
    bench.say(to_all(RollCall(EPOCH + 5, CONSOLE)))
    (facts,) = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert facts.epoch == EPOCH
    (answer,) = bench.order(Query(EPOCH + 5, bench.me.boot, 1))
    assert isinstance(answer, Answer)
    assert answer.state == AnswerState.UNKNOWN


def test_a_spin_of_the_longest_hold_fits_its_answer() -> None:
    bench = Bench()
    longest = Spin(EPOCH, bench.me.boot, 1, bench.me.identity & 0xFFFF, LATEST_MS, 9000, 0xFFFF)
    answer = bench.order(longest)[0]
    assert isinstance(answer, Answer)
    assert answer.expect_ms == 0xFFFF
