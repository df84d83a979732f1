"""Notices, legend and key hints: the quiet lines under the table.

Owns their texts. Knows no screen.
"""

from collections.abc import Sequence
from typing import Final

from console.view import FleetView
from console.widgets.lines import Lines
from console.widgets.picture import Part, cut, fit
from console.widgets.status import STOP_KEY
from console.widgets.words import OUTCOMES, Line, Span, Tone, printable, session_time

HINTS: Final = (
    Part(f"{STOP_KEY} ALL-STOP", Tone.STRONG),
    Part("f1 help", Tone.PLAIN),
    Part("tab complete", Tone.PLAIN, 3),
    Part("up/down history", Tone.PLAIN, 4),
    Part("pgup/pgdn table", Tone.PLAIN, 1),
    Part("f3 next wrong", Tone.PLAIN, 2),
    Part("ctrl+p palette", Tone.PLAIN, 5),
    Part("ctrl+q quit", Tone.PLAIN),
)
REPLAY_HINTS: Final = (
    Part("f1 help", Tone.PLAIN),
    Part("pgup/pgdn table", Tone.PLAIN, 1),
    Part("f3 next wrong", Tone.PLAIN, 2),
    Part("ctrl+p palette", Tone.PLAIN, 5),
    Part("ctrl+q quit", Tone.PLAIN),
)


class Notices(Lines):
    """The newest lines that a person should read, the newest at the bottom."""

    DEFAULT_CSS = "Notices { height: 3; background: $surface; }"

    def __init__(self) -> None:
        super().__init__()
        self._view: FleetView | None = None

    def on_resize(self) -> None:
        """Show as many as there is room for now."""
        if self._view is not None:
            self.show_view(self._view)

    def show_view(self, view: FleetView) -> None:
        """Show as many of the newest notices as there is room for."""
        self._view = view
        width, rows = self.size.width - 1, self.size.height
        newest = view.notices[-rows:] if rows else ()
        self.show([_notice_line(t_ns, text, width) for t_ns, text in newest])


def _notice_line(t_ns: int, text: str, width: int) -> Line:
    spans: list[Span] = [
        (f" {session_time(t_ns)} ", Tone.DIM),
        (printable(text), Tone.PLAIN),
    ]
    return cut(spans, width)


def legend(width: int) -> Line:
    """What the outcomes' glyphs mean, the newest being at the right."""
    spans: list[Span] = [(" outcomes:", Tone.DIM)]
    for word in OUTCOMES.values():
        spans += [(f" {word.glyph} ", word.tone), (word.word, Tone.DIM)]
    return cut(spans, width)


def hint_line(hints: Sequence[Part], width: int) -> Line:
    """Keys, those first that a person in a hurry looks for."""
    return ((" ", Tone.PLAIN), *fit(hints, width - 2))
