"""Replay and rebuild: a session's records, folded again.

Owns the player's time and position. Must not know screens, links or the engine: a replay never
transmits, there is nothing here it could transmit with.
"""

from collections import deque
from collections.abc import Callable, Iterable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Final, NoReturn

from console.errors import InputError, LogError
from console.fleet import FleetReducer, Step
from console.view import FleetView
from storage.records import Record
from storage.rows import AlarmRow, Row

NEVER_TRANSMITS: Final = "a replay never transmits"
SLOWEST: Final = 0.01
FASTEST: Final = 1000.0
BURST_RECORDS: Final = 20_000
"""Records folded in one call of ``advance`` at most, a fifth of a second's work: at high speed
the player falls behind rather than hold up the screen."""

NOTES_KEPT: Final = 5
"""Lines of the player's own among the notices."""

FAULTS: Final = frozenset({"all-stop", "restart", "address conflict", "damage", "link lost"})
"""Alarms that a jump stops at. A clear is an alarm's end and no fault."""


class ReplayPlayer:
    """Plays a session from its records. Implements view.FleetSource.

    All records are held in memory, some hundred megabytes for a long day of a large fleet, so
    that position and length are known and playing never waits for the disk. Positions are
    nanoseconds of the session's time since its first record.
    """

    def __init__(self, records: Iterable[tuple[int, Record]]) -> None:
        self._records = list(records)
        self._reducer = FleetReducer()
        self._next = 0
        self._start_ns = self._records[0][1].t_ns if self._records else 0
        # Not the last one's time: bytes carry that of their reading, and may be a little older
        # than what was recorded before them.
        latest_ns = max((record.t_ns for _, record in self._records), default=self._start_ns)
        self._length_ns = latest_ns - self._start_ns
        self._position_ns = 0
        self._looked_ns: int | None = None
        self._playing = False
        self._speed = 1.0
        self._notes: deque[tuple[int, str]] = deque(maxlen=NOTES_KEPT)

    # -- the screen's side ---------------------------------------------------------------

    def view(self) -> FleetView:
        """The fleet at the player's position."""
        view = self._reducer.view(self._start_ns + self._position_ns)
        if not self._notes:
            return view
        notices = sorted((*view.notices, *self._notes), key=lambda notice: notice[0])
        return replace(view, notices=tuple(notices))

    def log_trouble(self) -> str:
        """Nothing is written, so nothing can be wrong with the writing."""
        return ""

    def order(self, text: str) -> str:
        """Refused: raises InputError."""
        return self._refuse()

    def clear(self, stop_number: int, source: str) -> None:
        """Refused: raises InputError."""
        self._refuse()

    def beat(self) -> None:
        """A replay drives no wheels and needs no sign of life."""

    def stop(self, source: str) -> None:
        """Sends nothing, and says so among the notices: the key must never seem dead."""
        self._note(f"{NEVER_TRANSMITS}: no all-stop was sent")

    def _note(self, text: str) -> None:
        self._notes.append((self._start_ns + self._position_ns, text))

    @staticmethod
    def _refuse() -> NoReturn:
        raise InputError(NEVER_TRANSMITS)

    # -- where it is ---------------------------------------------------------------------

    @property
    def position_ns(self) -> int:
        """Nanoseconds of session time since the first record."""
        return self._position_ns

    @property
    def length_ns(self) -> int:
        """Nanoseconds from the first record to the latest."""
        return self._length_ns

    @property
    def ended(self) -> bool:
        """Whether the last record has been folded."""
        return self._next >= len(self._records)

    @property
    def playing(self) -> bool:
        """Whether time runs."""
        return self._playing

    @property
    def speed(self) -> float:
        """Session seconds for each second of the person's."""
        return self._speed

    # -- playing -------------------------------------------------------------------------

    def play(self) -> None:
        """Let time run; from the beginning again where the end has been reached."""
        if self.ended:
            self.rewind()
        self._playing = not self.ended
        self._looked_ns = None

    def pause(self) -> None:
        """Hold still."""
        self._playing = False

    def toggle(self) -> None:
        """Play or pause."""
        (self.pause if self._playing else self.play)()

    def set_speed(self, speed: float) -> None:
        """Play at 0.01 to 1000 times real time. Raises InputError outside of that."""
        if not SLOWEST <= speed <= FASTEST:
            raise InputError(f"speed {speed:g}: expected {SLOWEST:g} to {FASTEST:g}")
        self._speed = speed

    def advance(self, now_ns: int) -> bool:
        """Fold what is due; ``now_ns`` is any monotonic time, looked at again each call.

        Returns whether anything was folded. The first call after ``play`` only takes the time.
        """
        if not self._playing:
            return False
        since_ns = 0 if self._looked_ns is None else max(now_ns - self._looked_ns, 0)
        self._looked_ns = now_ns
        goal_ns = min(self._position_ns + round(since_ns * self._speed), self._length_ns)
        folded, behind = self._fold_to(goal_ns)
        if not behind:
            self._position_ns = goal_ns
        self._playing = not self.ended
        return folded

    def _fold_to(self, goal_ns: int) -> tuple[bool, bool]:
        """Fold all up to ``goal_ns``; returns whether any, and whether too many were due."""
        last = min(self._next + BURST_RECORDS, len(self._records))
        begun = self._next
        while self._next < last:
            if self._records[self._next][1].t_ns - self._start_ns > goal_ns:
                return self._next > begun, False
            self._fold_one()
        return self._next > begun, not self.ended

    def _fold_one(self) -> Step:
        number, record = self._records[self._next]
        self._next += 1
        self._position_ns = max(self._position_ns, record.t_ns - self._start_ns)
        try:
            return self._reducer.apply(number, record)
        except LogError as error:
            # A log that lost records is still worth watching; only a rebuild must refuse it.
            self._note(f"record {number} cannot be shown: {error}")
            return Step()

    def _fold_until(self, wanted: Callable[[Step], bool]) -> bool:
        self.pause()
        while not self.ended:
            if wanted(self._fold_one()):
                return True
        return False

    def step(self) -> bool:
        """Pause, and go on to the next record that has something to see: one that gives rows.

        Returns False where there was none before the end.
        """
        return self._fold_until(lambda step: bool(step.rows))

    def next_fault(self) -> bool:
        """Pause, and go on to the next fault; returns False where there was none before the end."""
        return self._fold_until(lambda step: any(map(_is_fault, step.rows)))

    def seek_end(self) -> None:
        """Pause, and go on to the end."""
        self._fold_until(lambda step: False)

    def rewind(self) -> None:
        """Pause, and begin again before the first record."""
        self.pause()
        self._reducer = FleetReducer()
        self._next = self._position_ns = 0
        self._notes.clear()


def _is_fault(row: Row) -> bool:
    return isinstance(row, AlarmRow) and row.alarm in FAULTS


def fold_rows(records: Iterable[tuple[int, Record]]) -> Iterator[Row]:
    """All rows that the records give, in order; of two with the same key the later counts."""
    reducer = FleetReducer()
    for number, record in records:
        yield from reducer.apply(number, record).rows


def rebuild_session(path: Path, session: int) -> dict[str, int]:
    """Derive a session's tables again from its records; returns row counts by table.

    Raises LogUnavailableError or StorageMisuseError as the log's reader and writer do, LogError
    where the records are not whole; the tables then stay as they were.
    """
    from storage.reader import LogReader
    from storage.rebuild import replace_derived, tidy

    reader = LogReader.open(path)
    try:
        counts = replace_derived(path, session, fold_rows(reader.records(session)))
    finally:
        reader.close()
    tidy(path)
    return counts
