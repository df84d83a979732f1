"""Opening a serial port, and saying what to do where that fails.

Owns the pyserial object and the advice in its error texts. Knows no frames and no fleet.
"""

import errno
import os
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

from console.errors import InputError, LinkError

DEFAULT_RATE_BAUD: Final = 921_600
READ_TIMEOUT_S: Final = 0.05
"""Short, because pyserial's cancel_read can miss a read that is about to begin."""
WRITE_TIMEOUT_S: Final = 0.25
_SOCKET: Final = "socket://"
_MOST_AT_ONCE: Final = 4096
UNKNOWN_HOLDER: Final = "another program"


@dataclass(slots=True)
class Port:
    """An open port. ``handle`` is a pyserial object; ``pace`` is what its fleet runs at."""

    url: str
    handle: Any
    rate_baud: int
    pace: float

    def read(self) -> bytes:
        """Wait a little for a first byte, then return all that is there; may be empty."""
        first: bytes = self.handle.read(1)
        if not first:
            return b""
        return first + self._more()

    def _more(self) -> bytes:
        """All that is there already, without waiting."""
        if not self.url.startswith(_SOCKET):
            more: bytes = self.handle.read(self.handle.in_waiting or 0)
            return more
        # A socket does not say how much waits, only whether anything does: two bytes a read,
        # a record each, and the console falls seconds behind a busy line (measured).
        self.handle.timeout = 0
        try:
            more = self.handle.read(_MOST_AT_ONCE)
        finally:
            self.handle.timeout = READ_TIMEOUT_S
        return more

    def write(self, data: bytes) -> None:
        """Hand bytes to the port. Raises OSError (pyserial's errors are) where it cannot."""
        self.handle.write(data)

    def close(self) -> None:
        """Close the port; a port that is already gone closes too."""
        try:
            self.handle.close()
        except OSError:
            self.handle = None


def open_port(url: str, rate_baud: int = DEFAULT_RATE_BAUD) -> Port:
    """Open any pyserial URL or device.

    Raises InputError for a bad URL or option, LinkError for a port that is missing, forbidden
    or taken; each text is one line that says what to do.
    """
    import serial

    import sim_link
    from sim_link.errors import SimInputError

    sim_link.register()
    exclusive: dict[str, Any] = {} if "://" in url else {"exclusive": True}
    try:
        handle = serial.serial_for_url(
            url,
            baudrate=rate_baud,
            timeout=READ_TIMEOUT_S,
            write_timeout=WRITE_TIMEOUT_S,
            **exclusive,
        )
    except serial.SerialException as error:
        if isinstance(error.__cause__, SimInputError):
            raise InputError(str(error.__cause__)) from error
        raise _advice(url, error) from error
    except ValueError as error:
        raise InputError(f"{url}: {error}") from error
    except OSError as error:
        raise _advice(url, error) from error
    return Port(url, handle, rate_baud, float(getattr(handle, "pace", 1.0)))


def _advice(url: str, error: OSError) -> LinkError:
    """Turn what pyserial or the system said into what the person should do."""
    number = error.errno if error.errno else _errno_of_text(str(error))
    if number in (errno.ENOENT, errno.ENXIO, errno.ENODEV):
        return LinkError(f"{url}: no such port; `tumblewire ports` lists those that are there")
    if number in (errno.EACCES, errno.EPERM):
        return LinkError(f"{url}: no permission to open it; {permission_advice(url)}")
    if number in (errno.EBUSY, errno.EAGAIN, errno.EWOULDBLOCK):
        return LinkError(f"{url}: in use by {holder_of(url)}; close that first")
    if number == errno.ECONNREFUSED:
        return LinkError(f"{url}: nothing listens there; start the other side first")
    return LinkError(f"{url}: cannot be opened: {' '.join(str(error).split())}")


def _errno_of_text(text: str) -> int:
    """Find the system's error number in a pyserial text that dropped it from ``errno``."""
    lock = "exclusively lock" in text
    numbers = (errno.ENOENT, errno.EACCES, errno.EBUSY, errno.ECONNREFUSED)
    found = [number for number in numbers if os.strerror(number) in text]
    return errno.EBUSY if lock else (found[0] if found else 0)


def permission_advice(device: str) -> str:
    """Say which group to join to open a device, or that no group would help."""
    try:
        import grp

        status = Path(device).stat()
        group = grp.getgrgid(status.st_gid).gr_name
    except (OSError, KeyError, ImportError):
        return "ask who looks after this computer for access"
    if status.st_mode & 0o060 != 0o060:
        return f"its group '{group}' may not use it either; ask who looks after this computer"
    return f"join its group with `sudo usermod -aG {group} $USER`, then log in again"


def holder_of(device: str) -> str:
    """Name the program that has a device, where the system tells (Linux), else say so.

    Whoever holds its lock comes first, since a pseudo-terminal is open at its other end too.
    """
    processes = [*_lockers(device), *_openers(device)]
    for process in processes:
        try:
            command = Path("/proc", process, "comm").read_text().strip()
        except OSError:
            continue  # it ended meanwhile
        return f"{command} (process {process})"
    return UNKNOWN_HOLDER


def _lockers(device: str) -> Iterator[str]:
    """Processes that hold an flock on a device, from the system's table of locks."""
    try:
        inode = os.stat(device).st_ino
        locks = Path("/proc/locks").read_text().splitlines()
    except OSError:
        return
    for line in locks:
        words = line.split()
        if "FLOCK" in words and words[5].endswith(f":{inode}"):
            yield words[4]


def _openers(device: str) -> Iterator[str]:
    """Other processes that have a device open, as far as we may see."""
    target = os.path.realpath(device)
    for link in Path("/proc").glob("[0-9]*/fd/*"):
        try:
            if os.readlink(link) == target and link.parts[2] != str(os.getpid()):
                yield link.parts[2]
        except OSError:
            continue  # the process or the descriptor went away, or is not ours to see
