"""Fleet table: one line a module, of which only those are redrawn that read differently.

Owns scrolling, the cursor and what each line last showed. What a line says is
fleet_columns.py's. Built on the line API with one region a row, because a table widget of a
thousand rows costs far more processor time for ten changed rows than drawing those ten.

Modules keep the order in which they were first heard: a table that sorts itself moves under the
hand. Lines out of sight are not made at all.
"""

from typing import ClassVar

from rich.style import Style
from textual import events
from textual.binding import Binding, BindingType
from textual.geometry import Region, Size
from textual.message import Message
from textual.scroll_view import ScrollView
from textual.strip import Strip

from console.view import FleetView
from console.widgets.fleet_columns import Plan, SteadyBattery, plan_columns
from console.widgets.lines import TONE_CLASSES, TONE_CSS, Lines, strip_of
from console.widgets.words import Line, Tone, module_trouble

SCROLLBAR_CELLS = 1


class FleetTable(ScrollView, can_focus=True):
    """The modules; ``header`` is the widget above that shows the titles."""

    ALLOW_SELECT = False
    ALLOW_MAXIMIZE = False
    COMPONENT_CLASSES: ClassVar[set[str]] = {*TONE_CLASSES, "fleet--cursor"}
    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("up", "move(-1)", "Module above", show=False),
        Binding("down", "move(1)", "Module below", show=False),
        Binding("pageup", "page(-1)", "Page up", show=False),
        Binding("pagedown", "page(1)", "Page down", show=False),
        Binding("home", "move(-1000000)", "First module", show=False),
        Binding("end", "move(1000000)", "Last module", show=False),
        Binding("enter", "choose", "Name it in the order line", show=False),
    ]
    DEFAULT_CSS = (
        "FleetTable { height: 1fr; overflow-x: hidden; overflow-y: auto; scrollbar-size: 1 1; "
        + TONE_CSS
        + "&:focus>.fleet--cursor { background: $block-cursor-blurred-background; }"
        "&:nocolor:focus>.fleet--cursor { text-style: reverse; } }"
    )

    class Chosen(Message):
        """A person chose a module: Enter on its line, or a click."""

        def __init__(self, name: str, typed: bool) -> None:
            self.name = name
            self.typed = typed
            super().__init__()

    def __init__(self, header: Lines) -> None:
        super().__init__()
        self._header = header
        self._view: FleetView | None = None
        self._plan: Plan = plan_columns(0)
        self._plan_for: tuple[int, int, int] = (0, 0, 0)
        self._drawn: dict[int, Line] = {}
        self._cursor = 0
        self._battery = SteadyBattery()

    @property
    def cursor(self) -> int:
        """Row under the cursor, from 0."""
        return self._cursor

    def show_view(self, view: FleetView) -> None:
        """Take a new view; refresh the visible rows that read differently."""
        before = len(self._view.modules) if self._view else 0
        self._view = view
        if len(view.modules) != before:
            self.virtual_size = Size(self.size.width, len(view.modules))
            self._cursor = max(min(self._cursor, len(view.modules) - 1), 0)
        self._replan()
        for row in self._visible_rows():
            if self._line(row) != self._drawn.get(row):
                self._refresh_row(row)

    def render_line(self, y: int) -> Strip:
        """Draw one visible line."""
        row = y + self.scroll_offset.y
        if self._view is None or row >= len(self._view.modules):
            return Strip.blank(self.size.width, self.rich_style)
        line = self._drawn[row] = self._line(row)
        strip = strip_of(line, self.size.width, self._style_of, self.rich_style)
        if row == self._cursor and self.has_focus:
            strip = strip.apply_style(self._cursor_style())
        return strip

    def action_move(self, rows: int) -> None:
        """Move the cursor by so many rows, as far as there are any."""
        self._move_to(self._cursor + rows)

    def action_page(self, pages: int) -> None:
        """Move the cursor by screenfuls."""
        self._move_to(self._cursor + pages * max(self.size.height - 1, 1))

    def action_choose(self) -> None:
        """Name the module under the cursor to whoever listens."""
        self._choose(typed=True)

    def next_wrong(self) -> bool:
        """Move the cursor to the next module in trouble, round the end; False: none is."""
        if self._view is None:
            return False
        count = len(self._view.modules)
        for step in range(1, count + 1):
            row = (self._cursor + step) % count
            if module_trouble(self._view.modules[row], self._view.t_ns) is not None:
                self._move_to(row)
                return True
        return False

    def on_click(self, event: events.Click) -> None:
        """Put the cursor where the person clicked."""
        row = event.y + self.scroll_offset.y
        if self._view is not None and 0 <= row < len(self._view.modules):
            self._move_to(row)
            self._choose(typed=False)

    def on_resize(self, _event: events.Resize) -> None:
        """Choose columns anew."""
        self._replan()

    def on_focus(self) -> None:
        """Show the cursor's bar."""
        self._refresh_row(self._cursor)

    def on_blur(self) -> None:
        """Take the cursor's bar away."""
        self._refresh_row(self._cursor)

    def _choose(self, typed: bool) -> None:
        if self._view is not None and self._cursor < len(self._view.modules):
            self.post_message(self.Chosen(self._view.modules[self._cursor].name, typed))

    def _move_to(self, row: int) -> None:
        count = len(self._view.modules) if self._view else 0
        row = max(min(row, count - 1), 0)
        if row == self._cursor:
            return
        left, self._cursor = self._cursor, row
        self.scroll_to_region(Region(0, row, 1, 1), animate=False, force=True)
        self._refresh_row(left)
        self._refresh_row(row)

    def _replan(self) -> None:
        """Plan columns where the width or the longest name changed. The scrollbar's cell is
        kept free also where there is none, so that columns stay when it comes."""
        modules = self._view.modules if self._view else ()
        width = self.container_size.width - SCROLLBAR_CELLS
        names = [module.name for module in modules]
        kinds = [module.kind for module in modules]
        needs = (width, max(map(len, names), default=0), max(map(len, kinds), default=0))
        if needs == self._plan_for:
            return
        self._plan_for = needs
        self._plan = plan_columns(width, names, kinds)
        self._header.show((self._plan.header(),))
        self._drawn.clear()
        self.refresh()

    def _visible_rows(self) -> range:
        top = self.scroll_offset.y
        count = len(self._view.modules) if self._view else 0
        return range(top, min(top + self.size.height, count))

    def _line(self, row: int) -> Line:
        if self._view is None:
            return ()
        module = self._battery.steadied(self._view.modules[row])
        return self._plan.row(module, self._view.t_ns, row == self._cursor)

    def _refresh_row(self, row: int) -> None:
        y = row - self.scroll_offset.y
        if 0 <= y < self.size.height:
            self.refresh(Region(0, y, self.size.width, 1))

    def _style_of(self, tone: Tone) -> Style:
        return self.get_component_rich_style(f"tone--{tone}")

    def _cursor_style(self) -> Style:
        return self.get_component_rich_style("fleet--cursor", partial=True)
