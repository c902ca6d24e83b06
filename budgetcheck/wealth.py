"""The path of wealth that a plan implies: its lowest point, inside the rows' periods too, and whether debt occurs.

    e^{−Λ(t)} k(t) = D(t) = k(0) + ∫_0^t e^{−Λ}(w − c) ds,        K(t)/H = A(0)L(0)/H · e^{R(t)} D(t)

Inside an interval D is the integral of the polynomial through the integrand's values at the Gauss nodes, which is as
exact as the quadrature itself.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from .budget import Budget, Reach
from .exponents import Exponent
from .plan import LARGEST_EXPONENT, OutOfRange
from .quadrature import EXP_ERROR, NODES, Floats, antiderivative_at, polynomial, running_sum

_SEARCH_POINTS = 65
"""Points between two neighbouring points of the grid at which a minimum or a crossing is looked for."""

_BESIDE = 3
_GAP = (1.0 + NODES[0]) * np.arange(1.0, _BESIDE + 1.0) / (_BESIDE + 1.0)
GRID: Floats = np.concatenate([-1.0 + _GAP, NODES, 1.0 - _GAP[::-1]])
"""Points of an interval at which its trace is known: the Gauss nodes, and a few between them and the ends, where it may
turn."""

_ENDS_TOO: Floats = np.concatenate([[-1.0], GRID, [1.0]])
_WITH_ENDS = len(_ENDS_TOO)

_TO_GRID: Floats = antiderivative_at(GRID)
_GRID_POWERS: Floats = GRID ** np.arange(32)[:, None]


@dataclass(frozen=True, kw_only=True, eq=False)
class Extreme:
    """A value at a date: t in years since the start; error: what is known to be uncertain in the value."""

    t: float
    value: float
    error: float


@dataclass(frozen=True, kw_only=True, eq=False)
class HouseholdWealth:
    """minimum: the lowest wealth; largest_debt: the same as a positive amount, None without debt."""

    minimum: Extreme
    largest_debt: Extreme | None


@dataclass(frozen=True, kw_only=True, eq=False)
class Breach:
    """since: the first date with a debt above the declared limit, beyond its error, None without one; room: the least distance
    from the limit, household money, negative beyond it."""

    since: float | None
    room: Extreme


@dataclass(frozen=True, kw_only=True, eq=False)
class WealthPath:
    """minimum: the lowest wealth per unit of human capital; per_household: in household money; first_negative: the first date
    with wealth below zero beyond its error; first_insolvent: the first date at which what is left to consume is worth more
    than all there is to pay for it, beyond its error; breach: against a declared borrowing limit, None without one;
    discounted_nodes (m, 16): D at the nodes."""

    minimum: Extreme
    per_household: HouseholdWealth
    first_negative: float | None
    first_insolvent: float | None
    breach: Breach | None
    discounted_nodes: Floats


@dataclass(frozen=True, eq=False)
class Trace:
    """D and an exponent E on the mesh: the trace of factor·e^E·D, at breakpoints before and after lump sums and at nodes."""

    breaks: Floats
    lengths: Floats
    before: Floats
    after: Floats
    grid: Floats
    net: Floats
    exponent: Exponent | None
    factor: float
    error: float
    allowance: tuple[float, Exponent | None] | None = None

    @property
    def at_nodes(self) -> Floats:
        """D at the Gauss nodes, (m, 16)."""
        return self.grid[:, _BESIDE:-_BESIDE]

    def with_allowance(self, amount: float, exponent: Exponent | None) -> Trace:
        """The trace of D + amount·e^A, which is below zero where wealth is below what may be owed."""
        level = np.full(len(self.breaks), amount)
        allowed, before, after, bound = np.full(self.grid.shape, amount), level, level, 0.0
        if exponent is not None:
            allowed = amount * np.exp(_on_grid(exponent.coefficients))
            before, after = amount * np.exp(exponent.before), amount * np.exp(exponent.after)
            bound = float((allowed.max(axis=1) * (1.01 * exponent.error + EXP_ERROR)).max())
        return replace(
            self,
            grid=self.grid + allowed,
            before=self.before + before,
            after=self.after + after,
            error=self.error + bound,
            allowance=(amount, exponent),
        )

    def _grown(self) -> tuple[Floats, Floats, Floats]:
        """factor·e^E at breakpoints, before and after a jump, (m + 1,), and at nodes, (m, 16)."""
        if self.exponent is None:
            level = np.full(len(self.breaks), self.factor)
            return level, level, np.full(self.grid.shape, self.factor)
        e = self.exponent
        after = self.factor * np.exp(e.after)
        before = after if e.before is e.after else self.factor * np.exp(e.before)
        return before, after, self.factor * np.exp(_on_grid(e.coefficients))

    def inside(self, interval: int, z: Floats) -> Floats:
        """factor·e^E·D at points z of one interval."""
        start = self.after[interval] - self._allowed(interval, np.full(1, -1.0))
        d = start + self.lengths[interval] / 2.0 * (antiderivative_at(z) @ self.net[interval]) + self._allowed(interval, z)
        if self.exponent is None:
            return np.asarray(self.factor * d)
        return np.asarray(self.factor * np.exp(polynomial(self.exponent.coefficients[interval], z)) * d)

    def _allowed(self, interval: int, z: Floats) -> Floats | float:
        """amount·e^A at points z of one interval."""
        if self.allowance is None:
            return 0.0
        amount, exponent = self.allowance
        return amount if exponent is None else amount * np.exp(polynomial(exponent.coefficients[interval], z))

    def time(self, interval: int, z: float) -> float:
        """The date of a point of an interval, years since the start."""
        return float(self.breaks[interval] + self.lengths[interval] * (1.0 + z) / 2.0)

    def lowest(self) -> Extreme:
        """The minimum over breakpoints and intervals."""
        grown_before, grown_after, inside = self._grown()
        trace = inside * self.grid
        edge = np.minimum(grown_after * self.after, grown_before * self.before)
        low = int(np.argmin(edge))
        interval, node = np.unravel_index(int(np.argmin(trace)), trace.shape)
        if edge[low] <= trace[interval, node]:
            found = Extreme(t=float(self.breaks[low]), value=float(edge[low]), error=float(grown_after[low]) * self.error)
            return self._beside(found, low, trace)
        i, j = int(interval), int(node)
        left = GRID[j - 1] if j > 0 else -1.0
        right = GRID[j + 1] if j + 1 < len(GRID) else 1.0
        z, value = self.descend(i, float(left), float(right))
        return Extreme(t=self.time(i, z), value=value, error=float(inside[i, j]) * self.error)

    def _beside(self, edge: Extreme, low: int, trace: Floats) -> Extreme:
        """The lowest breakpoint, or a point right beside it where wealth still falls or has been falling, as the parabola through
        the breakpoint and the next two points of the grid has it."""
        best = edge
        sides = (low, -1.0, float(GRID[0]), (0, 1)), (low - 1, float(GRID[-1]), 1.0, (-1, -2))
        for interval, left, right, near in sides:
            if not 0 <= interval < len(self.lengths):
                continue
            next_to, after_next = (float(trace[interval, place]) for place in near)
            if 4.0 * next_to - 3.0 * edge.value - after_next < 0.0:
                z, found = self.descend(interval, left, right)
                best = Extreme(t=self.time(interval, z), value=found, error=edge.error) if found < best.value else best
        return best

    def descend(self, interval: int, left: float, right: float) -> tuple[float, float]:
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
        """The first date at which the trace is below zero by more than its error."""
        # factor·e^E is positive, so the sign is that of D
        values = np.concatenate([self.after[:-1, None], self.grid, self.before[1:, None]], axis=1)
        seen = np.flatnonzero((values < -self.error).ravel())
        first = int(seen[0]) if len(seen) else values.size
        for place in self._dips(values):
            if place > first:
                break
            found = self._dip_below(*divmod(int(place), _WITH_ENDS))
            if found is not None:
                return found
        if first == values.size:
            return float(self.breaks[-1]) if self.after[-1] < -self.error else None
        interval, j = divmod(first, _WITH_ENDS)
        if j == 0:
            return float(self.breaks[interval])
        return self._crossing(interval, float(_ENDS_TOO[j - 1]), float(_ENDS_TOO[j]))

    def _dips(self, values: Floats) -> NDArray[np.intp]:
        """Places among the values (m, 24), in order, beside which the trace may dip below zero between two points: a value
        that is no higher than its neighbours, and above zero by no more than they are above it."""
        before = np.concatenate([values[:, :1], values[:, :-1]], axis=1)
        behind = np.concatenate([values[:, 1:], values[:, -1:]], axis=1)
        drop = np.maximum(before, behind) - values
        low = (values <= before) & (values <= behind) & (values - drop < -self.error)
        return np.flatnonzero(low.ravel())

    def _dip_below(self, interval: int, j: int) -> float | None:
        """The date at which the trace falls below zero beside a place of an interval; None where it does not."""
        left, right = float(_ENDS_TOO[max(j - 1, 0)]), float(_ENDS_TOO[min(j + 1, _WITH_ENDS - 1)])
        points = np.linspace(left, right, _SEARCH_POINTS)
        own = replace(self, exponent=None, factor=1.0)
        if float(own.inside(interval, points).min()) >= -self.error and own.descend(interval, left, right)[1] >= -self.error:
            return None
        z, _ = own.descend(interval, left, right)
        return self.time(interval, left) if z <= left else self._crossing(interval, left, z)

    def _crossing(self, interval: int, left: float, right: float) -> float:
        """The date between two points of an interval at which the trace, below zero at the second, gets there."""
        for _ in range(2):
            points = np.linspace(left, right, _SEARCH_POINTS)
            values = self.inside(interval, points)
            values[-1] = min(values[-1], 0.0)
            j = max(int(np.argmax(values <= 0.0)), 1)
            left, right = float(points[j - 1]), float(points[j])
        before, after = max(float(values[j - 1]), 0.0), float(values[j])
        share = before / (before - after) if before > after else 1.0
        return self.time(interval, left + share * (right - left))


def wealth_path(budget: Budget, reconstruction: float) -> WealthPath:
    """The path of wealth; reconstruction: the estimate of what interpolation between rows leaves open, in units of slack."""
    plan, unit = budget.plan, budget.unit
    error = unit.account.rows_slack.bound + (reconstruction if np.isfinite(reconstruction) else 0.0)
    trace = trace_of(budget, unit.account.initial_wealth.value, plan.signs, error)
    _check_range(trace, (unit.discount, budget.household.discount))
    own = replace(trace, exponent=unit.discount)
    household = replace(trace, exponent=budget.household.discount, factor=plan.scale.value).lowest()
    debt = household.value < -household.error
    return WealthPath(
        minimum=own.lowest(),
        per_household=HouseholdWealth(
            minimum=household,
            largest_debt=Extreme(t=household.t, value=-household.value, error=household.error) if debt else None,
        ),
        first_negative=own.first_below(),
        first_insolvent=_first_insolvent(budget, error),
        breach=_breach(budget, trace),
        discounted_nodes=trace.at_nodes,
    )


def _breach(budget: Budget, trace: Trace) -> Breach | None:
    """Where K(t)/H falls below minus the borrowing limit, which is money of its own date in the basis of wealth."""
    plan = budget.plan
    limit = plan.borrowing
    if limit is None:
        return None
    exponent = (plan.requirement - plan.drifts.discounting).exponent(plan.mesh)
    allowed = trace.with_allowance(limit.value / plan.scale.value, exponent)
    _check_range(allowed, (budget.household.discount,))
    household = replace(allowed, exponent=budget.household.discount, factor=plan.scale.value)
    return Breach(since=allowed.first_below(), room=household.lowest())


def _first_insolvent(budget: Budget, error: float) -> float | None:
    """The date from which k(t) falls short of −(present value of wages still to come, less the terminal requirement).

    In discounted form the shortfall is S + ∫_t e^{−Λ}c < 0: what is left to consume no longer covers the missing slack.
    """
    account = budget.unit.account
    slack, consumption = account.slack.value, account.consumption
    if consumption.reach is not Reach.FINITE or account.income.reach is not Reach.FINITE or slack >= -error:
        return None
    start = slack + consumption.whole.value
    return trace_of(budget, start, np.where(budget.plan.consumption, -1.0, 0.0), error).first_below()


def trace_of(budget: Budget, start: float, signs: Floats, error: float) -> Trace:
    """start + ∫_0^t of the signed discounted streams, on the mesh."""
    mesh, integral, lumps = budget.plan.mesh, budget.unit.integral, budget.unit.streams.lumps
    net = np.tensordot(signs, integral.nodes, axes=1)
    before = after = start + running_sum(signs @ integral.value)[0]
    if lumps is not None:
        # the sums of one date are netted first
        paid = running_sum(signs @ lumps.values()[0])[0]
        before, after = before + paid[:-1], after + paid[1:]
    grid = after[:-1, None] + (mesh.lengths / 2.0)[:, None] * (net @ _TO_GRID.T)
    return Trace(mesh.breaks, mesh.lengths, before, after, grid, net, None, 1.0, error)


def _on_grid(coefficients: Floats) -> Floats:
    """Polynomials (m, d) at the points of the grid, (m, 22)."""
    return np.asarray(coefficients @ _GRID_POWERS[: coefficients.shape[-1]])


def _check_range(trace: Trace, exponents: tuple[Exponent | None, ...]) -> None:
    """Refuse a path whose undiscounted amounts floating point cannot carry."""
    size = math.log(max(float(np.abs(trace.grid).max()), float(np.abs(trace.after).max()), 1.0))
    for exponent in exponents:
        if exponent is None or size + exponent.largest <= LARGEST_EXPONENT:
            continue
        # only now is it worth looking date by date: where discounted wealth is large, its exponent may be negative
        at_nodes_size = _on_grid(exponent.coefficients) + np.log(np.maximum(np.abs(trace.grid), 1.0))
        at_breaks_size = np.maximum(exponent.before, exponent.after) + np.log(
            np.maximum(np.maximum(np.abs(trace.after), np.abs(trace.before)), 1.0)
        )
        largest = max(float(at_nodes_size.max()), float(at_breaks_size.max()))
        if largest > LARGEST_EXPONENT:
            raise OutOfRange(
                f"wealth along the plan reaches e^{largest:.4g}, beyond the supported e^{LARGEST_EXPONENT:g}; "
                "shorten the horizon, or check r, g and n (fractions a year)"
            )
