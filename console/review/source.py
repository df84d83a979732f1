"""Sources of a review: the trials of a log, or of a CSV file of somebody's older notes.

Owns the way from either to ReviewTrial, and what a CSV file must hold. Counts nothing.

CSV as RFC 4180 has it: commas, a header line, fields in quotation marks where they hold commas,
quotation marks (written twice) or line breaks; either line ending; UTF-8, with or without a byte
order mark. Columns may come in any order, and columns of other names are passed over.
"""

import csv
import io
import math
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Final, TypeVar

from console.errors import InputError, LogError
from console.near_miss import did_you_mean, near_miss
from console.review.rates import ReviewTrial
from console.toml_file import read_text
from console.view import Outcome
from protocol.codes import Setting
from storage.reader import LogReader, TrialRow
from storage.rows import ModuleRow

REQUIRED: Final = ("module", "motion", "setting", "speed_rpm", "outcome")
OPTIONAL: Final = ("time_utc", "brake_ms")
MOTIONS: Final = ("pivot", "hop", "twist")
SETTINGS: Final = tuple(setting.name.lower() for setting in Setting)
MAX_SPEED_RPM: Final = 0xFFFF

_WHOLE: Final = re.compile(r"[0-9]{1,9}")
_T = TypeVar("_T")


def trials_from_log(reader: LogReader, session: int | None) -> list[ReviewTrial]:
    """Return the motions of one session, or of all, corrections applied and a sheet's return
    motions left out. Raises LogError for an outcome that this version does not know."""
    rows = reader.trials(session, all_outcomes=True)
    kinds = {each: _kinds(reader, each) for each in {row.session for row in rows}}
    return [_from_row(row, kinds[row.session]) for row in rows]


def _kinds(reader: LogReader, session: int) -> dict[tuple[str, bool], str]:
    """Kind of each module of a session, by the name under which its trials stand."""
    modules = (ModuleRow(*row) for row in reader.table("modules", session))
    return {(each.name or each.identity, bool(each.simulated)): each.kind for each in modules}


def _from_row(row: TrialRow, kinds: Mapping[tuple[str, bool], str]) -> ReviewTrial:
    try:
        outcome = Outcome(row.outcome)
    except ValueError as error:
        known = ", ".join(Outcome)
        raise LogError(
            f"session {row.session}: expected an outcome of {known}, not {row.outcome!r}"
        ) from error
    return ReviewTrial(
        module=row.module,
        kind=kinds.get((row.module, row.simulated), ""),
        motion=row.motion,
        setting=row.setting,
        speed_rpm=row.speed_rpm,
        outcome=outcome,
        simulated=row.simulated,
        session=row.session,
        time_utc=row.time_utc,
        brake_ms=row.brake_ms,
    )


def trials_from_csv(path: Path) -> list[ReviewTrial]:
    """Read a CSV file; its motions count as real ones, of one session with the file's name.

    Raises InputError: file, line, column, what was expected.
    """
    return parse_csv(read_text(path), str(path), path.name)


def parse_csv(text: str, where: str, session: str) -> list[ReviewTrial]:
    """Read the text of a CSV file; ``where`` stands first in every error. Raises InputError."""
    records = _records(text, where)
    first = next(records, None)
    if first is None:
        raise InputError(f"{where}: empty; expected a header line with {', '.join(REQUIRED)}")
    header = _Header.read(*first, where)
    return [header.trial(line, values, session) for line, values in records]


