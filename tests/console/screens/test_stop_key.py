"""The all-stop key works wherever the focus is; help, quitting and the palette do not shadow it.

What a key must not be comes from POSIX.1-2017, General Terminal Interface (section 11.1.9): the
special characters INTR, QUIT, SUSP, EOF, START, STOP; and from ASCII (ECMA-6): Ctrl with a
letter is that letter's code less 64, so ctrl+i, j, m, h and [ are Tab, LF, CR, BS and ESC.
"""

import os
import shutil
import subprocess
import sys
import time
import uuid
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from textual.pilot import Pilot
from textual.widgets import Input

from console.app import FleetApp
from console.errors import LinkError
from console.widgets.status import STOP_KEY
from tests.support.fake_fleet import (
    FakeFleet,
    busy_view,
    eight,
    fleet_view,
    line_with,
    look,
    play,
    screen_text,
)

ROOT = Path(__file__).parents[3]


def test_the_key_is_one_byte_with_no_other_meaning_to_a_terminal() -> None:
    modifier, letter = STOP_KEY.split("+")
    assert modifier == "ctrl"
    # POSIX specials by their usual keys: INTR c, QUIT \, SUSP z, EOF d, START q, STOP s.
    assert letter not in "czdqs\\"
    # ASCII: Tab i, line feed j, carriage return m, backspace h, escape [.
    assert letter not in "ijmh["
    # Common practice: prefixes of tmux (b) and screen (a).
    assert letter not in "ab"


def test_the_order_line_has_no_use_for_the_key() -> None:
    used = {key for binding in Input.BINDINGS for key in getattr(binding, "key", "").split(",")}
    assert "ctrl+a" in used
    assert STOP_KEY not in used


@pytest.mark.parametrize("key", [STOP_KEY, "ctrl+shift+g"])
def test_from_the_order_line_with_an_order_half_typed(key: str) -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("e", "l", "m", key)
        await look(app, pilot)
        assert source.stops == ["key"]
        line_with(app, "ALL-STOP 1 IN FORCE")
        line_with(app, "ok: all-stop given")
        assert "elm" in line_with(app, "order>")

    play(source, steps)


