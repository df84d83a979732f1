"""The engine: one thread that runs the session's core in real time.

Owns the threads and the inbox: one reader a link, one engine thread that alone touches the
core, and the log's writer behind it. Other threads put requests in the inbox and read
immutable views; nobody holds a lock while a link is written.

Must not know: what the core decides, screens, sheets, SQL.
"""

import queue
import threading
from collections.abc import Callable, Sequence
from concurrent.futures import Future
from contextlib import suppress
from dataclasses import dataclass, replace
from typing import Any, Final

from console.airtime import Channel
from console.clock import SessionClock, utc_now
from console.core import OnEnd, SessionCore
from console.errors import EngineError, InputError
from console.limits import Limits
from console.link import LinkReader, Outbox
from console.orders import Order, parse_order
from console.port import Port
from console.sealing import ConsoleSeal
from console.view import FleetView
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.frame import frame
from protocol.message import Packet, Stop, encode
from protocol.pacing import LinePacer
from storage.errors import StorageError
from storage.records import (
    LinkChanged,
    OrderGiven,
    Record,
    SessionClosed,
    SessionOpened,
    SheetClosed,
    SheetOpened,
)
from storage.writer import LogWriter

VIEW_PERIOD_NS: Final = 50_000_000
"""How often a new picture is made at most: twice as often as a screen looks."""
ANSWER_WAIT_S: Final = 2.0
LAST_STOPS: Final = 3
"""How often the all-stop of a failing engine is sent: it cannot wait for confirmations."""


@dataclass(frozen=True, slots=True)
class _Request:
    """Something to do on the engine's thread; ``reply`` takes its result where one is wanted."""

    act: Callable[[int], Any]
    reply: "Future[Any] | None" = None


