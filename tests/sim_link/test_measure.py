"""What sensors make of the truth: units by hand, widths, noise of the stated size."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from protocol.codes import Activity, Fault, Flags, Reason, SettingId
from protocol.message import Packet, Pivot, decode, encode
from sim_link import mechanics
from sim_link.box import Box
from sim_link.drive import QUIET_NS, Drive
from sim_link.errors import SimStateError
from sim_link.measure import Reporter, _field, bias_dps, facts, wheel_rpm
from sim_link.mechanics import MotionResult
from sim_link.randomness import Draws
from tests.support.boxes import BOOT, boxed
from tests.support.virtual_console import CONSOLE, MS, S, spec_of

COMMAND = Pivot(1000, 5, 3, 0x1234, 2_000_000_000, 0, 1, 1, 6000)
RESULT = MotionResult(
    faces=1,
    turned_rad=math.pi / 2,
    peak_tilt_rad=1.7,
    peak_rate_rad_s=10.0,
    brake_s=0.0123,
    settle_s=0.456,
    settled=True,
)


def box_with(draws: Draws, boot_ns: int = 0) -> Box:
    box = boxed(boot_ns=boot_ns)
    box.drive = Drive(box.spec, draws)
    return box


def braked(monkeypatch: pytest.MonkeyPatch, seed: int = 1) -> tuple[Box, Draws, int]:
    monkeypatch.setattr(mechanics, "pivot", lambda *_, **__: RESULT)
    draws = Draws(seed, 42)
    box = box_with(draws, 2 * S)
    t_ns = 3 * S
    box.drive.start_motion(1, 6000, t_ns)
    while box.drive.due_ns is not None:
        t_ns = box.drive.due_ns
        box.drive.step()
    return box, draws, t_ns


def test_facts_are_in_their_units(monkeypatch: pytest.MonkeyPatch) -> None:
    box, draws, t_ns = braked(monkeypatch)
    said = facts(COMMAND, Reason.NONE, box, draws, t_ns)
    assert (said.epoch, said.boot, said.number, said.reason) == (1000, 5, 3, 0)
    assert (said.face_before, said.face_after, said.settled) == (1, 2, 1)
    assert said.turned_ddeg == pytest.approx(900, abs=25)  # a quarter turn
    assert said.peak_tilt_ddeg == pytest.approx(974, abs=25)  # 1.7 rad is 97.4 degrees
    assert said.peak_rate_dps == pytest.approx(573, rel=0.05)  # 10 rad/s is 573 degrees/s
    assert said.brake_us == pytest.approx(12_300, rel=0.05)
    assert said.settle_ms == pytest.approx(456, abs=20)
    assert said.wheel_at_brake_rpm == pytest.approx(6000, abs=30)
    assert 0 < said.sag_mV < 2000
    assert said.started_ms == 1000  # a second after the boot
    assert said.spin_up_ms == pytest.approx(1885, rel=0.04)  # Iw w / tau


def test_noise_is_keyed_and_of_the_stated_size(monkeypatch: pytest.MonkeyPatch) -> None:
    errors = []
    for seed in range(150):
        box, draws, t_ns = braked(monkeypatch, seed)
        said = facts(COMMAND, Reason.NONE, box, draws, t_ns)
        assert said == facts(COMMAND, Reason.NONE, box, draws, t_ns)
        errors.append(said.turned_ddeg - 900)
    spread = math.sqrt(sum(e * e for e in errors) / len(errors))
    assert spread == pytest.approx(5.0, rel=0.25)  # half a degree; 150 draws


@pytest.mark.parametrize("seed", range(8))
def test_the_bias_of_the_gyroscope_adds_up_with_time(
    monkeypatch: pytest.MonkeyPatch, seed: int
) -> None:
    box, draws, t_ns = braked(monkeypatch, seed)
    brake_ns = t_ns - int(RESULT.settle_s * 1e9) - QUIET_NS
    for wait_s in (1, 30, 100):
        at_ns = t_ns + wait_s * S
        s = (at_ns - brake_ns) / S
        bias = bias_dps(draws, box.drive.supply.warmth.temperature_C(at_ns))
        said = facts(COMMAND, Reason.NONE, box, draws, at_ns)
        # Degrees a second for so many seconds, in tenths; noise adds up with the root of time.
        assert said.turned_ddeg == pytest.approx(900 + 10 * bias * s, abs=4 * 5.5 * math.sqrt(s))
        assert said.peak_tilt_ddeg == pytest.approx(974 + 5 * bias * s, abs=4 * 5.5 * math.sqrt(s))


def test_each_module_has_its_own_bias_of_the_stated_size_and_it_changes_with_warmth() -> None:
    n = 2000
    modules = [Draws(1, who) for who in range(n)]
    cold = [bias_dps(draws, 21.0) for draws in modules]
    slopes = [bias_dps(draws, 31.0) - bias for draws, bias in zip(modules, cold, strict=True)]
    assert cold == [bias_dps(draws, 21.0) for draws in modules]
    for values, size in ((cold, 0.3), (slopes, 0.2)):  # 0.02 a kelvin, for ten
        # Mean and standard deviation of n draws: within four standard errors.
        assert abs(sum(values) / n) < 4 * size / math.sqrt(n)
        assert math.sqrt(sum(v * v for v in values) / n) == pytest.approx(
            size, rel=4 / math.sqrt(2 * n)
        )


def test_without_its_gyroscope_a_module_reports_what_gravity_tells(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    box, draws, t_ns = braked(monkeypatch)
    whole = facts(COMMAND, Reason.NONE, box, draws, t_ns)
    box.faults.stand(Fault.SENSOR_LOST, 0)
    said = facts(COMMAND, Reason.NONE, box, draws, t_ns)
    assert (said.turned_ddeg, said.peak_tilt_ddeg, said.peak_rate_dps) == (900, 900, 0)
    assert said == whole._replace(turned_ddeg=900, peak_tilt_ddeg=900, peak_rate_dps=0)


@pytest.mark.parametrize(
    ("face_before", "direction", "turned_ddeg"),
    [(2, 1, 0), (1, 1, 900), (3, 1, -900), (3, -1, 900), (4, 1, 1800), (4, -1, 1800), (6, 1, 0)],
)
def test_the_turn_that_gravity_tells(
    monkeypatch: pytest.MonkeyPatch, face_before: int, direction: int, turned_ddeg: int
) -> None:
    box, draws, t_ns = braked(monkeypatch)  # ends with face 2 up
    assert box.drive.motion is not None
    box.drive.motion.face_before = face_before
    box.drive.motion.wheel_rad_s *= direction
    box.faults.stand(Fault.SENSOR_LOST, 0)
    assert facts(COMMAND, Reason.NONE, box, draws, t_ns).turned_ddeg == turned_ddeg


def test_reports_are_keyed_by_their_count_alone() -> None:
    """Who looks in between, and at what, makes no difference to what is reported."""
    said = []
    for looks in (0, 3):
        draws = Draws(4, 9)
        box, reporter = box_with(draws), Reporter(spec_of().identity, draws)
        for count in range(1, 6):
            for _ in range(looks):
                box.flags(count * S)
                draws.four_normals(99, "reported")
            said.append(reporter.telemetry(box, Activity.STILL, count * S))
    assert said[:5] == said[5:]
    assert len({(each.battery_mV, each.temperature_cC, each.tilt_ddeg) for each in said[:5]}) == 5


def test_a_motion_cut_before_its_brake_has_no_brake_figures() -> None:
    draws = Draws(1, 42)
    box = box_with(draws)
    drive = box.drive
    drive.start_motion(1, 6000, 0)
    drive.rest(400 * MS)
    assert drive.due_ns is not None
    t_ns = drive.due_ns
    drive.step()
    said = facts(COMMAND, Reason.RESTED, box, draws, t_ns)
    assert said.reason == Reason.RESTED
    assert (said.peak_rate_dps, said.wheel_at_brake_rpm, said.brake_us, said.settle_ms) == (0,) * 4
    assert abs(said.turned_ddeg) < 30


def test_facts_before_any_motion_are_our_mistake() -> None:
    draws = Draws(1, 1)
    with pytest.raises(SimStateError):
        facts(COMMAND, Reason.NONE, box_with(draws), draws, 0)


@given(st.floats(-1e9, 1e9))
def test_a_sensor_at_its_stop_stays_there(value: float) -> None:
    assert -0x8000 <= _field(value, (-0x8000, 0x7FFF)) <= 0x7FFF
    if abs(value) < 30_000:
        assert abs(_field(value, (-0x8000, 0x7FFF)) - value) <= 0.5


def test_telemetry_fits_its_message_in_every_activity() -> None:
    draws = Draws(1, 9)
    box, reporter = box_with(draws), Reporter(spec_of().identity, draws)
    drive, box.latched = box.drive, True
    drive.start_motion(1, 9000, 0)
    t_ns, seen = 0, set()
    while drive.due_ns is not None:
        for part in (0.1, 0.9):
            now_ns = t_ns + int(part * (drive.due_ns - t_ns))
            message = reporter.telemetry(box, drive.activity, now_ns)
            assert decode(encode(Packet(1, 0x10, message))).message == message
            assert message.flags & Flags.LATCHED
            seen.add(message.activity)
        t_ns = drive.due_ns
        drive.step()
    assert seen == {Activity.SPINNING_UP, Activity.BRAKING, Activity.SETTLING}


def test_telemetry_counts_and_says_when_the_body_moves() -> None:
    draws = Draws(1, 9)
    box, reporter = box_with(draws, 2 * S), Reporter(spec_of().identity, draws)
    drive = box.drive
    still = reporter.telemetry(box, Activity.STILL, 5 * S)
    assert (still.boot, still.sequence, still.time_ms) == (BOOT, 1, 3000)
    assert still.flags == Flags.PERMITTED | Flags.CLOCK_TOLD
    assert (still.face_up, still.wheel_rpm, still.identity_bits) == (1, 0, 0x1234)
    assert 4000 < still.battery_mV < 4200
    assert 1500 < still.temperature_cC < 3000
    drive.start_motion(1, 6000, 5 * S)
    drive.step()
    moving = reporter.telemetry(box, drive.activity, drive.due_ns or 0)
    assert (moving.sequence, moving.face_up) == (2, 0)
    assert moving.flags & Flags.UNSETTLED
    reporter.restart()
    assert reporter.telemetry(box, drive.activity, 9 * S).sequence == 1


def test_sequence_wraps_at_16_bits() -> None:
    draws = Draws(1, 9)
    reporter = Reporter(1, draws)
    reporter._sequence = 0xFFFF
    assert reporter.telemetry(box_with(draws), Activity.STILL, 0).sequence == 0


def test_a_wheel_that_hardly_turns_reads_zero() -> None:
    drive = Drive(spec_of(), Draws(1, 1))
    drive.wheel.ramp(0.05, 1.0, 0)  # 0.48 rpm
    assert wheel_rpm(drive, S) == 0
    drive.wheel.ramp(-200.0, 1000.0, S)
    assert wheel_rpm(drive, 2 * S) == -1910  # 200 rad/s are 1909.9 rpm


def test_every_standing_condition_has_its_flag() -> None:
    reporter, box = Reporter(1, Draws(1, 9)), box_with(Draws(1, 9))
    box.person, box.latched = b"Ada", True
    box.faults.stand(Fault.STORAGE_BAD, 0)
    box.settings.write(SettingId.BATTERY_LOW_MV, 4200)
    box.drive.body.brake(600.0, 1, 1, 0)
    assert reporter.telemetry(box, Activity.STAGED, MS).flags == sum(Flags)
    box.boot.allegiance.release(CONSOLE)
    assert not reporter.telemetry(box, Activity.STAGED, MS).flags & Flags.PERMITTED
