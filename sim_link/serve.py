"""The simulated fleet in a process of its own: on a pseudo-terminal, or on a TCP port.

Owns the two ways out and the loop that moves the world with the clock. One thread. A program
at the other end may come, go and come again; the fleet lives on. As on a real line, what is
sent while nobody listens, or faster than anybody reads, is lost.
"""

import errno
import gc
import os
import selectors
import socket
import threading
import time
from abc import ABC, abstractmethod
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Final

from sim_link.clock import PacedClock
from sim_link.errors import SimInputError
from sim_link.options import SimOptions
from sim_link.tally import TallyFile
from sim_link.world import World

_CHUNK: Final = 4096
_GLANCE_S: Final = 0.05
"""The longest wait without a look at ``stop``."""
_HELD_BYTES: Final = 8192
"""What is kept for a reader that is slow; beyond it the newest frames are lost."""
_STALE_S: Final = 0.5
"""Nobody read for so long: what is kept would be old news to whoever reads next."""
_GONE: Final = frozenset(
    {
        errno.EIO,
        errno.EPIPE,
        errno.ECONNRESET,
        errno.ECONNABORTED,
        errno.ENOTCONN,
        errno.ETIMEDOUT,
        errno.EHOSTUNREACH,
    }
)
"""What a pseudo-terminal or a socket says when nobody is at the other end (any more)."""


class _Endpoint(ABC):
    """A way out: bytes from whoever is connected, bytes to them, neither ever blocking."""

    def __init__(self) -> None:
        self._held = bytearray()
        self._moved_s = 0.0

    @abstractmethod
    def receive(self, at_most_s: float) -> bytes:
        """Wait so long for bytes; return what came, perhaps nothing."""

    @abstractmethod
    def _put(self, data: bytes) -> int:
        """Write without blocking; return how many bytes were taken. May raise OSError."""

    @abstractmethod
    def close(self) -> None:
        """Give the device or the port back."""

    def unplug(self) -> None:
        """The bridge's cable was pulled: what is kept for the reader is lost. A pseudo-terminal
        stays, and is silent."""
        self._held.clear()

    def send(self, data: bytes) -> None:
        """Send bytes, as far as somebody takes them."""
        if not self._held:
            self._moved_s = time.monotonic()
        if data and len(self._held) + len(data) <= _HELD_BYTES:
            self._held += data
        if not self._held:
            return
        try:
            del self._held[: self._put(bytes(self._held))]
            self._moved_s = time.monotonic()
        except BlockingIOError:
            if time.monotonic() - self._moved_s > _STALE_S:
                self._held.clear()
        except OSError as error:
            if error.errno not in _GONE:
                raise
            self._held.clear()


class _PseudoTerminal(_Endpoint):
    """A pseudo-terminal in raw mode.

    Its slave side is kept open here as well: so the line's settings and the device outlast a
    program that closes it, and the master does not report an error in between.
    """

    def __init__(self) -> None:
        import tty  # there are systems without

        super().__init__()
        self._master, self._slave = os.openpty()
        tty.setraw(self._slave)
        os.set_blocking(self._master, False)
        self.name = os.ttyname(self._slave)
        self._selector = selectors.DefaultSelector()
        self._selector.register(self._master, selectors.EVENT_READ)

    def receive(self, at_most_s: float) -> bytes:
        """Wait for bytes from the slave's side."""
        if not self._selector.select(at_most_s):
            return b""
        try:
            return os.read(self._master, _CHUNK)
        except BlockingIOError:
            return b""
        except OSError as error:
            if error.errno not in _GONE:
                raise
            # Readable at once, again and again, while nobody has it open: so wait here.
            time.sleep(at_most_s)
            return b""

    def _put(self, data: bytes) -> int:
        return os.write(self._master, data)

    def close(self) -> None:
        """Close both sides; the device vanishes."""
        self._selector.close()
        os.close(self._slave)
        os.close(self._master)


