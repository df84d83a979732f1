"""The review as text for a terminal: aligned tables, readable without colour.

Owns layout and wording. Counts nothing. Names come from radios and from other people's files, so
nothing unprintable of them reaches the terminal.
"""

from collections.abc import Sequence
from typing import Final

from console.review.overview import Overview
from console.review.rates import Group

_HEADINGS: Final = {"speed_rpm": "speed rpm"}
_OTHERS: Final = ("short", "over", "stuck", "adrift", "refused", "cut", "unseen")
_COUNT_HEADINGS: Final = ("trials", "landed", "rate %", "95 % interval", *_OTHERS)
_NOTHING: Final = "-"
_GAP: Final = "  "

_FOOT: Final = (
    "Trials are the motions that landed, fell short, went over, stuck or ended adrift; refused,",
    "cut and unseen ones stand beside them and count in no rate. Intervals: Wilson, 95 %.",
)


def review_text(review: Overview) -> str:
    """Return the review as lines of text, ending with a line break."""
    if not review.groups:
        return "No motions to review.\n"
    lines = _table(review.groups)
    if review.by != ("module",):
        lines += ["", "Totals by module", *_table(review.modules)]
    lines += ["", *_FOOT, *_simulated_lines(review)]
    return "\n".join(lines) + "\n"


def _simulated_lines(review: Overview) -> list[str]:
    if review.excluded_simulated:
        count = review.excluded_simulated
        motions = "motion was" if count == 1 else "motions were"
        return [f"{count} simulated {motions} left out, since real ones are there."]
    if all(group.simulated for group in review.groups):
        return ["SIMULATED: all of these motions."]
    if any(group.simulated for group in review.groups):
        return ["SIMULATED motions are counted in lines of their own."]
    return []


def _table(groups: Sequence[Group]) -> list[str]:
    mixed = len({group.simulated for group in groups}) > 1
    keys = [field for field, _ in groups[0].key]
    heads = [_HEADINGS.get(field, field) for field in keys] + ["source"] * mixed
    rows = [[*heads, *_COUNT_HEADINGS], *(_cells(group, mixed) for group in groups)]
    to_right = [field in {"speed_rpm", "session"} for field in keys] + [False] * mixed
    to_right += [True] * len(_COUNT_HEADINGS)
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    return [_line(row, widths, to_right) for row in rows]


def _line(row: Sequence[str], widths: Sequence[int], to_right: Sequence[bool]) -> str:
    cells = (
        cell.rjust(width) if right else cell.ljust(width)
        for cell, width, right in zip(row, widths, to_right, strict=True)
    )
    return _GAP.join(cells).rstrip()


def _cells(group: Group, mixed: bool) -> list[str]:
    cells = [_printable(value) for _, value in group.key]
    if mixed:
        cells.append("SIMULATED" if group.simulated else "real")
    cells += [str(group.trials), str(group.landed), _percent(group.rate), _interval(group)]
    return cells + [str(getattr(group, name)) for name in _OTHERS]


def _printable(value: int | str) -> str:
    text = "".join(each if each.isprintable() else "?" for each in str(value))
    return text or _NOTHING


def _percent(part: float | None) -> str:
    return _NOTHING if part is None else f"{100 * part:.1f}"


def _interval(group: Group) -> str:
    if group.low is None or group.high is None:
        return _NOTHING
    return f"{_percent(group.low)} to {_percent(group.high)}".rjust(13)
