"""Fleet columns: what one module's line says, and which columns a width has room for.

Owns the table of columns, the order in which they are dropped, and the text of every cell.
Pure: knows no screen library.

As the screen narrows columns go in this order: kind, signal, bar, doing, outcomes, heard,
posture, battery. Name, state, activity and wheel always stay: they answer who, is anything
wrong, and what moves. What room is left goes to outcomes and doing.
"""

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from typing import Final

from rich.cells import cell_len, set_cell_size

from console.view import ModuleView
from console.widgets.words import (
    BATTERY_LOW,
    OUTCOMES,
    SILENT_NS,
    Line,
    Span,
    Tone,
    activity,
    age_text,
    is_moving,
    module_state,
    posture,
    printable,
    speed_bar,
)
from protocol.codes import Flags

NAME_CELLS: Final = 12
"""Widest name or kind: what a Nameplate carries, in bytes."""
SHORTEST_NAME_CELLS: Final = 6
BATTERY_BAND_V: Final = 0.015
"""Half more than the last digit shown."""


@dataclass(frozen=True, slots=True)
class Column:
    """One column. ``rank``: the highest is dropped first, 0 never; ``grow``: cells that it takes
    of the room left over, in the table's order."""

    title: str
    cells: int
    rank: int
    grow: int
    right: bool
    draw: Callable[[ModuleView, int, int], Line]


@dataclass(frozen=True, slots=True)
class Plan:
    """Columns that fit, each with its cells."""

    columns: tuple[tuple[Column, int], ...]

    def header(self) -> Line:
        """The header line: the title of each column over its cells."""
        titles = (_fill(column.title, cells, column.right) for column, cells in self.columns)
        return ((" " + " ".join(titles), Tone.DIM),)

    def row(self, module: ModuleView, t_ns: int, under_cursor: bool) -> Line:
        """The line of one module, as wide as the header."""
        spans: list[Span] = [(">" if under_cursor else " ", Tone.STRONG)]
        for index, (column, cells) in enumerate(self.columns):
            if index:
                spans.append((" ", Tone.PLAIN))
            drawn = column.draw(module, t_ns, cells)
            if len(drawn) == 1:
                ((text, tone),) = drawn
                spans.append((_fill(text, cells, column.right), tone))
            else:
                spans.extend(drawn)
        return tuple(_merged(spans))


class SteadyBattery:
    """Keeps a shown voltage until the measured one has left a band around it: a cell at rest
    flickers by a hundredth of a volt between two messages, and a column of flickering digits
    hides what changes."""

    def __init__(self) -> None:
        self._shown_V: dict[int, float] = {}

    def steadied(self, module: ModuleView) -> ModuleView:
        """The module with the voltage to show, at most ``BATTERY_BAND_V`` off."""
        shown_V = self._shown_V.get(module.module, module.battery_V)
        if abs(module.battery_V - shown_V) > BATTERY_BAND_V:
            shown_V = module.battery_V
        self._shown_V[module.module] = shown_V
        return module if shown_V == module.battery_V else replace(module, battery_V=shown_V)


def plan_columns(width: int, names: Iterable[str] = (), kinds: Iterable[str] = ()) -> Plan:
    """Choose columns for ``width`` cells; name and kind are as wide as the longest so far."""
    fixed = {"name": _name_cells(names), "kind": _name_cells(kinds)}
    chosen = [(column, fixed.get(column.title, column.cells)) for column in COLUMNS]
    while sum(cells + 1 for _, cells in chosen) > width:
        worst = max(chosen, key=lambda each: each[0].rank)
        if worst[0].rank == 0:
            break
        chosen.remove(worst)
    room = max(width - sum(cells + 1 for _, cells in chosen), 0)
    planned = []
    for column, cells in chosen:
        extra = min(column.grow, room)
        room -= extra
        planned.append((column, cells + extra))
    return Plan(tuple(planned))


def _name_cells(names: Iterable[str]) -> int:
    longest = max(map(cell_len, names), default=0)
    return min(max(longest, SHORTEST_NAME_CELLS), NAME_CELLS)