class Engine:
    """Runs one session over its links. Implements view.FleetSource.

    ``log`` is open for the session that ``opened`` describes; the engine closes both log and
    ports. Call ``start`` once and ``close`` at the end.
    """

    def __init__(
        self,
        ports: Sequence[Port],
        log: LogWriter,
        clock: SessionClock,
        opened: SessionOpened,
        seal: ConsoleSeal | None = None,
        *,
        channel: Channel | None = None,
    ) -> None:
        self._clock = clock
        self._log = log
        self._ports = list(ports)
        self._opened = opened
        self._inbox: queue.SimpleQueue[_Request] = queue.SimpleQueue()
        outboxes = [Outbox(LinePacer(port.rate_baud)) for port in self._ports]
        limits = Limits().at_pace(opened.pace)
        self._core = SessionCore(outboxes, log, self._log_answered, seal, limits, channel=channel)
        self._beat_ns: int | None = None
        self._seal = seal
        self._readers = [
            LinkReader(link, port, clock, self._arrived, self._lost)
            for link, port in enumerate(self._ports)
        ]
        self._view = self._core.view(0)
        self._viewed_ns = 0
        self._unseen_change = False
        self._failure: Exception | None = None
        self._log_lost = ""
        self._ended = False
        self._thread = threading.Thread(target=self._run, name="engine", daemon=True)

    # -- what other threads call ---------------------------------------------------------

    def start(self) -> None:
        """Begin the session."""
        self._thread.start()

    def close(self, why: str = "closed") -> None:
        """End the session in order: last record, log, ports, threads. Safe to call twice.

        Raises EngineError where the engine failed by a fault of its own.
        """
        self._inbox.put(_Request(lambda t_ns: self._close(why, t_ns)))
        if self._thread.ident is not None:
            self._thread.join()
        if self._failure is not None:
            failure = repr(self._failure)
            raise EngineError(
                f"the engine failed ({failure}); all-stop was sent"
            ) from self._failure

    @property
    def session(self) -> int:
        """Number of this session in its log."""
        return self._log.session

    def now_ns(self) -> int:
        """The session's time now."""
        return self._clock.now_ns()

    def real_s(self, fleet_ns: int) -> float:
        """Real seconds that so much fleet time lasts."""
        return self._clock.real_s(fleet_ns)

    def view(self) -> FleetView:
        """The newest picture of the fleet."""
        return self._view

    def log_trouble(self) -> str:
        """Why nothing is written now, or an empty text."""
        if self._failure is not None:
            return f"the engine failed: {self._failure!r}"
        return self._log_lost or self._log.trouble()

    def link_open(self) -> bool:
        """Whether any link is still open."""
        return bool(self._core.open_links)

    def order(self, text: str) -> str:
        """Take a typed order. Raises InputError where it cannot be given."""
        names = [module.name for module in self._view.modules]
        given = self.give(parse_order(text, names), "typed")
        count = len(given.commands)
        return f"order {given.order}: {given.text} ({count} command{'s' * (count != 1)})"

    def give(
        self, order: Order, source: str, trial: int = 0, on_end: OnEnd | None = None
    ) -> OrderGiven:
        """Give an order; returns what was planned, before anything is sent.

        ``on_end`` is called on the engine's thread once for each command, at its end. Raises
        InputError with the reason where an interlock blocks it or the engine has ended.
        """
        given: OrderGiven = self._ask(
            lambda t_ns: self._core.give(order, source, t_ns, trial, on_end)
        )
        return given

    def beat(self) -> None:
        """A sign of life of whoever leads the session; without it the drive permits lapse. Never
        blocks."""
        self._beat_ns = self._clock.now_ns()

    def stop(self, source: str) -> None:
        """All-stop, now; never blocks."""
        self._inbox.put(_Request(lambda t_ns: self._stop(source, t_ns)))

    def clear(self, stop_number: int, source: str) -> None:
        """Lift the newest all-stop. Raises InputError where another is the newest."""
        self._ask(lambda t_ns: self._core.lift_stop(stop_number, source, t_ns))

    def open_sheet(self, name: str, text: str, seed: int, planned: int) -> None:
        """Record that the session's run sheet begins."""
        self._note_at(lambda t_ns: SheetOpened(t_ns, 1, name, text, seed, planned))

    def close_sheet(self, stopped: str) -> None:
        """Record that the run sheet ended; ``stopped`` says why before its time, or is empty."""
        self._note_at(lambda t_ns: SheetClosed(t_ns, 1, stopped))

    def _note_at(self, make: Callable[[int], Record]) -> None:
        self._inbox.put(_Request(lambda t_ns: self._core.note(make(t_ns))))

    def _ask(self, act: Callable[[int], Any]) -> Any:
        if self._ended or not self._thread.is_alive():
            raise InputError("the session is closed")
        reply: Future[Any] = Future()
        self._inbox.put(_Request(act, reply))
        try:
            return reply.result(ANSWER_WAIT_S)
        except TimeoutError as error:
            raise InputError("the engine did not answer in time; look before ordering again") from (
                error
            )

    # -- what the readers and the log's thread call ----------------------------------------

    def _arrived(self, link: int, t_ns: int, data: bytes) -> None:
        self._inbox.put(_Request(lambda _: self._core.arrived(link, data, t_ns)))

    def _lost(self, link: int, t_ns: int, why: str) -> None:
        self._inbox.put(_Request(lambda _: self._lose(link, t_ns, why)))

    def _log_answered(self, given: OrderGiven, why_not: str) -> None:
        self._inbox.put(_Request(lambda t_ns: self._core.committed(given, why_not, t_ns)))

    # -- the engine's thread -------------------------------------------------------------

    def _run(self) -> None:
        try:
            self._conduct()
        except Exception as error:  # noqa: BLE001 - whatever it is, the wheels must rest
            self._fail(error)
        while not self._inbox.empty():
            self._do(self._inbox.get())

    def _fail(self, error: Exception) -> None:
        """A fault of ours: all-stop goes out as bytes alone, and ``close`` tells what it was."""
        self._failure = error
        self._ended = True
        stop = Stop(self._core.fleet.newest_stop + 1)
        payload = encode(Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, stop))
        data = frame(payload if self._seal is None else self._seal.seal(payload))
        for reader in self._readers:
            reader.end()
        for port in self._ports:
            with suppress(OSError):
                port.write(data * LAST_STOPS)
            port.close()
        self._core.open_links.clear()
        self._view = replace(self._view, closed=True)
        self._close_log("failed", utc_now())

    def _conduct(self) -> None:
        self._core.note(self._opened)
        for link, port in enumerate(self._ports):
            self._core.note(LinkChanged(self._clock.now_ns(), link, port.url, "open", ""))
        for reader in self._readers:
            reader.start()
        while True:
            requests = self._take()
            for request in requests:
                self._do(request)
            if self._ended:
                return
            self._unseen_change |= bool(requests)
            now_ns = self._clock.now_ns()
            if self._beat_ns is not None:
                self._core.beat(self._beat_ns)
            self._core.wake(now_ns)
            self._write(now_ns)
            self._publish(now_ns)

    def _take(self) -> list[_Request]:
        """Wait for the inbox or the next timer; return all that is there."""
        requests: list[_Request] = []
        now_ns = self._clock.now_ns()
        wake_ns = self._core.next_wake_ns(now_ns)
        if self._unseen_change:
            wake_ns = min(wake_ns, self._viewed_ns + VIEW_PERIOD_NS)
        wait_s = self._clock.real_s(wake_ns - now_ns)
        try:
            requests.append(self._inbox.get(timeout=wait_s))
            while True:
                requests.append(self._inbox.get_nowait())
        except queue.Empty:
            return requests

    def _do(self, request: _Request) -> None:
        if self._ended:
            if request.reply is not None:
                request.reply.set_exception(InputError("the session is closed"))
            return
        try:
            result = request.act(self._clock.now_ns())
        except InputError as error:
            if request.reply is None:
                raise
            request.reply.set_exception(error)
        else:
            if request.reply is not None:
                request.reply.set_result(result)

    def _stop(self, source: str, t_ns: int) -> None:
        self._core.stop_all(source, t_ns)
        self._write(t_ns)
        self._publish(t_ns, force=True)

    def _write(self, now_ns: int) -> None:
        for link, data in self._core.to_write(now_ns):
            try:
                self._ports[link].write(data)
            except OSError as error:
                self._lose(link, now_ns, str(error))

    def _lose(self, link: int, t_ns: int, why: str) -> None:
        if link in self._core.open_links:
            self._core.open_links.discard(link)
            self._core.note(LinkChanged(t_ns, link, self._ports[link].url, "lost", why))
            self._publish(t_ns, force=True)

    def _publish(self, now_ns: int, force: bool = False) -> None:
        if force or now_ns - self._viewed_ns >= VIEW_PERIOD_NS:
            self._view = self._core.view(now_ns)
            self._viewed_ns = now_ns
            self._unseen_change = False

    def _close(self, why: str, t_ns: int) -> None:
        utc = utc_now()
        self._core.release()
        self._write(t_ns)
        for reader in self._readers:
            reader.end()
        for link in sorted(self._core.open_links):
            self._core.note(LinkChanged(t_ns, link, self._ports[link].url, "closed", ""))
        self._core.note(SessionClosed(t_ns, utc, why))
        for reader in self._readers:
            reader.join()
        for port in self._ports:
            port.close()
        self._close_log("closed", utc)
        self._publish(t_ns, force=True)
        self._ended = True

    def _close_log(self, ending: str, utc: str) -> None:
        try:
            self._log.close(ending, utc)
        except StorageError as error:
            self._log_lost = str(error)
