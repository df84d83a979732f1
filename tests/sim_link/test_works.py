"""Commands of a virtual module: permit, staged motions, lock-out, settings, owners, faults."""

import math
from dataclasses import replace

import pytest

from protocol.codes import Activity, AnswerState, Fault, Flags, Reason, SettingId, identity_bits
from protocol.message import (
    Answer,
    Facts,
    Go,
    LockOut,
    LockState,
    Message,
    Nameplate,
    Permit,
    Presence,
    Release,
    RollCall,
    SettingAsk,
    SettingValue,
    SettingWrite,
    Stop,
    Telemetry,
    Unlock,
)
from sim_link.kinds import Kind
from sim_link.mechanics import tipping_torque_N_m
from tests.support.module_bench import Bench, of
from tests.support.virtual_console import (
    CONSOLE,
    EPOCH,
    MS,
    PAVER,
    S,
    flash,
    pivot,
    rest,
    spin,
    to_all,
    to_module,
)

OTHER_CONSOLE = 0xD0D0
STRONG = replace(PAVER, name="strong", spin_up_torque_N_m=9.0)
"""A kind whose motor could tip its body."""


def answers(said: list[Message]) -> list[tuple[int, AnswerState, Reason]]:
    return [
        (each.number, AnswerState(each.state), Reason(each.reason))
        for each in said
        if isinstance(each, Answer)
    ]


def envelope(bench: Bench, number: int) -> tuple[int, int, int, int]:
    return EPOCH, bench.me.boot, number, identity_bits(bench.me.identity)


def lock(bench: Bench, number: int, person: bytes = b"Ada") -> list[Message]:
    return bench.order(LockOut(*envelope(bench, number), person))


def unlock(bench: Bench, number: int, person: bytes = b"Ada") -> list[Message]:
    return bench.order(Unlock(*envelope(bench, number), person))


def without_permit() -> Bench:
    """A bench on which no permit is renewed: the one of the beginning holds for 50 s."""
    bench = Bench()
    bench.permits = False
    return bench


# -- permit ----------------------------------------------------------------------------------


def test_a_wheel_is_rested_when_its_permit_lapses_and_the_body_stays() -> None:
    bench = without_permit()
    bench.order(spin(bench.me, 1, 6000, 60_000))
    bench.run(49 * S)
    assert bench.module.drive.activity is Activity.HOLDING
    said = bench.run(S)
    # 50 s, less the bound of 20 ms, what the clocks may drift apart in 50 s, and a millisecond.
    assert bench.module.drive.activity is Activity.RESTING
    [change] = [each for each in said if isinstance(each, Telemetry)][-1:]
    assert not change.flags & Flags.PERMITTED
    assert answers(bench.run()) == [(1, AnswerState.CUT, Reason.PERMIT_LAPSED)]
    assert bench.module.drive.body.posture(bench.t_ns) == (1, 0.0, True)


def test_the_moment_of_the_lapse_is_that_of_the_rule() -> None:
    bench = without_permit()
    bench.order(spin(bench.me, 1, 6000, 60_000))
    while bench.module.drive.activity in {Activity.SPINNING_UP, Activity.HOLDING}:
        bench.run(MS)
    seen_ms = bench.t_ns // MS  # looked at once a millisecond
    assert seen_ms - 1 == 50_000 - 20 - (seen_ms >> 13) - 1


@pytest.mark.parametrize("kind", [PAVER, STRONG])
@pytest.mark.parametrize("speed_rpm", [2_000, -8_000])
def test_after_a_lapse_the_wheel_rests_as_slowly_as_its_kind_must(
    kind: Kind, speed_rpm: int
) -> None:
    """What its motor has slows it, but no more than half of what would tip the body: time is wheel
    inertia times speed over torque, give or take a module's own deviation of some percent."""
    bench = Bench(kind=kind)
    bench.permits = False
    bench.run(44 * S)
    bench.order(spin(bench.me, 1, speed_rpm, 60_000))
    while bench.module.drive.activity is not Activity.RESTING:
        bench.run(MS)
    start_ns, sense = bench.t_ns, 1 if speed_rpm > 0 else -1
    while bench.module.drive.activity is not Activity.STILL:
        bench.run(MS)
        assert bench.module.drive.body.posture(bench.t_ns) == (1, 0.0, True)
    torque_N_m = min(kind.spin_up_torque_N_m, tipping_torque_N_m(kind, 1, sense) / 2)
    rest_s = kind.wheel_inertia_kg_m2 * abs(speed_rpm) * math.pi / 30 / torque_N_m
    assert (bench.t_ns - start_ns) / S == pytest.approx(rest_s, rel=0.05, abs=0.003)
    assert bench.module.drive.wheel.rpm(bench.t_ns) == 0.0
    assert bench.module.drive.body.turned_rad == 0.0


