"""Order line: where orders are typed, with history and completion.

Owns the line, what was typed before, and the words offered next. Knows no grammar: words come
from a callable, orders go out as messages.

A completion is either a whole line that continues what stands there, or a word that may come
next or ends the word begun. Right arrow at the end and Tab both take it, Tab with a blank behind
it; on an empty line Tab moves on to the table.
"""

from collections.abc import Callable, Iterable
from typing import ClassVar

from textual.binding import Binding, BindingType
from textual.message import Message
from textual.suggester import Suggester
from textual.widgets import Input

Completions = Callable[[str], list[str]]
HISTORY_LINES = 500


def continued(text: str, offered: str) -> str:
    """The whole line where ``offered`` is taken: in place of what it continues of the text, the
    longest such ending that begins a word; empty where it continues nothing."""
    folded, whole = text.casefold(), offered.casefold()
    for at in range(len(text) + 1):
        begins_word = at == 0 or text[at - 1] in " ,"
        if begins_word and whole.startswith(folded[at:]):
            return text[:at] + offered
    return ""


def first_continued(text: str, offered: Iterable[str]) -> str:
    """The whole line with the first completion that makes it longer, or an empty text."""
    lines = (continued(text, each) for each in offered)
    return next((line for line in lines if len(line) > len(text)), "")


class History:
    """Lines typed before, walked up and down; the line begun is kept below the newest."""

    def __init__(self) -> None:
        self._lines: list[str] = []
        self._at = 0
        self._begun = ""

    def add(self, line: str) -> None:
        """Keep a line that was given; the same line twice running is kept once."""
        if self._lines[-1:] != [line]:
            self._lines.append(line)
        del self._lines[:-HISTORY_LINES]
        self._at = len(self._lines)

    def walk(self, step: int, current: str) -> str:
        """Return the line ``step`` further down (up: negative), or ``current`` at the ends."""
        target = self._at + step
        if not 0 <= target <= len(self._lines):
            return current
        if self._at == len(self._lines):
            self._begun = current
        self._at = target
        return self._begun if target == len(self._lines) else self._lines[target]


class _GrammarSuggester(Suggester):
    """Offers the first completion as the pale continuation of the line."""

    def __init__(self, completions: Completions) -> None:
        # Nothing is kept: module names come and go. Names keep their letter case.
        super().__init__(use_cache=False, case_sensitive=True)
        self._completions = completions

    async def get_suggestion(self, value: str) -> str | None:
        """The whole line with the first completion that fits, or None."""
        whole = first_continued(value, self._completions(value))
        # What is typed stays as typed: letter case is the grammar's to forgive.
        return value + whole[len(value) :] if whole else None


class OrderLine(Input):
    """The input of orders."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("up", "history(-1)", "Order before", show=False),
        Binding("down", "history(1)", "Order after", show=False),
        Binding("tab", "complete", "Take the completion", show=False),
        Binding("pageup", "screen.page(-1)", "Page up", show=False),
        Binding("pagedown", "screen.page(1)", "Page down", show=False),
    ]
    DEFAULT_CSS = """
    OrderLine { width: 1fr; }
    OrderLine:nocolor>.input--cursor { text-style: reverse; }
    """

    class Given(Message):
        """A person gave an order; ``text`` is stripped and not empty."""

        def __init__(self, text: str) -> None:
            self.text = text
            super().__init__()

    class Offered(Message):
        """The words that may come next, now that the line has changed; may be empty."""

        def __init__(self, words: list[str]) -> None:
            self.words = words
            super().__init__()

    def __init__(self, completions: Completions | None) -> None:
        super().__init__(
            placeholder="an order, such as: birch pivot forward at 4500",
            suggester=_GrammarSuggester(completions) if completions else None,
            compact=True,
            select_on_focus=False,
        )
        self.cursor_blink = False
        self._completions = completions
        self._history = History()

    def name_module(self, name: str) -> None:
        """Put a module's name where the next word goes."""
        joint = "" if not self.value or self.value.endswith((" ", ",")) else ", "
        self.value = f"{self.value}{joint}{name}"
        self.cursor_position = len(self.value)

    def action_history(self, step: int) -> None:
        """Walk through what was typed before."""
        self.value = self._history.walk(step, self.value)
        self.cursor_position = len(self.value)

    def action_complete(self) -> None:
        """Take the first completion; on an empty line, move the focus on."""
        if not self.value:
            self.app.action_focus_next()
            return
        offered = self._completions(self.value) if self._completions else []
        whole = first_continued(self.value, offered)
        if whole:
            self.value = f"{whole} "
            self.cursor_position = len(self.value)

    def on_input_changed(self, event: Input.Changed) -> None:
        """Tell which words may come next."""
        event.stop()
        if self._completions is not None:
            self.post_message(self.Offered(self._completions(self.value) if self.value else []))

    def on_input_submitted(self, event: Input.Submitted) -> None:
        """Send the line out and begin a new one."""
        event.stop()
        text = event.value.strip()
        if text:
            self._history.add(text)
            self.value = ""
            self.post_message(self.Given(text))
