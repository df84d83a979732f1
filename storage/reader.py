"""Log reader: sessions, records and tables of a log, also while it is being written.

Owns the questions the program asks. Opens the file so that nothing can be written, and keeps
no read transaction open between two answers: a cursor left half read would hold the WAL, which
then grows without end. Plain sqlite3, because importing sqlite-utils takes 0.3 s.
"""

import sqlite3
from collections.abc import Iterator
from pathlib import Path
from typing import Any, Final, NamedTuple

from storage.connect import connect_to_read, explain
from storage.errors import LogUnavailableError, StorageMisuseError
from storage.inserts import columns_of
from storage.records import BytesIn, BytesOut, Record, read_note
from storage.rows import TABLES
from storage.schema import check_readable

DERIVED_TABLES: Final[tuple[str, ...]] = tuple(table.name for table in TABLES.values())
"""Tables that can be made again from the records."""

BLOCK_RECORDS: Final = 4_000
"""Records read at a time: a few milliseconds in which the WAL is held."""

_KEYS: Final[dict[str, tuple[str, ...]]] = {table.name: table.key for table in TABLES.values()}

_BLOCK: Final = """
SELECT record, t_ns, link, outbound, data FROM wire
    WHERE session = :session AND record > :after
UNION ALL
SELECT record, t_ns, NULL, sort, body FROM records
    WHERE session = :session AND record > :after
ORDER BY record LIMIT :block"""

_SUMMARIES: Final = """
SELECT session, uid, opened_utc, coalesce(closed_utc, ''), ending, operator,
    EXISTS (SELECT 1 FROM modules AS m WHERE m.session = s.session AND m.simulated),
    (SELECT count(*) FROM modules AS m WHERE m.session = s.session),
    (SELECT count(*) FROM orders AS o WHERE o.session = s.session),
    (SELECT count(*) FROM motions AS m WHERE m.session = s.session),
    coalesce((SELECT name FROM sheets AS h WHERE h.session = s.session
        ORDER BY sheet DESC LIMIT 1), ''),
    lost_records
FROM sessions AS s ORDER BY session"""

_TRIAL_COLUMNS: Final = (
    "module, motion, setting, speed_rpm, outcome, simulated, session, trial, brake_ms, time_utc"
)
_COUNTED: Final = f"SELECT {_TRIAL_COLUMNS} FROM trials_counted WHERE 1"
_ALL_OUTCOMES: Final = (
    f"SELECT {_TRIAL_COLUMNS} FROM motions_named WHERE (trial > 0 OR source IS NOT 'sheet')"
)


class SessionSummary(NamedTuple):
    """One session in a line. ``ending``: empty while open, 'closed', 'cut off'; ``sheet``: the
    newest run sheet's name or empty; ``closed_utc`` is empty where nobody saw the end."""

    session: int
    uid: str
    opened_utc: str
    closed_utc: str
    ending: str
    operator: str
    simulated: bool
    modules: int
    orders: int
    motions: int
    sheet: str
    lost_records: int


class TrialRow(NamedTuple):
    """One trial for the review, a person's correction applied. ``time_utc``: when ordered."""

    module: str
    motion: str
    setting: str
    speed_rpm: int
    outcome: str
    simulated: bool
    session: int
    trial: int
    brake_ms: float | None
    time_utc: str


class LogReader:
    """A log open for reading; one thread at a time. Methods raise LogUnavailableError where
    the file fails."""

    def __init__(self, path: Path, connection: sqlite3.Connection) -> None:
        self._path = path
        self._connection = connection

    @classmethod
    def open(cls, path: Path) -> "LogReader":
        """Open the log at ``path``. Raises LogUnavailableError: missing, not a log of ours, of
        a newer version, or of an older one not yet brought up to date."""
        connection = connect_to_read(path)
        try:
            check_readable(connection, path)
        except LogUnavailableError:
            connection.close()
            raise
        return cls(path, connection)

    def sessions(self) -> list[SessionSummary]:
        """Return all sessions, oldest first."""
        found = self._all(_SUMMARIES)
        return [SessionSummary(*row)._replace(simulated=bool(row[6])) for row in found]

    def find_session(self, text: str) -> int:
        """Return the session that ``text`` names: its number, its uid or the beginning of it
        that no other has, or ``last``. Raises StorageMisuseError where there is none or more."""
        text = text.strip().lower()
        found = self._all("SELECT session, uid FROM sessions ORDER BY session")
        if not found:
            raise StorageMisuseError(f"{self._path} holds no session yet")
        if text == "last":
            return int(found[-1][0])
        matches = [session for session, _ in found if str(session) == text]
        matches = matches or [session for session, uid in found if text and uid.startswith(text)]
        if len(matches) == 1:
            return int(matches[0])
        newest = found[-1][0]
        if matches:
            raise StorageMisuseError(
                f"'{text}' begins the uid of {len(matches)} sessions; give more of it"
            )
        raise StorageMisuseError(
            f"there is no session '{text}' in {self._path}; the newest is {newest}"
        )

    def records(self, session: int) -> Iterator[tuple[int, Record]]:
        """Yield (number, record) in order, also such as are written while this goes on.

        Raises LogUnavailableError also where a stored record cannot be understood.
        """
        after = -1
        while True:
            block = self._all(_BLOCK, session=session, after=after, block=BLOCK_RECORDS)
            for row in block:
                yield _to_record(row)
            if len(block) < BLOCK_RECORDS:
                return
            after = block[-1][0]

    def trials(self, session: int | None, *, all_outcomes: bool = False) -> list[TrialRow]:
        """Return the trials of one session or of all, in the order in which they were ordered.

        Only outcomes that count in rates, or with ``all_outcomes`` also refused, cut, unseen.
        A sheet's return motions are no trials.
        """
        question = _ALL_OUTCOMES if all_outcomes else _COUNTED
        if session is not None:
            question += " AND session = :session"
        found = self._all(question + " ORDER BY session, command", session=session)
        return [TrialRow(*row)._replace(simulated=bool(row[5])) for row in found]

    def table(self, name: str, session: int) -> list[tuple[Any, ...]]:
        """Return a derived table's rows of one session, ordered by key, without the session.

        Each is equal to its row type of storage/rows.py. Whole in memory: for tests and
        comparisons. Raises StorageMisuseError for another table.
        """
        if name not in _KEYS:
            raise StorageMisuseError(f"'{name}' is no derived table; there are {DERIVED_TABLES}")
        columns, key = ", ".join(columns_of(name)), ", ".join(_KEYS[name])
        return self._all(
            f"SELECT {columns} FROM {name} WHERE session = :session ORDER BY {key}",
            session=session,
        )

    def close(self) -> None:
        """Close the file. Safe to call twice."""
        self._connection.close()

    def _all(self, question: str, **values: Any) -> list[tuple[Any, ...]]:
        """Ask, and take the whole answer at once, so that no transaction stays open."""
        try:
            return self._connection.execute(question, values).fetchall()
        except sqlite3.ProgrammingError as error:
            raise StorageMisuseError(f"{self._path}: {error}") from error
        except sqlite3.Error as error:
            raise LogUnavailableError(explain(error, self._path)) from error


def _to_record(row: tuple[Any, ...]) -> tuple[int, Record]:
    number, t_ns, link, second, content = row
    if link is None:
        return number, read_note(second, t_ns, content)
    made = BytesOut if second else BytesIn
    return number, made(t_ns, link, content)
