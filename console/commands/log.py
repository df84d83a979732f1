"""`tumblewire sessions`, `rebuild` and `review`: what a log holds, and what it says.

Owns how each answer is laid out. Reads through storage.reader; counts nothing itself.
"""

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

from console.commands.output import print_json, print_line, say
from console.errors import InputError, LogError
from console.paths import default_log_path
from storage.errors import StorageError, StorageMisuseError

if TYPE_CHECKING:
    from console.review.rates import ReviewTrial
    from storage.reader import LogReader, SessionSummary

_COLUMNS: Final = ("session", "opened (UTC)", "ending", "operator", "modules", "orders", "motions")


@contextmanager
def reading(log: Path | None) -> "Iterator[LogReader]":
    """Open a log for reading, and turn its errors into the console's."""
    from storage.reader import LogReader

    try:
        reader = LogReader.open(log or default_log_path())
    except StorageError as error:
        raise LogError(str(error)) from error
    try:
        yield reader
    except StorageMisuseError as error:
        raise InputError(str(error)) from error
    except StorageError as error:
        raise LogError(str(error)) from error
    finally:
        reader.close()


def list_sessions(log: Path | None, as_json: bool) -> int:
    """Print the sessions of a log, oldest first."""
    with reading(log) as reader:
        summaries = reader.sessions()
    if as_json:
        print_json({"sessions": [each._asdict() for each in summaries]})
        return 0
    if not summaries:
        print_line("no sessions yet")
        return 0
    for line in _session_lines(summaries):
        print_line(line)
    return 0


def _session_lines(summaries: "Sequence[SessionSummary]") -> list[str]:
    rows = [
        (
            str(each.session),
            each.opened_utc[:19].replace("T", " "),
            each.ending or "open",
            each.operator,
            str(each.modules),
            str(each.orders),
            str(each.motions),
            " ".join((each.sheet, "SIMULATED" if each.simulated else "")).strip(),
        )
        for each in summaries
    ]
    table = [(*_COLUMNS, "sheet"), *rows]
    widths = [max(len(row[column]) for row in table) for column in range(len(table[0]))]
    return ["  ".join(map(str.ljust, row, widths)).rstrip() for row in table]


def rebuild(session_text: str, log: Path | None, as_json: bool) -> int:
    """Derive a session's tables again from its records; print row counts by table."""
    from console.replay import rebuild_session

    path = log or default_log_path()
    with reading(path) as reader:
        session = reader.find_session(session_text)
    try:
        counts = rebuild_session(path, session)
    except StorageMisuseError as error:
        raise InputError(str(error)) from error
    except StorageError as error:
        raise LogError(str(error)) from error
    if as_json:
        print_json({"session": session, "rows": counts})
    else:
        told = ", ".join(f"{count} {table}" for table, count in counts.items() if count)
        print_line(f"session {session} rebuilt: {told or 'nothing in it'}")
    return 0


@dataclass(frozen=True, slots=True)
class ReviewChoice:
    """What to review: a log (all of it, or one session), or a CSV file of older notes."""

    log: Path | None
    csv: Path | None
    session: str | None
    by: str | None
    with_simulated: bool


def review(choice: ReviewChoice, as_json: bool) -> int:
    """Print rates with their intervals."""
    from console.review.document import review_document
    from console.review.overview import overview
    from console.review.rates import DEFAULT_BY, parse_by
    from console.review.text import review_text

    if choice.csv is not None and (choice.log is not None or choice.session is not None):
        raise InputError("--from takes its trials from a CSV file; leave out --log and --session")
    by = DEFAULT_BY if choice.by is None else parse_by(choice.by)
    counted = overview(_trials(choice), by, with_simulated=choice.with_simulated)
    if as_json:
        print_json(review_document(counted))
    else:
        print_line(review_text(counted).rstrip("\n"))
    if not counted.groups:
        say("tumblewire: nothing to review there yet")
    return 0


def _trials(choice: ReviewChoice) -> "list[ReviewTrial]":
    from console.review.source import trials_from_csv, trials_from_log

    if choice.csv is not None:
        return trials_from_csv(choice.csv)
    with reading(choice.log) as reader:
        session = reader.find_session(choice.session) if choice.session is not None else None
        return trials_from_log(reader, session)