def test_a_spinning_up_pivot_is_cut_by_a_lapse_and_a_braking_one_is_not() -> None:
    for late_ns, reason in ((300 * MS, Reason.PERMIT_LAPSED), (2_500 * MS, Reason.NONE)):
        bench = without_permit()
        bench.run(50 * S - late_ns)
        bench.say(to_all(Permit(CONSOLE, 1)))  # an older one changes nothing
        bench.order(pivot(bench.me, 1, 4700))
        [facts] = of(Facts, bench.run())
        assert isinstance(facts, Facts)
        assert facts.reason == reason
        assert facts.settled


def test_release_ends_the_permit_at_once() -> None:
    bench = Bench()
    bench.order(spin(bench.me, 1, 6000, 60_000))
    bench.run(5 * S)
    bench.permits = False
    bench.say(to_all(Release(OTHER_CONSOLE)))
    assert bench.module.drive.activity is Activity.HOLDING
    bench.say(to_all(Release(CONSOLE)))
    assert bench.module.drive.activity is Activity.RESTING
    assert bench.order(spin(bench.me, 2))[0].reason == Reason.NO_PERMIT  # type: ignore[union-attr]


def test_a_flash_needs_no_permit() -> None:
    bench = without_permit()
    bench.run(60 * S)
    assert answers(bench.order(flash(bench.me, 1))) == [(1, AnswerState.ACCEPTED, Reason.NONE)]


# -- owners ----------------------------------------------------------------------------------


def presence(said: list[Message]) -> Presence:
    return next(each for each in said if isinstance(each, Presence))


def test_a_second_console_is_told_who_owns_and_refused() -> None:
    bench = Bench()
    told = presence(bench.say(to_all(RollCall(EPOCH + 9, OTHER_CONSOLE))))
    assert (told.epoch, told.console) == (EPOCH, CONSOLE)
    assert told.owner_left_ms > 40_000
    command = spin(bench.me, 1)._replace(epoch=EPOCH + 9)
    assert answers(bench.order(command)) == [(1, AnswerState.REFUSED, Reason.OWNED)]
    bench.say(to_all(Permit(OTHER_CONSOLE, 90_000)))
    assert bench.module.box.boot.allegiance.permit_left_ms(0) < 60_000


def test_it_takes_over_once_the_permit_has_ended_and_then_owns() -> None:
    bench = without_permit()
    bench.run(51 * S)
    told = presence(bench.say(to_all(RollCall(EPOCH + 9, OTHER_CONSOLE))))
    assert (told.epoch, told.console, told.owner_left_ms) == (EPOCH + 9, OTHER_CONSOLE, 3000)
    assert not told.flags & (Flags.PERMITTED | Flags.CLOCK_TOLD)
    old = bench.order(spin(bench.me, 1))
    assert answers(old) == [(1, AnswerState.REFUSED, Reason.OWNED)]
    new = bench.order(spin(bench.me, 1)._replace(epoch=EPOCH + 9))
    assert answers(new) == [(1, AnswerState.REFUSED, Reason.CLOCK_UNKNOWN)]


def test_a_console_s_wheel_does_not_turn_on_under_another() -> None:
    bench = without_permit()
    bench.order(spin(bench.me, 1, 6000, 60_000))
    bench.run(5 * S)
    bench.module.box.boot.allegiance.release(CONSOLE)  # its owner is gone without a word
    bench.say(to_all(RollCall(EPOCH + 9, OTHER_CONSOLE)))
    assert bench.module.drive.activity is Activity.RESTING


# -- staged motions --------------------------------------------------------------------------


def staged(latest_ms: int = 5_000) -> Bench:
    bench = Bench()
    command = pivot(bench.me, 1, 6000, stage=9)._replace(latest_ms=latest_ms)
    answer, report = bench.order(command)
    assert answers([answer]) == [(1, AnswerState.ACCEPTED, Reason.NONE)]
    assert isinstance(answer, Answer)
    assert answer.expect_ms > latest_ms
    assert isinstance(report, Telemetry)
    assert report.activity == Activity.STAGED
    return bench


def test_a_staged_motion_waits_for_its_go_and_starts_at_the_agreed_time() -> None:
    bench = staged()
    bench.run(S)
    assert bench.module.drive.activity is Activity.STILL
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    [facts] = of(Facts, bench.run())
    assert isinstance(facts, Facts)
    assert facts.started_ms == 1_400
    assert [(entry.number, entry.motion) for entry in bench.tally] == [(1, "pivot")]


