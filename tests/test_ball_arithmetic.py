"""Reported bounds hold against exact arithmetic, on random and on hand-picked hard plans; so do the parts of the rule."""

from __future__ import annotations

from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from random import Random
from statistics import median
from typing import Any

import numpy as np
import pytest
from agreement import relative_bound, violations
from flint import acb, arb, ctx
from oracle import exact
from strategies import Sample, draw

import budgetcheck
from budgetcheck import Assessment
from budgetcheck.quadrature import NODES, UNIT, WEIGHTS, integrate, running_sum, truncation_bound

PLANS = 1000


def assessed(sample: Sample, folder: Path) -> Assessment:
    """The package's answer to the printed table."""
    path = folder / "plan.csv"
    path.write_text(sample.text, encoding="utf-8")
    return budgetcheck.assess(path, sample.assumptions)


def test_bounds_hold_on_random_plans(tmp_path: Path) -> None:
    """On random plans of the whole family every figure is within its bound; the median bound is below 1e-12 of resources."""
    wrong, shares = {}, []
    for seed in range(PLANS):
        sample = draw(seed)
        found, truth = assessed(sample, tmp_path), exact(sample.text, sample.assumptions)
        problems = violations(found, truth)
        if problems:
            wrong[seed] = problems
        share = relative_bound(found, truth)
        if share is not None:
            shares.append(share)
    assert not wrong
    assert len(shares) > PLANS / 2
    assert median(shares) <= 1e-12


def plan(rows: str, **sections: dict[str, Any]) -> Sample:
    """A table written on one line, rows separated by blanks."""
    return Sample(text="\n".join(rows.split()) + "\n", assumptions=sections)


def continuous(path: str, **more: object) -> dict[str, Any]:
    """[amounts] of a continuous plan."""
    return {"timing": "continuous", "path": path, **more}


PERPETUAL = {"kind": "perpetual", "tail": "balanced growth"}
LEVEL = "t,wage,consumption 0,3,2.9 1,3,2.9 2,3,2.9 3,3,2.9"
ONE_EACH = "t,wage,consumption 0,1,1 400.7,1,1 1000.3,1,1"

