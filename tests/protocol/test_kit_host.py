"""Whole modules in C alone, driven over a pseudo-terminal by the Python side's own protocol."""

import json
import os
import subprocess
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

from protocol.codes import Activity, AnswerState, Flags, Reason, SettingId, is_simulated
from protocol.frame import frame
from protocol.key_text import read_keys
from protocol.message import (
    Answer,
    Facts,
    Flash,
    LockOut,
    Nameplate,
    Packet,
    Pivot,
    Presence,
    Query,
    Rest,
    RollCall,
    SettingAsk,
    SettingValue,
    SettingWrite,
    Spin,
    Stop,
    Stopped,
    Telemetry,
    TraceAsk,
    TraceChunk,
    encode,
    field_text,
)
from protocol.seal import KeyRing
from protocol.trace import TraceFetch
from tests.support.kit_build import built
from tests.support.kit_host import CONSOLE, EPOCH, HostLine, host

ROOT = Path(__file__).parents[2]
KEY_FILE = f'# for a test\n[[key]]\nslot = 0\nhex = "{bytes(range(32)).hex()}"\n'
FORWARD = 1
FLOOR = 1


@pytest.fixture(scope="module")
def program(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The host program, built aside."""
    return built(tmp_path_factory, "tw_host")


@contextmanager
def line_to(
    program: Path, *words: str, keys: KeyRing | None = None, epoch: int = EPOCH
) -> Iterator[HostLine]:
    with host(program, *words) as path:
        line = HostLine(path, keys, epoch)
        try:
            yield line
        finally:
            line.close()


class Orders:
    """Commands to one module, numbered."""

    def __init__(self, line: HostLine, me: Presence) -> None:
        self.line, self.me, self.number = line, me, 0

    def envelope(self) -> tuple[int, int, int, int]:
        self.number += 1
        return self.line.epoch, self.me.boot, self.number, self.me.identity & 0xFFFF

    def pivot(self, speed_rpm: int = 6_000) -> Pivot:
        return Pivot(*self.envelope(), self.line.latest_ms(), 0, FLOOR, FORWARD, speed_rpm)

    def spin(self, speed_rpm: int, hold_ms: int) -> Spin:
        return Spin(*self.envelope(), self.line.latest_ms(), speed_rpm, hold_ms)


def tally_of(path: Path) -> list[dict[str, Any]]:
    return [json.loads(text) for text in path.read_text().splitlines()]


def test_a_roll_call_is_answered_by_each_of_several(program: Path) -> None:
    with line_to(program, "--modules", "3", "--name", "birch", "--identity", "0x1234") as line:
        line.roll()
        line.listen(0.3)
        said = {each.source: each.message for each in line.heard if type(each.message) is Presence}
        plates = {
            each.source: each.message for each in line.heard if type(each.message) is Nameplate
        }
    assert sorted(said) == [0x100, 0x101, 0x102]
    assert all(is_simulated(each.identity) for each in said.values())
    assert said[0x101].identity == 0x8000_0000_0000_1235
    names = [field_text(plates[address].name) for address in sorted(plates)]
    assert names == ["birch", "birch-2", "birch-3"]


def test_a_pivot_from_permit_to_facts_and_its_trace(program: Path) -> None:
    with line_to(program, "--seed", "4") as line:
        address, me = line.take_over()
        orders = Orders(line, me)
        pivot = orders.pivot()
        answer = line.order(address, pivot, Answer)
        assert (answer.state, answer.reason) == (AnswerState.ACCEPTED, Reason.NONE)
        assert 1_500 < answer.expect_ms < 6_000
        facts = line.wait(Facts)
        trace = fetch(line, address, me, pivot)
    assert (facts.number, facts.reason) == (pivot.number, Reason.NONE)
    assert (facts.face_before, facts.face_after, facts.settled) == (1, 2, 1)
    assert abs(facts.turned_ddeg - 900) < 30
    assert facts.peak_tilt_ddeg >= facts.turned_ddeg - 30
    assert abs(facts.wheel_at_brake_rpm - 6_000) < 120
    assert 10_000 < facts.brake_us < 60_000
    assert 0 < facts.sag_mV < 400
    assert 100 < facts.settle_ms < 1_000
    head, samples = trace.head, trace.samples
    assert (head.period_us, head.samples) == (4_000, 240)
    assert 0 < head.brake_sample < head.samples
    assert abs(samples[head.brake_sample - 1].wheel_rpm - 6_000) < 120
    assert samples[-1].wheel_rpm == 0
    assert abs(samples[-1].tilt_ddeg - 900) < 30


def fetch(line: HostLine, address: int, me: Presence, pivot: Pivot) -> Any:
    fetched = TraceFetch()
    bits = me.identity & 0xFFFF
    while not fetched.complete:
        first, wanted = fetched.missing()
        line.say(TraceAsk(EPOCH, me.boot, pivot.number, bits, first, wanted), address)
        for packet in line.listen(0.1):
            if isinstance(packet.message, TraceChunk):
                fetched.take(packet.message)
        assert not fetched.absent
    return fetched.trace()


def test_too_slow_a_wheel_turns_nothing_over(program: Path) -> None:
    with line_to(program) as line:
        address, me = line.take_over()
        line.order(address, Orders(line, me).pivot(2_000), Answer)
        facts = line.wait(Facts)
    assert (facts.face_before, facts.face_after, facts.reason) == (1, 1, Reason.NONE)
    assert abs(facts.turned_ddeg) < 30 < facts.peak_tilt_ddeg


def test_the_wheel_rests_when_the_permit_lapses(program: Path) -> None:
    with line_to(program) as line:
        address, me = line.take_over()
        spin = Orders(line, me).spin(3_000, 20_000)
        assert line.order(address, spin, Answer).state == AnswerState.ACCEPTED
        line.wait(Telemetry, lambda it: it.activity == Activity.HOLDING)
        line.permits, from_s = False, time.monotonic()
        line.wait(Telemetry, lambda it: it.activity == Activity.RESTING)
        waited_s = time.monotonic() - from_s
        cut = line.wait(Answer)
        still = line.wait(Telemetry)
    assert 0.6 < waited_s < 1.2
    assert (cut.number, cut.state, cut.reason) == (1, AnswerState.CUT, Reason.PERMIT_LAPSED)
    assert (still.activity, still.wheel_rpm) == (Activity.STILL, 0)
    assert not still.flags & Flags.PERMITTED


def test_no_wheel_turns_without_a_permit(program: Path) -> None:
    with line_to(program) as line:
        address, me = line.take_over()
        line.permits = False
        line.listen(1.2)
        refusal = line.order(address, Orders(line, me).spin(3_000, 500), Answer)
        line.say(RollCall(EPOCH, CONSOLE))
        line.listen(0.2)
    assert (refusal.state, refusal.reason) == (AnswerState.REFUSED, Reason.NO_PERMIT)
    reported = [it.message for it in line.heard if isinstance(it.message, Telemetry)]
    assert reported
    assert all(each.wheel_rpm == 0 for each in reported)


def test_a_stop_a_lock_and_a_setting_are_kept_over_a_restart(program: Path, tmp_path: Path) -> None:
    store = ("--store", str(tmp_path / "kept"))
    with line_to(program, *store) as line:
        address, before = line.take_over()
        orders = Orders(line, before)
        line.order(address, LockOut(*orders.envelope(), b"Ada"), Answer)
        write = SettingWrite(*orders.envelope(), SettingId.WHEEL_LIMIT_RPM, 5_000)
        assert line.order(address, write, Answer).state == AnswerState.FINISHED
        line.say(Stop(9))
        assert line.wait(Stopped).latched
    with line_to(program, *store, epoch=EPOCH + 1) as line:
        address, after = line.take_over()
        refusal = line.order(address, Orders(line, after).spin(2_000, 500), Answer)
        line.say(SettingAsk(SettingId.WHEEL_LIMIT_RPM), address)
        kept = line.wait(SettingValue)
    assert after.boot == before.boot + 1
    assert after.flags & (Flags.LOCKED_OUT | Flags.LATCHED) == Flags.LOCKED_OUT | Flags.LATCHED
    assert after.stop_number == 9
    assert (refusal.state, refusal.reason) == (AnswerState.REFUSED, Reason.STOP_IN_FORCE)
    assert (kept.value, kept.lowest, kept.highest) == (5_000, 100, 9_000)


def test_a_torn_copy_costs_nothing_that_was_stored(program: Path, tmp_path: Path) -> None:
    """What a power loss in the middle of a write leaves: the older of the two copies, which was
    being written, is not whole."""
    path = tmp_path / "kept"
    boots = [boot_of(program, path, start) for start in range(2)]
    data = bytearray(path.read_bytes())
    copies = [data[:KEPT_BYTES], data[KEPT_BYTES:]]
    older = min((0, 1), key=lambda copy: int.from_bytes(copies[copy][:4], "little"))
    data[older * KEPT_BYTES + 7] ^= 0x5A
    path.write_bytes(data)
    boots += [boot_of(program, path, start) for start in range(2, 4)]
    assert len(data) == 2 * KEPT_BYTES
    assert boots == [boots[0] + start for start in range(4)]


KEPT_BYTES = 45


def boot_of(program: Path, store: Path, start: int) -> int:
    """Start, ask for the boot number, and end."""
    with line_to(program, "--store", str(store), epoch=EPOCH + start) as line:
        return line.roll()[1].boot


def test_repeats_and_losses_carry_nothing_out_twice(program: Path, tmp_path: Path) -> None:
    path = tmp_path / "tally"
    words = ("--loss", "0.2", "--repeat", "0.5", "--seed", "5", "--tally", str(path))
    with line_to(program, *words) as line:
        address, me = line.take_over()
        orders = Orders(line, me)
        for _ in range(25):
            flash = Flash(*orders.envelope(), 30)
            line.say(flash, address, times=3)
            line.order(address, flash, Answer)
            line.order(address, Rest(*orders.envelope()), Answer)
            line.say(Query(EPOCH, me.boot, flash.number), address, times=2)
        line.order(address, orders.pivot(), Facts)
    found = [(each["identity"], each["boot"], each["number"]) for each in tally_of(path)]
    assert len(found) == len(set(found))
    assert {each["motion"] for each in tally_of(path)} == {"flash", "rest", "pivot"}
    assert len(found) > 25
    assert set(tally_of(path)[0]) == {"identity", "boot", "number", "time_ns", "name", "motion"}


def test_with_keys_only_sealed_words_are_obeyed(program: Path, tmp_path: Path) -> None:
    path = tmp_path / "keys"
    path.write_text(KEY_FILE)
    keys = read_keys(KEY_FILE)
    with line_to(program, "--keys", str(path), keys=keys) as line:
        plain = encode(Packet(0xFFFF, 1, RollCall(EPOCH + 9, CONSOLE)))
        line.send(frame(plain))
        address, me = line.take_over()
        assert me.epoch == EPOCH
        answer = line.order(address, Orders(line, me).spin(1_000, 10), Answer)
    assert answer.state == AnswerState.ACCEPTED


def test_a_reader_may_go_away_and_come_back(program: Path) -> None:
    with host(program) as path:
        first = HostLine(path)
        first.roll()
        first.close()
        time.sleep(1.5)
        second = HostLine(path, epoch=EPOCH + 1)
        try:
            assert second.roll()[1].epoch == EPOCH + 1
        finally:
            second.close()


def test_on_standard_input_and_output(program: Path) -> None:
    asked = frame(encode(Packet(0xFFFF, 1, RollCall(EPOCH, CONSOLE))))
    with subprocess.Popen(
        [program, "--stdio"], stdin=subprocess.PIPE, stdout=subprocess.PIPE
    ) as process:
        assert process.stdin is not None
        assert process.stdout is not None
        process.stdin.write(asked)
        process.stdin.flush()
        said = os.read(process.stdout.fileno(), 256)
        process.stdin.close()
        assert process.wait(10) == 0
    assert said.endswith(b"\0")


@pytest.mark.parametrize(
    "words",
    [
        [],
        ["--pty", "--modules", "0"],
        ["--pty", "--loss", "2"],
        ["--pty", "--address", "1"],
        ["--pty", "--nonsense", "1"],
        ["--pty", "--seed"],
    ],
)
def test_a_wrong_command_line_is_said_to_be_wrong(program: Path, words: list[str]) -> None:
    done = subprocess.run([program, *words], capture_output=True, text=True, check=False)
    assert done.returncode == 2
    assert "usage:" in done.stderr


@pytest.mark.parametrize(
    "text", ["", "nonsense", KEY_FILE.replace("00", "zz"), KEY_FILE + KEY_FILE, KEY_FILE + "a = 1"]
)
def test_a_wrong_key_file_is_refused_and_not_shown(
    program: Path, tmp_path: Path, text: str
) -> None:
    path = tmp_path / "keys"
    path.write_text(text)
    words = [program, "--pty", "--keys", str(path)]
    done = subprocess.run(words, capture_output=True, text=True, check=False)
    assert done.returncode == 1
    assert "no key file" in done.stderr
    assert "0405" not in done.stderr
