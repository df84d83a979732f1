"""The figures behind the console's timers."""

import pytest

from protocol.errors import LocalProtocolError
from protocol.resend import NS_PER_MS, ResendPolicy


def test_the_usual_policy_is_the_wire_document_s() -> None:
    policy = ResendPolicy()
    assert policy.tries == 10
    assert policy.initial_ns == 250 * NS_PER_MS
    assert (policy.minimum_ns, policy.maximum_ns) == (30 * NS_PER_MS, 2_000 * NS_PER_MS)
    assert policy.finish_margin_ns == 300 * NS_PER_MS


@pytest.mark.parametrize("wrong", [{"tries": 0}, {"finish_margin_ns": -1}, {"minimum_ns": 0}])
def test_what_cannot_be_is_refused(wrong: dict[str, int]) -> None:
    with pytest.raises(LocalProtocolError):
        ResendPolicy(**wrong)


def test_its_estimator_has_its_bounds() -> None:
    estimator = ResendPolicy(initial_ns=90 * NS_PER_MS).estimator()
    assert estimator.timeout_ns == 90 * NS_PER_MS
    estimator.sample(1)
    assert estimator.timeout_ns == 30 * NS_PER_MS
    estimator.sample(10**12)
    assert estimator.timeout_ns == 2_000 * NS_PER_MS


def test_stretched_all_times_are_longer_and_tries_as_many() -> None:
    policy = ResendPolicy().stretched(8.0)
    assert policy.tries == ResendPolicy().tries
    for name in ("initial_ns", "minimum_ns", "maximum_ns", "granularity_ns", "finish_margin_ns"):
        assert getattr(policy, name) == 8 * getattr(ResendPolicy(), name)
    assert ResendPolicy().stretched(1.0) == ResendPolicy()