HARD = {
    "r above g + n by 1e-13": plan(
        LEVEL,
        market={"r": Decimal("0.0500000000001")},
        growth={"g": Decimal("0.02"), "n": Decimal("0.03")},
        amounts=continuous("linear"),
        horizon=PERPETUAL,
    ),
    "r a tie with g + n in decimals, equal tails": plan(
        "t,wage,consumption 0,5,2.9 1,3,2.5 2,3,2.9 3,3,3",
        market={"r": Decimal("0.05")},
        growth={"g": Decimal("0.02"), "n": Decimal("0.03")},
        amounts=continuous("smooth"),
        horizon=PERPETUAL,
    ),
    "a column of r above g + n by little more than its rounding": plan(
        "t,wage,consumption,r 0,3,2,0.05000000000000003 1,3,2.5,0.05000000000000003",
        growth={"g": Decimal("0.02"), "n": Decimal("0.03")},
        amounts=continuous("linear"),
        horizon=PERPETUAL,
    ),
    "the same in annual totals": plan(
        "year,wage,consumption,r 2030,3,2,0.05000000000000008 2031,3,2.5,0.05000000000000008",
        growth={"g": Decimal("0.02"), "n": Decimal("0.03")},
        horizon=PERPETUAL,
    ),
    "r exactly zero": plan(LEVEL, market={"r": 0}, amounts=continuous("smooth"), horizon={"kind": "finite"}),
    "r = 1e-13": plan(LEVEL, market={"r": Decimal("1e-13")}, amounts={"timing": "spread"}, horizon=PERPETUAL),
    "r = -1e-99": plan(LEVEL, market={"r": Decimal("-1e-99")}, amounts={"timing": "in arrears"}),
    "negative rates, income at the end worth e^600 today": plan(
        ONE_EACH, market={"r": Decimal("-0.6")}, amounts=continuous("smooth")
    ),
    "negative rates along a geometric path": plan(
        "t,wage,consumption 0.0,1,1 37.5522605,0.94,1 1005,0.88,1",
        market={"r": Decimal("-0.5998809088482119")},
        amounts=continuous("geometric"),
    ),
    "nothing left of the last row but e^-680": plan(
        ONE_EACH,
        market={"r": Decimal("0.68")},
        household={"wealth": 1},
        horizon={"kind": "finite", "terminal_wealth": Decimal("1e15")},
        amounts=continuous("linear"),
    ),
    "a lump sum deep in the discount": plan(ONE_EACH, market={"r": Decimal("0.42")}, amounts={"timing": "in arrears"}),
    "exponents that cancel": plan(
        ONE_EACH,
        market={"r": Decimal("0.25")},
        growth={"g": Decimal("0.125"), "n": Decimal("0.12499")},
        amounts={"timing": "at mid-period", "basis": "per effective unit"},
    ),
    "intervals from 1e-6 to 1e3 years": plan(
        "t,wage,consumption,r 0,3,1,0.01 0.000001,3.1,1,0.01 1000.000001,7,1.3,0.02 1000.000002,7,1.2,0.02 1001,8,1,0.02",
        amounts=continuous("smooth"),
    ),
    "a spline whose last interval is 1e-6 years": plan(
        "t,wage,consumption 0,3,1 1,3.1,1 2,7,1.3 2.000001,7.00001,1.2",
        market={"r": Decimal("0.03")},
        amounts=continuous("smooth"),
    ),
    "neighbours of 1e-12 and 1e15": plan(
        "t,wage,consumption 0,1e-12,1 1,1e15,2 2,1e-12,1 3,5,1", market={"r": Decimal("0.03")}, amounts=continuous("geometric")
    ),
    "neighbours nearly equal along a geometric path": plan(
        "t,wage,consumption 0,3,2.9999999999999 1,3.0000000000000004,3 50,3,2.9999999999999",
        market={"r": Decimal("0.03")},
        amounts=continuous("geometric"),
        horizon=PERPETUAL,
    ),
    "two rows and a column of r": plan("t,wage,consumption,r 0,3,1,-0.02 40,1,4,0.05", amounts=continuous("smooth")),
    "three rows: a parabola, also of r": plan(
        "t,wage,consumption,r 0,3,1,0.01 10,3,1.5,0.012 40,1,2,0.03", amounts=continuous("smooth"), horizon=PERPETUAL
    ),
    "r through zero, daily compounding": plan(
        "year,wage,consumption,r 2030,3,1,-0.04 2031,3,3,0.00 2033,3,2,1e-13 2040,3,4,0.05",
        market={"compounding": "daily"},
        growth={"g": Decimal("0.02"), "compounding": "annual"},
        horizon=PERPETUAL,
    ),
    "r next to -100 %": plan(
        "year,wage,consumption,r 2030,3,1,-0.999999 2031,3,3,-0.99 2033,3,2,0.5",
        market={"compounding": "annual"},
        amounts={"timing": "in advance"},
    ),
    "slack that cancels to nothing": plan(
        "t,wage,consumption 0,123456789012345,123456789012345 1,98765432109876.5,98765432109876.6 2,3,2 3,1,1",
        market={"r": Decimal("0.07")},
        amounts=continuous("linear"),
    ),
    "a whole economy in millions": plan(
        "year,wage,consumption 2030,1900000,1800000.5 2031,1950000,1900000 2032,2000000,2100000",
        market={"r": Decimal("0.03"), "compounding": "semiannual"},
        growth={"g": Decimal("0.011"), "n": Decimal("-0.004")},
        household={"wealth": Decimal("9.1e12"), "households": 38000000, "members": Decimal("2.03"), "productivity": 120},
        amounts={"basis": "economy", "unit": 1000000},
        horizon={"kind": "finite", "terminal_wealth": Decimal("9.3e12")},
    ),
    "tails that grow at their own rates": plan(
        "t,wage,consumption 0,3,2.9 0.25,3,2.9 0.5,3.2,2.9",
        market={"r": Decimal("0.08"), "compounding": "quarterly"},
        growth={"g": Decimal("0.02"), "n": Decimal("0.01"), "compounding": "monthly"},
        amounts={"timing": "in arrears", "quoted": "per year", "basis": "per household"},
        horizon={
            "kind": "perpetual",
            "tail": "growing",
            "income_growth": Decimal("0.01"),
            "consumption_growth": Decimal("-0.3"),
        },
    ),
}


@pytest.mark.parametrize("name", HARD)
def test_bounds_hold_on_hard_plans(name: str, tmp_path: Path) -> None:
    """The bounds hold where rates nearly vanish or tie, exponents reach the supported range and rows are wildly uneven."""
    sample = HARD[name]
    found, truth = assessed(sample, tmp_path), exact(sample.text, sample.assumptions)
    assert violations(found, truth) == []


