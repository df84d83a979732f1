"""Lines: a widget of a few lines of toned text that redraws only the lines that changed.

Owns the drawing of tones, shared with the fleet table. Knows nothing of what the lines say.
"""

from collections.abc import Callable, Sequence
from typing import ClassVar

from rich.segment import Segment
from rich.style import Style
from textual.geometry import Region
from textual.strip import Strip
from textual.widget import Widget

from console.widgets.words import Line, Tone

TONE_CLASSES = {f"tone--{tone}" for tone in Tone}

# Without colour (NO_COLOR) weight, underline and reverse tell the tones apart.
TONE_CSS = """
    &>.tone--plain { color: $foreground; }
    &>.tone--dim { color: $foreground 70%; }
    &>.tone--strong { color: $foreground; text-style: bold; }
    &>.tone--good { color: $text-success; }
    &>.tone--moving { color: $text-warning; text-style: bold; }
    &>.tone--alert { color: $text-error; text-style: bold; }
    &>.tone--banner { color: $background; background: $foreground; text-style: bold; }
    &:nocolor {
        &>.tone--banner { text-style: bold reverse; }
        &>.tone--alert { text-style: bold underline; }
    }
"""


def strip_of(line: Line, width: int, style_of: Callable[[Tone], Style], base: Style) -> Strip:
    """Draw a line, filled up with blanks to ``width`` cells."""
    segments = [Segment(text, style_of(tone)) for text, tone in line if text]
    return Strip(segments).adjust_cell_length(width, base)


class Lines(Widget):
    """A few lines of toned text. The height is the style sheet's; missing lines are blank."""

    ALLOW_SELECT = False
    COMPONENT_CLASSES: ClassVar[set[str]] = TONE_CLASSES
    DEFAULT_CSS = "Lines { height: 1; width: 1fr; " + TONE_CSS + "}"

    def __init__(self, *, id: str | None = None, classes: str | None = None) -> None:
        super().__init__(id=id, classes=classes)
        self._lines: tuple[Line, ...] = ()

    def show(self, lines: Sequence[Line]) -> None:
        """Take new content; refresh what differs."""
        old, self._lines = self._lines, tuple(lines)
        for y in range(max(len(old), len(self._lines))):
            if old[y : y + 1] != self._lines[y : y + 1]:
                self.refresh(Region(0, y, self.size.width, 1))

    def render_line(self, y: int) -> Strip:
        """Draw one line."""
        line = self._lines[y] if y < len(self._lines) else ()
        return strip_of(line, self.size.width, self.style_of, self.rich_style)

    def style_of(self, tone: Tone) -> Style:
        """The style of a tone here, after the theme."""
        return self.get_component_rich_style(f"tone--{tone}")
