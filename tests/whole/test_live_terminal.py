"""The console in a real terminal: keys in, text out, and what the log says of it."""

import os
import re
import signal
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.support.programs import ask, served, wait_for
from tests.support.terminal import Terminal, terminal

pytestmark = pytest.mark.terminal

NAMES = ("alder", "birch", "cedar", "elm", "hazel", "larch", "maple", "rowan")
FACES = """
SELECT name, face_up FROM telemetry JOIN modules USING (session, module)
WHERE flags & 4 = 0 GROUP BY name, face_up ORDER BY name
"""


@pytest.fixture
def log(tmp_path: Path) -> Path:
    return tmp_path / "log.db"


@pytest.fixture
def live(log: Path) -> Iterator[Terminal]:
    with terminal("live", "--log", str(log), "--operator", "Ida") as shown:
        shown.until_ready(NAMES)
        yield shown


def rpm(row: str) -> int:
    """Wheel speed as a module's line shows it."""
    found = re.search(r"(-?\d+)/\d+", row)
    assert found, row
    return abs(int(found.group(1)))


def posture(row: str) -> str:
    found = re.search(r"\d\.\d\d V +(\S+ \S+)", row)
    assert found, row
    return found.group(1)


def test_an_order_typed_makes_a_module_pivot(live: Terminal, log: Path) -> None:
    assert "SIMULATED" in live.screen()
    before = posture(live.row("birch"))
    live.type("birch pivot forward at 5200")
    live.wait("order 1")
    live.until(lambda: "+" in live.row("birch"), "an outcome in birch's line")
    live.until(lambda: posture(live.row("birch")) not in (before, "- tilted"), "a new posture")
    motions = wait_for(
        lambda: ask(log, "SELECT module, outcome, operator FROM motions_named JOIN sessions"
                         " USING (session)"), "the motion in the log"
    )  # fmt: skip
    assert motions == [("birch", "landed", "Ida")]
    live.keys("C-q")
    live.wait("ended with 0")
    assert ask(log, "SELECT ending FROM sessions") == [("closed",)]


def test_all_stop_rests_every_wheel_and_none_moves(live: Terminal, log: Path) -> None:
    before = {name: posture(live.row(name)) for name in NAMES}
    live.type("all spin at 3000 for 60 s")
    live.until(lambda: all(rpm(live.row(name)) > 2500 for name in NAMES), "all wheels turning")
    live.keys("C-g")
    live.wait("ALL-STOP 1 IN FORCE")
    live.wait("confirmed 8/8")
    live.until(lambda: all(rpm(live.row(name)) == 0 for name in NAMES), "all wheels at rest")
    assert {name: posture(live.row(name)) for name in NAMES} == before
    live.type("birch pivot forward at 5200")
    live.wait("all-stop 1 is in force")
    live.type("clear 1")
    live.wait("all-stop not in force")
    live.keys("C-q")
    live.wait("ended with 0")
    assert [name for name, _ in ask(log, FACES)] == sorted(NAMES)  # one face each, throughout
    assert ask(log, "SELECT alarm FROM alarms ORDER BY t_ns") == [("all-stop",), ("clear",)]
    assert ask(log, "SELECT count(*) FROM motions") == [(0,)]


def test_the_all_stop_key_works_with_half_an_order_typed(live: Terminal) -> None:
    live.keys("-l", "birch piv")
    live.keys("C-g")
    live.wait("ALL-STOP 1 IN FORCE")


def test_a_terminated_console_stops_the_fleet_first(tmp_path: Path, log: Path) -> None:
    with (
        served(tmp_path, pace=1) as fleet,
        terminal("live", "--link", fleet.link, "--log", str(log)) as shown,
    ):
        shown.until_ready(NAMES)
        shown.type("all spin at 3000 for 60 s")
        shown.until(lambda: all(rpm(shown.row(name)) > 2000 for name in NAMES), "wheels turning")
        os.kill(child_of(shown.process()), signal.SIGTERM)
        shown.wait("ended with 1")
        assert ask(log, "SELECT detail FROM alarms") == [("number 1, by SIGTERM",)]
        stopped = ask(log, "SELECT count(*) FROM commands WHERE ending = 'cut'")
        with terminal("live", "--link", fleet.link, "--log", str(log)) as again:
            again.wait("ALL-STOP 1 IN FORCE")
            again.until(lambda: all(rpm(again.row(name)) == 0 for name in NAMES), "wheels at rest")
        assert stopped[0][0] <= 8


def child_of(process: int) -> int:
    """The program below tmux's shell."""
    found = subprocess.run(
        ("pgrep", "-P", str(process)), capture_output=True, text=True, check=False
    )
    return int(found.stdout.split()[0]) if found.stdout.split() else process
