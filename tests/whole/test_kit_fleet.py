"""Modules in C alone and simulated ones, one fleet: the real program runs and shows both.

The C modules are processes of their own on pseudo-terminals, and their tallies are their witness;
nothing of ours stands between them and the console but bytes.
"""

import json
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from tests.support.kit_build import built
from tests.support.programs import ask, run_json, wait_for
from tests.support.terminal import terminal

KIT_NAMES = ("oak", "oak-2")
SHEET = """
title = "Two sorts of modules"
modules = ["oak", "oak-2", "alder", "birch"]
motion = "pivot"
setting = "floor"
speeds_rpm = [6000]
repeats = 2
order = "as written"
direction = "turnabout"
at_once = 4
"""


@pytest.fixture(scope="module")
def program(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return Path(built(tmp_path_factory, "tw_host"))


@contextmanager
def kit_fleet(program: Path, folder: Path, *options: str) -> Iterator[str]:
    """Two C modules on a pseudo-terminal; gives its path."""
    words = [program, "--pty", "--modules", "2", "--name", "oak", "--kind", "oak"]
    words += ["--address", "0x40", "--seed", "5", "--tally", folder / "kit.jsonl", *options]
    process = subprocess.Popen(words, stdout=subprocess.PIPE, text=True)  # type: ignore[arg-type]
    assert process.stdout is not None
    try:
        yield process.stdout.readline().strip()
    finally:
        process.terminate()
        process.communicate(timeout=10)


def tally(folder: Path) -> list[tuple[str, int]]:
    """Name and number of each pivot that the C modules carried out."""
    lines = [json.loads(line) for line in (folder / "kit.jsonl").read_text().splitlines()]
    return [(line["name"], line["number"]) for line in lines if line["motion"] == "pivot"]


def test_a_sheet_over_both_carries_each_trial_out_once(program: Path, tmp_path: Path) -> None:
    sheet, log = tmp_path / "both.toml", tmp_path / "log.db"
    sheet.write_text(SHEET)
    with kit_fleet(program, tmp_path, "--loss", "0.1", "--repeat", "0.1") as path:
        links = ("--link", path, "--link", "sim://?seed=7&loss=0.1")
        document = run_json("run", str(sheet), *links, "--log", str(log))
    assert document["planned"] == document["started"] == 8
    assert document["stopped"] is None
    assert document["simulated"] is True
    assert document["ended"]["unseen"] == document["ended"]["refused"] == 0
    # A computer that stalls for a second lets a permit lapse: then a motion is cut, and not done.
    rows = ask(
        log,
        "SELECT name, number, outcome FROM commands JOIN modules USING (session, module)"
        " JOIN motions USING (session, command) WHERE name LIKE 'oak%' ORDER BY name, number",
    )
    assert len(rows) == 4
    done = [(name, number) for name, number, outcome in rows if outcome != "cut"]
    assert sorted(tally(tmp_path)) == done
    assert {outcome for _, _, outcome in rows} <= {"landed", "short", "over", "cut"}
    simulated = ask(log, "SELECT name, simulated FROM modules WHERE name LIKE 'oak%' ORDER BY 1")
    assert simulated == [("oak", 1), ("oak-2", 1)]


@pytest.mark.terminal
def test_the_screen_shows_and_stops_both(program: Path, tmp_path: Path) -> None:
    log = tmp_path / "log.db"
    with kit_fleet(program, tmp_path) as path:
        words = ("live", "--link", path, "--link", "sim://?seed=7", "--log", str(log))
        with terminal(*words) as shown:
            shown.until_ready((*KIT_NAMES, "alder"))
            drivable = "SELECT count(DISTINCT module) FROM telemetry WHERE flags & 32"
            wait_for(lambda: ask(log, drivable) == [(10,)], "a permit for all")
            shown.type("oak, alder spin at 3000 for 30 s")
            shown.wait("order 1")
            turning = "SELECT count(DISTINCT module) FROM telemetry WHERE abs(wheel_rpm) > 2900"
            wait_for(lambda: ask(log, turning) == [(2,)], "both wheels at speed")
            shown.keys("C-g")
            shown.wait("confirmed 10/10")
            last = (
                "SELECT name, wheel_rpm FROM (SELECT module, wheel_rpm, max(t_ns) FROM telemetry"
                " GROUP BY module) JOIN modules USING (module) WHERE wheel_rpm != 0"
            )
            wait_for(lambda: ask(log, last) == [], "every wheel at rest")