def test_nodes_and_weights_are_right_to_one_rounding() -> None:
    """Nodes and weights are those of the 16-point Gauss–Legendre rule, each within one unit roundoff."""
    with ctx.workprec(200):
        for k, (node, weight) in enumerate(zip(NODES[::-1], WEIGHTS[::-1], strict=True)):
            exact_node, exact_weight = arb.legendre_p_root(16, k, weight=True)
            assert abs(arb(node) - exact_node) <= UNIT * abs(exact_node)
            assert abs(arb(weight) - exact_weight) <= UNIT * exact_weight


def test_running_sum_is_within_its_bound() -> None:
    """Each of 100,000 partial sums, of terms over sixteen orders of magnitude that nearly cancel, is within its bound."""
    rng = Random(7)
    terms = [rng.choice((-1, 1)) * 10.0 ** rng.uniform(-10, 6) for _ in range(50_000)]
    terms += [-term * (1.0 + 1e-9 * rng.random()) for term in terms]
    sums, bounds = running_sum(np.array(terms))
    so_far = Fraction(0)
    for term, found, bound in zip(terms, sums[1:], bounds[1:], strict=True):
        so_far += Fraction(term)
        assert abs(Fraction(float(found)) - so_far) <= Fraction(float(bound))
    assert float(bounds[-1]) < 1e-11


def ball_rule(p: list[float], q: list[float]) -> tuple[arb, arb]:
    """∫_{−1}^{1} Σ p_j z^j · exp(Σ q_j z^j) dz: by the 16-point rule without rounding, and exactly."""

    def integrand(z: acb, _: bool = False) -> acb:
        value = sum((acb(c) * z**j for j, c in enumerate(p)), acb(0))
        return value * sum((acb(c) * z**j for j, c in enumerate(q)), acb(0)).exp()

    roots = (arb.legendre_p_root(16, k, weight=True) for k in range(16))
    by_rule = sum((weight * integrand(acb(node)).real for node, weight in roots), arb(0))
    return by_rule, acb.integral(integrand, -1, 1).real


STEEP = [
    ([1.0], [0.0, 3.0]),
    ([1.0], [0.0, -40.0]),
    ([1.0], [250.0, 300.0]),
    ([2.0, -1.0, 0.5, 3.0], [0.0, 8.0, -6.0]),
    ([1e9, -1e9], [-30.0, 25.0, 5.0, -3.0, 2.0]),
    ([0.0, 0.0, 0.0, 1.0], [0.0, 0.5, -60.0]),
    ([1.0], [0.0, 0.0, 0.0, 0.0, -90.0]),
    ([1.0, 1.0], [5.0, -1e-9, 20.0, 11.0]),
]


@pytest.mark.parametrize(("p", "q"), STEEP)
def test_truncation_bound_covers_the_rule_without_rounding(p: list[float], q: list[float]) -> None:
    """Before any halving, the truncation bound covers what the rule itself misses, however steep the integrand."""
    with ctx.workprec(300):
        by_rule, truth = ball_rule(p, q)
        missed = abs(by_rule - truth)
        bound = truncation_bound(np.abs([[p]]), np.array([[q[0]]]), np.abs([[q[1:]]]), np.array([2.0]))
        assert missed <= arb(float(bound[0, 0]))


@pytest.mark.parametrize(("p", "q"), STEEP)
def test_integral_is_within_its_bound_before_halving(p: list[float], q: list[float]) -> None:
    """On an interval too long for the rule the value is within its bound all the same; the interval is marked for halving."""
    none = np.zeros((1, 1))
    found = integrate(np.array([[p]]), np.array([[q]]), np.array([2.0]), p_error=none, q_error=none)
    with ctx.workprec(300):
        _, truth = ball_rule(p, q)
        assert abs(arb(float(found.value[0, 0])) - truth) <= arb(float(found.bound[0, 0]))
    assert bool(found.coarse[0]) is (sum(abs(c) for c in q[1:]) > 3.0)


def test_wrong_bound_is_noticed(tmp_path: Path) -> None:
    """The comparison can fail: a plan whose figures were read differently from what is printed is reported."""
    sample = HARD["three rows: a parabola, also of r"]
    found = assessed(sample, tmp_path)
    changed = sample.text.replace("0.012", "0.01200000001")
    assert any(problem.startswith("slack") for problem in violations(found, exact(changed, sample.assumptions)))
