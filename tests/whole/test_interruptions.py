"""What cuts a session short: a signal, a pulled cable, a killed console, a full disk."""

import json
import resource
import signal
import subprocess
from pathlib import Path

import pytest

from tests.support.programs import (
    PACE,
    RADIO,
    ask,
    commands_logged,
    run_json,
    served,
    start,
    wait_for,
)

UNENDED = "SELECT count(*) FROM commands WHERE ending IS NULL OR final = 0"


def sheet_on(link: str, log: Path, pace: int = PACE) -> subprocess.Popen[str]:
    words = ("run", "speeds", "--link", link, "--pace", str(pace), "--log", str(log), "--json")
    return start(*words)


def wait_for_trials(log: Path, count: int) -> None:
    wait_for(lambda: commands_logged(log) >= count, f"{count} commands in the log")


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGHUP])
def test_a_signal_to_a_run_is_an_all_stop(number: signal.Signals, tmp_path: Path) -> None:
    log = tmp_path / "log.db"
    with served(tmp_path) as fleet:
        process = sheet_on(fleet.link, log)
        wait_for_trials(log, 7)
        process.send_signal(number)
        out, err = process.communicate(timeout=60)
        assert process.returncode == 1, err
        document = json.loads(out)
        assert document["stopped"] == "all-stop 1"
        assert document["started"] < 60
        assert sum(document["ended"].values()) == document["started"]
        assert ask(log, "SELECT detail FROM alarms") == [(f"number 1, by {number.name}",)]
        assert ask(log, UNENDED) == [(0,)]
        assert ask(log, "SELECT ending FROM sessions") == [("closed",)]
        blocked = run_json(
            "run", "speeds", "--link", fleet.link, "--pace", str(PACE), "--log", str(log), status=1
        )
        assert blocked["stopped"] == "all-stop 1"  # still in force for the next console
        assert blocked["started"] == 0


def test_a_pulled_cable_ends_a_run_in_order(tmp_path: Path) -> None:
    log = tmp_path / "log.db"
    with served(tmp_path) as fleet:
        process = sheet_on(fleet.link, log)
        wait_for_trials(log, 7)
        fleet.process.kill()
        out, err = process.communicate(timeout=60)
    assert process.returncode == 3, err
    assert json.loads(out)["stopped"] == "link lost"
    assert ask(log, UNENDED) == [(0,)]
    assert ask(log, "SELECT ending FROM sessions") == [("closed",)]
    assert ("lost",) in ask(log, "SELECT state FROM link_events")


def test_a_killed_console_leaves_no_command_out_of_the_log(tmp_path: Path) -> None:
    log = tmp_path / "log.db"
    with served(tmp_path, *RADIO) as fleet:
        process = sheet_on(fleet.link, log)
        wait_for_trials(log, 12)
        process.kill()
        process.communicate()
        assert ask(log, "PRAGMA integrity_check") == [("ok",)]
        done = {(each["identity"], each["boot"], each["number"]) for each in fleet.carried_out()}
        assert done
        assert done <= set(ask(log, "SELECT identity, boot, number FROM commands"))
        again = run_json(
            "run", "speeds", "--link", fleet.link, "--pace", str(PACE), "--log", str(log)
        )
        assert sum(again["ended"].values()) == 60
        assert ask(log, "SELECT ending FROM sessions ORDER BY session") == [
            ("cut off",),
            ("closed",),
        ]
        epochs = [epoch for (epoch,) in ask(log, "SELECT epoch FROM sessions ORDER BY session")]
        carried_out = [
            (each["identity"], each["boot"], each["number"]) for each in fleet.carried_out()
        ]
        assert len(carried_out) >= 60
        assert epochs[1] >= epochs[0]


def test_a_disk_that_fills_during_a_run(tmp_path: Path) -> None:
    """A limit on the size of files stands for the full disk: SQLite sees the same failure."""
    log = tmp_path / "log.db"

    def small_files() -> None:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (300_000, 300_000))

    with served(tmp_path) as fleet:
        words = ("run", "speeds", "--link", fleet.link, "--pace", str(PACE), "--log", str(log))
        process = start(*words, "--json", preexec_fn=small_files)
        out, err = process.communicate(timeout=120)
        assert process.returncode == 3, (out, err)
        assert "Traceback" not in err
        assert "full" in err or "failed" in err
        done = {(each["identity"], each["boot"], each["number"]) for each in fleet.carried_out()}
        assert done
        assert done <= set(ask(log, "SELECT identity, boot, number FROM commands"))
        assert ask(log, "PRAGMA integrity_check") == [("ok",)]
