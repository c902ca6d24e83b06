"""Settings for all tests."""

from __future__ import annotations

import os

from hypothesis import settings

# no deadline: tests are not timed; derandomised: a run is the same everywhere
settings.register_profile("budgetcheck", max_examples=60, deadline=None, derandomize=True)
settings.register_profile("thorough", max_examples=2000, deadline=None)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "budgetcheck"))
