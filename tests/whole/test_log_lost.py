"""A log that cannot be written, before and during a run: one line, nothing half done, and no
command that is not in it.

A small file system in memory stands for the disk; what it says when it is full (ENOSPC) is what
any disk says. Where it cannot be had, a limit on the size of files stands in for it.
"""

import json
import os
import resource
import shutil
import signal
import subprocess
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from tests.support.programs import (
    PACE,
    as_ordinary_user,
    ask,
    commands_logged,
    run,
    run_json,
    served,
    start,
    wait_for,
)

SHEET = """
title = "one"
modules = ["alder"]
motion = "pivot"
speeds_rpm = [4700]
repeats = 1
"""
FAST = "sim://?pace=50"


@dataclass(frozen=True, slots=True)
class Disk:
    """A folder on a disk of its own."""

    folder: Path

    def fill(self) -> None:
        """Leave no room for another block."""
        with (self.folder / "ballast").open("ab", buffering=0) as ballast:
            try:
                while True:
                    ballast.write(bytes(4096))
            except OSError:
                return


@pytest.fixture
def disk(tmp_path: Path) -> Iterator[Disk]:
    """A disk of 600 kB."""
    folder = tmp_path / "disk"
    folder.mkdir()
    words = ("mount", "-t", "tmpfs", "-o", "size=600k", "tumblewire-test", str(folder))
    if shutil.which("mount") is None or subprocess.run(words, check=False).returncode:
        pytest.skip("needs the right to mount a file system")
    try:
        yield Disk(folder)
    finally:
        subprocess.run(("umount", "--lazy", str(folder)), check=True)


@pytest.fixture
def sheet(tmp_path: Path) -> Path:
    path = tmp_path / "one.toml"
    path.write_text(SHEET)
    return path


def refusal(log: Path, sheet: Path, **more: Any) -> str:
    """The one line with which a run ends whose log cannot be had."""
    result = run("run", str(sheet), "--link", FAST, "--log", str(log), **more)
    assert result.returncode == 3
    assert result.stdout == ""
    [line] = result.stderr.splitlines()
    assert str(log) in line
    return line


def limited(size_bytes: int) -> Callable[[], None]:
    """Run in the child before the program: no file may become larger."""

    def limit() -> None:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (size_bytes, size_bytes))

    return limit


def test_a_full_disk_before_the_first_session_leaves_no_file(disk: Disk, sheet: Path) -> None:
    disk.fill()
    assert "full; free some space" in refusal(disk.folder / "log.db", sheet)
    assert [each.name for each in disk.folder.iterdir()] == ["ballast"]


def test_files_that_may_not_grow_leave_no_file(tmp_path: Path, sheet: Path) -> None:
    folder = tmp_path / "logs"
    folder.mkdir()
    refusal(folder / "log.db", sheet, preexec_fn=limited(20_000))
    assert list(folder.iterdir()) == []


def test_a_full_disk_adds_no_session_and_what_is_there_can_be_read(disk: Disk, sheet: Path) -> None:
    log = disk.folder / "log.db"
    run_json("run", str(sheet), "--link", FAST, "--log", str(log))
    disk.fill()
    assert "full; free some space" in refusal(log, sheet)
    [session] = run_json("sessions", "--log", str(log))["sessions"]
    assert (session["session"], session["ending"]) == (1, "closed")
    [group] = run_json("review", "--log", str(log), "--by", "module")["groups"]
    assert group["module"] == "alder"
    (disk.folder / "ballast").unlink()
    document = run_json("run", str(sheet), "--link", FAST, "--log", str(log))
    assert document["session"] == 2


def test_a_read_only_log_is_refused_and_left_alone(tmp_path: Path, sheet: Path) -> None:
    log = tmp_path / "log.db"
    run_json("run", str(sheet), "--link", FAST, "--log", str(log))
    log.chmod(0o444)
    before = log.read_bytes()
    assert "read-only" in refusal(log, sheet, preexec_fn=as_ordinary_user())
    assert log.read_bytes() == before
    assert sorted(each.name for each in tmp_path.iterdir()) == ["log.db", "one.toml"]


def carried_out_but_not_logged(tally: list[dict[str, Any]], log: Path) -> set[tuple[Any, ...]]:
    done = {(each["identity"], each["boot"], each["number"]) for each in tally}
    assert done
    return done - set(ask(log, "SELECT identity, boot, number FROM commands"))


def test_a_disk_that_fills_during_a_run_ends_it(disk: Disk, tmp_path: Path) -> None:
    log = disk.folder / "log.db"
    with served(tmp_path) as fleet:
        words = ("run", "speeds", "--link", fleet.link, "--pace", str(PACE), "--log", str(log))
        process = start(*words, "--json")
        wait_for(lambda: commands_logged(log) >= 7, "commands in the log")
        disk.fill()
        out, err = process.communicate(timeout=60)
        assert process.returncode == 3, err
        document = json.loads(out)
        assert document["stopped"].startswith("log lost: ")
        assert document["started"] < 60  # the rest of the sheet is not used up
        assert sum(document["ended"].values()) == document["started"]
        [line] = err.splitlines()
        assert "full; free some space" in line
        assert not carried_out_but_not_logged(fleet.carried_out(), log)
        assert ask(log, "PRAGMA integrity_check") == [("ok",)]


def test_all_stop_works_while_the_disk_is_full(disk: Disk, tmp_path: Path) -> None:
    log = disk.folder / "log.db"
    # At pace 1 a second of the fleet is one of the person's: time to press before the sheet ends.
    with served(tmp_path, pace=1) as fleet:
        process = start("run", "speeds", "--link", fleet.link, "--log", str(log), "--json")
        wait_for(lambda: commands_logged(log) >= 6, "commands in the log")
        wait_for(fleet.carried_out, "a brake")
        disk.fill()
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=60)
        assert process.returncode == 3, err
        assert json.loads(out)["stopped"] == "all-stop 1"
        assert not carried_out_but_not_logged(fleet.carried_out(), log)
        other = tmp_path / "other.db"
        after = run_json("run", "speeds", "--link", fleet.link, "--log", str(other), status=1)
        assert after["stopped"] == "all-stop 1"  # every module holds it
        assert ask(other, "SELECT count(DISTINCT module) FROM telemetry WHERE wheel_rpm") == [(0,)]


def test_a_log_that_is_taken_away_during_a_run(tmp_path: Path) -> None:
    """On POSIX a deleted file still takes what is written to it, and keeps none of it."""
    log = tmp_path / "log.db"
    with served(tmp_path) as fleet:
        words = ("run", "speeds", "--link", fleet.link, "--pace", str(PACE), "--log", str(log))
        process = start(*words, "--json")
        wait_for(lambda: commands_logged(log) >= 7, "commands in the log")
        kept = tmp_path / "kept.db"
        os.rename(log, kept)
        out, err = process.communicate(timeout=60)
    assert process.returncode == 3, err
    assert "put it back" in json.loads(out)["stopped"]
    assert not log.exists()
