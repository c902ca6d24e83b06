"""Settings for all tests."""

from __future__ import annotations

from hypothesis import settings

# no deadline: tests are not timed; derandomised: a run is the same everywhere
settings.register_profile("budgetcheck", max_examples=60, deadline=None, derandomize=True)
settings.load_profile("budgetcheck")
