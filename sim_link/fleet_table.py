"""One table of a fleet file: its keys, read with one clear error for each that is wrong.

Owns the checks of single values and the wording of what was expected. Knows no meaning: which
keys a table has is said by whoever reads it (fleet_file.py, fleet_block.py).
"""

import re
from collections.abc import Collection, Sequence
from typing import Any, Final, TypeGuard

from sim_link.errors import SimInputError

NAME: Final = re.compile(r"[a-z][a-z0-9-]{0,11}")
"""What modules, kinds and groups may be called: it must fit the name fields of the wire."""
NAME_EXPECTED: Final = "a name of at most 12 small letters, digits and hyphens is needed"

_Span = tuple[float, float]
_MOST_DECIMAL: Final = 9_999


class Table:
    """A table of a fleet file. ``where`` names its place in errors, for instance
    ``hall.toml: module 3``; ``what`` is how it is written, for instance ``[[module]]``.

    Every method raises SimInputError naming place and key; so does making one from what is no
    table, or has a key that is not in ``known``.
    """

    __slots__ = ("_values", "where")

    def __init__(self, values: object, known: Collection[str], where: str, what: str) -> None:
        self.where = where
        if not isinstance(values, dict):
            raise self.error(what.strip("[]"), f"a table {what} is needed")
        for key in values:
            if key not in known:
                raise self.error(key, f"no such key; known are {', '.join(known)}")
        self._values: dict[str, Any] = values

    def error(self, key: str, expected: str) -> SimInputError:
        """Make the error of one key."""
        return SimInputError(self.where, key, expected)

    def __contains__(self, key: str) -> bool:
        return key in self._values

    def get(self, key: str) -> object:
        """Return the value as it stands in the file; None where it is left out."""
        return self._values.get(key)

    def integer(self, key: str, span: tuple[int, int], default: int | None = None) -> int:
        """Read a whole number within ``span``; without a default it must be given."""
        value = self._values.get(key, default)
        if not _is_integer(value) or not span[0] <= value <= span[1]:
            form = "#x" if span[1] > _MOST_DECIMAL else "d"  # addresses and identities
            raise self.error(
                key, f"a whole number from {span[0]:{form}} to {span[1]:{form}} is needed"
            )
        return int(value)

    def number(self, key: str, span: _Span, default: float | None = None) -> float:
        """Read a number within ``span``; without a default it must be given."""
        value = self._values.get(key, default)
        if not _is_number(value) or not span[0] <= value <= span[1]:
            raise self.error(key, f"a number from {span[0]:g} to {span[1]:g} is needed")
        return float(value)

    def pair(self, key: str, span: _Span, default: tuple[float, float]) -> tuple[float, float]:
        """Read two numbers, each within ``span``."""
        value = self._values.get(key, default)
        fits = isinstance(value, list | tuple) and len(value) == 2
        if not fits or not all(_is_number(part) and span[0] <= part <= span[1] for part in value):
            raise self.error(key, f"two numbers from {span[0]:g} to {span[1]:g} are needed")
        return float(value[0]), float(value[1])

    def name(self, key: str) -> str:
        """Read a name of a module, a kind or a group."""
        value = self._values.get(key)
        if not isinstance(value, str) or not NAME.fullmatch(value):
            raise self.error(key, NAME_EXPECTED)
        return value

    def one_of(self, key: str, known: Collection[str]) -> str:
        """Read a text that is one of ``known``."""
        value = self._values.get(key)
        if not isinstance(value, str) or value not in known:
            raise self.error(key, f"one of {', '.join(known)} is needed")
        return value

    def some_of(self, key: str, known: Sequence[str]) -> tuple[str, ...]:
        """Read a list of texts out of ``known``; an empty one where the key is left out."""
        value = self._values.get(key, [])
        if not isinstance(value, list) or not all(each in known for each in value):
            said = f"out of {', '.join(known)} is needed" if known else "must be empty"
            raise self.error(key, f"a list of names {said}")
        return tuple(value)

    def names(self, key: str, most: int) -> tuple[str, ...]:
        """Read a list of at most so many different names; an empty one where it is left out."""
        value = self._values.get(key, [])
        fits = isinstance(value, list) and all(
            isinstance(each, str) and NAME.fullmatch(each) for each in value
        )
        if not fits or len(set(value)) != len(value) or len(value) > most:
            expected = f"a list of at most {most} different names is needed, each of at most 12"
            raise self.error(key, f"{expected} small letters, digits and hyphens")
        return tuple(value)

    def tables(self, key: str) -> list[object]:
        """Read a list of tables, written [[key]]; an empty one where there is none."""
        value = self._values.get(key, [])
        if not isinstance(value, list):
            raise self.error(key, f"at least one table is needed, written [[{key}]]")
        return value


def _is_integer(value: object) -> TypeGuard[int]:
    return isinstance(value, int) and not isinstance(value, bool)


def _is_number(value: object) -> TypeGuard[int | float]:
    return isinstance(value, int | float) and not isinstance(value, bool)
