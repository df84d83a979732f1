"""The served fleet: a pseudo-terminal and a TCP port, who comes and goes, and the tally."""

import json
import os
import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
import serial

from protocol.frame import FrameDecoder, frame
from protocol.message import Message, Presence, RollCall, Telemetry, decode, encode
from sim_link.errors import SimInputError
from sim_link.options import SimOptions
from sim_link.serve import _PseudoTerminal, serve_pty, serve_tcp
from tests.support.virtual_console import (
    CONSOLE,
    EPOCH,
    flash,
    permit,
    pivot,
    to_all,
    to_module,
    told,
)

ROLL_CALL = frame(encode(to_all(RollCall(EPOCH, CONSOLE))))
FAST = SimOptions(seed=7, pace=20.0)

pty_only = pytest.mark.skipif(not hasattr(os, "openpty"), reason="no pseudo-terminals here")


@contextmanager
def served(serve: Callable[[Callable[[str], None], threading.Event], None]) -> Iterator[str]:
    """Run a server on a thread; give the name that it announces."""
    names: list[str] = []
    ready, stop = threading.Event(), threading.Event()

    def announce(name: str) -> None:
        names.append(name)
        ready.set()

    thread = threading.Thread(target=serve, args=(announce, stop))
    thread.start()
    try:
        assert ready.wait(10.0)
        yield names[0]
    finally:
        stop.set()
        thread.join(5.0)
        assert not thread.is_alive()
        assert len(names) == 1


def pty(tally: Path | None = None) -> "Callable[[Callable[[str], None], threading.Event], None]":
    return lambda announce, stop: serve_pty(FAST, tally, announce, stop)


def tcp(tally: Path | None = None) -> "Callable[[Callable[[str], None], threading.Event], None]":
    return lambda announce, stop: serve_tcp(FAST, "127.0.0.1", 0, tally, announce, stop)


def hear(read: Callable[[], bytes], wanted: type, count: int) -> list[tuple[int, Message]]:
    """Read until so many messages of a type came, or five seconds passed."""
    decoder, heard = FrameDecoder(), list[tuple[int, Message]]()
    end_s = time.monotonic() + 5.0
    while len(heard) < count and time.monotonic() < end_s:
        for payload in decoder.feed(read()):
            if isinstance(payload, bytes):
                packet = decode(payload)
                if isinstance(packet.message, wanted):
                    heard.append((packet.source, packet.message))
    return heard


@pty_only
def test_a_pseudo_terminal_survives_a_console_that_comes_again() -> None:
    with served(pty()) as name:
        for _ in range(3):
            with serial.Serial(name, 921_600, timeout=0.1) as link:
                link.write(ROLL_CALL)
                heard = hear(lambda link=link: link.read(256), Presence, 8)
            assert {source for source, _ in heard} == set(range(0x10, 0x18))
            time.sleep(0.05)


@pty_only
def test_a_pseudo_terminal_is_raw_both_ways() -> None:
    # Carriage return, line feed, end of file, interrupt, flow control: none is touched. The
    # bytes come as noise before a frame; after the delimiter the frame is heard.
    with served(pty()) as name, serial.Serial(name, timeout=0.1) as link:
        link.write(b"\r\n\x03\x04\x11\x13\x1a\x7f\0" + ROLL_CALL)
        assert len(hear(lambda: link.read(256), Presence, 8)) == 8


@pty_only
def test_news_and_not_history_for_whoever_reads_late() -> None:
    with served(pty()) as name, serial.Serial(name, timeout=0.1) as link:
        hear(lambda: link.read(256), Telemetry, 8)
        time.sleep(1.5)  # 30 s of fleet time: 17 kB that nobody reads
        link.reset_input_buffer()
        time.sleep(0.1)
        fresh = hear(lambda: link.read(256), Telemetry, 40)[-1][1]
        assert isinstance(fresh, Telemetry)
        assert fresh.time_ms > 30_000


