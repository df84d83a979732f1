"""The review as a document: plain values for ``--json``.

Owns the names of its keys, which programs of other people read. Counts nothing. A key stands
here only if this version computes what belongs under it.
"""

from dataclasses import fields
from typing import Final

from console.review.overview import Overview
from console.review.rates import Group

_COUNTS: Final = tuple(field.name for field in fields(Group) if field.name != "key")


def review_document(review: Overview) -> dict[str, object]:
    """Return the document, fit for ``json.dumps(..., allow_nan=False)``.

    ``groups``, ``modules`` and ``sessions`` are lists of objects: first the fields that the group
    is by, then ``simulated``, ``trials``, ``landed``, ``rate``, ``low``, ``high`` (0 to 1, null
    where no trial counts; a 95 % Wilson interval), then the count of each other outcome.
    """
    return {
        "groups": [_group(each) for each in review.groups],
        "modules": [_group(each) for each in review.modules],
        "sessions": [_group(each) for each in review.sessions],
        "excluded_simulated": review.excluded_simulated,
    }


def _group(group: Group) -> dict[str, object]:
    return {**dict(group.key), **{name: getattr(group, name) for name in _COUNTS}}
