"""The path of wealth that a plan implies: its lowest point, inside the rows' periods too, and whether debt occurs.

    e^{−Λ(t)} k(t) = D(t) = k(0) + ∫_0^t e^{−Λ}(w − c) ds,        K(t)/H = A(0)L(0)/H · e^{R(t)} D(t)

Inside an interval D is the integral of the polynomial through the integrand's values at the Gauss nodes, which is as
exact as the quadrature itself.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from .budget import Budget, Reach
from .plan import LARGEST_EXPONENT, OutOfRange
from .quadrature import ANTIDERIVATIVE, NODES, POINTS, Floats, antiderivative_at, at_nodes, polynomial, running_sum
from .streams import Exponent

_SEARCH_POINTS = 65
"""Points between two neighbouring nodes at which a minimum or a crossing is looked for."""


@dataclass(frozen=True, kw_only=True)
class Extreme:
    """A value at a date: t in years since the start; error: what is known to be uncertain in the value."""

    t: float
    value: float
    error: float


@dataclass(frozen=True, kw_only=True)
class HouseholdWealth:
    """minimum: the lowest wealth; largest_debt: the same as a positive amount, None without debt."""

    minimum: Extreme
    largest_debt: Extreme | None


@dataclass(frozen=True, kw_only=True, eq=False)
class WealthPath:
    """minimum: the lowest wealth per unit of human capital; per_household: in household money; first_negative: the first date
    with wealth below zero beyond its error; first_insolvent: the first date at which what is left to consume is worth more
    than all there is to pay for it, beyond its error; discounted_nodes (m, 16): D at the nodes."""

    minimum: Extreme
    per_household: HouseholdWealth
    first_negative: float | None
    first_insolvent: float | None
    discounted_nodes: Floats


@dataclass(frozen=True, eq=False)
class _Course:
    """D and an exponent E on the mesh: the course of e^E·D, at breakpoints before and after lump sums and at nodes."""

    breaks: Floats
    lengths: Floats
    before: Floats
    after: Floats
    nodes: Floats
    net: Floats
    exponent: Exponent | None
    factor: float
    error: float

    def _grown(self) -> tuple[Floats, Floats]:
        """factor·e^E at breakpoints (m + 1,) and at nodes (m, 16)."""
        if self.exponent is None:
            return np.full(len(self.breaks), self.factor), np.full(self.nodes.shape, self.factor)
        return self.factor * np.exp(self.exponent.at), self.factor * np.exp(at_nodes(self.exponent.coefficients))

    def inside(self, interval: int, z: Floats) -> Floats:
        """factor·e^E·D at points z of one interval."""
        d = self.after[interval] + self.lengths[interval] / 2.0 * (antiderivative_at(z) @ self.net[interval])
        if self.exponent is None:
            return np.asarray(self.factor * d)
        return np.asarray(self.factor * np.exp(polynomial(self.exponent.coefficients[interval], z)) * d)

    def time(self, interval: int, z: float) -> float:
        """The date of a point of an interval, years since the start."""
        return float(self.breaks[interval] + self.lengths[interval] * (1.0 + z) / 2.0)

    def lowest(self) -> Extreme:
        """The minimum over breakpoints and intervals."""
        at_breaks, inside = self._grown()
        course = inside * self.nodes
        after, before = at_breaks * self.after, at_breaks * self.before
        edge = np.minimum(after, before)
        low = int(np.argmin(edge))
        interval, node = np.unravel_index(int(np.argmin(course)), course.shape)
        if edge[low] <= course[interval, node]:
            return Extreme(t=float(self.breaks[low]), value=float(edge[low]), error=float(at_breaks[low]) * self.error)
        i, j = int(interval), int(node)
        left = NODES[j - 1] if j > 0 else -1.0
        right = NODES[j + 1] if j + 1 < POINTS else 1.0
        z, value = self._descend(i, float(left), float(right))
        return Extreme(t=self.time(i, z), value=value, error=float(inside[i, j]) * self.error)

    def _descend(self, interval: int, left: float, right: float) -> tuple[float, float]:
        """The vertex of the parabola through the three lowest of many points between left and right."""
        z = np.linspace(left, right, _SEARCH_POINTS)
        values = self.inside(interval, z)
        best = min(max(int(np.argmin(values)), 1), _SEARCH_POINTS - 2)
        low, middle, high = values[best - 1 : best + 2].tolist()
        bend = low - 2.0 * middle + high
        shift = 0.5 * (low - high) / bend if bend > 0.0 else 0.0
        lowered = middle - 0.125 * (low - high) ** 2 / bend if bend > 0.0 else middle
        if abs(shift) > 1.0:
            shift, lowered = 0.0, middle
        return float(z[best] + shift * (z[1] - z[0])), float(min(lowered, low, middle, high))

    def first_below(self) -> float | None:
        """The first date at which the course is below zero by more than its error."""
        # factor·e^E is positive, so the sign is that of D
        below_nodes = self.nodes < -self.error
        below_after, below_before = self.after < -self.error, self.before < -self.error
        intervals = below_nodes.any(axis=1) | below_after[:-1] | below_before[1:]
        if not intervals.any():
            return float(self.breaks[-1]) if below_after[-1] else None
        i = int(np.argmax(intervals))
        if below_after[i]:
            return float(self.breaks[i])
        z = np.concatenate([[-1.0], NODES, [1.0]])
        low = np.concatenate([[False], below_nodes[i], [below_before[i + 1]]])
        j = int(np.argmax(low))
        points = np.linspace(z[j - 1], z[j], _SEARCH_POINTS)
        values = self.inside(i, points)
        values[-1] = min(values[-1], 0.0)
        j = max(int(np.argmax(values <= 0.0)), 1)
        # a straight line between two points so close finds the date to far better than a day
        before, after = max(float(values[j - 1]), 0.0), float(values[j])
        share = before / (before - after) if before > after else 1.0
        return self.time(i, float(points[j - 1] + share * (points[j] - points[j - 1])))


def wealth_path(budget: Budget, reconstruction: float) -> WealthPath:
    """The path of wealth; reconstruction: the estimate of what interpolation between rows leaves open, in units of slack."""
    plan, unit = budget.plan, budget.unit
    signs = np.where(plan.incomes, 1.0, -1.0)
    error = unit.account.rows_slack.bound + (reconstruction if np.isfinite(reconstruction) else 0.0)
    course = _course(budget, unit.account.initial_wealth.value, signs, error)
    _check_range(course, (unit.discount, budget.household.discount))
    own = replace(course, exponent=unit.discount)
    household = replace(course, exponent=budget.household.discount, factor=plan.scale.value).lowest()
    debt = household.value < -household.error
    return WealthPath(
        minimum=own.lowest(),
        per_household=HouseholdWealth(
            minimum=household,
            largest_debt=Extreme(t=household.t, value=-household.value, error=household.error) if debt else None,
        ),
        first_negative=own.first_below(),
        first_insolvent=_first_insolvent(budget, error),
        discounted_nodes=course.nodes,
    )


def _first_insolvent(budget: Budget, error: float) -> float | None:
    """The date from which k(t) falls short of −(present value of wages still to come, less the terminal requirement).

    In discounted form the shortfall is S + ∫_t e^{−Λ}c < 0: what is left to consume no longer covers the missing slack.
    """
    account = budget.unit.account
    slack, consumption = account.slack.value, account.consumption
    if consumption.reach is not Reach.FINITE or account.income.reach is not Reach.FINITE or slack >= -error:
        return None
    start = slack + consumption.whole.value
    return _course(budget, start, np.where(budget.plan.incomes, 0.0, -1.0), error).first_below()


def _course(budget: Budget, start: float, signs: Floats, error: float) -> _Course:
    """start + ∫_0^t of the signed discounted streams, on the mesh."""
    mesh, integral, lumps = budget.plan.mesh, budget.unit.integral, budget.unit.streams.lumps
    net = np.tensordot(signs, integral.nodes, axes=1)
    before = after = start + running_sum(signs @ integral.value)[0]
    if lumps is not None:
        # the sums of one date are netted first
        paid = running_sum(signs @ lumps.values()[0])[0]
        before, after = before + paid[:-1], after + paid[1:]
    nodes = after[:-1, None] + (mesh.lengths / 2.0)[:, None] * (net @ ANTIDERIVATIVE.T)
    return _Course(mesh.breaks, mesh.lengths, before, after, nodes, net, None, 1.0, error)


def _check_range(course: _Course, exponents: tuple[Exponent | None, ...]) -> None:
    """Refuse a path whose undiscounted amounts floating point cannot carry."""
    size = math.log(max(float(np.abs(course.nodes).max()), float(np.abs(course.after).max()), 1.0))
    for exponent in exponents:
        if exponent is None or size + exponent.largest <= LARGEST_EXPONENT:
            continue
        # only now is it worth looking date by date: where discounted wealth is large, its exponent may be negative
        at_nodes_size = at_nodes(exponent.coefficients) + np.log(np.maximum(np.abs(course.nodes), 1.0))
        at_breaks_size = exponent.at + np.log(np.maximum(np.maximum(np.abs(course.after), np.abs(course.before)), 1.0))
        largest = max(float(at_nodes_size.max()), float(at_breaks_size.max()))
        if largest > LARGEST_EXPONENT:
            raise OutOfRange(
                f"wealth along the plan reaches e^{largest:.4g}, beyond the supported e^{LARGEST_EXPONENT:g}; "
                "shorten the horizon, or check r, g and n (fractions a year)"
            )
