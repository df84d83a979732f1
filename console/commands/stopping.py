"""Signals as an all-stop, and waiting until it is carried out; for every command that drives.

Owns which signals those are and what is said of modules that have not confirmed.
"""

import signal
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from types import FrameType
from typing import Final

from console.commands.output import say
from console.engine import Engine
from console.view import FleetView
from protocol.codes import Activity

HEADLESS_SIGNALS: Final = (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)
SCREEN_SIGNALS: Final = (signal.SIGTERM, signal.SIGHUP)
"""A screen reads its own keys, the interrupt key among them."""
CONFIRM_WAIT_S: Final = 10.0
_GLANCE_S: Final = 0.05
_AT_REST: Final = frozenset({Activity.STILL, Activity.FLASHING})


@contextmanager
def stop_on_signal(
    engine: Engine,
    signals: tuple[signal.Signals, ...] = HEADLESS_SIGNALS,
    then: Callable[[], None] = lambda: None,
) -> Iterator[None]:
    """While inside, each of the signals is an all-stop; ``then`` is called after it."""

    def stop(number: int, frame: FrameType | None) -> None:
        del frame
        engine.stop(signal.Signals(number).name)
        then()

    if threading.current_thread() is not threading.main_thread():
        yield  # only the main thread may set handlers; whoever runs it elsewhere has its own
        return
    before = {number: signal.signal(number, stop) for number in signals}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def await_confirmation(engine: Engine) -> bool:
    """Wait until every module has confirmed the all-stop in force and reports its wheel at rest.

    A confirmation says that a module obeys; the gentle rest takes it a second or more, and is
    part of what the log should hold. Returns whether all have confirmed; says who has not in
    time, and whose wheel still turns.
    """
    gate = threading.Event()
    for _ in range(round(CONFIRM_WAIT_S / _GLANCE_S)):
        view = engine.view()
        if _confirmed(view) and not _turning(view):
            return True
        if not engine.link_open():
            break
        gate.wait(_GLANCE_S)
    view = engine.view()
    if _confirmed(view):
        say(f"tumblewire: all-stop confirmed, but not yet at rest: {', '.join(_turning(view))}")
        return True
    missing = [each.name for each in view.modules if each.module in view.stop.missing]
    say(
        f"tumblewire: all-stop not confirmed by {', '.join(missing) or 'anybody'}. "
        "Keep away: their wheels may be turning"
    )
    return False


def _confirmed(view: FleetView) -> bool:
    return view.stop.in_force and not view.stop.missing


def _turning(view: FleetView) -> list[str]:
    return [each.name for each in view.modules if each.wheel_rpm or each.activity not in _AT_REST]
