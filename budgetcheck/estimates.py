"""Errors that can be estimated, not proved: of reconstructing a path from its rows, and of an undeclared tail.

Reconstruction: a continuous plan is known only at its rows. The change of slack when every second row is left out is larger
than the error that remains, by about the order of the interpolation (16 for a smooth path), wherever the rows are fine enough
at all.

Tail: where the author declared none, balanced growth is assumed after the last row although the last rows may still move.
Twice the difference between balanced growth and the tails fitted to the last rows (see `settling`) is taken as the error.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from .budget import Budget, Reach, slack_only
from .plan import OutOfRange, Plan
from .quadrature import Floats

if TYPE_CHECKING:
    from .settling import Curves, Fits, LastRows

FEWEST_ROWS = 4
"""Below this a reconstruction error cannot be estimated."""

SMOOTH_ORDER = 16.0
"""By how much twice as many rows lessen the error of a smooth path, once they are fine enough."""

TAIL_FACTOR = 2.0
"""On cut-off growth paths, from above and from below their long-run values, once the difference was too small and twice was
not."""


@dataclass(frozen=True, kw_only=True, eq=False)
class TailEstimate:
    """error: of slack, per unit of human capital; fit: None where nothing moves or nothing could be fitted; why: the reason in
    words; balanced: slack under balanced growth, beside a converging tail, None otherwise or where infinite."""

    error: float
    fit: Curves | None
    why: str
    balanced: float | None = None


def open_between_rows(plan: Plan) -> bool:
    """Whether the plan is known only at its rows: not for totals, nor for a declared step, linear or geometric path."""
    c = plan.conventions
    return not c.periods and (not c.path_declared or plan.path == "smooth")


def reconstruction(budget: Budget, thinned: Callable[[int], Plan]) -> float:
    """Estimated error of slack from interpolating between rows; zero where the path is what the plan means.

    max(|S_h − S_2h|, |S_2h − S_4h|/16), S_h from all rows, S_2h from every second and S_4h from every fourth, the first and
    the last kept: the second difference, brought to the finer rows at the order of a smooth path, takes over where the first
    happens to vanish on its way from one sign to the other. thinned: the same plan from every
    second row, so many times over.
    """
    plan = budget.plan
    if not open_between_rows(plan):
        return 0.0
    count = len(plan.rows.timeline.times)
    if count < FEWEST_ROWS:
        return math.inf
    slacks = [budget.unit.account.slack.value]
    try:
        levels = (1, 2) if count >= 2 * FEWEST_ROWS else (1,)
        slacks.extend([slack_only(thinned(times)).slack.value for times in levels])
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
    from .settling import slowing

    found = fitted(plan)
    if found.settled is None:
        return TailEstimate(error=math.inf if found.moves else found.weight * found.still, fit=None, why=found.why)
    assert found.fits is not None, "curves come from fits"
    difference, why = _difference(found.rows, found.settled, slowing(found.fits), plan)
    error = found.weight * (difference + found.still)
    return TailEstimate(error=error if math.isfinite(error) else math.inf, fit=found.settled, why=why)


def converging_tail(balanced: Plan, found: Fitted | None) -> TailEstimate:
    """Estimated error of a converging tail: none where it was declared; where it was fitted to the last rows, twice the largest
    difference from other fits to them. balanced: the plan with balanced growth instead."""
    try:
        account = slack_only(balanced)
    except OutOfRange:
        beside = None
    else:
        finite = account.income.reach is Reach.FINITE and account.consumption.reach is Reach.FINITE
        beside = account.slack.value if finite else None
    if found is None:
        return TailEstimate(error=0.0, fit=None, why="the tail is declared", balanced=beside)
    if found.settled is None or found.fits is None:
        error = math.inf if found.moves else found.weight * found.still
        return TailEstimate(error=error, fit=None, why=found.why, balanced=beside)
    from .settling import exponential, slowing

    growth = balanced.drifts.growth.beyond.value
    value = found.settled.value(growth)
    others = [_value(curves, growth) for curves in (exponential(found.fits, 2), slowing(found.fits)) if curves is not None]
    difference = max((abs(other - value) for other in others), default=math.inf)
    error = found.weight * (difference + found.still)
    why = "other curves fitted to the last rows differ by half of this"
    return TailEstimate(error=error if math.isfinite(error) else math.inf, fit=found.settled, why=why, balanced=beside)


@dataclass(frozen=True, eq=False)
class Fitted:
    """What was fitted to the last rows: settled is None where nothing moves (moves) or nothing could be fitted; weight: from a
    value at the last row to twice the present one; still: what a shift within the noise of the rows would change, at most."""

    rows: LastRows
    fits: Fits | None
    settled: Curves | None
    moves: bool
    weight: float
    still: float
    why: str


def fitted(plan: Plan) -> Fitted:
    """Curves fitted to the last rows of a plan, and why there are none."""
    from .settling import FEWEST_IN_WINDOW, exponential, fit, last_rows

    rows = last_rows(plan)
    moving = rows.movement > rows.noise * (1.0 + 1e-9)
    discount = plan.net_exponent
    weight = TAIL_FACTOR * (1.0 if discount is None else math.exp(-float(discount.before[-1])))
    still = _lasting_shift(rows, np.where(moving, 0.0, rows.movement), plan)

    def without(why: str) -> Fitted:
        return Fitted(rows, None, None, moves=bool(moving.any()), weight=weight, still=still, why=why)

    if not moving.any():
        return without("the last rows do not move beyond the rounding of their figures")
    if len(rows.s) < FEWEST_IN_WINDOW:
        return without("there are too few rows to fit a converging tail to")
    fits = fit(rows, moving)
    settled = exponential(fits)
    if settled is None:
        return without("the last rows do not settle towards long-run values")
    return Fitted(rows, fits, settled, moves=True, weight=weight, still=still, why="the last rows settle")


def _lasting_shift(rows: LastRows, shift: Floats, plan: Plan) -> float:
    """What may hide under the rounding of the last rows, at most: a shift of income, consumption and r, (3,), that lasts, or
    that goes on as a drift of so much in each window.

    A lasting shift x of a flow is worth x/δ, a drift of x in w years x/(wδ²); of the rate, on a net flow f, f·x/(δ(δ − x)) and
    that over w(δ − x).
    """
    decay = float(rows.values[2, -1]) - plan.drifts.growth.beyond.value
    if not shift.any():
        return 0.0
    left = decay - float(shift[2])
    if left <= 0.0:
        return math.inf
    window = max(-float(rows.s[0]), 1e-9)
    net = abs(float(rows.values[0, -1] - rows.values[1, -1]))
    goes_on = max(1.0, 1.0 / (window * left))
    return float(((shift[0] + shift[1]) / left + net / (decay * left) * shift[2]) * goes_on)


def _difference(rows: LastRows, settled: Curves, slower: Curves | None, plan: Plan) -> tuple[float, str]:
    """How far the tails fitted to the last rows are from balanced growth, valued at the last row, and why."""
    growth = plan.drifts.growth.beyond.value
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
