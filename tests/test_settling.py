"""The estimate for an undeclared tail covers what really follows, on flows whose whole future is known."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad

import budgetcheck

Path = Callable[[float], float]

EDGES = (0.0, 1.0, 5.0, 20.0, 60.0, 200.0, 600.0, 1500.0, 4000.0)
"""Pieces for the reference integral; e^(−0.02·4000) is nothing."""

WEALTH = 1.0


@dataclass(frozen=True)
class Flows:
    """Wage, consumption, r and ∫r as functions of t."""

    wage: Path
    consumption: Path
    interest: Path
    cumulative: Path

    def slack(self) -> float:
        """Slack for ever, by scipy's adaptive quadrature of the functions themselves."""

        def net(t: float) -> float:
            return float((self.wage(t) - self.consumption(t)) * np.exp(-self.cumulative(t)))

        return WEALTH + sum(quad(net, a, b, limit=500, epsabs=1e-13, epsrel=1e-12)[0] for a, b in pairwise(EDGES))

    def assess(self, years: int) -> budgetcheck.Assessment:
        """The plan cut off after so many years, sampled every quarter, its tail not declared."""
        t = np.arange(4 * years + 1) / 4
        columns = {"wage": self.wage, "consumption": self.consumption, "r": self.interest}
        table = pd.DataFrame({"t": t, **{name: [path(float(s)) for s in t] for name, path in columns.items()}})
        stated = {"household": {"wealth": WEALTH}, "amounts": {"path": "smooth"}, "horizon": {"kind": "perpetual"}}
        return budgetcheck.assess(table, stated)


def exponential(seed: int) -> Flows:
    """Wage, consumption and r settle exponentially, each at its own speed between 0.01 and 0.5 a year."""
    rng = np.random.default_rng(seed)
    speed = 10.0 ** rng.uniform(-2.0, -0.3, 3)
    settled, wage, consumption = rng.uniform(0.02, 0.05), rng.uniform(-0.5, 0.8), rng.uniform(-0.5, 0.8)
    above = rng.uniform(-0.3, 1.5) * settled
    return Flows(
        wage=lambda t: float(1.0 + wage * np.exp(-speed[0] * t)),
        consumption=lambda t: float(1.0 + consumption * np.exp(-speed[1] * t)),
        interest=lambda t: float(settled + above * np.exp(-speed[2] * t)),
        cumulative=lambda t: float(settled * t - above * np.expm1(-speed[2] * t) / speed[2]),
    )


def algebraic(seed: int) -> Flows:
    """They settle like powers of time, ever more slowly."""
    rng = np.random.default_rng(seed)
    power, rate = rng.uniform(0.6, 3.0, 3), rng.uniform(0.02, 0.3, 3)
    settled, wage, consumption = rng.uniform(0.02, 0.05), rng.uniform(-0.5, 0.8), rng.uniform(-0.5, 0.8)
    above = rng.uniform(-0.3, 1.5) * settled
    return Flows(
        wage=lambda t: float(1.0 + wage * (1.0 + rate[0] * t) ** -power[0]),
        consumption=lambda t: float(1.0 + consumption * (1.0 + rate[1] * t) ** -power[1]),
        interest=lambda t: float(settled + above * (1.0 + rate[2] * t) ** -power[2]),
        cumulative=lambda t: float(
            settled * t + above * ((1.0 + rate[2] * t) ** (1.0 - power[2]) - 1.0) / ((1.0 - power[2]) * rate[2])
        ),
    )


@pytest.mark.parametrize("family", [exponential, algebraic])
@pytest.mark.parametrize("years", [20, 60, 200])
def test_the_error_covers_what_follows(family: Callable[[int], Flows], years: int) -> None:
    """However flows and interest settle, slack for ever lies within the error of the plan that was cut off."""
    for seed in range(25):
        flows = family(seed)
        found = flows.assess(years)
        assert found.slack.per_effective_unit is not None
        gap = abs(found.slack.per_effective_unit.value - flows.slack())
        assert gap <= found.decision.error + 1e-9, (seed, found.tail.estimate)


def test_what_does_not_settle_is_not_decided() -> None:
    """A wage that grows in a straight line until the last row has no long-run value: UNDECIDED, whatever the slack."""
    flows = Flows(lambda t: 1.0 + 0.01 * t, lambda t: 1.0, lambda t: 0.04, lambda t: 0.04 * t)
    found = flows.assess(40)
    assert found.verdict == "UNDECIDED"
    assert np.isinf(found.error.tail)
    assert found.would_decide is not None
    assert "tail" in found.would_decide


def test_what_stands_still_is_settled() -> None:
    """Rows that no longer move need no fit."""
    flows = Flows(lambda t: 1.0, lambda t: 1.03, lambda t: 0.04, lambda t: 0.04 * t)
    found = flows.assess(40)
    assert found.error.tail == 0.0
    assert found.tail.estimate.fit is None
    assert found.verdict == "PASS"
