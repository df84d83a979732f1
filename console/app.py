"""App: polls the fleet's source, hands pictures to the screens, and holds the keys that work
everywhere.

Owns the poll timer, the all-stop key, help and quitting. It starts no thread and never waits
for the source: views are read, orders handed over.

The all-stop key is ctrl+g. It is one byte (0x07) on the wire, so no terminal, tmux or slow SSH
line can cut it in two or hold it back, as they can an Escape or a function key's sequence. It
is no flow control (ctrl+s, ctrl+q), no signal (ctrl+c, ctrl+z, ctrl+backslash), no line editing
(the order line uses ctrl+a d e f k u v w x and c; ctrl+x cuts text there, and a person who cuts
a word must not stop the fleet), no other name of Tab, Enter or Backspace (ctrl+i j m h), no
usual prefix of a multiplexer (ctrl+a, ctrl+b), and nothing that a browser takes from a
terminal in a page (ctrl+n t w). One hand reaches it. Line editors use it to abort, so the hand
that knows it means the same. It is a priority binding of the app: Textual asks the app before
the screen, the dialog, the palette and the focused widget. Terminals that report modifiers may
send ctrl+shift+g where others send the same byte, so both are bound.
"""

import os
import time
from collections.abc import Callable, Iterable
from typing import ClassVar

from textual.app import App, SystemCommand
from textual.binding import Binding, BindingType
from textual.screen import Screen

from console.errors import ConsoleError
from console.screens.desk import Desk
from console.screens.fleet import FleetScreen
from console.screens.help import HelpScreen
from console.screens.leave import LeaveDialog
from console.screens.shows import ShowsPicture
from console.view import FleetSource, FleetView
from console.widgets.picture import NEVER_TRANSMITS, REPLAY, Picture, make_picture
from console.widgets.replay_bar import ReplayControls, next_speed
from console.widgets.status import STOP_KEY

POLL_S = 1 / 8
STALE_NS = 3_000_000_000
"""The engine gives a new view many times a second; so long without one, it does not work."""


class FleetApp(App[None]):
    """The console's screens over one source.

    ``banner``: SIMULATED, REPLAY or empty. ``controls``: the player, for a replay only.
    ``completions``: the words that may follow a text (order_line.py). ``clock_ns``: real time.
    """

    TITLE = "Tumblewire"
    CSS = """
    OptionList:nocolor>.option-list--option-highlighted { text-style: reverse; }
    Input:nocolor>.input--cursor { text-style: reverse; }
    """
    BINDINGS: ClassVar[list[BindingType]] = [
        Binding(f"{STOP_KEY},ctrl+shift+g", "stop_all", "All-stop", priority=True),
        Binding("f1", "help", "Help"),
        Binding("f5", "replay('toggle')", "Play or pause"),
        Binding("f6", "replay('slower')", "Slower"),
        Binding("f7", "replay('faster')", "Faster"),
        Binding("f8", "replay('step')", "One step"),
        Binding("f9", "replay('next_fault')", "Next fault"),
    ]

    def __init__(
        self,
        source: FleetSource,
        *,
        operator: str,
        banner: str = "",
        controls: ReplayControls | None = None,
        completions: Callable[[str], list[str]] | None = None,
        clock_ns: Callable[[], int] = time.monotonic_ns,
    ) -> None:
        # Under NO_COLOR Textual by itself turns colours into greys, which are colours still.
        # With native colours it sends none at all.
        super().__init__(ansi_color=True if "NO_COLOR" in os.environ else None)
        self.animation_level = "none"
        self._source = source
        self._operator = operator
        self._banner = banner
        self._controls = controls
        self._clock_ns = clock_ns
        self._fleet = FleetScreen(Desk(source, operator), completions, controls)
        self._newest_t_ns: int | None = None
        self._newest_at_ns = 0

    def get_default_screen(self) -> Screen[None]:
        """Begin with the fleet."""
        return self._fleet

    def on_mount(self) -> None:
        """Begin to poll."""
        self.set_interval(POLL_S, self.poll)
        self.call_after_refresh(self.poll)

    def poll(self) -> None:
        """Look at the source now and show what is new; the timer does this by itself. It is also
        the heart that keeps wheels turning: it beats while the event loop runs, whether or not
        the terminal takes what is drawn."""
        self._source.beat()
        if self._controls is not None:
            self._controls.advance(self._clock_ns())
        picture = self._picture()
        for screen in self.screen_stack:
            if isinstance(screen, ShowsPicture) and screen.is_mounted:
                screen.show_picture(picture)

    def get_system_commands(self, screen: Screen[object]) -> Iterable[SystemCommand]:
        """Keep Textual's commands and add the help."""
        yield from super().get_system_commands(screen)
        yield SystemCommand("Help", "Keys, glyphs, orders, a frozen screen", self.action_help)

    def check_action(self, action: str, parameters: tuple[object, ...]) -> bool | None:
        """Replay keys are there only for a replay."""
        return action != "replay" or self._controls is not None

    def action_stop_all(self) -> None:
        """All-stop, now."""
        if self._banner == REPLAY:
            self._fleet.say(f"{NEVER_TRANSMITS}; press it in the live console", refused=True)
            return
        try:
            self._source.stop("key")
        except ConsoleError as error:
            self._fleet.say(str(error), refused=True)
            return
        self._fleet.say("all-stop given", refused=False)
        self.poll()

    def action_help(self) -> None:
        """Open the help, once."""
        if not isinstance(self.screen, HelpScreen):
            self.push_screen(HelpScreen())

    async def action_quit(self) -> None:
        """Leave; ask first where a wheel turns."""
        if self._banner == REPLAY or not self._picture().turning:
            self.exit()
        elif not isinstance(self.screen, LeaveDialog):
            self.push_screen(LeaveDialog(self._rest_all), self._left)

    def action_replay(self, what: str) -> None:
        """Drive the player."""
        controls = self._controls
        if controls is None:
            return
        deeds: dict[str, Callable[[], object]] = {
            "toggle": controls.toggle,
            "slower": lambda: controls.set_speed(next_speed(controls.speed, -1)),
            "faster": lambda: controls.set_speed(next_speed(controls.speed, 1)),
            "step": controls.step,
            "next_fault": controls.next_fault,
        }
        deeds[what]()
        self.poll()

    def _left(self, leave: bool | None) -> None:
        if leave:
            self.exit()

    def _rest_all(self) -> str:
        try:
            return self._source.order("all rest")
        except ConsoleError as error:
            return f"refused: {error}"

    def _picture(self) -> Picture:
        view = self._source.view()
        return make_picture(
            view,
            self._source.log_trouble(),
            banner=self._banner,
            operator=view.operator or self._operator,
            stale_s=self._stale_s(view),
        )

    def _stale_s(self, view: FleetView) -> int:
        """Whole seconds without a newer view, where that is too long; a replay may stand."""
        now_ns = self._clock_ns()
        if view.t_ns != self._newest_t_ns or view.closed or self._controls is not None:
            self._newest_t_ns, self._newest_at_ns = view.t_ns, now_ns
        age_ns = now_ns - self._newest_at_ns
        return age_ns // 1_000_000_000 if age_ns >= STALE_NS else 0