def _fill(text: str, cells: int, right: bool) -> str:
    """Pad or cut to exactly so many cells; a text that does not fit ends in ``~``."""
    text = printable(text)
    if cell_len(text) > cells:
        return set_cell_size(text, cells - 1) + "~"
    blanks = " " * (cells - cell_len(text))
    return blanks + text if right else text + blanks


def _merged(spans: Iterable[Span]) -> list[Span]:
    """Join neighbours of one tone: fewer pieces, fewer bytes to the terminal."""
    merged: list[Span] = []
    for text, tone in spans:
        if merged and merged[-1][1] is tone:
            merged[-1] = (merged[-1][0] + text, tone)
        else:
            merged.append((text, tone))
    return merged


def _name(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    return ((module.name, Tone.STRONG),)


def _kind(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    return ((module.kind, Tone.DIM),)


def _state(module: ModuleView, t_ns: int, _cells: int) -> Line:
    word = module_state(module, t_ns)
    return ((word.text, word.tone),)


def _activity(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    word = activity(module)
    return ((word.text, word.tone),)


def _wheel_tone(module: ModuleView) -> Tone:
    return Tone.MOVING if is_moving(module) else Tone.DIM


def _wheel(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    limit = module.wheel_max_rpm or "?"
    return ((f"{module.wheel_rpm}/{limit}", _wheel_tone(module)),)


def _bar(module: ModuleView, _t_ns: int, cells: int) -> Line:
    bar = speed_bar(module.wheel_rpm, module.wheel_max_rpm, cells)
    return ((bar, _wheel_tone(module)),)


def _battery(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    if module.heard_t_ns is None:
        return (("?", Tone.DIM),)
    low = bool(module.flags & Flags.BATTERY_LOW)
    mark = BATTERY_LOW.glyph if low else " "
    return ((f"{module.battery_V:.2f} V{mark}", Tone.ALERT if low else Tone.PLAIN),)


def _posture(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    if module.heard_t_ns is None:
        return (("?", Tone.DIM),)
    return ((posture(module), Tone.PLAIN if module.face_up else Tone.STRONG),)


def _heard(module: ModuleView, t_ns: int, _cells: int) -> Line:
    silent = module.heard_t_ns is None or t_ns - module.heard_t_ns >= SILENT_NS
    return ((age_text(module.heard_t_ns, t_ns), Tone.ALERT if silent else Tone.DIM),)


def _signal(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    if module.heard_t_ns is None:
        return (("?", Tone.DIM),)
    return ((f"{module.signal:.0%}", Tone.PLAIN),)


def _outcomes(module: ModuleView, _t_ns: int, cells: int) -> Line:
    """The newest outcomes that fit, the newest at the right end of those shown."""
    shown = module.outcomes[-cells:]
    spans = [(OUTCOMES[outcome].glyph, OUTCOMES[outcome].tone) for outcome in shown]
    return (*spans, (" " * (cells - len(shown)), Tone.PLAIN))


def _doing(module: ModuleView, _t_ns: int, _cells: int) -> Line:
    return ((module.doing, Tone.PLAIN),)


COLUMNS: Final[tuple[Column, ...]] = (
    Column("name", SHORTEST_NAME_CELLS, 0, 0, False, _name),
    Column("kind", SHORTEST_NAME_CELLS, 8, 0, False, _kind),
    Column("state", 11, 0, 0, False, _state),
    Column("activity", 10, 0, 0, False, _activity),
    Column("rpm/limit", 11, 0, 1, True, _wheel),
    Column("of limit", 10, 6, 2, False, _bar),
    Column("battery", 7, 1, 0, True, _battery),
    Column("posture", 9, 2, 0, False, _posture),
    Column("heard", 6, 3, 0, True, _heard),
    Column("signal", 6, 7, 0, True, _signal),
    Column("outcomes", 8, 4, 16, False, _outcomes),
    Column("doing", 16, 5, 999, False, _doing),
)
