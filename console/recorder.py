"""What the session's core needs of a log, and nothing of how it is written.

Owns that interface alone; storage.writer.LogWriter is one, and tests have others.
"""

from collections.abc import Callable, Sequence
from typing import Protocol

from storage.records import Record
from storage.rows import Row


class Recorder(Protocol):
    """Takes records with the rows that follow from them. Called on the engine's thread."""

    def append(self, number: int, record: Record, rows: Sequence[Row]) -> None:
        """Take a record; it is written soon."""
        ...

    def commit(
        self, number: int, record: Record, rows: Sequence[Row], done: Callable[[str], None]
    ) -> None:
        """Take a record; ``done("")`` once it is durable, ``done(why_not)`` where it cannot be."""
        ...

    def trouble(self) -> str:
        """Why nothing is written now, or an empty text."""
        ...