@pytest.mark.parametrize(
    "go",
    [
        Go(CONSOLE, 8, 1_400),
        Go(OTHER_CONSOLE, 9, 1_400),
        Go(CONSOLE, 9, 1_000),
        Go(CONSOLE, 9, 500),
        Go(CONSOLE, 9, 5_001),
    ],
    ids=["other stage", "other console", "just past", "long past", "beyond the latest start"],
)
def test_a_go_that_does_not_fit_starts_nothing(go: Go) -> None:
    bench = staged()
    bench.run(S)
    bench.say(to_all(go))
    assert answers(bench.run()) == [(1, AnswerState.CUT, Reason.TOO_LATE)]
    assert bench.tally == []


def test_a_go_said_again_starts_it_once() -> None:
    bench = staged()
    for _ in range(5):
        bench.say(to_all(Go(CONSOLE, 9, 1_400)))
        bench.run(200 * MS)
    bench.run()
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    bench.run()
    assert len(bench.tally) == 1


@pytest.mark.parametrize(
    ("erase", "reason"),
    [
        (lambda bench: bench.say(to_all(Stop(1))), Reason.STOPPED),
        (lambda bench: bench.order(rest(bench.me, 2)), Reason.RESTED),
        (lambda bench: lock(bench, 2), Reason.LOCKED_OUT),
    ],
    ids=["stop", "rest", "lock-out"],
)
def test_what_is_staged_is_erased(erase, reason: Reason) -> None:  # type: ignore[no-untyped-def]
    bench = staged()
    assert (1, AnswerState.CUT, reason) in answers(erase(bench))
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    bench.run()
    assert "pivot" not in [entry.motion for entry in bench.tally]


def test_at_the_start_every_interlock_is_looked_at_again() -> None:
    bench = staged()
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    bench.permits = False
    bench.say(to_all(Release(CONSOLE)))
    assert answers(bench.run()) == [(1, AnswerState.CUT, Reason.NO_PERMIT)]
    assert bench.tally == []


def test_a_lock_that_came_after_the_go_is_looked_at_too() -> None:
    """Each of these stands between the acceptance and the start, and refuses the start."""
    bench = staged()
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    bench.module.box.notice(Fault.STORAGE_BAD, bench.t_ns)
    said = bench.run(2 * S)
    assert answers(said) == [(1, AnswerState.CUT, Reason.FAULT)]
    assert of(Telemetry, said)[-1].activity == Activity.STILL  # type: ignore[union-attr]


def test_another_epoch_erases_what_is_staged_and_telemetry_says_so_at_once() -> None:
    bench = staged()
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    said = bench.say(to_all(RollCall(EPOCH + 1, CONSOLE)))
    [report] = of(Telemetry, said)
    assert isinstance(report, Telemetry)
    assert report.activity == Activity.STILL
    assert (answers(bench.run()), bench.tally) == ([], [])


def test_a_restart_forgets_what_was_staged() -> None:
    bench = staged()
    bench.say(to_all(Go(CONSOLE, 9, 1_400)))
    bench.module.restart(bench.t_ns)
    bench.run()
    assert bench.tally == []


def test_one_thing_at_a_time() -> None:
    bench = staged()
    assert answers(bench.order(spin(bench.me, 2))) == [(2, AnswerState.REFUSED, Reason.BUSY)]
    assert answers(bench.order(flash(bench.me, 3))) == [(3, AnswerState.REFUSED, Reason.BUSY)]


# -- lock-out --------------------------------------------------------------------------------


def test_a_lock_rests_the_wheel_names_its_person_and_outlives_a_restart() -> None:
    bench = Bench()
    bench.order(spin(bench.me, 1, 6000, 60_000))
    bench.run(5 * S)
    answer, state, report = lock(bench, 2)
    assert answers([answer]) == [(2, AnswerState.FINISHED, Reason.NONE)]
    assert isinstance(state, LockState)
    assert (state.locked, state.person) == (1, b"Ada")
    assert isinstance(report, Telemetry)
    assert (report.activity, report.flags & Flags.LOCKED_OUT) == (Activity.RESTING, 8)
    assert answers(bench.run()) == [(1, AnswerState.CUT, Reason.LOCKED_OUT)]
    bench.module.restart(bench.t_ns)
    said = bench.say(to_all(RollCall(EPOCH, CONSOLE)))
    assert [each.person for each in said if isinstance(each, LockState)] == [b"Ada"]


