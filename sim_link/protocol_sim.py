"""The ``sim://`` port: a simulated fleet as pyserial sees a serial port.

Owns the behaviour of a port: time-outs, buffers, waking of a waiting reader. Knows nothing of
frames and modules. There is no thread inside: whoever reads or writes moves the world to the
present first. ``sim_link.register()`` makes pyserial find this module.

Only pyserial and the standard library are imported at the top: pyserial takes an ImportError
here for "no such protocol", and the true cause would never be seen. The world is imported as a
port is opened, where an error shows.
"""

import io
import threading
import time
from typing import TYPE_CHECKING, Any, Final

import serial
from serial.serialutil import PortNotOpenError, SerialTimeoutException

if TYPE_CHECKING:
    from sim_link.clock import PacedClock
    from sim_link.world import World

SEND_BUFFER_BYTES: Final = 4096
"""A write waits while more than this is not on the wire yet, as with a real port's driver."""

_GLANCE_S: Final = 0.05
"""The longest wait without looking again: a cancel may come just before the wait begins."""


class Serial(serial.SerialBase):
    """A port on a simulated fleet. Reading and writing may be done from different threads.

    ``pace`` says how many times faster than real time the fleet lives. A port that is closed
    and opened again finds the same fleet, which went on meanwhile.
    """

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        # Before the base's __init__, which sets properties and may open the port.
        self.pace = 1.0
        self._changed = threading.Condition()
        self._received = bytearray()
        self._read_cancelled = False
        self._write_cancelled = False
        self._world: World | None = None
        self._clock: PacedClock | None = None
        self._world_port: str | None = None
        super().__init__(*args, **kwargs)

    def open(self) -> None:
        """Open the port; the first time, make its fleet.

        Raises SerialException with one line where an option or a fleet file is bad, where the
        port has no URL, and where it is open already.
        """
        if self.port is None:
            raise serial.SerialException("sim://: a port needs its URL before it is opened")
        if self.is_open:
            raise serial.SerialException("sim://: the port is open already")
        if self._world_port != self.port:
            self._make_world(self.port)
        else:
            self._forget_while_closed()
        if self._world is not None and self._world.unplugged:
            raise serial.SerialException("sim://: cannot be opened: the bridge is unplugged")
        self.is_open = True

    def close(self) -> None:
        """Close the port; a waiting reader or writer returns."""
        with self._changed:
            self.is_open = False
            self._received.clear()
            self._changed.notify_all()

    def read(self, size: int = 1, /) -> bytes:
        """Read up to ``size`` bytes, waiting for all of them as long as ``timeout`` allows.

        Returns what there is when the read is cancelled or the port closed meanwhile.
        """
        deadline_s = _deadline(self.timeout)
        with self._changed:
            self._read_cancelled = False
            self._take()
            while len(self._received) < size and not self._read_cancelled:
                left_s = _left(deadline_s)
                if left_s <= 0.0:
                    break
                self._wait(left_s)
                if not self.is_open:
                    return b""
                self._take()
            data = bytes(self._received[:size])
            del self._received[:size]
        return data

    def write(self, data: Any, /) -> int:
        """Hand over bytes; wait while too many are before them.

        Raises SerialTimeoutException after ``write_timeout``.
        """
        taken = bytes(data)
        with self._changed:
            self._write_cancelled = False
            if not self._drained(SEND_BUFFER_BYTES, _deadline(self.write_timeout)):
                raise SerialTimeoutException("Write timeout")
            world, clock = self._opened()
            world.write(taken, clock.now_ns())
            self._changed.notify_all()
        return len(taken)

    def flush(self) -> None:
        """Wait until all that was written is on the wire."""
        with self._changed:
            self._write_cancelled = False
            self._drained(0, None)

    @property
    def in_waiting(self) -> int:
        """Bytes that have arrived and were not read."""
        with self._changed:
            self._take()
            return len(self._received)

    @property
    def out_waiting(self) -> int:
        """Bytes written that are not on the wire yet."""
        with self._changed:
            world, clock = self._opened()
            return world.unsent(clock.now_ns())

    def reset_input_buffer(self) -> None:
        """Drop what has arrived and was not read."""
        with self._changed:
            self._take()
            self._received.clear()

    def reset_output_buffer(self) -> None:
        """Drop what was written and is not on the wire yet."""
        with self._changed:
            world, clock = self._opened()
            world.discard_unsent(clock.now_ns())
            self._changed.notify_all()

    def cancel_read(self) -> None:
        """Let a waiting read return with what it has."""
        with self._changed:
            self._read_cancelled = True
            self._changed.notify_all()

    def cancel_write(self) -> None:
        """Let a waiting write or flush return."""
        with self._changed:
            self._write_cancelled = True
            self._changed.notify_all()

    @property
    def cts(self) -> bool:
        """Clear to send: always, there is no flow control here."""
        return self._line_state()

    @property
    def dsr(self) -> bool:
        """Data set ready: always."""
        return self._line_state()

    @property
    def ri(self) -> bool:
        """Ring indicator: never."""
        return not self._line_state()

    @property
    def cd(self) -> bool:
        """Carrier detect: always."""
        return self._line_state()

    def fileno(self) -> int:
        """Raise io.UnsupportedOperation: there is no file behind this port."""
        raise io.UnsupportedOperation("a simulated port has no file descriptor")

    def fleet_time_ns(self) -> int:
        """Return the fleet's time: nanoseconds since the fleet was made, times the pace."""
        return self._opened()[1].now_ns()

    def _make_world(self, url: str) -> None:
        from sim_link.clock import PacedClock  # see the module's docstring
        from sim_link.errors import SimInputError
        from sim_link.options import SimOptions
        from sim_link.world import World

        try:
            options = SimOptions.from_url(url)
            self._world = World(options)
        except SimInputError as error:
            raise serial.SerialException(str(error)) from error
        self.pace = options.pace
        self._clock = PacedClock(options.pace)
        self._world_port = url

    def _forget_while_closed(self) -> None:
        """What the fleet said while nobody had the port open is gone."""
        if self._world is not None and self._clock is not None:
            self._world.read(self._clock.now_ns())

    def _opened(self) -> "tuple[World, PacedClock]":
        if not self.is_open or self._world is None or self._clock is None:
            raise PortNotOpenError
        return self._world, self._clock

    def _take(self) -> None:
        world, clock = self._opened()
        self._received += world.read(clock.now_ns())
        if world.unplugged:
            raise serial.SerialException("sim://: the bridge was unplugged")

    def _wait(self, at_most_s: float) -> None:
        world, clock = self._opened()
        self._changed.wait(clock.wait_s(world.next_event_ns, min(at_most_s, _GLANCE_S)))

    def _drained(self, limit: int, deadline_s: float | None) -> bool:
        """Wait until at most ``limit`` bytes are unsent; False where the time ran out."""
        while True:
            self._take()  # else what waits to be read would be the next event, for ever
            world, clock = self._opened()
            if world.unsent(clock.now_ns()) <= limit or self._write_cancelled:
                return True
            left_s = _left(deadline_s)
            if left_s <= 0.0:
                return False
            self._wait(left_s)

    def _line_state(self) -> bool:
        self._opened()
        return True

    def _reconfigure_port(self) -> None:
        """Take any setting: neither baud rate nor parity means anything to a simulated line.

        The line rate is the URL's option ``rate``.
        """

    def _update_rts_state(self) -> None:
        """Request to send leads nowhere here."""

    def _update_dtr_state(self) -> None:
        """Data terminal ready leads nowhere here."""

    def _update_break_state(self) -> None:
        """A break is nothing that the simulated bridge would notice."""


def _deadline(timeout_s: float | None) -> float | None:
    return None if timeout_s is None else time.monotonic() + timeout_s


def _left(deadline_s: float | None) -> float:
    return float("inf") if deadline_s is None else deadline_s - time.monotonic()
