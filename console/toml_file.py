"""TOML files that a person writes: reading them, and saying where they are wrong.

Owns the way from a file to checked values, with the file, line and key in every error. Knows no
sheet and no other content; who uses it says which keys there are and what they may hold.
"""

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Final, TypeGuard

from console.errors import InputError
from console.near_miss import did_you_mean

_LINE_IN_MESSAGE: Final = re.compile(r"\(at line (\d+), column \d+\)")
_SORTS: Final = ((str, "a longer text"), (dict, "a table"))


def read_text(path: Path) -> str:
    """Read a UTF-8 file, with or without a byte order mark. Raises InputError, one line."""
    try:
        data = path.read_bytes()
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror or error}") from error
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise InputError(f"{path}, line {line}: expected UTF-8 text") from error


@dataclass(frozen=True, slots=True)
class TomlFile:
    """A parsed file: ``where`` it came from (for errors), its text, and its top table."""

    where: str
    text: str
    table: Mapping[str, object]

    @classmethod
    def parse(cls, text: str, where: str) -> "TomlFile":
        """Parse a text. Raises InputError with the line at which it stops being TOML."""
        try:
            return cls(where, text, tomllib.loads(text))
        except tomllib.TOMLDecodeError as error:
            line = _error_line(str(error), text)
            what = _LINE_IN_MESSAGE.sub("", str(error)).strip()
            raise InputError(f"{where}, line {line}: not TOML: {what}") from error
        except (ValueError, RecursionError) as error:
            what = "a number has too many digits, or lists lie too deep in one another"
            raise InputError(f"{where}: cannot be read: {what}") from error

    def only(self, known: Sequence[str]) -> None:
        """Check that no other keys stand at the top. Raises InputError with a near miss."""
        for key in self.table:
            if key not in known:
                near = did_you_mean(key, known) or f"; there are {', '.join(known)}"
                raise InputError(f"{self._place(key)}: unknown key{near}")

    def wrong(self, key: str, expected: str, found: object = None) -> InputError:
        """Make the error for a key: where it is, what was expected, what stood there."""
        if key not in self.table:
            return InputError(f"{self.where}: no key {key}: expected {expected}")
        tail = "" if found is None else f", not {_shown(found)}"
        return InputError(f"{self._place(key)}: expected {expected}{tail}")

    def line_of(self, key: str) -> int | None:
        """Return the line on which a top-level key stands, or None where it is not found.

        A line that looks like the key may lie within a text or a list of several lines; it is
        the key's only if everything above it is TOML by itself.
        """
        pattern = re.compile(rf"""^[ \t]*\[*[ \t]*(["']?){re.escape(key)}\1[ \t]*[=.\]]""", re.M)
        for match in pattern.finditer(self.text):
            try:
                tomllib.loads(self.text[: match.start()])
            except ValueError:
                continue
            return self.text.count("\n", 0, match.start()) + 1
        return None

    def string(self, key: str, expected: str) -> str:
        """Return a text of one line, not empty, or raise InputError."""
        value = self.table.get(key)
        if not isinstance(value, str) or not value.strip() or "\n" in value:
            raise self.wrong(key, expected, value)
        return value

    def choice(self, key: str, choices: Sequence[str], default: str | None = None) -> str:
        """Return one of the choices, or raise InputError with a near miss."""
        value = self.table.get(key, default)
        if isinstance(value, str) and value in choices:
            return value
        error = self.wrong(key, " or ".join(f'"{each}"' for each in choices), value)
        near = did_you_mean(value, choices) if isinstance(value, str) else ""
        raise InputError(f"{error}{near}")

    def whole(
        self, key: str, expected: str, low: int, high: int, default: int | None = None
    ) -> int:
        """Return a whole number from ``low`` to ``high``, or raise InputError."""
        value = self.table.get(key, default)
        if not is_whole(value, low, high):
            raise self.wrong(key, expected, value)
        return value

    def number(
        self, key: str, expected: str, low: float, high: float, default: float | None = None
    ) -> float:
        """Return a number from ``low`` to ``high`` (``nan`` is none), or raise InputError."""
        value = self.table.get(key, default)
        if (
            not isinstance(value, int | float)
            or isinstance(value, bool)
            or not low <= value <= high
        ):
            raise self.wrong(key, expected, value)
        return float(value)

    def items(self, key: str, expected: str) -> list[object]:
        """Return a list with something in it, or raise InputError."""
        value = self.table.get(key)
        if not isinstance(value, list) or not value:
            raise self.wrong(key, expected, value)
        return list(value)

    def _place(self, key: str) -> str:
        line = self.line_of(key)
        return f"{self.where}: {key}" if line is None else f"{self.where}, line {line}: {key}"


def is_whole(value: object, low: int, high: int) -> TypeGuard[int]:
    """Say whether a value is a whole number in these bounds; true and false are none."""
    return isinstance(value, int) and not isinstance(value, bool) and low <= value <= high


def _shown(value: object) -> str:
    """Show a value as an error quotes it: figures and short texts as written, the rest by sort."""
    if isinstance(value, str) and value.isprintable() and len(value) <= 40:
        return f'"{value}"'
    if isinstance(value, list):
        return f"a list of {len(value)}"
    if isinstance(value, bool):
        return str(value).lower()
    return next((words for cls, words in _SORTS if isinstance(value, cls)), str(value))


def _error_line(message: str, text: str) -> int:
    """Line of a syntax error; tomllib names none where the text ends too early."""
    match = _LINE_IN_MESSAGE.search(message)
    return int(match[1]) if match else text.rstrip("\n").count("\n") + 1
