"""Bad input at the start of a run: one clear line, exit status 2 or 3, nothing half done."""

from pathlib import Path

import pytest

from tests.support.programs import PACE, commands_logged, run, served, start, wait_for

GOOD = """
title = "one"
modules = ["alder"]
motion = "pivot"
speeds_rpm = [4700]
repeats = 1
"""


def refused(folder: Path, *words: str) -> tuple[int, str]:
    """Exit status and the one line on standard error; no log may have been made."""
    log = folder / "new.db"
    result = run("run", *words, "--log", str(log))
    assert result.stdout == ""
    lines = result.stderr.strip().splitlines()
    assert len(lines) == 1, result.stderr
    assert not log.exists()
    return result.returncode, lines[0]


def test_a_port_in_use_names_who_has_it(tmp_path: Path) -> None:
    with served(tmp_path) as fleet:
        words = ("run", "speeds", "--link", fleet.link, "--pace", str(PACE))
        first = start(*words, "--log", str(tmp_path / "first.db"))
        try:
            wait_for(lambda: commands_logged(tmp_path / "first.db"), "the first one to run")
            status, line = refused(tmp_path, "speeds", "--link", fleet.link)
        finally:
            first.kill()
            first.communicate()
    assert status == 3
    assert "in use by" in line
    assert str(first.pid) in line


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        (GOOD.replace('"pivot"', '"dance"'), ("line 4", "motion", "pivot")),
        (GOOD.replace("[4700]", "[4700, -3]"), ("line 5", "speeds_rpm")),
        (GOOD.replace("repeats = 1", "repeats = [1, 2]"), ("line 6", "repeats")),
        (GOOD + "at_onec = 2\n", ("line 7", "at_onec", "at_once")),
        (GOOD.replace('title = "one"', 'title = "one'), ("line 2",)),
        (GOOD.replace('modules = ["alder"]', ""), ("modules",)),
        (GOOD + 'direction = "forward"\n', ("return_speed_rpm",)),
    ],
)
def test_a_malformed_sheet_names_file_line_key_and_what_was_expected(
    text: str, parts: tuple[str, ...], tmp_path: Path
) -> None:
    sheet = tmp_path / "bad.toml"
    sheet.write_text(text)
    status, line = refused(tmp_path, str(sheet), "--link", f"sim://?pace={PACE}")
    assert status == 2
    for part in ("bad.toml", *parts):
        assert part in line


def test_a_sheet_whose_module_is_not_there_ends_before_anything_moves(tmp_path: Path) -> None:
    sheet = tmp_path / "oak.toml"
    sheet.write_text(GOOD.replace("alder", "oak"))
    log = tmp_path / "log.db"
    result = run("run", str(sheet), "--link", "sim://?pace=20", "--log", str(log))
    assert result.returncode == 2
    assert "oak did not answer the roll" in result.stderr
    assert commands_logged(log) == 0


def test_a_log_that_is_something_else_is_left_alone(tmp_path: Path) -> None:
    notes = tmp_path / "notes.txt"
    notes.write_text("my own notes\n" * 100)
    result = run("run", "speeds", "--log", str(notes))
    assert result.returncode == 3
    assert "notes.txt" in result.stderr
    assert notes.read_text() == "my own notes\n" * 100