class _Listener(_Endpoint):
    """A TCP port with one client at a time; the next is taken once this one left."""

    def __init__(self, host: str, port: int) -> None:
        super().__init__()
        family = socket.AF_INET6 if ":" in host else socket.AF_INET
        try:
            self._listener = socket.create_server((host, port), family=family, backlog=4)
        except (OSError, OverflowError) as error:
            reason = error.strerror if isinstance(error, OSError) else str(error)
            raise SimInputError("tcp", f"{host}:{port}", f"cannot be opened: {reason}") from error
        self._listener.setblocking(False)
        bound = self._listener.getsockname()
        self.name = f"[{bound[0]}]:{bound[1]}" if ":" in bound[0] else f"{bound[0]}:{bound[1]}"
        self._client: socket.socket | None = None
        self._selector = selectors.DefaultSelector()
        self._selector.register(self._listener, selectors.EVENT_READ)

    def receive(self, at_most_s: float) -> bytes:
        """Wait for the client's bytes, or for a client."""
        if not self._selector.select(at_most_s):
            return b""
        if self._client is None:
            self._accept()
            return b""
        try:
            data = self._client.recv(_CHUNK)
        except BlockingIOError:
            return b""
        except OSError as error:
            if error.errno not in _GONE:
                raise
            data = b""
        if not data:
            self._leave()
        return data

    def _put(self, data: bytes) -> int:
        return len(data) if self._client is None else self._client.send(data)

    def _accept(self) -> None:
        try:
            client, _ = self._listener.accept()
        except (BlockingIOError, ConnectionAbortedError):
            return  # it left before it was taken
        client.setblocking(False)
        client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._held.clear()
        self._client = client
        self._selector.unregister(self._listener)
        self._selector.register(client, selectors.EVENT_READ)

    def unplug(self) -> None:
        """The client loses its connection, and so does who tries again meanwhile."""
        super().unplug()
        self._leave()

    def _leave(self) -> None:
        if self._client is not None:
            self._selector.unregister(self._client)
            self._client.close()
            self._client = None
            self._selector.register(self._listener, selectors.EVENT_READ)

    def close(self) -> None:
        """Close the client, if any, and the port."""
        self._leave()
        self._selector.close()
        self._listener.close()


def serve_pty(
    options: SimOptions,
    tally_path: Path | None,
    announce: Callable[[str], None],
    stop: threading.Event,
) -> None:
    """Serve a fleet on a pseudo-terminal until ``stop`` is set.

    ``announce`` is called once with the device's name, when it can be opened. Raises
    SimInputError for bad options, a tally that cannot be written, or a system without
    pseudo-terminals.
    """
    with _world(options, tally_path) as world:
        if not hasattr(os, "openpty"):
            raise SimInputError("pty", "device", "there are none on this system; use TCP")
        terminal = _PseudoTerminal()
        _serve(world, terminal, terminal.name, announce, stop)


def serve_tcp(  # noqa: PLR0917  (where, what, and who is told: all of them are needed)
    options: SimOptions,
    host: str,
    port: int,
    tally_path: Path | None,
    announce: Callable[[str], None],
    stop: threading.Event,
) -> None:
    """Serve a fleet on a TCP port until ``stop`` is set; port 0 takes any free one.

    ``announce`` is called once with host:port, when it can be connected to. Raises
    SimInputError for bad options, a tally that cannot be written, or a port not to be had.
    """
    with _world(options, tally_path) as world:
        listener = _Listener(host, port)
        _serve(world, listener, listener.name, announce, stop)


@contextmanager
def _world(options: SimOptions, tally_path: Path | None) -> Iterator[World]:
    """Make the world, with its tally open as long as it lives."""
    if tally_path is None:
        yield World(options)
        return
    with TallyFile(tally_path) as tally:
        yield World(options, tally)


def _serve(
    world: World,
    endpoint: _Endpoint,
    name: str,
    announce: Callable[[str], None],
    stop: threading.Event,
) -> None:
    clock = PacedClock(world.options.pace)
    gc.collect()
    gc.freeze()  # the fleet lives as long as this process: looking it through takes 0.1 s a time
    try:
        announce(name)
        while not stop.is_set():
            wait_s = clock.wait_s(world.next_event_ns, _GLANCE_S)
            received = endpoint.receive(wait_s)
            if received:
                world.write(received, clock.now_ns())
            data = world.read(clock.now_ns())
            if world.unplugged:
                endpoint.unplug()
            else:
                endpoint.send(data)
    finally:
        endpoint.close()
