"""`tumblewire live` and `tumblewire replay`: the Fleet screen over an engine or over a log.

Owns how the two are put together. Knows nothing of what the screen draws.
"""

import threading
from pathlib import Path

from console.commands.stopping import SCREEN_SIGNALS, await_confirmation, stop_on_signal
from console.engine import Engine
from console.errors import InputError, LogError
from console.opening import (
    PRACTICE_LINK,
    SessionOptions,
    is_simulated,
    open_session,
    operator_name,
)
from console.orders import complete
from console.paths import default_log_path


def run_live(options: SessionOptions) -> int:
    """Show the console until the person leaves; return the exit status.

    A signal is an all-stop first; then the console ends, and not with success.
    """
    from console.app import FleetApp

    engine = open_session(options)
    signalled = threading.Event()
    try:
        app = FleetApp(
            engine,
            operator=operator_name(options.operator),
            banner="SIMULATED" if all(map(is_simulated, options.links)) else "",
            controls=None,
            completions=lambda text: _complete(engine, text),
        )

        def leave() -> None:
            signalled.set()
            app.exit()

        with stop_on_signal(engine, SCREEN_SIGNALS, then=leave):
            app.run()
        stopped = signalled.is_set() or engine.view().stop.in_force
        confirmed = await_confirmation(engine) if stopped else True
    finally:
        engine.close()
    if not engine.link_open() or engine.log_trouble():
        return 3
    return 1 if signalled.is_set() or not confirmed else 0


def practice_options(links: tuple[str, ...]) -> tuple[str, ...]:
    """The links as given, or the practice fleet where none is."""
    return links or (PRACTICE_LINK,)


def _complete(engine: Engine, text: str) -> list[str]:
    return complete(text, [module.name for module in engine.view().modules])


def run_replay(session_text: str, log: Path | None, speed: float) -> int:
    """Play a recorded session on the same screen. Raises LogError, InputError."""
    from console.app import FleetApp
    from console.replay import ReplayPlayer
    from storage.errors import StorageError, StorageMisuseError
    from storage.reader import LogReader

    try:
        reader = LogReader.open(log or default_log_path())
    except StorageError as error:
        raise LogError(str(error)) from error
    try:
        session = reader.find_session(session_text)
        player = ReplayPlayer(reader.records(session))
        player.set_speed(speed)
        FleetApp(
            player,
            operator=player.view().operator,
            banner="REPLAY",
            controls=player,
            completions=None,
        ).run()
    except StorageMisuseError as error:
        raise InputError(str(error)) from error
    except StorageError as error:
        raise LogError(str(error)) from error
    finally:
        reader.close()
    return 0
