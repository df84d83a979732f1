"""A real terminal for whole-program tests: tmux, keys in, text of the screen out."""

import re
import shlex
import shutil
import subprocess
import uuid
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager

import pytest

from tests.support.programs import PROGRAM, ROOT, wait_for


class Terminal:
    """One program in a tmux session of its own. Nothing is read but what is on the screen."""

    def __init__(self, server: str) -> None:
        self._server = server

    def _tmux(self, *words: str) -> str:
        command = ("tmux", "-L", self._server, *words)
        return subprocess.run(command, capture_output=True, text=True, check=True).stdout

    def keys(self, *keys: str) -> None:
        """Press keys, in tmux's names."""
        self._tmux("send-keys", *keys)

    def type(self, text: str) -> None:
        """Type a line and press Enter."""
        self._tmux("send-keys", "-l", text)
        self._tmux("send-keys", "Enter")

    def screen(self) -> str:
        """The text on the screen now."""
        return self._tmux("capture-pane", "-p")

    def line(self, word: str) -> str:
        """The first line of the screen that holds a word; empty where none does."""
        return next((line for line in self.screen().splitlines() if word in line), "")

    def row(self, name: str) -> str:
        """A module's line in the fleet table."""
        for line in self.screen().splitlines():
            if line[1:].split(" ")[0] == name:
                return line
        return ""

    def wait(self, text: str, seconds: float = 20.0) -> None:
        """Wait until the screen shows a text."""
        self.until(lambda: text in self.screen(), f"{text!r} on the screen", seconds)

    def until(self, condition: Callable[[], object], what: str, seconds: float = 30.0) -> None:
        """Wait until something is so; where it is not, fail with what the screen shows."""
        try:
            wait_for(condition, what, seconds)
        except AssertionError as error:
            raise AssertionError(f"{error}; the screen:\n{self.screen()}") from None

    def until_ready(self, names: Sequence[str]) -> None:
        """Wait until all modules have been heard in full and may be ordered."""
        ready = re.compile(r" [1-9]\.\d\d V +[1-4] level")
        self.until(lambda: all(ready.search(self.row(name)) for name in names), "a ready fleet")

    def process(self) -> int:
        """Number of the process that runs in the terminal."""
        return int(self._tmux("display-message", "-p", "#{pane_pid}"))


@contextmanager
def terminal(*words: str, columns: int = 150, lines: int = 40) -> Iterator[Terminal]:
    """The program in a terminal; its exit status is shown when it ends."""
    if shutil.which("tmux") is None:
        pytest.skip("needs tmux")
    server = f"tumblewire-{uuid.uuid4().hex[:8]}"
    program = shlex.join((*PROGRAM, *words))
    script = f"PYTHONPATH={shlex.quote(str(ROOT))} {program}; echo ended with $?; sleep 600"
    size = ("-x", str(columns), "-y", str(lines))
    # No configuration of the person's own: -f /dev/null.
    command = ("tmux", "-L", server, "-f", "/dev/null", "new-session", "-d", *size, script)
    subprocess.run(command, check=True)
    try:
        yield Terminal(server)
    finally:
        subprocess.run(("tmux", "-L", server, "kill-server"), check=False)
