"""Near misses: what a person may have meant by a word that is not known.

Owns the wording of a suggestion, so that orders, sheets and reviews suggest alike. Knows no
vocabulary of its own.
"""

import difflib
from collections.abc import Iterable


def near_miss(word: str, known: Iterable[str]) -> str:
    """Return the known word closest to ``word``, letter case aside, or an empty text."""
    by_folded = {str(each).casefold(): str(each) for each in known}
    close = difflib.get_close_matches(word.casefold(), by_folded, n=1)
    return by_folded[close[0]] if close else ""


def did_you_mean(word: str, known: Iterable[str]) -> str:
    """Return a tail for an error, ``; did you mean 'x'?``, or an empty text."""
    close = near_miss(word, known)
    return f"; did you mean {close!r}?" if close else ""
