"""Rates: how often a module's motions land, with intervals, group by group.

Owns the counting. Knows trials only as plain values and asks nobody where they come from
(source.py); draws no tables. SciPy is imported where it is needed: it costs a second.

Only motions that ran their course count in a rate (verdict.COUNTED). Refused, cut and unseen ones
are counted beside it, so that a reader sees what the rate leaves out.
"""

from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from console.errors import InputError
from console.near_miss import did_you_mean
from console.verdict import COUNTED
from console.view import Outcome

CONFIDENCE: Final = 0.95
FIELDS: Final = ("module", "kind", "motion", "setting", "speed_rpm", "session")
"""What trials can be grouped by."""
DEFAULT_BY: Final = ("module", "motion", "setting", "speed_rpm")


@dataclass(frozen=True, slots=True)
class ReviewTrial:
    """One motion as the review sees it. ``kind`` and ``time_utc`` are empty where not known;
    ``session`` is a log's session number, or the name of the file that it was read from."""

    module: str
    kind: str
    motion: str
    setting: str
    speed_rpm: int
    outcome: Outcome
    simulated: bool
    session: int | str
    time_utc: str
    brake_ms: float | None


@dataclass(frozen=True, slots=True)
class Group:
    """Trials that agree in ``key`` (field and value, in turn) and in ``simulated``.

    ``trials`` are the ones that count, ``landed`` of them landed. ``rate`` and its interval,
    ``low`` to ``high``, run from 0 to 1 and are None where no trial counts.
    """

    key: tuple[tuple[str, int | str], ...]
    simulated: bool
    trials: int
    landed: int
    rate: float | None
    low: float | None
    high: float | None
    short: int
    over: int
    stuck: int
    adrift: int
    refused: int
    cut: int
    unseen: int


def wilson_interval(landed: int, trials: int) -> tuple[float, float]:
    """Return the two-sided 95 % score interval of a proportion, by SciPy.

    Wilson (1927), J. Am. Stat. Assoc. 22, 209-212; without continuity correction. It holds what
    it promises with few trials too, and also where all of them or none landed.
    ``trials`` is at least 1. Raises ValueError where ``landed`` is not from 0 to ``trials``.
    """
    from scipy.stats import binomtest

    if not 0 <= landed <= trials:  # not every release of SciPy refuses it
        raise ValueError(f"{landed} of {trials} is no proportion")
    interval = binomtest(landed, trials).proportion_ci(CONFIDENCE, method="wilson")
    return float(interval.low), float(interval.high)


def parse_by(text: str) -> tuple[str, ...]:
    """Read what to group by, such as ``kind,speed_rpm``. Raises InputError with a near miss."""
    by = tuple(word.strip() for word in text.split(","))
    for word in by:
        if word not in FIELDS:
            near = did_you_mean(word, FIELDS)
            raise InputError(f"by {word!r}: expected any of {', '.join(FIELDS)}{near}")
    if len(set(by)) != len(by):
        raise InputError(f"by {text!r}: expected each field once")
    return by


def without_simulated(
    trials: Sequence[ReviewTrial], with_simulated: bool
) -> tuple[list[ReviewTrial], int]:
    """Return the trials to count, and how many simulated ones were left out.

    Simulated ones are left out where real ones stand beside them, unless asked for. A selection
    that is simulated throughout is kept: there is nothing that it could be mistaken for.
    """
    real = [trial for trial in trials if not trial.simulated]
    if with_simulated or not real:
        return list(trials), 0
    return real, len(trials) - len(real)


def success_groups(trials: Iterable[ReviewTrial], by: Sequence[str] = DEFAULT_BY) -> list[Group]:
    """Group and count trials, sorted by key. Simulated and real ones never share a group,
    also where they agree in everything else; the real ones come first."""
    counts: dict[tuple[bool, tuple[int | str, ...]], Counter[Outcome]] = {}
    for trial in trials:
        values: tuple[int | str, ...] = tuple(getattr(trial, field) for field in by)
        counts.setdefault((trial.simulated, values), Counter())[trial.outcome] += 1
    return [
        _group(tuple(zip(by, values, strict=True)), simulated, counts[simulated, values])
        for simulated, values in sorted(counts)
    ]


def _group(
    key: tuple[tuple[str, int | str], ...], simulated: bool, count: Counter[Outcome]
) -> Group:
    trials = sum(count[outcome] for outcome in COUNTED)
    landed = count[Outcome.LANDED]
    low, high = wilson_interval(landed, trials) if trials else (None, None)
    return Group(
        key=key,
        simulated=simulated,
        trials=trials,
        landed=landed,
        rate=landed / trials if trials else None,
        low=low,
        high=high,
        short=count[Outcome.SHORT],
        over=count[Outcome.OVER],
        stuck=count[Outcome.STUCK],
        adrift=count[Outcome.ADRIFT],
        refused=count[Outcome.REFUSED],
        cut=count[Outcome.CUT],
        unseen=count[Outcome.UNSEEN],
    )
