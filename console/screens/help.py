"""Help screen: keys, glyphs, how orders read, and what to do when the screen is frozen.

Owns the help's text; glyphs and words come from the tables that the fleet screen draws from.
"""

from collections.abc import Iterable
from typing import ClassVar, Final

from textual import events
from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import VerticalScroll
from textual.screen import Screen
from textual.widgets import Static

from console.widgets.lines import Lines
from console.widgets.notices import hint_line
from console.widgets.picture import Part, Picture
from console.widgets.replay_bar import KEYS as REPLAY_KEYS
from console.widgets.status import STOP_KEY, Status
from console.widgets.words import ACTIVITIES, OUTCOMES, STATES, Tone, Word

KEYS: Final = (
    (STOP_KEY, "all-stop: every wheel to rest, from every screen and dialog"),
    ("f1", "this help; type help where a terminal keeps f1 to itself"),
    ("f3", "to the next module in trouble"),
    ("enter", "give the order; in the table: name the module in the order line"),
    ("tab, right", "take the completion; tab on an empty line: to the table"),
    ("up, down", "orders typed before; in the table: module above, below"),
    ("pgup, pgdn", "page through the table, also from the order line"),
    ("ctrl+p", "palette: themes and more"),
    ("ctrl+q", "quit; where a wheel turns, the console asks first"),
)

FROZEN: Final = f"""\
  If the screen is frozen no key works here, {STOP_KEY} neither. Then:
  1. Keep hands and faces away from the modules: a wheel may be turning.
  2. In another terminal on this computer type: pkill -TERM tumblewire
     That is an all-stop first; then the console ends.
  3. A wheel turns only while this screen gives signs of life: a second
     after the last one each module rests its own, whatever becomes of
     this console. A brake already engaged stays engaged.
  4. Go near only when every wheel is at rest. An all-stop stays in
     force until a person clears it, also for a console started later."""

ORDERS: Final = """\
  birch pivot forward at 4500     one module, one motion; speed in rpm
  birch, elm pivot back at 4500   several: one command for each
  cedar spin at 2000 for 5 s      hold the wheel at a speed, then rest it
  birch, elm hop at 7000 together all begin at one agreed time
  cedar flash                     light and beep: which box is it?
  cedar lock by Ada               Ada locks it out before she touches it
  cedar unlock by Ada             only Ada's name takes her lock off
  cedar set wheel-limit to 6000   a setting of the module's own
  all rest                        every wheel gently to a stop
  stop                            all-stop, typed
  clear 3                         lift all-stop 3; it must be the newest"""

CARE: Final = """\
  Wheels store energy, cells burn, magnets pinch and disturb implants,
  modules jump. Keep the area clear. Local rules and licensed practice
  (laboratory, radio, cells) come before anything said here."""


def help_text() -> str:
    """The whole help, plain text, narrow enough for 80 columns."""
    keys = "\n".join(f"  {key:12}{what}" for key, what in KEYS)
    replay = "\n".join(f"  {key:12}{what}" for key, what in REPLAY_KEYS)
    parts = (
        ("KEYS", keys),
        ("WHEN THE SCREEN IS FROZEN", FROZEN),
        ("ORDERS", ORDERS),
        ("OUTCOMES (newest at the right)", _glyphs(OUTCOMES.values())),
        ("ACTIVITY", _glyphs(ACTIVITIES.values())),
        ("STATE (the most pressing one is shown)", _glyphs(STATES)),
        ("IN A REPLAY (it never transmits)", replay),
        ("CARE", CARE),
    )
    return "\n\n".join(f"{title}\n{text}" for title, text in parts)


def _glyphs(words: Iterable[Word]) -> str:
    """Glyph and word of each, four a line."""
    texts = [f"{word.text:17}" for word in words]
    lines = ("".join(texts[at : at + 4]).rstrip() for at in range(0, len(texts), 4))
    return "\n".join(f"  {line}" for line in lines)


class HelpScreen(Screen[None]):
    """The help, under the same status lines as everywhere."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape,f1", "dismiss", "Back"),
    ]
    DEFAULT_CSS = """
    HelpScreen {
        VerticalScroll { height: 1fr; padding: 0 1; scrollbar-size: 1 1; }
        Static { width: 1fr; }
        #hints { background: $panel; }
    }
    """

    def __init__(self) -> None:
        super().__init__()
        self._status = Status()
        self._hints = Lines(id="hints")

    def compose(self) -> ComposeResult:
        """Status above, text, keys below."""
        yield self._status
        with VerticalScroll():
            yield Static(help_text(), markup=False)
        yield self._hints

    def show_picture(self, picture: Picture) -> None:
        """Keep the status lines new."""
        self._status.show_picture(picture)

    def on_resize(self, _event: events.Resize) -> None:
        """Fit the key line anew."""
        hints = (
            Part(f"{STOP_KEY} ALL-STOP", Tone.STRONG),
            Part("escape or f1 back", Tone.PLAIN),
            Part("up/down, pgup/pgdn scroll", Tone.PLAIN, 1),
        )
        line = hint_line(hints, self.size.width)
        self.call_after_refresh(self._hints.show, (line,))
