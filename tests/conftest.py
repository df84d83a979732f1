"""For all tests: Hypothesis draws the same examples each time, so that a red run can be had
again; TUMBLEWIRE_SEARCH=1 lets it draw new ones instead."""

import os

from hypothesis import HealthCheck, settings

settings.register_profile(
    "steady",
    derandomize=True,
    deadline=None,
    max_examples=25,  # always the same ones; a search tries a hundred new ones
    suppress_health_check=[HealthCheck.too_slow],
)
settings.register_profile(
    "search", deadline=None, suppress_health_check=[HealthCheck.too_slow], print_blob=True
)
settings.load_profile("search" if os.environ.get("TUMBLEWIRE_SEARCH") else "steady")
