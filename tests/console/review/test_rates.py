"""Rates: intervals against published figures, and what is counted with what."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from console.errors import InputError
from console.review.rates import (
    DEFAULT_BY,
    Group,
    ReviewTrial,
    parse_by,
    success_groups,
    wilson_interval,
    without_simulated,
)
from console.view import Outcome


def trial(outcome: str = "landed", **changes: object) -> ReviewTrial:
    values: dict[str, object] = {
        "module": "birch",
        "kind": "paver",
        "motion": "pivot",
        "setting": "floor",
        "speed_rpm": 4400,
        "simulated": False,
        "session": 1,
        "time_utc": "2026-03-02T08:00:00.000Z",
        "brake_ms": 41.5,
        **changes,
    }
    return ReviewTrial(outcome=Outcome(outcome), **values)  # type: ignore[arg-type]


PUBLISHED = [
    # Newcombe (1998), Two-sided confidence intervals for the single proportion: comparison of
    # seven methods, Statistics in Medicine 17, 857-872, Table I, method 3 (score); 4 decimals.
    (81, 263, 0.2553, 0.3662, 6e-5),
    (0, 20, 0.0, 0.1611, 6e-5),
    # R 3.6.2, prop.test(3, 10, correct = FALSE), as quoted in SciPy's own test of this method.
    (3, 10, 0.1077913, 0.6032219, 1e-6),
]


@pytest.mark.parametrize(("landed", "trials", "low", "high", "tolerance"), PUBLISHED)
def test_wilson_against_published_intervals(
    landed: int, trials: int, low: float, high: float, tolerance: float
) -> None:
    assert wilson_interval(landed, trials) == pytest.approx((low, high), abs=tolerance)


@given(st.integers(1, 400).flatmap(lambda n: st.tuples(st.integers(0, n), st.just(n))))
def test_wilson_bounds_solve_the_score_equation(counts: tuple[int, int]) -> None:
    """Wilson (1927): at each bound p, |landed/n - p| is z standard errors, sqrt(p(1-p)/n);
    z = 1.959964 for 95 % (tables of the normal distribution)."""
    landed, trials = counts
    for bound in wilson_interval(landed, trials):
        distance = landed / trials - bound
        assert distance**2 == pytest.approx(
            1.959963984540054**2 * bound * (1 - bound) / trials, abs=1e-9
        )


@given(st.integers(1, 400).flatmap(lambda n: st.tuples(st.integers(0, n), st.just(n))))
def test_landed_and_missed_mirror_each_other(counts: tuple[int, int]) -> None:
    landed, trials = counts
    low, high = wilson_interval(landed, trials)
    assert 0.0 <= low <= landed / trials <= high <= 1.0
    assert wilson_interval(trials - landed, trials) == pytest.approx((1 - high, 1 - low))


def test_wilson_refuses_what_is_no_proportion() -> None:
    with pytest.raises(ValueError):
        wilson_interval(3, 2)
    with pytest.raises(ValueError):
        wilson_interval(-1, 2)


@pytest.mark.reference
def test_wilson_against_statsmodels() -> None:
    proportion = pytest.importorskip(
        "statsmodels.stats.proportion", reason="needs statsmodels (the extra 'reference')"
    )
    for trials in (1, 2, 7, 20, 263):
        for landed in range(trials + 1):
            expected = proportion.proportion_confint(landed, trials, 0.05, method="wilson")
            assert wilson_interval(landed, trials) == pytest.approx(expected, abs=1e-12)


def test_one_group_counts_every_outcome_and_rates_only_what_ran_its_course() -> None:
    outcomes = ["landed"] * 5 + ["short"] * 3 + ["over"] * 2 + ["stuck", "adrift"]
    outcomes += ["refused"] * 4 + ["cut"] * 6 + ["unseen"] * 7
    (group,) = success_groups(trial(each) for each in outcomes)
    assert group.low == pytest.approx(wilson_interval(5, 12)[0])
    assert group.high == pytest.approx(wilson_interval(5, 12)[1])
    assert group == Group(
        key=(("module", "birch"), ("motion", "pivot"), ("setting", "floor"), ("speed_rpm", 4400)),
        simulated=False,
        trials=12,
        landed=5,
        rate=5 / 12,
        low=group.low,
        high=group.high,
        short=3,
        over=2,
        stuck=1,
        adrift=1,
        refused=4,
        cut=6,
        unseen=7,
    )


def test_a_group_in_which_nothing_counts_has_no_rate() -> None:
    (group,) = success_groups([trial("refused"), trial("unseen")])
    assert (group.trials, group.landed, group.refused, group.unseen) == (0, 0, 1, 1)
    assert (group.rate, group.low, group.high) == (None, None, None)


def test_nothing_gives_no_group() -> None:
    assert success_groups([]) == []


def test_groups_are_sorted_by_key_and_speeds_as_numbers() -> None:
    trials = [
        trial(module=module, speed_rpm=speed_rpm)
        for module, speed_rpm in [("elm", 900), ("birch", 10_000), ("birch", 900)]
    ]
    keys = [dict(group.key) for group in success_groups(trials)]
    assert [(key["module"], key["speed_rpm"]) for key in keys] == [
        ("birch", 900),
        ("birch", 10_000),
        ("elm", 900),
    ]


@pytest.mark.parametrize(
    ("by", "counts"),
    [
        (("module",), [2, 2]),
        (("speed_rpm",), [3, 1]),
        (("session",), [1, 3]),
        (("kind", "speed_rpm"), [1, 1, 2]),
        (DEFAULT_BY, [1, 1, 2]),
    ],
)
def test_grouping_by_any_field(by: tuple[str, ...], counts: list[int]) -> None:
    trials = [
        trial(session=1),
        trial(session=2, speed_rpm=5000),
        trial(session=2, module="elm", kind="pebble"),
        trial(session=2, module="elm", kind="pebble"),
    ]
    groups = success_groups(trials, by)
    assert [group.trials for group in groups] == counts
    assert all(tuple(field for field, _ in group.key) == by for group in groups)


def test_simulated_and_real_never_share_a_group() -> None:
    trials = [trial(), trial("short", simulated=True), trial(simulated=True)]
    real, simulated = success_groups(trials, ("module",))
    assert (real.simulated, real.trials, real.rate) == (False, 1, 1.0)
    assert (simulated.simulated, simulated.trials, simulated.rate) == (True, 2, 0.5)


def test_simulated_motions_are_left_out_beside_real_ones_unless_asked_for() -> None:
    real, simulated = trial(), trial(simulated=True)
    assert without_simulated([real, simulated, simulated], False) == ([real], 2)
    assert without_simulated([real, simulated], True) == ([real, simulated], 0)
    assert without_simulated([simulated, simulated], False) == ([simulated, simulated], 0)
    assert without_simulated([real], False) == ([real], 0)
    assert without_simulated([], False) == ([], 0)


_TRIALS = st.lists(
    st.builds(
        trial,
        st.sampled_from([each.value for each in Outcome]),
        module=st.sampled_from(["a", "b", "c"]),
        speed_rpm=st.sampled_from([4000, 4350]),
        simulated=st.booleans(),
    ),
    max_size=30,
)


@given(_TRIALS)
def test_every_trial_stands_in_exactly_one_group(trials: list[ReviewTrial]) -> None:
    groups = success_groups(trials)
    total = sum(each.trials + each.refused + each.cut + each.unseen for each in groups)
    assert total == len(trials)
    for each in groups:
        assert each.trials == each.landed + each.short + each.over + each.stuck + each.adrift


@pytest.mark.parametrize(
    ("text", "by"),
    [("module", ("module",)), ("kind, speed_rpm", ("kind", "speed_rpm"))],
)
def test_by_is_read(text: str, by: tuple[str, ...]) -> None:
    assert parse_by(text) == by


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "by '': expected any of module, kind, motion, setting, speed_rpm, session"),
        ("speed", "by 'speed': expected any of .*; did you mean 'speed_rpm'"),
        ("module,", "by ''"),
        ("outcome", "by 'outcome'"),
        ("module,module", "expected each field once"),
    ],
)
def test_a_bad_by_is_one_clear_line(text: str, words: str) -> None:
    with pytest.raises(InputError, match=words):
        parse_by(text)
