"""The overview: everything that one review says, counted once, for text and document alike.

Owns which counts belong together. Knows neither where trials come from nor how they are shown.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from console.errors import InputError
from console.review.rates import (
    DEFAULT_BY,
    Group,
    ReviewTrial,
    success_groups,
    without_simulated,
)


@dataclass(frozen=True, slots=True)
class Overview:
    """``groups`` by what was asked for; ``modules`` and ``sessions`` are totals over all motions
    and speeds. ``excluded_simulated``: motions left out because real ones were there."""

    by: tuple[str, ...]
    groups: tuple[Group, ...]
    modules: tuple[Group, ...]
    sessions: tuple[Group, ...]
    excluded_simulated: int


def overview(
    trials: Sequence[ReviewTrial],
    by: Sequence[str] = DEFAULT_BY,
    *,
    with_simulated: bool = False,
) -> Overview:
    """Count a selection of trials. Raises InputError where it is to be grouped by kind and no
    trial's kind is known, which is so of all that come from a CSV file."""
    kept, excluded = without_simulated(trials, with_simulated)
    if "kind" in by and kept and not any(trial.kind for trial in kept):
        raise InputError("by 'kind': no trial's kind is known; expected trials of a log, not a CSV")
    return Overview(
        by=tuple(by),
        groups=tuple(success_groups(kept, by)),
        modules=tuple(success_groups(kept, ("module",))),
        sessions=tuple(success_groups(kept, ("session",))),
        excluded_simulated=excluded,
    )
