"""Errors that can be estimated, not proved: of reconstructing a path from its rows, and of an undeclared tail.

Reconstruction: a continuous plan is known only at its rows. The change of slack when every second row is left out is larger
than the error that remains, by about the order of the interpolation (16 for a smooth path), wherever the rows are fine enough
at all.

Tail: where the author declared none, balanced growth is assumed after the last row although the last rows may still move.
Twice the difference between balanced growth and the tails fitted to the last rows (see `settling`) is taken as the error.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from .budget import Budget, slack_only
from .plan import OutOfRange, Plan, build
from .quadrature import Floats
from .settling import FEWEST_IN_WINDOW, Curves, LastRows, exponential, fit, last_rows, slowing

FEWEST_ROWS = 4
"""Below this a reconstruction error cannot be estimated."""

SMOOTH_ORDER = 16.0
"""By how much twice as many rows lessen the error of a smooth path, once they are fine enough."""

TAIL_FACTOR = 2.0
"""On cut-off growth paths, from above and from below their long-run values, once the difference was too small and twice was
not."""


@dataclass(frozen=True, kw_only=True)
class TailEstimate:
    """error: of slack, per unit of human capital; fit: None where nothing moves or nothing could be fitted; why: the reason in
    words."""

    error: float
    fit: Curves | None
    why: str


def reconstruction(budget: Budget) -> float:
    """Estimated error of slack from interpolating between rows; zero where the path is what the plan means.

    max(|S_h − S_2h|, |S_2h − S_4h|/16), S_h from all rows, S_2h from every second and S_4h from every fourth, the first and
    the last kept: the second difference, brought to the finer rows at the order of a smooth path, takes over where the first
    happens to vanish on its way from one sign to the other.
    """
    plan = budget.plan
    c = plan.conventions
    if c.periods or (c.path_declared and plan.path != "smooth"):
        return 0.0
    rows = plan.rows
    if len(rows.timeline.times) < FEWEST_ROWS:
        return math.inf
    slacks = [budget.unit.account.slack.value]
    try:
        for _ in range(2 if len(rows.timeline.times) >= 2 * FEWEST_ROWS else 1):
            rows = rows.thinned()
            slacks.append(slack_only(build(rows, c, plan.path)).slack.value)
    except OutOfRange:
        return math.inf
    differences = np.abs(np.diff(slacks)) / (1.0, SMOOTH_ORDER)[: len(slacks) - 1]
    return float(differences.max())


def tail(budget: Budget) -> TailEstimate:
    """Estimated error of slack from assuming balanced growth after the last row of a perpetual plan."""
    plan = budget.plan
    if not plan.conventions.perpetual:
        return TailEstimate(error=0.0, fit=None, why="the plan has no tail")
    if plan.conventions.tail_declared:
        return TailEstimate(error=0.0, fit=None, why="the tail is declared")
    rows = last_rows(plan)
    moving = rows.movement > rows.noise
    discount = budget.unit.discount
    weight = TAIL_FACTOR * (1.0 if discount is None else math.exp(-float(discount.at[-1])))
    still = weight * _lasting_shift(rows, np.where(moving, 0.0, rows.movement), plan)
    if not moving.any():
        return TailEstimate(error=still, fit=None, why="the last rows do not move beyond the rounding of their figures")
    if len(rows.s) < FEWEST_IN_WINDOW:
        return TailEstimate(error=math.inf, fit=None, why="there are too few rows to fit a converging tail to")
    fits = fit(rows, moving)
    settled = exponential(fits)
    if settled is None:
        return TailEstimate(error=math.inf, fit=None, why="the last rows do not settle towards long-run values")
    difference, why = _difference(rows, settled, slowing(fits), plan)
    error = weight * difference + still
    return TailEstimate(error=error if math.isfinite(error) else math.inf, fit=settled, why=why)


def _lasting_shift(rows: LastRows, shift: Floats, plan: Plan) -> float:
    """What a lasting shift of income, consumption and r, (3,), would change in the tail, at most, to first order."""
    decay = float(rows.values[2, -1]) - plan.growth.value
    if not shift.any():
        return 0.0
    if decay <= 0.0:
        return math.inf
    net = abs(float(rows.values[0, -1] - rows.values[1, -1]))
    return float((shift[0] + shift[1]) / decay + net / decay**2 * shift[2])


def _difference(rows: LastRows, settled: Curves, slower: Curves | None, plan: Plan) -> tuple[float, str]:
    """How far the tails fitted to the last rows are from balanced growth, valued at the last row, and why."""
    growth = plan.growth.value
    now = float(rows.values[2, -1]) - growth
    if now <= 0.0:
        return math.inf, "r does not exceed g + n at the last row, and still moves"
    balanced = float(rows.values[0, -1] - rows.values[1, -1]) / now
    difference = abs(settled.value(growth) - balanced)
    if math.isinf(difference):
        return math.inf, "the fitted long-run r does not exceed g + n"
    why = "a tail that goes on settling as the last rows do, fitted to them, differs by half of this"
    if slower is None:
        return difference, why
    other = _value(slower, growth) - balanced
    if not math.isfinite(other):
        return math.inf, "the last rows settle ever more slowly, and may not settle at all"
    if abs(other) > difference:
        why = "a tail that settles ever more slowly, fitted to the last rows, differs by half of this"
    return max(difference, abs(other)), why


def _value(curves: Curves, growth: float) -> float:
    """The value of curves, infinite where one of them has no long-run value."""
    long_run = (curves.income.long_run, curves.consumption.long_run, curves.interest.long_run)
    return curves.value(growth) if all(map(math.isfinite, long_run)) else math.inf
