"""The command line: words, help, exit status, and one clear line for each thing that is wrong."""

import json
import subprocess
import sys
from pathlib import Path

import click
import pytest

from console.cli import tumblewire

ROOT = Path(__file__).parents[2]
COMMANDS = sorted(tumblewire.commands)


def run(*words: str, cwd: Path | None = None) -> subprocess.CompletedProcess[str]:
    """Run the command line as a user's shell would."""
    return subprocess.run(
        [sys.executable, "-c", "from console.cli import main; main()", *words],
        capture_output=True,
        text=True,
        timeout=120,
        cwd=cwd or ROOT,
        env={"PATH": "/usr/bin:/bin", "PYTHONPATH": str(ROOT), "HOME": str(cwd or ROOT)},
        check=False,
    )


def one_line(result: subprocess.CompletedProcess[str]) -> str:
    assert "Traceback" not in result.stderr
    lines = result.stderr.strip().splitlines()
    assert len(lines) == 1, result.stderr
    return lines[0]


@pytest.mark.parametrize("name", COMMANDS)
def test_each_command_has_help_with_an_example(name: str) -> None:
    command = tumblewire.commands[name]
    with click.Context(command, info_name=name) as context:
        text = command.get_help(context)
    assert "Example:" in text
    assert f"tumblewire {name}" in text
    for parameter in command.params:
        if isinstance(parameter, click.Option):
            assert parameter.help, f"{name} {parameter.name} has no help"


@pytest.mark.parametrize("name", COMMANDS)
def test_each_command_is_in_the_readme(name: str) -> None:
    assert f"tumblewire {name}" in (ROOT / "README.md").read_text()


def test_help_imports_nothing_costly() -> None:
    code = (
        "import sys; from console.cli import tumblewire\n"
        "tumblewire.main(['--help'], standalone_mode=False)\n"
        "costly = {'scipy', 'numpy', 'textual', 'sqlite_utils', 'serial', 'sqlite3'}\n"
        "print(sorted(costly & set(sys.modules)), file=sys.stderr)"
    )
    result = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT
    )
    assert result.stderr.strip() == "[]"


@pytest.mark.parametrize(
    ("words", "status", "said"),
    [
        (("run", "speeds", "--link", "/dev/nothing-here"), 3, "no such port"),
        (("run", "speeds", "--link", "sim://?foo=1"), 2, "foo: no such option"),
        (("run", "nowhere.toml"), 2, "nowhere.toml"),
        (("review", "--from", "nowhere.csv"), 2, "nowhere.csv"),
        (("review", "--log", "nowhere.db"), 3, "nowhere.db"),
        (("sessions", "--log", "nowhere.db"), 3, "nowhere.db"),
        (("rebuild", "last", "--log", "nowhere.db"), 3, "nowhere.db"),
        (("replay", "1", "--log", "nowhere.db"), 3, "nowhere.db"),
        (("simulate", "--tcp", "nonsense"), 2, "HOST:PORT"),
        (("simulate", "--pty", "--loss", "7"), 2, "loss"),
    ],
)
def test_what_is_wrong_is_one_line_and_a_status(
    words: tuple[str, ...], status: int, said: str, tmp_path: Path
) -> None:
    result = run(*words, cwd=tmp_path)
    assert result.returncode == status
    assert said in one_line(result)
    assert result.stdout == ""
    assert not list(tmp_path.rglob("*.db"))


@pytest.mark.parametrize(
    "words", [("simulate",), ("simulate", "--pty", "--tcp", "localhost:0"), ("fly",), ("run",)]
)
def test_bad_usage_is_status_2(words: tuple[str, ...], tmp_path: Path) -> None:
    result = run(*words, cwd=tmp_path)
    assert result.returncode == 2
    assert "Traceback" not in result.stderr


def test_a_malformed_sheet_names_file_line_and_key(tmp_path: Path) -> None:
    sheet = tmp_path / "bad.toml"
    sheet.write_text('title = "x"\nmodules = ["alder"]\nmotion = "pivot"\nspeeds_rpm = "fast"\n')
    line = one_line(run("run", "bad.toml", cwd=tmp_path))
    for part in ("bad.toml", "4", "speeds_rpm"):
        assert part in line


def test_a_log_on_a_full_or_read_only_place_is_status_3(tmp_path: Path) -> None:
    for place in ("/proc/tumblewire.db", "/dev/full"):
        result = run("run", "speeds", "--log", place, cwd=tmp_path)
        assert result.returncode == 3
        assert place in one_line(result)


def test_ports_as_json() -> None:
    result = run("ports", "--json")
    assert result.returncode == 0
    ports = json.loads(result.stdout)["ports"]
    assert all(set(port) == {"device", "description", "trouble"} for port in ports)


def test_review_of_older_notes(tmp_path: Path) -> None:
    notes = tmp_path / "notes.csv"
    rows = ["module,motion,setting,speed_rpm,outcome"]
    rows += ["oak,pivot,floor,5000,landed"] * 81 + ["oak,pivot,floor,5000,short"] * 182
    notes.write_text("\n".join(rows))
    result = run("review", "--from", str(notes), "--json")
    [group] = json.loads(result.stdout)["groups"]
    # Newcombe 1998, Stat Med 17:857, Table I, method 3: 81 of 263.
    assert (group["trials"], group["landed"]) == (263, 81)
    assert group["low"] == pytest.approx(0.2553, abs=6e-5)
    assert group["high"] == pytest.approx(0.3662, abs=6e-5)
