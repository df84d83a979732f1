"""`tumblewire simulate`: the simulated fleet as a process of its own, for any program.

Owns the announcement, the end by signal, and which of the two ways was asked for.
"""

import signal
import threading
from collections.abc import Mapping
from pathlib import Path
from types import FrameType

from console.commands.output import print_line
from console.errors import InputError, LinkError


def simulate(tcp: str | None, options: Mapping[str, object], tally: Path | None) -> int:
    """Serve until interrupted; the first line on standard output is the device or host:port."""
    from sim_link.errors import SimError
    from sim_link.options import SimOptions
    from sim_link.serve import serve_pty, serve_tcp

    stop = _stop_event()
    try:
        chosen = SimOptions.from_texts(options, "simulate")
        if tcp is None:
            serve_pty(chosen, tally, print_line, stop)
        else:
            host, port = host_and_port(tcp)
            serve_tcp(chosen, host, port, tally, print_line, stop)
    except SimError as error:
        raise InputError(str(error)) from error
    except OSError as error:
        raise LinkError(f"cannot serve the fleet: {error.strerror or error}") from error
    return 0


def host_and_port(text: str) -> tuple[str, int]:
    """Read ``HOST:PORT``. Raises InputError."""
    host, colon, port = text.rpartition(":")
    if not (colon and host and port.isdecimal() and int(port) <= 0xFFFF):
        raise InputError(f"--tcp {text}: HOST:PORT is needed, such as 127.0.0.1:7070")
    return host.strip("[]"), int(port)


def _stop_event() -> threading.Event:
    stop = threading.Event()

    def end(number: int, frame: FrameType | None) -> None:
        del number, frame
        stop.set()

    for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        signal.signal(number, end)
    return stop
