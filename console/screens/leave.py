"""Leave dialog: asked where a person quits while a wheel turns.

Owns its three answers: rest first (and leave when all wheels are still), leave at once, stay.
Knows no source; resting is a callable.
"""

from collections.abc import Callable
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal, Vertical
from textual.screen import ModalScreen
from textual.widgets import Button

from console.widgets.lines import Lines
from console.widgets.picture import Part, Picture, fit, names_within
from console.widgets.status import STOP_KEY
from console.widgets.words import Line, Tone

BOX_CELLS = 66
TEXT_CELLS = BOX_CELLS - 6


class LeaveDialog(ModalScreen[bool]):
    """Dismissed with True: leave; with False: stay."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("r", "rest", "Rest first"),
        Binding("l", "dismiss(True)", "Leave"),
        Binding("escape,s", "dismiss(False)", "Stay"),
        Binding("left", "app.focus_previous", "Answer before", show=False),
        Binding("right", "app.focus_next", "Answer after", show=False),
    ]
    DEFAULT_CSS = f"""
    LeaveDialog {{
        align: center middle;
        #box {{
            width: {BOX_CELLS}; height: auto; padding: 1 2;
            background: $surface; border: solid $foreground;
        }}
        #text {{ height: 5; }}
        Horizontal {{ height: 1; margin-top: 1; }}
        Button {{ margin-right: 2; }}
        Button:nocolor:focus {{ text-style: reverse; }}
    }}
    """

    def __init__(self, rest: Callable[[], str]) -> None:
        super().__init__()
        self._rest = rest
        self._answer = ""
        self._told = Lines(id="text")

    def compose(self) -> ComposeResult:
        """A few lines and three answers."""
        with Vertical(id="box"):
            yield self._told
            with Horizontal():
                yield Button("r  rest first, then leave", id="rest", compact=True)
                yield Button("l  leave now", id="leave", compact=True)
                yield Button("s  stay", id="stay", compact=True)

    def show_picture(self, picture: Picture) -> None:
        """Show which wheels turn; leave by itself once they rest, where that was asked."""
        if self._answer and not picture.turning:
            if self.is_current:
                self.dismiss(True)
            return
        self._told.show(self._text(picture))

    def on_button_pressed(self, event: Button.Pressed) -> None:
        """Take an answer given by the mouse or Enter."""
        if event.button.id == "rest":
            self.action_rest()
        else:
            self.dismiss(event.button.id == "leave")

    def action_rest(self) -> None:
        """Ask every wheel to rest and wait."""
        self._answer = self._rest()

    def _text(self, picture: Picture) -> tuple[Line, ...]:
        names = names_within(picture.turning, TEXT_CELLS - 18)
        count = len(picture.turning)
        verb = "wheel turns" if count == 1 else "wheels turn"
        told = f"{count} {verb}: {names}" if count else "Every wheel rests now."
        rows = (
            Part(told, Tone.MOVING if count else Tone.PLAIN),
            Part("Left alone, each rests when its ordered time is over.", Tone.PLAIN),
            Part(self._answer, Tone.STRONG),
            Part("Waiting for the wheels to rest." if self._answer else "", Tone.PLAIN),
            Part(f"{STOP_KEY} ALL-STOP", Tone.STRONG),
        )
        return tuple(fit((row,), TEXT_CELLS) for row in rows)
