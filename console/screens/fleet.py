"""Fleet screen: status, one line a module, notices, and the order line.

Owns the layout and what the order line's result says. Knows no source: it is handed pictures,
and typed lines go to the desk.
"""

from typing import ClassVar

from textual import events
from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal
from textual.screen import Screen
from textual.widgets import Static

from console.screens.desk import Desk
from console.widgets.fleet_table import FleetTable
from console.widgets.lines import Lines
from console.widgets.notices import HINTS, REPLAY_HINTS, Notices, hint_line, legend
from console.widgets.order_line import Completions, OrderLine
from console.widgets.picture import NEVER_TRANSMITS, Picture, cut
from console.widgets.replay_bar import ReplayBar, ReplayControls
from console.widgets.status import Status
from console.widgets.words import Line, Tone, printable

OTHER_ROWS = 8
"""Rows that are neither modules nor notices: status 3, header, legend, order, result, keys."""
REPLAY_OTHER_ROWS = OTHER_ROWS + 2
LEAST_NOTICES = 3
MOST_NOTICES = 12


class FleetScreen(Screen[None]):
    """The whole fleet at a glance, and where orders are given."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("f3", "next_wrong", "Next module in trouble"),
        Binding("pageup", "page(-1)", "Page up", show=False),
        Binding("pagedown", "page(1)", "Page down", show=False),
    ]
    DEFAULT_CSS = """
    FleetScreen {
        layout: vertical;
        #header { background: $surface; text-style: bold; }
        #legend { background: $background; }
        #entry { height: 1; }
        #prompt { width: 8; height: 1; text-style: bold; }
        #result { background: $background; }
        #hints { background: $panel; }
    }
    """

    def __init__(
        self, desk: Desk, completions: Completions | None, controls: ReplayControls | None
    ) -> None:
        super().__init__()
        self._desk = desk
        self._completions = completions
        self._controls = controls
        self._picture: Picture | None = None
        self._result: Line = ()
        self._notice_rows = 0
        # The parts are kept at hand, not looked up: pictures come also while the screen is
        # being built or taken down.
        self._status = Status()
        self._header = Lines(id="header")
        self._table = FleetTable(self._header)
        self._legend = Lines(id="legend")
        self._notices = Notices()
        self._order_line = OrderLine(self._words)
        self._result_line = Lines(id="result")
        self._hints = Lines(id="hints")
        self._replay_bar = ReplayBar()

    def compose(self) -> ComposeResult:
        """Lay the parts out from top to bottom."""
        yield self._status
        yield self._header
        yield self._table
        yield self._legend
        yield self._notices
        with Horizontal(id="entry"):
            yield Static(" order> ", id="prompt", markup=False)
            yield self._order_line
        yield self._result_line
        yield self._hints
        if self._controls is not None:
            yield self._replay_bar

    def on_mount(self) -> None:
        """Put the cursor where the work begins."""
        if self._controls is not None:
            self._order_line.placeholder = NEVER_TRANSMITS
            self._order_line.disabled = True
            self._table.focus()
        else:
            self._order_line.focus()

    def show_picture(self, picture: Picture) -> None:
        """Hand each part what it shows."""
        self._picture = picture
        self._share_room(len(picture.view.modules))
        self._status.show_picture(picture)
        self._table.show_view(picture.view)
        self._notices.show_view(picture.view)
        if self._controls is not None:
            self._replay_bar.show_controls(self._controls)

    def on_resize(self, _event: events.Resize) -> None:
        """Fit the texts anew, once the parts have their new sizes."""
        self.call_after_refresh(self._fit)

    def say(self, text: str, *, refused: bool) -> None:
        """Show one line below the order line."""
        glyph, tone = ("! refused:", Tone.ALERT) if refused else ("ok:", Tone.STRONG)
        self._show_result(((f" {glyph} ", tone), (printable(text), Tone.PLAIN)))

    def action_page(self, pages: int) -> None:
        """Page the table, wherever the focus is."""
        self._table.action_page(pages)

    def action_next_wrong(self) -> None:
        """Go to the next module in trouble."""
        if not self._table.next_wrong():
            self.say("no module is in trouble", refused=False)

    def on_key(self, event: events.Key) -> None:
        """What is typed while the table has the focus goes to the order line."""
        typed = event.character if event.is_printable else None
        if typed and self.focused is self._table and not self._order_line.disabled:
            event.stop()
            self._order_line.focus()
            self._order_line.insert_text_at_cursor(typed)

    def on_order_line_given(self, message: OrderLine.Given) -> None:
        """Do what was typed, and say what came of it."""
        reply = self._desk.give(message.text)
        if reply.help:
            self.app.call_later(self.app.run_action, "help")
            return
        self.say(
            f"{message.text} -- {reply.text}" if reply.refused else reply.text,
            refused=reply.refused,
        )

    def on_order_line_offered(self, message: OrderLine.Offered) -> None:
        """Show what may come next; an empty line keeps the last result in sight."""
        if message.words:
            offered = "  ".join(map(printable, message.words))
            self._show_result(((" next: ", Tone.DIM), (offered, Tone.DIM)))

    def on_fleet_table_chosen(self, message: FleetTable.Chosen) -> None:
        """Name the chosen module in the order line."""
        if message.typed and not self._order_line.disabled:
            self._order_line.name_module(message.name)
            self._order_line.focus()

    def _words(self, text: str) -> list[str]:
        return self._desk.words(text, self._completions(text) if self._completions else [])

    def _show_result(self, line: Line) -> None:
        self._result = line
        self._result_line.show((cut(line, self.size.width - 1),))

    def _share_room(self, modules: int) -> None:
        """Give the notices the rows that the modules do not need, within bounds."""
        others = REPLAY_OTHER_ROWS if self._controls is not None else OTHER_ROWS
        spare = self.size.height - others - modules - 1
        rows = min(max(spare, LEAST_NOTICES), MOST_NOTICES)
        if rows != self._notice_rows:
            self._notice_rows = rows
            self._notices.styles.height = rows

    def _fit(self) -> None:
        width = self.size.width
        self._legend.show((legend(width),))
        hints = REPLAY_HINTS if self._controls is not None else HINTS
        self._hints.show((hint_line(hints, width),))
        self._show_result(self._result)
        if self._picture is not None:
            self.show_picture(self._picture)
