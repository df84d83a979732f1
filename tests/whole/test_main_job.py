"""The main job, over real links: sixty pivots on a bad radio, each exactly once, all in the log."""

import shutil
import subprocess
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from tests.support.programs import PACE, RADIO, Fleet, ask, run_json, served

KNOWN = {"landed", "short", "over", "stuck", "adrift"}
TRIALS = """
SELECT modules.name, commands.trial, motions.outcome
FROM motions JOIN commands USING (session, command)
JOIN modules ON modules.session = motions.session AND modules.module = motions.module
WHERE motions.session = ? ORDER BY commands.trial
"""


@dataclass(frozen=True, slots=True)
class Done:
    """One sheet carried out: the document it ended with, its log, and the modules' own tally."""

    document: dict[str, Any]
    log: Path
    tally: list[dict[str, Any]]

    def outcomes(self) -> list[tuple[Any, ...]]:
        """Module, trial and outcome of every trial."""
        return ask(self.log, TRIALS, self.document["session"])


def carry_out(folder: Path, fleet: Fleet) -> Done:
    log = folder / "log.db"
    words = ("run", "speeds", "--link", fleet.link, "--pace", str(PACE), "--log", str(log))
    return Done(run_json(*words), log, fleet.carried_out())


def over_sim(folder: Path, seed: int) -> Done:
    log = folder / "log.db"
    url = f"sim://?seed={seed}&loss=0.1&damage=0.02&repeat=0.05&pace={PACE}"
    return Done(run_json("run", "speeds", "--link", url, "--log", str(log)), log, [])


@pytest.fixture(scope="module")
def over_terminal(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Done]:
    folder = tmp_path_factory.mktemp("pty")
    with served(folder, "--seed", "7", *RADIO) as fleet:
        yield carry_out(folder, fleet)


def test_every_trial_ends_in_a_known_outcome(over_terminal: Done) -> None:
    document = over_terminal.document
    assert (document["planned"], document["started"]) == (60, 60)
    assert sum(document["ended"].values()) == 60
    assert {name for name, count in document["ended"].items() if count} <= KNOWN
    assert document["stopped"] is None
    assert document["simulated"] is True
    assert document["commands"] == 60
    assert document["resends"] > 0


def test_each_command_was_carried_out_once_and_is_in_the_log(over_terminal: Done) -> None:
    tally = [(each["identity"], each["boot"], each["number"]) for each in over_terminal.tally]
    logged = ask(over_terminal.log, "SELECT identity, boot, number FROM commands")
    assert len(tally) == 60
    assert Counter(tally) == Counter(logged)
    assert set(Counter(tally).values()) == {1}


def test_the_log_answers_success_by_module_and_speed(over_terminal: Done) -> None:
    rows = ask(over_terminal.log, "SELECT module, speed_rpm, trials, landed FROM success")
    assert len(rows) == 18
    assert sum(row[2] for row in rows) == 60
    assert sum(row[3] for row in rows) == over_terminal.document["ended"]["landed"]
    by_module = Counter(each["name"] for each in over_terminal.tally)
    assert {row[0] for row in rows} == set(by_module)
    assert set(by_module.values()) == {10}


def test_the_sqlite3_shell_answers_too(over_terminal: Done) -> None:
    shell = shutil.which("sqlite3")
    if shell is None:
        pytest.skip("needs the sqlite3 shell")
    words = [shell, str(over_terminal.log), "select module, speed_rpm, rate from success"]
    done = subprocess.run(words, capture_output=True, text=True, check=True)
    assert len(done.stdout.splitlines()) == 18
    assert "alder|4700|1.0" in done.stdout


def test_success_rises_with_speed_around_the_predicted_threshold(over_terminal: Done) -> None:
    from math import pi

    from sim_link.fleet_file import load_fleet
    from sim_link.mechanics import pivot_threshold

    rates = dict(
        ask(
            over_terminal.log,
            "SELECT speed_rpm, sum(landed) * 1.0 / sum(trials) FROM success GROUP BY speed_rpm",
        )
    )
    assert rates[4000] <= 0.2
    assert rates[4000] < rates[4350] < rates[4700]
    assert rates[4700] >= 0.8
    for kind in {module.kind for module in load_fleet(None).modules}:
        threshold_rpm = pivot_threshold(kind).w_min_rad_s * 60 / (2 * pi)
        assert 4000 < threshold_rpm < 4700


def test_over_tcp_with_the_same_outcomes(over_terminal: Done, tmp_path: Path) -> None:
    with served(tmp_path, "--seed", "7", *RADIO, tcp=True) as fleet:
        done = carry_out(tmp_path, fleet)
    assert done.outcomes() == over_terminal.outcomes()
    assert len(done.tally) == 60


def test_over_sim_with_the_same_outcomes_and_again(over_terminal: Done, tmp_path: Path) -> None:
    first, second, other = (
        over_sim(tmp_path / name, seed) for name, seed in (("a", 7), ("b", 7), ("c", 8))
    )
    assert first.outcomes() == over_terminal.outcomes()
    assert second.outcomes() == first.outcomes()
    assert other.outcomes() != first.outcomes()
    assert {outcome for _, _, outcome in other.outcomes()} <= KNOWN


SHEET = """
title = "far too fast"
modules = ["birch", "elm", "alder"]
motion = "pivot"
speeds_rpm = [8800]
repeats = 2
at_once = 3
pause_s = 1.0
"""


def test_the_free_kind_goes_over_when_far_too_fast(tmp_path: Path) -> None:
    sheet = tmp_path / "fast.toml"
    sheet.write_text(SHEET)
    log = tmp_path / "log.db"
    run_json("run", str(sheet), "--link", f"sim://?seed=3&pace={PACE}", "--log", str(log))
    outcomes = ask(log, "SELECT module, outcome FROM motions_named ORDER BY module, outcome")
    assert outcomes == [("alder", "landed")] * 2 + [("birch", "over")] * 2 + [("elm", "over")] * 2