def test_only_the_same_person_takes_it_off() -> None:
    bench = Bench()
    lock(bench, 1)
    assert answers(lock(bench, 2, b"Bo")) == [(2, AnswerState.REFUSED, Reason.LOCKED_OUT)]
    assert answers(lock(bench, 3)) == [(3, AnswerState.FINISHED, Reason.NONE)]
    assert answers(unlock(bench, 4, b"Bo")) == [(4, AnswerState.REFUSED, Reason.OTHER_PERSON)]
    assert answers(bench.order(spin(bench.me, 5))) == [(5, AnswerState.REFUSED, Reason.LOCKED_OUT)]
    answer, state = unlock(bench, 6)
    assert answers([answer]) == [(6, AnswerState.FINISHED, Reason.NONE)]
    assert state == LockState(bench.me.boot, bench.me.identity & 0xFFFF, 0, b"")
    assert answers(bench.order(spin(bench.me, 7))) == [(7, AnswerState.ACCEPTED, Reason.NONE)]


def test_a_clear_does_not_take_a_lock_off() -> None:
    bench = Bench()
    lock(bench, 1)
    bench.say(to_all(Stop(1)))
    bench.module.restart(bench.t_ns)
    assert bench.module.box.person == b"Ada"
    assert bench.module.latched


# -- settings --------------------------------------------------------------------------------


def write(bench: Bench, number: int, setting: SettingId, value: int) -> list[Message]:
    return bench.order(SettingWrite(*envelope(bench, number), setting, value))


def read(bench: Bench, setting: int) -> SettingValue:
    [value] = bench.order(SettingAsk(setting))
    assert isinstance(value, SettingValue)
    return value


def test_a_setting_written_is_read_again_and_kept_over_a_restart() -> None:
    bench = Bench()
    said = write(bench, 1, SettingId.BATTERY_LOW_MV, 3600)
    assert answers(said) == [(1, AnswerState.FINISHED, Reason.NONE)]
    assert read(bench, SettingId.BATTERY_LOW_MV).value == 3600
    bench.module.restart(bench.t_ns)
    assert read(bench, SettingId.BATTERY_LOW_MV).value == 3600


def test_a_new_speed_limit_holds_and_stands_on_the_nameplate() -> None:
    bench = Bench()
    _, plate = write(bench, 1, SettingId.WHEEL_LIMIT_RPM, 5000)
    assert isinstance(plate, Nameplate)
    assert plate.wheel_max_rpm == 5000
    assert answers(bench.order(spin(bench.me, 2, 5001))) == [
        (2, AnswerState.REFUSED, Reason.OVER_SPEED_LIMIT)
    ]


def test_telemetry_takes_its_new_period() -> None:
    bench = Bench()
    write(bench, 1, SettingId.TELEMETRY_PERIOD_MS, 100)
    bench.run(S)
    assert len(of(Telemetry, bench.run(10 * S))) == 100


def test_a_shorter_period_holds_from_now_on() -> None:
    """And not only after the next report of the longer one, which may be a minute away."""
    bench = Bench()
    write(bench, 1, SettingId.TELEMETRY_PERIOD_MS, 60_000)
    bench.run(S)
    assert of(Telemetry, bench.run(30 * S)) == []
    write(bench, 2, SettingId.TELEMETRY_PERIOD_MS, 200)
    assert len(of(Telemetry, bench.run(S))) == 5


def test_a_setting_that_cannot_be_changed_is_refused_and_stays() -> None:
    bench = Bench()
    before = read(bench, SettingId.CALIBRATION)
    assert before.value == before.lowest == before.highest
    said = write(bench, 1, SettingId.CALIBRATION, before.value)
    assert answers(said) == [(1, AnswerState.REFUSED, Reason.READ_ONLY)]
    said = write(bench, 2, SettingId.WHEEL_LIMIT_RPM, 9_001)
    assert answers(said) == [(2, AnswerState.REFUSED, Reason.BAD_FIELD)]
    assert read(bench, SettingId.WHEEL_LIMIT_RPM).value == 9_000


def test_a_battery_that_is_too_low_by_its_setting_drives_nothing_and_says_so() -> None:
    bench = Bench()
    write(bench, 1, SettingId.BATTERY_LOW_MV, 4_200)
    assert answers(bench.order(spin(bench.me, 2))) == [(2, AnswerState.REFUSED, Reason.BATTERY_LOW)]
    report = of(Telemetry, bench.run(S))[0]
    assert isinstance(report, Telemetry)
    assert report.flags & Flags.BATTERY_LOW


def test_a_group_is_reached_and_another_is_not() -> None:
    bench = Bench()
    write(bench, 1, SettingId.GROUPS, 0b100)
    call = to_module(RollCall(EPOCH, CONSOLE), 0xF002)
    assert len(bench.say(call)) == 2
    assert bench.say(call._replace(destination=0xF001)) == []
    assert bench.say(to_module(flash(bench.me, 2), 0xF002)) == []
