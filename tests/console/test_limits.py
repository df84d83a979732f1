"""Limits of time: what they are, and that a rehearsal keeps them in real time."""

import pytest

from console.limits import NS_PER_MS, RENEWALS, Limits
from protocol.allegiance import LONGEST_PERMIT_MS


def test_the_defaults_are_those_of_the_wire_document() -> None:
    limits = Limits()
    assert limits.permit_ns == 1_000 * NS_PER_MS
    assert limits.renewal_ns == 125 * NS_PER_MS
    assert limits.clock_bound_ns == 200 * NS_PER_MS
    assert limits.start_within_ns == 5_000 * NS_PER_MS


def test_a_pace_keeps_them_in_real_time() -> None:
    fast = Limits().at_pace(10.0)
    assert fast.permit_ns == 10 * Limits().permit_ns
    assert fast.start_within_ns == 10 * Limits().start_within_ns
    assert fast.clock_bound_ns == 10 * Limits().clock_bound_ns
    assert fast.stage_lead_ns == 10 * Limits().stage_lead_ns
    assert fast.resend.tries == Limits().resend.tries
    assert fast.resend.minimum_ns == 10 * Limits().resend.minimum_ns
    assert fast.resend.initial_ns == 10 * Limits().resend.initial_ns


def test_slow_motion_does_not_shorten_them() -> None:
    """A tenth of the pace would make a permit of 0.1 s of fleet time, less than a clock's bound."""
    assert Limits().at_pace(0.1) == Limits()


@pytest.mark.parametrize("pace", [1.0, 40.0, 60.0, 1000.0])
def test_no_permit_is_longer_than_a_module_believes(pace: float) -> None:
    assert Limits().at_pace(pace).permit_ns < LONGEST_PERMIT_MS * NS_PER_MS


def test_a_permit_outlives_the_loss_of_all_but_one_of_its_renewals() -> None:
    """0.1 ** 8 a permit's length, 200 modules, RENEWALS an hour's seconds each: below one in an
    hour; with two renewals fewer it would not be. The arithmetic of independent losses."""

    def lapses_an_hour(renewals: int) -> float:
        return 0.1**renewals * 200 * renewals * 3600

    assert lapses_an_hour(RENEWALS) < 1 < lapses_an_hour(RENEWALS - 2)
