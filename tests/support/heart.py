"""A heart for engines that no screen and no sheet leads: without one the drive permits lapse."""

import threading
from collections.abc import Iterator
from contextlib import contextmanager

from console.engine import Engine
from console.view import FleetView
from protocol.codes import Flags

BEAT_S = 0.02


@contextmanager
def beating(engine: Engine) -> Iterator[None]:
    """Give signs of life until the end."""
    ended = threading.Event()

    def beat() -> None:
        while not ended.wait(BEAT_S):
            engine.beat()

    thread = threading.Thread(target=beat, name="heart", daemon=True)
    thread.start()
    try:
        yield
    finally:
        ended.set()
        thread.join()


def drivable(view: FleetView, modules: int = 8) -> bool:
    """Whether so many modules are known in full, follow this console and hold its permit."""
    return len(view.modules) >= modules and all(
        module.kind
        and module.battery_V
        and module.console == view.console
        and module.clock_bound_ms is not None
        and module.flags & Flags.PERMITTED
        for module in view.modules
    )
