"""One thread a link that reads, and the queue of what waits to be written on it.

Owns reading and the order of writing: all-stop ahead of everything, the rest in turn, never
more ahead of the wire than the pacer allows. Knows no commands: whole frames only.
"""

import threading
from collections import deque
from collections.abc import Callable

from console.clock import SessionClock
from console.port import Port
from protocol.pacing import LinePacer


class LinkReader(threading.Thread):
    """Reads a port until told to end or until the port is gone, and passes on what came.

    ``arrived(link, t_ns, data)`` and ``lost(link, t_ns, why)`` are called on this thread and
    must not block.
    """

    def __init__(
        self,
        link: int,
        port: Port,
        clock: SessionClock,
        arrived: Callable[[int, int, bytes], None],
        lost: Callable[[int, int, str], None],
    ) -> None:
        super().__init__(name=f"link-{link}", daemon=True)
        self._link = link
        self._port = port
        self._clock = clock
        self._arrived = arrived
        self._lost = lost
        self._ending = threading.Event()

    def run(self) -> None:
        """Read until the end."""
        while not self._ending.is_set():
            try:
                data = self._port.read()
            except (OSError, TypeError, ValueError) as error:
                # pyserial raises TypeError or ValueError where another thread closed the port.
                if not self._ending.is_set():
                    self._lost(self._link, self._clock.now_ns(), str(error))
                return
            if data:
                self._arrived(self._link, self._clock.now_ns(), data)

    def end(self) -> None:
        """Ask the thread to end; it does within the read timeout."""
        self._ending.set()


class Outbox:
    """Frames that wait for one link's wire. Used by the engine's thread only."""

    def __init__(self, pacer: LinePacer) -> None:
        self._pacer = pacer
        self._urgent: deque[bytes] = deque()
        self._plain: deque[tuple[int, bytes]] = deque()

    def push(self, address: int, frame: bytes, urgent: bool = False) -> None:
        """Append a frame for an address; an urgent one goes before all that are not."""
        if urgent:
            self._urgent.append(frame)
        else:
            self._plain.append((address, frame))

    def line_ns(self, n_bytes: int) -> int:
        """How long so many bytes take on this line, either way."""
        return self._pacer.duration_ns(n_bytes)

    def drop_plain(self, address: int | None = None) -> int:
        """Forget what is not urgent, for one address or for all, because a rest or an all-stop
        erases it; return how many frames."""
        before = len(self._plain)
        kept = [] if address is None else [each for each in self._plain if each[0] != address]
        self._plain = deque(kept)
        return before - len(kept)

    def _next(self) -> bytes | None:
        if self._urgent:
            return self._urgent[0]
        return self._plain[0][1] if self._plain else None

    def next_ready_ns(self, t_ns: int) -> int | None:
        """When the next frame may be handed over; None where nothing waits."""
        frame = self._next()
        return None if frame is None else self._pacer.ready_ns(len(frame), t_ns)

    def pop_ready(self, t_ns: int) -> bytes | None:
        """Take the next frame if the wire has room for it now."""
        frame = self._next()
        if frame is None or self._pacer.ready_ns(len(frame), t_ns) > t_ns:
            return None
        (self._urgent or self._plain).popleft()
        self._pacer.sent(len(frame), t_ns)
        return frame
