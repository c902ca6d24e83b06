"""The path of wealth that a plan implies: its lowest point, inside the rows' periods too, and whether debt occurs.

    e^{−Λ(t)} k(t) = D(t) = k(0) + ∫_0^t e^{−Λ}(w − c) ds,        K(t)/H = A(0)L(0)/H · e^{R(t)} D(t)

Inside an interval D is the integral of the polynomial through the integrand's values at the Gauss nodes, which is as
exact as the quadrature itself.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .budget import Budget
from .quadrature import ANTIDERIVATIVE, NODES, POINTS, WEIGHTS, Floats, at_nodes, polynomial, running_sum
from .streams import Exponent

_SEARCH_POINTS = 65
_SEARCH_ROUNDS = 2


@dataclass(frozen=True, kw_only=True)
class Extreme:
    """A value at a date: t in years since the start; error: what is known to be uncertain in the value."""

    t: float
    value: float
    error: float


@dataclass(frozen=True, kw_only=True, eq=False)
class WealthPath:
    """discounted_nodes (m, 16): D at the nodes; per_unit, per_household: the lowest wealth; largest_debt: as a positive amount
    of household money, None without debt; first_negative: the first date with wealth below zero beyond its error."""

    discounted_nodes: Floats
    per_unit: Extreme
    per_household: Extreme
    largest_debt: Extreme | None
    first_negative: float | None


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
        """e^E·D at points z of one interval."""
        from numpy.polynomial.legendre import legvander

        values = legvander(NODES, POINTS - 1)
        series = (np.arange(POINTS) + 0.5) * ((WEIGHTS * self.net[interval]) @ values)
        at = legvander(z, POINTS)
        integral = np.empty((len(z), POINTS))
        integral[:, 0] = 1.0 + z
        integral[:, 1:] = (at[:, 2:] - at[:, : POINTS - 1]) / (2.0 * np.arange(1, POINTS) + 1.0)
        d = self.after[interval] + self.lengths[interval] / 2.0 * (integral @ series)
        if self.exponent is None:
            return np.asarray(self.factor * d)
        return np.asarray(self.factor * np.exp(polynomial(self.exponent.coefficients[interval], z)) * d)

    def time(self, interval: int, z: float) -> float:
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
        """Narrow a bracket of the minimum twice, then take the vertex of the parabola through the last three points."""
        for _ in range(_SEARCH_ROUNDS):
            z = np.linspace(left, right, _SEARCH_POINTS)
            values = self.inside(interval, z)
            best = min(max(int(np.argmin(values)), 1), _SEARCH_POINTS - 2)
            left, right = float(z[best - 1]), float(z[best + 1])
        low, middle, high = values[best - 1 : best + 2]
        bend = low - 2.0 * middle + high
        shift = 0.5 * (low - high) / bend if bend > 0.0 else 0.0
        lowered = middle - 0.125 * (low - high) ** 2 / bend if bend > 0.0 else middle
        return float(z[best] + np.clip(shift, -1.0, 1.0) * (z[1] - z[0])), float(min(lowered, low, middle, high))

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
        left, right = float(z[j - 1]), float(z[j])
        for _ in range(_SEARCH_ROUNDS):
            points = np.linspace(left, right, _SEARCH_POINTS)
            negative = self.inside(i, points) < 0.0
            negative[-1] = True
            j = int(np.argmax(negative))
            left, right = float(points[max(j - 1, 0)]), float(points[j])
        return self.time(i, right)


def wealth_path(budget: Budget, reconstruction: float) -> WealthPath:
    """The path of wealth; reconstruction: the estimate of what interpolation between rows leaves open, in units of slack."""
    plan, unit = budget.plan, budget.unit
    signs = np.where(plan.incomes, 1.0, -1.0)
    net = np.tensordot(signs, unit.integral.nodes, axes=1)
    flows = signs @ unit.integral.value
    before, after = _at_breaks(budget, signs, flows)
    nodes = after[:-1, None] + (plan.mesh.lengths / 2.0)[:, None] * (net @ ANTIDERIVATIVE.T)
    error = unit.account.rows_slack.bound + (reconstruction if np.isfinite(reconstruction) else 0.0)

    def course(exponent: Exponent | None, factor: float) -> _Course:
        mesh = plan.mesh
        return _Course(mesh.breaks, mesh.lengths, before, after, nodes, net, exponent, factor, error)

    per_unit = course(unit.discount, 1.0)
    household = course(budget.household.discount, plan.scale.value).lowest()
    debt = household.value < -household.error
    return WealthPath(
        discounted_nodes=nodes,
        per_unit=per_unit.lowest(),
        per_household=household,
        largest_debt=Extreme(t=household.t, value=-household.value, error=household.error) if debt else None,
        first_negative=per_unit.first_below(),
    )


def _at_breaks(budget: Budget, signs: Floats, flows: Floats) -> tuple[Floats, Floats]:
    """D at breakpoints before and after the lump sums there, which are netted first."""
    lumps = budget.unit.streams.lumps
    start = budget.unit.account.wealth.value
    if lumps is None:
        running = start + running_sum(flows)[0]
        return running, running
    netted = signs @ lumps.values()[0]
    running = start + running_sum(flows)[0]
    paid = running_sum(netted)[0]
    return running + paid[:-1], running + paid[1:]
