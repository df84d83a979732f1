"""The laws' limits on whole modules in C, while things go wrong: restarts, silence, losses, a
storage that fails. The program's own tally is the witness of what was carried out."""

import os
import signal
import subprocess
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from protocol.codes import Activity, AnswerState, Fault, Flags, Reason, SettingId
from protocol.message import (
    Answer,
    Clear,
    FaultNotice,
    Flash,
    LockOut,
    Message,
    Nameplate,
    Presence,
    Query,
    Release,
    Rest,
    RollCall,
    SettingWrite,
    Stop,
    Stopped,
    Telemetry,
    Unlock,
)
from tests.support.kit_build import built
from tests.support.kit_host import (
    CONSOLE,
    EPOCH,
    PATIENCE_S,
    HostLine,
    Orders,
    line_to,
    tally_of,
)

BRAKED_S = 0.035 * 6_000 / 9_000
"""How long the made-up brake takes from 6,000 rpm: host/box.c."""
RESTED_S = 2.5 * 6_000 / 9_000
"""And the motor, gently."""


@pytest.fixture(scope="module")
def program(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The host program, built aside."""
    return built(tmp_path_factory, "tw_host")


def carried_out(path: Path) -> list[tuple[str, int, int]]:
    """Identity, boot and number of each command in the tally."""
    return [(each["identity"], each["boot"], each["number"]) for each in tally_of(path)]


def test_a_restart_at_the_brake_repeats_no_motion(program: Path, tmp_path: Path) -> None:
    """The command is sent on and on, to the boot before and after; only its own boot takes it."""
    tally = tmp_path / "tally"
    with line_to(program, "--fault", "restart_on_brake", "--tally", str(tally)) as line:
        address, before = line.take_over()
        pivot = Orders(line, before).pivot()
        assert line.order(address, pivot, Answer).state == AnswerState.ACCEPTED
        turning = line.wait(Telemetry, lambda it: it.boot != before.boot)
        late = line.order(address, pivot, Answer)
        still = line.wait(Telemetry, lambda it: it.activity == Activity.STILL)
        told = [each.message for each in line.heard if isinstance(each.message, FaultNotice)]
        address, after = line.take_over()
        again = line.order(address, pivot, Answer)
    assert (turning.boot, after.boot) == (before.boot + 1, before.boot + 1)
    assert turning.activity == Activity.RESTING
    assert (still.boot, still.wheel_rpm) == (after.boot, 0)
    assert [(each.fault, each.standing) for each in told] == [(Fault.WATCHDOG, 0)]
    for refusal in (late, again):
        assert (refusal.state, refusal.reason) == (AnswerState.REFUSED, Reason.OTHER_BOOT)
    assert [boot for _, boot, _ in carried_out(tally)] == [before.boot]


def test_a_module_that_only_hears_carries_each_out_once(program: Path, tmp_path: Path) -> None:
    tally = tmp_path / "tally"
    with line_to(program, "--fault", "silent", "--tally", str(tally)) as line:
        _, me = line.roll()
        line.listen(0.1)
        heard = len(line.heard)
        orders = Orders(line, me)
        for _ in range(10):
            flash, rest = Flash(*orders.envelope(), 5), Rest(*orders.envelope())
            for command in (flash, rest, flash, rest):
                line.say(command, 0x100, times=3)
            line.listen(0.02)
    assert line.heard[heard:] == []
    numbers = [number for _, _, number in carried_out(tally)]
    assert numbers == sorted(set(numbers))
    assert len(numbers) == 20


def end_at_once(process_id: int) -> None:
    """Power is gone: the program has no time to do anything."""
    os.kill(process_id, signal.SIGKILL)


def powered(program: Path, *words: str) -> "subprocess.Popen[str]":
    """A program that may be ended at once."""
    return subprocess.Popen([program, "--pty", *words], stdout=subprocess.PIPE, text=True)


def test_power_cuts_losses_and_repeats_carry_nothing_out_twice(
    program: Path, tmp_path: Path
) -> None:
    """All that was ever ordered is said again after each cut, by a console that knows no better."""
    tally, said = tmp_path / "tally", list[Message]()
    words = ("--store", str(tmp_path / "kept"), "--tally", str(tally))
    air = ("--loss", "0.2", "--repeat", "0.4")
    boots = []
    for life in range(6):
        with powered(program, *words, *air, "--seed", str(life)) as process:
            assert process.stdout is not None
            line = HostLine(process.stdout.readline().strip(), epoch=EPOCH + life // 2)
            address, me = line.take_over()
            boots.append(me.boot)
            for message in said:
                line.say(message, address)
            orders = Orders(line, me)
            for _ in range(4):
                flash = Flash(*orders.envelope(), 5)
                line.order(address, flash, Answer)
                line.say(flash, address, times=2)
                line.say(Query(line.epoch, me.boot, flash.number), address)
                said.append(flash)
            said.append(orders.pivot())
            line.say(said[-1], address, times=5)
            line.listen(0.2 * life)  # cut while the wheel comes to speed, brakes, or stands again
            end_at_once(process.pid)
            line.close()
    found = carried_out(tally)
    assert len(found) == len(set(found))
    assert boots == list(range(boots[0], boots[0] + 6))
    assert {boot for _, boot, _ in found} == set(boots)
    assert {"flash", "pivot"} <= {each["motion"] for each in tally_of(tally)}


def lapse(line: HostLine, address: int, orders: Orders) -> None:
    """Renew no more."""
    line.permits = False


def release(line: HostLine, address: int, orders: Orders) -> None:
    """Let go of all."""
    line.permits = False
    line.say(Release(CONSOLE))


def stop(line: HostLine, address: int, orders: Orders) -> None:
    """All-stop."""
    line.say(Stop(1))


def rest(line: HostLine, address: int, orders: Orders) -> None:
    """Rest, in order."""
    line.say(Rest(*orders.envelope()), address)


def lock_out(line: HostLine, address: int, orders: Orders) -> None:
    """A person comes near."""
    line.say(LockOut(*orders.envelope(), b"Ada"), address)


@pytest.mark.parametrize(
    ("how", "reason"),
    [
        (lapse, Reason.PERMIT_LAPSED),
        (release, Reason.PERMIT_LAPSED),
        (stop, Reason.STOPPED),
        (rest, Reason.RESTED),
        (lock_out, Reason.LOCKED_OUT),
    ],
)
def test_every_way_of_resting_is_gentle(
    how: Callable[[HostLine, int, Orders], None], reason: Reason, program: Path
) -> None:
    """The wheel takes the motor's time and not the brake's, and the body lies still throughout."""
    with line_to(program) as line:
        address, me = line.take_over()
        orders = Orders(line, me)
        spin = orders.spin(6_000, 60_000)
        line.order(address, spin, Answer)
        line.wait(Telemetry, lambda it: it.activity == Activity.HOLDING)
        how(line, address, orders)
        cut = line.wait(Answer, lambda it: it.number == spin.number)
        line.listen(0.1)
    reports = [each.message for each in line.heard if isinstance(each.message, Telemetry)]
    resting = next(each for each in reports if each.activity == Activity.RESTING)
    still = next(
        each
        for each in reports
        if each.activity == Activity.STILL and each.time_ms > resting.time_ms
    )
    took_s = (still.time_ms - resting.time_ms) / 1_000
    assert (cut.state, cut.reason) == (AnswerState.CUT, reason)
    assert abs(took_s - RESTED_S) < 0.1
    assert took_s > 20 * BRAKED_S
    assert Activity.BRAKING not in {each.activity for each in reports}
    assert {(each.face_up, each.tilt_ddeg) for each in reports} == {(1, 0)}


def test_a_latch_and_a_lock_outlast_a_power_cut(program: Path, tmp_path: Path) -> None:
    """And go only by the newest stop's clear, and by the same person."""
    words = ("--store", str(tmp_path / "kept"))
    with powered(program, *words) as process:
        assert process.stdout is not None
        line = HostLine(process.stdout.readline().strip())
        address, me = line.take_over()
        line.order(address, LockOut(*Orders(line, me).envelope(), b"Ada"), Answer)
        line.say(Stop(9))
        line.wait(Stopped)
        end_at_once(process.pid)
        line.close()
    with line_to(program, *words, epoch=EPOCH + 1) as line:
        address, me = line.take_over()
        orders = Orders(line, me)
        line.say(Clear(8))
        late = line.wait(Stopped)
        line.say(Clear(9))
        lifted = line.wait(Stopped)
        other = line.order(address, Unlock(*orders.envelope(), b"Bo"), Answer)
        locked = line.order(address, orders.spin(2_000, 10), Answer)
        same = line.order(address, Unlock(*orders.envelope(), b"Ada"), Answer)
        free = line.order(address, orders.spin(2_000, 10), Answer)
    assert me.flags & (Flags.LATCHED | Flags.LOCKED_OUT) == Flags.LATCHED | Flags.LOCKED_OUT
    assert [(each.stop_number, each.latched) for each in (late, lifted)] == [(9, 1), (9, 0)]
    assert (other.state, other.reason) == (AnswerState.REFUSED, Reason.OTHER_PERSON)
    assert (locked.state, locked.reason) == (AnswerState.REFUSED, Reason.LOCKED_OUT)
    assert (same.state, free.state) == (AnswerState.FINISHED, AnswerState.ACCEPTED)


@pytest.mark.parametrize(
    ("kind", "fault"),
    [("lost_sensor", Fault.SENSOR_LOST), ("drop_storage", Fault.STORAGE_BAD)],
)
def test_a_fault_is_told_and_drives_no_wheel(kind: str, fault: Fault, program: Path) -> None:
    """A brake brings the first; a setting that cannot be stored the second."""
    with line_to(program, "--fault", kind) as line:
        address, me = line.take_over()
        orders = Orders(line, me)
        if fault is Fault.SENSOR_LOST:
            line.order(address, orders.pivot(), Answer)
        else:
            write = SettingWrite(*orders.envelope(), SettingId.WHEEL_LIMIT_RPM, 5_000)
            bad = line.order(address, write, Answer)
            assert (bad.state, bad.reason) == (AnswerState.REFUSED, Reason.FAULT)
        end_s = time.monotonic() + PATIENCE_S
        while not any(isinstance(each.message, FaultNotice) for each in line.heard):
            assert time.monotonic() < end_s
            line.listen(0.05)
        line.listen(2.0 if fault is Fault.SENSOR_LOST else 0.1)
        refusal = line.order(address, orders.spin(2_000, 10), Answer)
        heard = len(line.heard)
        line.say(RollCall(EPOCH, CONSOLE))
        line.listen(0.2)
    assert (refusal.state, refusal.reason) == (AnswerState.REFUSED, Reason.FAULT)
    answers = [each.message for each in line.heard[heard:]]
    told = [each for each in answers if isinstance(each, FaultNotice)]
    assert [(each.fault, each.standing) for each in told] == [(fault, 1)]
    assert any(isinstance(each, Presence) and each.flags & Flags.FAULTY for each in answers)
    plates = [each for each in answers if isinstance(each, Nameplate)]
    assert [each.wheel_max_rpm for each in plates] == [9_000]
