"""The real program in processes of its own: run, served fleets, and answers from the log."""

import ctypes
import json
import os
import signal
import sqlite3
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[2]
PROGRAM = (sys.executable, "-c", "from console.cli import main; main()")
PACE = 8
RADIO = ("--loss", "0.1", "--damage", "0.02", "--repeat", "0.05")


def environment() -> dict[str, str]:
    """The environment with the project first on Python's path, and no terminal's size in it."""
    return {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONUNBUFFERED": "1"}


def start(*words: str, **more: Any) -> subprocess.Popen[str]:
    """Start the program; the caller ends it."""
    return subprocess.Popen(
        (*PROGRAM, *words),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=environment(),
        **more,
    )


def run(*words: str, timeout_s: float = 120.0, **more: Any) -> subprocess.CompletedProcess[str]:
    """Run the program to its end."""
    process = start(*words, **more)
    try:
        out, err = process.communicate(timeout=timeout_s)
    finally:
        process.kill()
    return subprocess.CompletedProcess(words, process.returncode, out, err)


def run_json(*words: str, status: int = 0, **more: Any) -> dict[str, Any]:
    """Run the program with ``--json``; its one document. The status must be as expected."""
    result = run(*words, "--json", **more)
    assert result.returncode == status, result.stderr
    document: dict[str, Any] = json.loads(result.stdout)
    return document


@dataclass(frozen=True, slots=True)
class Fleet:
    """A fleet served by a process of its own."""

    link: str
    tally: Path
    process: subprocess.Popen[str]

    def carried_out(self) -> list[dict[str, Any]]:
        """What the modules' process wrote of each command as it carried it out."""
        return [json.loads(line) for line in self.tally.read_text().splitlines()]


@contextmanager
def served(folder: Path, *options: str, tcp: bool = False, pace: int = PACE) -> Iterator[Fleet]:
    """A simulated fleet on a pseudo-terminal or on TCP, ended afterwards."""
    tally = folder / "tally.jsonl"
    way = ("--tcp", "127.0.0.1:0") if tcp else ("--pty",)
    process = start("simulate", *way, "--tally", str(tally), "--pace", str(pace), *options)
    try:
        assert process.stdout is not None
        name = process.stdout.readline().strip()
        assert name, process.stderr.read() if process.stderr else ""
        yield Fleet(f"socket://{name}" if tcp else name, tally, process)
    finally:
        process.send_signal(signal.SIGTERM)
        try:
            process.communicate(timeout=5)
        except subprocess.TimeoutExpired:
            process.kill()
            process.communicate()


_PR_CAPBSET_DROP = 24
_CAP_DAC_OVERRIDE, _CAP_DAC_READ_SEARCH = 1, 2


def as_ordinary_user() -> Callable[[], None] | None:
    """For ``preexec_fn``: give up root's right to pass over files' permissions; None where
    nobody is root. Numbers are those of Linux's prctl(2) and capabilities(7): what is not in the
    bounding set is not gained by the exec that follows."""
    if os.geteuid() != 0:
        return None
    libc = ctypes.CDLL(None, use_errno=True)

    def give_up() -> None:
        for capability in (_CAP_DAC_OVERRIDE, _CAP_DAC_READ_SEARCH):
            if libc.prctl(_PR_CAPBSET_DROP, capability, 0, 0, 0):
                raise OSError(ctypes.get_errno(), "prctl")

    return give_up


def ask(log: Path, question: str, *values: Any) -> list[tuple[Any, ...]]:
    """Ask a log as any SQLite tool would."""
    connection = sqlite3.connect(log)
    try:
        return connection.execute(question, values).fetchall()
    finally:
        connection.close()


def wait_for(condition: Callable[[], Any], what: str, seconds: float = 30.0) -> Any:
    """Look until it is so; fail saying what was waited for."""
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        found = condition()
        if found:
            return found
        time.sleep(0.05)
    raise AssertionError(f"waited {seconds:g} s for {what}")


def commands_logged(log: Path) -> int:
    """How many commands the log holds now; 0 while there is no log."""
    try:
        return int(ask(log, "SELECT count(*) FROM commands")[0][0])
    except sqlite3.OperationalError:
        return 0
