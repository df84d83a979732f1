"""Desk: what becomes of a line typed on the order line.

Owns the few words that the screen answers itself (all-stop, clear, help); every other line
goes to the fleet's source. Pure: knows no screen library.
"""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from console.errors import ConsoleError, InputError
from console.view import FleetSource, FleetView

STOP_WORDS: Final = frozenset({"stop", "all stop", "all-stop"})
HELP_WORDS: Final = frozenset({"help", "?"})
_CLEAR: Final = re.compile(r"clear(?:\s+(?P<number>\S+))?", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Reply:
    """What to show below the order line. ``help``: the person asked for the help instead."""

    text: str
    refused: bool = False
    help: bool = False


class Desk:
    """Takes typed lines for one operator."""

    def __init__(self, source: FleetSource, operator: str) -> None:
        self._source = source
        self._operator = operator

    def give(self, text: str) -> Reply:
        """Do what the line says; a refusal is a reply too, with its reason."""
        said = " ".join(text.casefold().split())
        if said in HELP_WORDS:
            return Reply("", help=True)
        try:
            if said in STOP_WORDS:
                self._source.stop("typed")
                return Reply("all-stop given")
            clear = _CLEAR.fullmatch(text.strip())
            if clear:
                return Reply(self._clear(clear["number"] or ""))
            return Reply(self._source.order(text))
        except ConsoleError as error:
            return Reply(str(error), refused=True)

    def words(self, text: str, offered: Sequence[str]) -> list[str]:
        """Add the desk's own words to the completions offered for ``text``."""
        stop = self._source.view().stop
        begun = text.casefold()
        own = [f"clear {stop.stop_number}"] if stop.in_force else []
        own += ["help", "stop"]
        return [*offered, *(each for each in own if begun and each.startswith(begun))]

    def _clear(self, number: str) -> str:
        """Lift the all-stop that the person names; no default, so that nobody lifts one that
        came while they typed. Raises InputError."""
        view = self._source.view()
        if not view.stop.in_force:
            raise InputError("no all-stop is in force: nothing to clear")
        if not (number.isascii() and number.isdigit()):
            raise InputError(f"expected the all-stop's number: {_clear_example(view)}")
        if int(number) != view.stop.stop_number:
            raise InputError(f"all-stop {number} is not the newest: {_clear_example(view)}")
        self._source.clear(int(number), self._operator)
        return f"all-stop {number} cleared by {self._operator}"


def _clear_example(view: FleetView) -> str:
    return f"clear {view.stop.stop_number}"