def test_from_the_table() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(_app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("tab", STOP_KEY)
        assert source.stops == ["key"]

    play(source, steps)


def test_from_the_help_which_shows_that_it_is_in_force() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("f1")
        await look(app, pilot)
        assert "KEYS" in screen_text(app)
        await pilot.press(STOP_KEY)
        await look(app, pilot)
        assert source.stops == ["key"]
        line_with(app, "ALL-STOP 1 IN FORCE")
        await pilot.press("escape")
        await look(app, pilot)
        line_with(app, "order>")

    play(source, steps)


def test_from_the_dialog_that_asks_before_quitting() -> None:
    source = FakeFleet(busy_view())

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+q")
        await look(app, pilot)
        line_with(app, "2 wheels turn: birch, elm")
        await pilot.press(STOP_KEY)
        await look(app, pilot)
        assert source.stops == ["key"]
        line_with(app, "ALL-STOP 1 IN FORCE")
        line_with(app, "2 wheels turn: birch, elm")

    play(source, steps)


def test_from_the_palette() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+p")
        await look(app, pilot)
        assert "Search for commands" in screen_text(app)
        await pilot.press(STOP_KEY)
        await look(app, pilot)
        assert source.stops == ["key"]
        line_with(app, "ALL-STOP 1 IN FORCE")

    play(source, steps)


def test_a_source_that_cannot_stop_says_so() -> None:
    class Unable(FakeFleet):
        def stop(self, source: str) -> None:
            raise LinkError("no link is open: switch the modules off by hand")

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press(STOP_KEY)
        await pilot.pause()
        line_with(app, "refused: no link is open: switch the modules off by hand")

    play(Unable(fleet_view(*eight())), steps)


def test_a_replay_never_transmits_a_stop() -> None:
    source = FakeFleet(fleet_view(*eight()))

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press(STOP_KEY)
        await pilot.pause()
        assert source.stops == []
        line_with(app, "a replay never transmits; press it in the live console")

    play(source, steps, banner="REPLAY")


def test_quitting_asks_nothing_where_no_wheel_turns() -> None:
    async def steps(_app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+q")
        await pilot.pause()

    app = play(FakeFleet(fleet_view(*eight())), steps)
    assert app.return_code == 0
    assert not app.is_running


def test_rest_first_waits_for_the_wheels_and_then_leaves() -> None:
    source = FakeFleet(busy_view())

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+q")
        await look(app, pilot)
        await pilot.press("r")
        await look(app, pilot)
        assert source.orders == ["all rest"]
        line_with(app, "Waiting for the wheels to rest.")
        source.change(2, wheel_rpm=0, activity=0)
        await look(app, pilot)
        line_with(app, "1 wheel turns: elm")
        assert app._exit is False
        source.change(4, wheel_rpm=0, activity=0)
        await look(app, pilot)
        assert app._exit is True

    play(source, steps)


def test_a_person_may_stay_or_leave_at_once() -> None:
    source = FakeFleet(busy_view())

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+q")
        await look(app, pilot)
        await pilot.press("escape")
        await look(app, pilot)
        assert "wheels turn" not in screen_text(app)
        await pilot.press("ctrl+q")
        await look(app, pilot)
        await pilot.press("right", "enter")
        await look(app, pilot)
        assert app._exit is True
        assert source.orders == []

    play(source, steps)


def test_a_refused_rest_is_shown_in_the_dialog() -> None:
    source = FakeFleet(busy_view())
    source.refuse = "no link is open"

    async def steps(app: FleetApp, pilot: "Pilot[None]") -> None:
        await pilot.press("ctrl+q")
        await look(app, pilot)
        await pilot.press("r")
        await look(app, pilot)
        line_with(app, "refused: no link is open")

    play(source, steps)


SCRIPT = """
from console.app import FleetApp
from tests.support.fake_fleet import FakeFleet, busy_view
source = FakeFleet(busy_view())
FleetApp(source, operator="Ida", clock_ns=lambda: 0).run()
print("stops given:", len(source.stops))
"""


@pytest.fixture
def tmux(tmp_path: Path) -> Iterator[Callable[..., str]]:
    """A terminal of its own with the app in it; called with tmux's arguments."""
    if shutil.which("tmux") is None:
        pytest.skip("needs tmux")
    name = f"tumblewire-{uuid.uuid4().hex[:12]}"
    script = tmp_path / "screen.py"
    script.write_text(SCRIPT, encoding="utf-8")

    def call(*arguments: str) -> str:
        done = subprocess.run(
            ["tmux", "-f", "/dev/null", "-L", name, *arguments],
            check=True,
            capture_output=True,
            text=True,
            env={**os.environ, "PYTHONPATH": str(ROOT)},
        )
        return done.stdout

    command = f"{sys.executable} {script}; sleep 60"
    call("new-session", "-d", "-x", "80", "-y", "24", command)
    yield call
    call("kill-server")


def seen(tmux: Callable[..., str], piece: str, seconds: float = 15.0) -> str:
    """Wait until ``piece`` stands on the terminal; return the terminal's text."""
    until = time.monotonic() + seconds
    while time.monotonic() < until:
        text = tmux("capture-pane", "-p")
        if piece in text:
            return text
        time.sleep(0.05)
    raise AssertionError(f"{piece!r} did not come:\n{text}")


@pytest.mark.terminal
def test_in_a_real_terminal_from_order_line_help_and_dialog(tmux: Callable[..., str]) -> None:
    seen(tmux, "ctrl+g ALL-STOP")
    tmux("send-keys", "elm", "C-g")
    seen(tmux, "ALL-STOP 1 IN FORCE")
    tmux("send-keys", "F1")
    seen(tmux, "WHEN THE SCREEN IS FROZEN")
    tmux("send-keys", "C-g")
    seen(tmux, "ALL-STOP 2 IN FORCE")
    tmux("send-keys", "F1")
    seen(tmux, "order> elm")
    tmux("send-keys", "C-q")
    seen(tmux, "2 wheels turn")
    tmux("send-keys", "C-g")
    seen(tmux, "ALL-STOP 3 IN FORCE")
    tmux("send-keys", "l")
    seen(tmux, "stops given: 3")