@pty_only
def test_the_tally_has_a_line_for_each_command_as_it_is_carried_out(tmp_path: Path) -> None:
    path = tmp_path / "tally.jsonl"
    with served(pty(path)) as name, serial.Serial(name, timeout=0.1) as link:
        link.write(ROLL_CALL)
        present = dict(hear(lambda: link.read(256), Presence, 8))
        alder, birch = present[0x10], present[0x11]
        assert isinstance(alder, Presence)
        assert isinstance(birch, Presence)
        offset_ms = alder.time_ms  # fleet time counts from the opening here: the permit is long
        link.write(frame(encode(to_module(told(alder, offset_ms), 0x10))))
        link.write(frame(encode(to_all(permit(0)))))
        for packet in (to_module(pivot(alder, 1), 0x10), to_module(flash(birch, 1), 0x11)):
            for _ in range(3):
                link.write(frame(encode(packet)))
        end_s = time.monotonic() + 5.0
        while path.read_text().count("\n") < 2 and time.monotonic() < end_s:
            time.sleep(0.02)
        lines = [json.loads(line) for line in path.read_text().splitlines()]
    assert [(line["name"], line["motion"], line["number"]) for line in lines] == [
        ("birch", "flash", 1),
        ("alder", "pivot", 1),
    ]
    assert lines[1]["identity"] == f"{alder.identity:016x}"
    assert lines[1]["boot"] == alder.boot


def test_tcp_takes_one_client_after_another() -> None:
    with served(tcp()) as name:
        host, _, number = name.rpartition(":")
        for _ in range(2):
            with socket.create_connection((host, int(number)), 2.0) as client:
                client.sendall(ROLL_CALL)
                heard = hear(lambda client=client: client.recv(4096), Presence, 8)
            assert {source for source, _ in heard} == set(range(0x10, 0x18))


def test_tcp_keeps_a_second_client_waiting_until_the_first_left() -> None:
    with served(tcp()) as name:
        address = ("127.0.0.1", int(name.rpartition(":")[2]))
        with socket.create_connection(address, 2.0) as second_to_be:
            hear(lambda: second_to_be.recv(4096), Telemetry, 1)
            with socket.create_connection(address, 2.0) as waiting:
                waiting.settimeout(0.3)
                with pytest.raises(TimeoutError):
                    waiting.recv(10)
                second_to_be.close()
                waiting.settimeout(2.0)
                assert hear(lambda: waiting.recv(4096), Telemetry, 1)


def test_tcp_is_reached_by_pyserial_too() -> None:
    with served(tcp()) as name, serial.serial_for_url(f"socket://{name}", timeout=0.1) as link:
        link.write(ROLL_CALL)
        assert len(hear(lambda: link.read(256), Presence, 8)) == 8


def test_a_client_that_breaks_off_does_no_harm() -> None:
    with served(tcp()) as name:
        address = ("127.0.0.1", int(name.rpartition(":")[2]))
        for _ in range(3):
            client = socket.create_connection(address, 2.0)
            # Closed with a reset, not with a farewell: linger on, nought seconds.
            client.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, b"\1\0\0\0\0\0\0\0")
            client.sendall(ROLL_CALL)
            client.close()
        with socket.create_connection(address, 2.0) as client:
            assert hear(lambda: client.recv(4096), Telemetry, 1)


def test_a_port_in_use_and_a_port_that_is_none_are_told() -> None:
    options, stop = SimOptions(), threading.Event()
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = taken.getsockname()[1]
        with pytest.raises(SimInputError, match=rf"127.0.0.1:{port}: cannot be opened: \w"):
            serve_tcp(options, "127.0.0.1", port, None, print, stop)
    with pytest.raises(SimInputError, match="cannot be opened"):
        serve_tcp(options, "127.0.0.1", 70_000, None, print, stop)


def test_a_tally_that_cannot_be_written_is_told_before_anything_is_announced(
    tmp_path: Path,
) -> None:
    names: list[str] = []
    with pytest.raises(SimInputError, match="tally"):
        serve_tcp(
            SimOptions(),
            "127.0.0.1",
            0,
            tmp_path / "nowhere" / "t",
            names.append,
            threading.Event(),
        )
    assert names == []


@pty_only
def test_a_slave_that_nobody_has_open_is_no_error() -> None:
    terminal = _PseudoTerminal()
    os.close(terminal._slave)  # now the master reports EIO, at once and every time
    terminal._slave = os.open(os.devnull, os.O_RDWR)
    start_s = time.monotonic()
    assert terminal.receive(0.1) == b""
    assert time.monotonic() - start_s > 0.05
    terminal.send(b"lost")
    terminal.close()


def test_a_system_without_pseudo_terminals_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delattr(os, "openpty", raising=False)
    with pytest.raises(SimInputError, match="use TCP"):
        serve_pty(SimOptions(), None, print, threading.Event())