def _records(text: str, where: str) -> Iterator[tuple[int, list[str]]]:
    """Yield each record with the line on which it begins; empty lines are none."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    while True:
        line = reader.line_num + 1
        try:
            values = next(reader)
        except StopIteration:
            return
        except csv.Error as error:
            raise InputError(f"{where}, line {line}: not CSV as in RFC 4180: {error}") from error
        if values:
            yield line, values


@dataclass(frozen=True, slots=True)
class _Header:
    """The header line: where the file is from, and which column stands where."""

    where: str
    names: tuple[str, ...]

    @classmethod
    def read(cls, line: int, values: Sequence[str], where: str) -> "_Header":
        names = tuple(value.strip() for value in values)
        place = f"{where}, line {line}"
        if len(names) == 1 and ";" in names[0]:
            raise InputError(f"{place}: expected commas between the columns, not semicolons")
        for name in (*REQUIRED, *OPTIONAL):
            if names.count(name) > 1:
                raise InputError(f"{place}: column {name}: expected once, not twice")
        for name in REQUIRED:
            if name not in names:
                near = near_miss(name, [each for each in names if each not in REQUIRED])
                tail = f"; is it {near!r}?" if near else ""
                raise InputError(f"{place}: no column {name}: expected {', '.join(REQUIRED)}{tail}")
        return cls(where, names)

    def trial(self, line: int, values: Sequence[str], session: str) -> ReviewTrial:
        """Read one record. Raises InputError."""
        place = f"{self.where}, line {line}"
        if len(values) != len(self.names):
            raise InputError(
                f"{place}: expected {len(self.names)} columns as in the header, not {len(values)}"
            )
        record = {name: value.strip() for name, value in zip(self.names, values, strict=True)}
        row = _Record(place, record)
        motion = row.one_of("motion", MOTIONS)
        return ReviewTrial(
            module=row.read("module", _name, "the name of a module"),
            kind="",
            motion=motion,
            setting=row.one_of("setting", SETTINGS if motion == "pivot" else (*SETTINGS, "")),
            speed_rpm=row.read("speed_rpm", _speed_rpm, "a whole speed in rpm, from 1 to 65535"),
            outcome=Outcome(row.one_of("outcome", tuple(Outcome))),
            simulated=False,
            session=session,
            time_utc=row.read("time_utc", _time_utc, "a UTC time as ISO 8601 has it, or nothing"),
            brake_ms=row.read("brake_ms", _brake_ms, "a time in ms above 0, or nothing"),
        )


@dataclass(frozen=True, slots=True)
class _Record:
    """One record by column, and its place for errors. An optional column may be missing."""

    place: str
    values: Mapping[str, str]

    def read(self, column: str, convert: Callable[[str], _T], expected: str) -> _T:
        """Return a value converted; what ``convert`` cannot convert raises InputError."""
        value = self.values.get(column, "")
        try:
            return convert(value)
        except (ValueError, OverflowError) as error:
            raise self._wrong(column, expected, value) from error

    def one_of(self, column: str, choices: Sequence[str]) -> str:
        """Return one of the choices, letter case aside, or raise InputError."""
        value = self.values[column]
        if value.lower() in choices:
            return value.lower()
        expected = ", ".join(each or "nothing" for each in choices)
        error = self._wrong(column, expected, value)
        raise InputError(f"{error}{did_you_mean(value, choices)}")

    def _wrong(self, column: str, expected: str, value: str) -> InputError:
        found = f"{value[:40]!r}" if value else "nothing"
        return InputError(f"{self.place}, column {column}: expected {expected}, not {found}")


def _name(value: str) -> str:
    if not value:
        raise ValueError(value)
    return value


def _speed_rpm(value: str) -> int:
    # Not by int() alone, which also takes "4_350" and figures of other scripts.
    if not _WHOLE.fullmatch(value) or not 1 <= int(value) <= MAX_SPEED_RPM:
        raise ValueError(value)
    return int(value)


def _time_utc(value: str) -> str:
    """A time without an offset is taken as UTC, as the column's name says."""
    if not value:
        return ""
    time = datetime.fromisoformat(value)
    utc = time.replace(tzinfo=UTC) if time.tzinfo is None else time.astimezone(UTC)
    return utc.isoformat(timespec="milliseconds").replace("+00:00", "Z")


def _brake_ms(value: str) -> float | None:
    if not value:
        return None
    brake_ms = float(value)
    if not 0.0 < brake_ms < math.inf:
        raise ValueError(value)
    return brake_ms
