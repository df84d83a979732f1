"""How a ratio is measured: two loops in turn in one process, and the median of the pairs.

The machine may be shared and its speed may drift; two loops that take turns drift together.
"""

import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Figure:
    """One named number. ``numerator`` and ``denominator`` are medians, in the same unit;
    ``value`` is the median of the pairs' ratios; ``n`` counts samples on each side."""

    value: float
    numerator: float
    denominator: float
    n: int

    def as_json(self) -> dict[str, float | int]:
        """The figure as the JSON document holds it."""
        return {
            "value": round(self.value, 4),
            "numerator": round(self.numerator, 3),
            "denominator": round(self.denominator, 3),
            "n": self.n,
        }


def rate_ratio(ours: Callable[[], int], floor: Callable[[], int], rounds: int) -> Figure:
    """Ratio of two rates; each loop returns how many units it did. One round warms up."""
    pairs = []
    for count in range(rounds + 1):
        pair = (_rate(ours), _rate(floor))
        if count:
            pairs.append(pair)
    return Figure(
        value=statistics.median(mine / theirs for mine, theirs in pairs),
        numerator=statistics.median(mine for mine, _ in pairs),
        denominator=statistics.median(theirs for _, theirs in pairs),
        n=rounds,
    )


def _rate(loop: Callable[[], int]) -> float:
    begun = time.perf_counter()
    units = loop()
    return units / (time.perf_counter() - begun)
