"""The tally: one line for each command as a virtual module carries it out.

Owns the entry and its file. It is the simulator's own witness for at-most-once, written where
the thing happens, so that nothing a console says is needed to count.
"""

import json
import os
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import IO

from sim_link.errors import SimInputError


@dataclass(frozen=True, slots=True)
class TallyEntry:
    """One command carried out: a pivot as its brake is applied, others as they start.

    ``t_ns`` is fleet time; ``motion`` is pivot, spin, rest or flash.
    """

    identity: int
    boot: int
    number: int
    t_ns: int
    name: str
    motion: str

    def as_json(self) -> str:
        """Return the entry as one line: identity in 16 hexadecimal digits, as on a label."""
        return json.dumps(
            {
                "identity": f"{self.identity:016x}",
                "boot": self.boot,
                "number": self.number,
                "time_ns": self.t_ns,
                "name": self.name,
                "motion": self.motion,
            }
        )


class TallyFile:
    """A file of JSON lines, each on the disk before the next thing happens."""

    def __init__(self, path: Path) -> None:
        """Start the file anew. Raises SimInputError where it cannot be written."""
        self._path = path
        try:
            self._file: IO[str] = path.open("w", encoding="utf-8")
        except OSError as error:
            raise SimInputError(
                "tally", str(path), f"cannot be written: {error.strerror}"
            ) from error

    def __call__(self, entry: TallyEntry) -> None:
        """Write one entry. Raises SimInputError if the disk does not take it."""
        try:
            self._file.write(entry.as_json() + "\n")
            self._file.flush()
            os.fsync(self._file.fileno())
        except OSError as error:
            raise SimInputError(
                "tally", str(self._path), f"not written: {error.strerror}"
            ) from error

    def close(self) -> None:
        """Close the file; a second call does nothing."""
        self._file.close()

    def __enter__(self) -> "TallyFile":
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()
