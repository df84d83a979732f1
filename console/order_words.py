"""The words of an order line: cutting it up, reading it on, and saying what was expected.

Owns tokens, the place reached in them, and the wording of every grammar error. Knows no grammar:
what may come next is asked of it word by word (orders.py), and what was asked in vain at one
place is at once the source of near misses and of completions.
"""

import re
from dataclasses import dataclass
from typing import Final, NoReturn

from console.errors import InputError
from console.near_miss import did_you_mean

LATER_WORDS: Final = frozenset({"group"})
"""Words of subjects that this version does not carry out."""

MAX_SHOWN: Final = 40

_TOKEN: Final = re.compile(r'"(?P<quoted>(?:[^"]|"")*)"|(?P<plain>,|[^\s,"]+)|(?P<open>".*)', re.S)


@dataclass(frozen=True, slots=True)
class Token:
    """One word, comma or name in quotation marks. ``column`` counts characters from 1;
    ``closed`` is False for a quotation that runs to the end of the line."""

    text: str
    column: int
    quoted: bool = False
    closed: bool = True

    @property
    def folded(self) -> str:
        """The word as the grammar compares it, or empty for a name in quotation marks."""
        return "" if self.quoted else self.text.casefold()

    @property
    def shown(self) -> str:
        """The word as an error quotes it, cut where it is no word that anybody would write."""
        cut = len(self.text) > MAX_SHOWN
        return repr(self.text[:MAX_SHOWN] + "..." if cut else self.text)


def tokenise(text: str) -> list[Token]:
    """Cut the line into words, commas and quoted names; an open quotation runs to the end."""
    found = []
    for match in _TOKEN.finditer(text):
        quoted, plain, opened = match.group("quoted", "plain", "open")
        column = match.start() + 1
        if plain is not None:
            found.append(Token(plain, column))
        elif quoted is not None:
            found.append(Token(quoted.replace('""', '"'), column, quoted=True))
        else:
            found.append(Token(opened[1:], column, quoted=True, closed=False))
    return found


class Words:
    """The tokens and how far they were read. ``tried``: what was looked for at this place, the
    source of near misses and completions alike."""

    def __init__(self, tokens: list[Token]) -> None:
        self._tokens = tokens
        self._next = 0
        self.tried: list[str] = []

    @property
    def at_end(self) -> bool:
        """Whether all was read."""
        return self._next == len(self._tokens)

    @property
    def token(self) -> Token | None:
        """The token that comes next, or None at the end."""
        return None if self.at_end else self._tokens[self._next]

    def advance(self) -> None:
        """Read on by one token."""
        self._next += 1
        self.tried = []

    def take(self, *alternatives: str) -> str:
        """Read one of these words, or nothing; returns it as the grammar spells it, or ''."""
        self.tried += alternatives
        token = self.token
        if token is None or token.folded not in alternatives:
            return ""
        self.advance()
        return token.folded

    def take_comma(self) -> bool:
        """Read a comma, if one comes; not offered as a completion."""
        if self.token is None or self.token.folded != ",":
            return False
        self.advance()
        return True

    def need(self, expected: str, *alternatives: str, example: str = "") -> str:
        """Read one of these words. Raises InputError where none comes."""
        return self.take(*alternatives) or self.fail(expected, example)

    def fail(self, expected: str, example: str = "") -> NoReturn:
        """Raise InputError: what was expected, after which word, what stood there instead."""
        place = f"after {self._tokens[self._next - 1].shown}" if self._next else "first"
        such = f", such as {example!r}" if example else ""
        token = self.token
        if token is None:
            raise InputError(f"expected {expected} {place}{such}")
        if token.folded in LATER_WORDS:
            raise InputError(
                f"{token.shown} (column {token.column}) is not in this version;"
                f" expected {expected} {place}{such}"
            )
        raise InputError(
            f"expected {expected} {place}{such}, not {token.shown} (column {token.column})"
            + did_you_mean(token.text, self.tried)
        )
