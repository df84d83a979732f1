"""The reading thread, and the order in which frames leave."""

import os
import pty
import queue

from console.clock import SessionClock
from console.link import LinkReader, Outbox
from console.port import Port, open_port
from protocol.pacing import LinePacer

MS = 1_000_000


class Heard:
    """Collects what a reader passes on."""

    def __init__(self) -> None:
        self.data: queue.SimpleQueue[tuple[int, int, bytes]] = queue.SimpleQueue()
        self.lost: queue.SimpleQueue[tuple[int, int, str]] = queue.SimpleQueue()

    def arrived(self, link: int, t_ns: int, data: bytes) -> None:
        self.data.put((link, t_ns, data))

    def gone(self, link: int, t_ns: int, why: str) -> None:
        self.lost.put((link, t_ns, why))


def reader_on(port: Port, heard: Heard) -> LinkReader:
    reader = LinkReader(3, port, SessionClock(), heard.arrived, heard.gone)
    reader.start()
    return reader


def test_what_comes_is_passed_on_and_the_thread_ends_when_asked() -> None:
    master, slave = pty.openpty()
    port = open_port(os.ttyname(slave))
    heard = Heard()
    reader = reader_on(port, heard)
    os.write(master, b"one\x00")
    link, t_ns, data = heard.data.get(timeout=5)
    assert (link, data) == (3, b"one\x00")
    assert t_ns >= 0
    reader.end()
    reader.join(5)
    assert not reader.is_alive()
    assert heard.lost.empty()
    port.close()
    os.close(master)
    os.close(slave)


def test_a_pulled_cable_is_told_once_and_ends_the_thread() -> None:
    master, slave = pty.openpty()
    port = open_port(os.ttyname(slave))
    os.close(slave)
    heard = Heard()
    reader = reader_on(port, heard)
    os.close(master)
    link, _, why = heard.lost.get(timeout=5)
    assert link == 3
    assert why
    reader.join(5)
    assert not reader.is_alive()
    assert heard.lost.empty()
    port.close()


def pop_all(outbox: Outbox, t_ns: int) -> list[bytes]:
    frames = []
    while (frame := outbox.pop_ready(t_ns)) is not None:
        frames.append(frame)
    return frames


def test_urgent_frames_go_first_and_the_rest_in_turn() -> None:
    outbox = Outbox(LinePacer(921_600))
    outbox.push(16, b"a")
    outbox.push(16, b"b")
    outbox.push(16, b"S", urgent=True)
    outbox.push(16, b"T", urgent=True)
    assert pop_all(outbox, 0) == [b"S", b"T", b"a", b"b"]


def test_all_stop_erases_what_is_not_urgent() -> None:
    outbox = Outbox(LinePacer(921_600))
    outbox.push(16, b"a")
    outbox.push(16, b"b")
    outbox.push(16, b"S", urgent=True)
    assert outbox.drop_plain() == 2
    assert pop_all(outbox, 0) == [b"S"]
    assert outbox.next_ready_ns(0) is None


def test_a_rest_erases_what_waits_for_its_module_only() -> None:
    outbox = Outbox(LinePacer(921_600))
    outbox.push(16, b"a")
    outbox.push(17, b"b")
    outbox.push(16, b"c")
    assert outbox.drop_plain(16) == 2
    assert pop_all(outbox, 0) == [b"b"]


def test_no_more_than_ten_milliseconds_wait_before_the_wire() -> None:
    outbox = Outbox(LinePacer(9_600))  # 10 bits a byte: 1.04 ms a byte, by hand
    for _ in range(100):
        outbox.push(16, bytes(5))
    assert len(pop_all(outbox, 0)) <= 3
    ready_ns = outbox.next_ready_ns(0)
    assert ready_ns is not None
    assert 0 < ready_ns <= 11 * MS
    total = 0
    for t_ns in range(0, 250 * MS, MS):
        total += sum(len(frame) for frame in pop_all(outbox, t_ns))
    assert 230 <= total <= 250  # 0.25 s of the line are 240 bytes, by hand
