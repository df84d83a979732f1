"""After a session: the review names rates with intervals, a replay ends where live did, and a
rebuild gives back what was deleted."""

import math
import re
import sqlite3
from dataclasses import replace
from pathlib import Path

import pytest

from console.opening import SessionOptions, open_session
from console.replay import ReplayPlayer
from console.view import FleetView
from storage.reader import DERIVED_TABLES, LogReader
from tests.support.heart import beating, drivable
from tests.support.programs import run, run_json, wait_for
from tests.support.terminal import terminal

LINK = "sim://?seed=9&loss=0.1&damage=0.02&repeat=0.05&pace=10"


@pytest.fixture(scope="module")
def log(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("review") / "log.db"
    run_json("run", "speeds", "--link", LINK, "--log", str(path))
    return path


def wilson(landed: int, trials: int) -> tuple[float, float]:
    """Wilson (1927), J. Am. Stat. Assoc. 22, 209: the score interval, written out by hand."""
    z = 1.959963984540054  # the normal's 97.5 % point, standard tables
    p = landed / trials
    middle = p + z * z / (2 * trials)
    half = z * math.sqrt(p * (1 - p) / trials + z * z / (4 * trials * trials))
    width = 1 + z * z / trials
    return (middle - half) / width, (middle + half) / width


def test_the_review_names_each_modules_rate_and_interval(log: Path) -> None:
    document = run_json("review", "--log", str(log))
    modules = {group["module"]: group for group in document["modules"]}
    assert sorted(modules) == ["alder", "birch", "cedar", "elm", "hazel", "larch"]
    for group in document["groups"] + document["modules"]:
        low, high = wilson(group["landed"], group["trials"])
        assert group["low"] == pytest.approx(low, abs=1e-9)
        assert group["high"] == pytest.approx(high, abs=1e-9)
        assert group["simulated"] is True
    assert sum(group["trials"] for group in document["groups"]) == 60


def test_the_review_as_text_says_how_many_trials_each_figure_rests_on(log: Path) -> None:
    result = run("review", "--log", str(log), "--by", "module")
    [line] = [each for each in result.stdout.splitlines() if each.startswith("birch")]
    assert line.split()[1] == "10"
    assert "SIMULATED" in result.stdout


def dump(log: Path) -> dict[str, list[tuple[object, ...]]]:
    reader = LogReader.open(log)
    try:
        return {table: reader.table(table, 1) for table in DERIVED_TABLES}
    finally:
        reader.close()


def test_a_rebuild_gives_back_what_was_deleted(log: Path) -> None:
    before = dump(log)
    connection = sqlite3.connect(log)
    for table in DERIVED_TABLES:
        connection.execute(f"DELETE FROM {table}")
    connection.commit()
    connection.close()
    assert not any(dump(log).values())
    counts = run_json("rebuild", "last", "--log", str(log))["rows"]
    after = dump(log)
    assert after == before
    assert counts["motions"] == 60
    assert counts["telemetry"] > 100


# -- replay -----------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def live_end(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, FleetView]:
    """A session on a bad radio, with a stop in it, and its last picture."""
    path = tmp_path_factory.mktemp("replay") / "log.db"
    engine = open_session(SessionOptions((LINK,), path, operator="Ida"))
    with beating(engine):
        wait_for(lambda: drivable(engine.view()), "all")
        engine.order("all pivot forward at 4350")
        wait_for(lambda: all(module.outcomes for module in engine.view().modules), "outcomes")
        engine.order("all spin at 3000 for 20 s")
        engine.stop("test")
        wait_for(lambda: engine.view().stop.in_force and not engine.view().stop.missing, "stopped")
        wait_for(lambda: not any(module.doing for module in engine.view().modules), "all over")
    engine.close()
    return path, engine.view()


def test_a_replay_ends_in_the_same_state(live_end: tuple[Path, FleetView]) -> None:
    path, live = live_end
    reader = LogReader.open(path)
    player = ReplayPlayer(reader.records(1))
    reader.close()
    player.seek_end()
    assert replace(player.view(), t_ns=0) == replace(live, t_ns=0)
    assert live.stop.in_force
    assert len(live.modules) == 8


@pytest.mark.terminal
def test_a_replay_shows_the_end_on_the_same_screen(live_end: tuple[Path, FleetView]) -> None:
    path, live = live_end
    with terminal("replay", "last", "--log", str(path), "--speed", "100") as shown:
        shown.wait("REPLAY")
        shown.keys("F5")
        shown.wait("ALL-STOP 1 IN FORCE")
        shown.wait("confirmed 8/8")
        for module in live.modules:
            glyph = {"landed": "+", "short": "<"}[module.outcomes[0]]
            end = re.compile(rf" {module.face_up} level .* {re.escape(glyph)}( |$)")
            shown.until(lambda e=end, m=module: e.search(shown.row(m.name)), module.name)
        shown.keys("C-q")
        shown.wait("ended with 0")
