"""Picture: one polled view of the fleet with what a person needs to see first drawn from it.

Owns the summary (who moves, who is in trouble, who has not confirmed) and the fitting of texts
into a width. Pure: knows no screen library.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from rich.cells import cell_len, set_cell_size

from console.view import FleetView
from console.widgets.words import Line, Span, Tone, is_moving, module_trouble, printable

REPLAY: Final = "REPLAY"
SIMULATED: Final = "SIMULATED"
NEVER_TRANSMITS: Final = "a replay never transmits"
GAP: Final = "  "


@dataclass(frozen=True, slots=True)
class Picture:
    """A view, the log's trouble, and the summary. ``wrong`` pairs a name with its state's word;
    ``stale_s``: whole seconds for which the engine has given no newer view, 0 while it does."""

    view: FleetView
    log_trouble: str
    banner: str
    operator: str
    stale_s: int
    moving: tuple[str, ...]
    turning: tuple[str, ...]
    wrong: tuple[tuple[str, str], ...]
    missing: tuple[str, ...]

    @property
    def replay(self) -> bool:
        """Whether this comes from the log and not from a link."""
        return self.banner == REPLAY


def make_picture(
    view: FleetView, log_trouble: str, *, banner: str, operator: str, stale_s: int = 0
) -> Picture:
    """Draw the summary from a view. Names come in the order of the view's modules."""
    moving, turning, wrong = [], [], []
    for module in view.modules:
        trouble = module_trouble(module, view.t_ns)
        if is_moving(module):
            moving.append(module.name)
        if module.wheel_rpm:
            turning.append(module.name)
        if trouble is not None:
            wrong.append((module.name, trouble.word))
    names = {module.module: module.name for module in view.modules}
    missing = tuple(names.get(each, f"module {each}") for each in view.stop.missing)
    shown = banner or (SIMULATED if view.simulated else "")
    return Picture(
        view,
        log_trouble,
        shown,
        operator,
        stale_s,
        tuple(moving),
        tuple(turning),
        tuple(wrong),
        missing,
    )


@dataclass(frozen=True, slots=True)
class Part:
    """A piece of a line. The part with the highest ``rank`` is the first to go where the line
    is too long; rank 0 stays and is cut at the edge."""

    text: str
    tone: Tone
    rank: int = 0


def fit(parts: Iterable[Part], width: int) -> Line:
    """Join parts two blanks apart, leave out those of the highest rank until the rest fits."""
    kept = [part for part in parts if part.text]
    while sum(cell_len(part.text) + len(GAP) for part in kept) - len(GAP) > width:
        worst = max(kept, key=lambda part: part.rank)
        if worst.rank == 0:
            break
        kept.remove(worst)
    spans: list[Span] = []
    for part in kept:
        if spans:
            spans.append((GAP, Tone.PLAIN))
        spans.append((printable(part.text), part.tone))
    return cut(spans, width)


def cut(spans: Sequence[Span], width: int) -> Line:
    """Cut a line at ``width`` cells; ``~`` in the last cell says that something is missing."""
    total = 0
    for index, (text, tone) in enumerate(spans):
        cells = cell_len(text)
        if total + cells > width:
            room = width - total
            ending = set_cell_size(text, room - 1) + "~" if room > 0 else ""
            return (*spans[:index], (ending, tone))
        total += cells
    return tuple(spans)


def names_within(names: Sequence[str], width: int) -> str:
    """List names as far as they fit, then how many more there are; at least one is shown."""
    listed = names[0] if names else ""
    for index, name in enumerate(names[1:], 2):
        rest = len(names) - index
        tail = f" +{rest} more" if rest else ""
        if cell_len(f"{listed}, {name}{tail}") > width and cell_len(", ".join(names)) > width:
            return f"{listed} +{rest + 1} more"
        listed = f"{listed}, {name}"
    return listed
