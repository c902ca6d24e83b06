"""A trace: discounted wealth, or something like it, at every date of a plan, with its lowest point and its first date below
zero.

    D(t) = start + ∫_0^t of the signed discounted streams, and factor·e^{E(t)}·D(t) for an exponent E.

Inside an interval D is the integral of the polynomial through the integrand's values at the Gauss nodes, which is as exact as
the quadrature itself.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from .budget import Budget
from .exponents import Exponent
from .quadrature import EXP_ERROR, NODES, UNIT, Floats, antiderivative_at, polynomial, running_sum

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


MOST_DIPS = 64
"""Places at which a lower point than any seen is looked for, the most promising first."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Extreme:
    """A value at a date: t in years since the start; error: what is known to be uncertain in the value."""

    t: float
    value: float
    error: float


@dataclass(frozen=True, eq=False)
class Trace:
    """before, after (m + 1,): D at breakpoints, before and after the lump sums there; grid (m, 22): at the points of the grid;
    net (m, 16): the integrand at the nodes; error (m + 1,): what is uncertain in D at each breakpoint and before it; allowance:
    an amount and an exponent A, amount·e^A being part of D."""

    breaks: Floats
    lengths: Floats
    before: Floats
    after: Floats
    grid: Floats
    net: Floats
    error: Floats
    exponent: Exponent | None = None
    factor: float = 1.0
    allowance: tuple[float, Exponent | None] | None = None

    @property
    def at_nodes(self) -> Floats:
        """D at the Gauss nodes, (m, 16)."""
        return self.grid[:, _BESIDE:-_BESIDE]

    def with_allowance(self, amount: float, exponent: Exponent | None) -> Trace:
        """The trace of D + amount·e^A, which is below zero where wealth is below what may be owed."""
        level = np.full(len(self.breaks), amount)
        allowed, before, after, bound = np.full(self.grid.shape, amount), level, level, np.zeros(len(level))
        if exponent is not None:
            allowed = amount * np.exp(on_grid(exponent.coefficients))
            before, after = amount * np.exp(exponent.before), amount * np.exp(exponent.after)
            inside = allowed.max(axis=1) * (1.06 * exponent.error + EXP_ERROR)
            bound = np.maximum(np.append(0.0, inside), after * (1.06 * exponent.at_error + EXP_ERROR))
        return replace(
            self,
            grid=self.grid + allowed,
            before=self.before + before,
            after=self.after + after,
            error=self.error + bound,
            allowance=(amount, exponent),
        )

    def grown(self) -> tuple[Floats, Floats, Floats]:
        """factor·e^E at breakpoints, before and after a jump, (m + 1,), and on the grid, (m, 22)."""
        if self.exponent is None:
            level = np.full(len(self.breaks), self.factor)
            return level, level, np.full(self.grid.shape, self.factor)
        e = self.exponent
        after = self.factor * np.exp(e.after)
        before = after if e.before is e.after else self.factor * np.exp(e.before)
        return before, after, self.factor * np.exp(on_grid(e.coefficients))

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

    def _values(self) -> tuple[Floats, Floats]:
        """factor·e^E·D at the ends and on the grid of every interval, (m, 24), and what is uncertain in it."""
        before, after, inside = self.grown()
        values = np.concatenate([(after * self.after)[:-1, None], inside * self.grid, (before * self.before)[1:, None]], axis=1)
        size = np.concatenate([after[:-1, None], inside, before[1:, None]], axis=1)
        size *= self.error[1:, None]
        size[:, 0] = after[:-1] * self.error[:-1]
        return values, size

    def lowest(self) -> Extreme:
        """The minimum over all dates."""
        values, errors = self._values()
        before, after, _ = self.grown()
        # before the first sum is paid and after the last one, which belong to no interval
        outer = ((0.0, float(before[0] * self.before[0]), 0), (float(self.breaks[-1]), float(after[-1] * self.after[-1]), -1))
        best = min(
            (Extreme(t=t, value=value, error=float(after[at] * self.error[at])) for t, value, at in outer),
            key=lambda extreme: extreme.value,
        )
        interval, j = divmod(int(np.argmin(values)), _WITH_ENDS)
        if values[interval, j] <= best.value:
            t = self.time(interval, float(_ENDS_TOO[j]))
            best = Extreme(t=t, value=float(values[interval, j]), error=float(errors[interval, j]))
        for interval, j in self._dips(values, best.value):
            z, value = self._descend(interval, *_around(j))
            if value < best.value:
                best = Extreme(t=self.time(interval, z), value=value, error=float(errors[interval, j]))
        return best

    def _dips(self, values: Floats, level: float | Floats) -> Iterator[tuple[int, int]]:
        """Places of the values (m, 24) beside which the trace may dip below a level between two points: a value no higher than
        its neighbours, and above the level by no more than they are above it. In order of time, at most the MOST_DIPS
        deepest."""
        before = np.concatenate([values[:, :1], values[:, :-1]], axis=1)
        behind = np.concatenate([values[:, 1:], values[:, -1:]], axis=1)
        reach = 2.0 * values - np.maximum(before, behind)
        low = (values <= before) & (values <= behind) & (reach < level) & (reach < values)
        # at an end of an interval only where the parabola through the next points falls inwards
        low[:, 0] &= 4.0 * values[:, 1] - 3.0 * values[:, 0] - values[:, 2] < 0.0
        low[:, -1] &= 4.0 * values[:, -2] - 3.0 * values[:, -1] - values[:, -3] < 0.0
        places = np.flatnonzero(low.ravel())
        if len(places) > MOST_DIPS:
            places = np.sort(places[np.argsort(reach.ravel()[places])[:MOST_DIPS]])
        for place in places.tolist():
            yield divmod(place, _WITH_ENDS)

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
        """The first date at which the trace is below zero by more than its error."""
        # factor·e^E is positive, so the sign is that of D
        own = replace(self, exponent=None, factor=1.0)
        if own.before[0] < -own.error[0]:
            return 0.0
        values, errors = own._values()
        seen = np.flatnonzero((values < -errors).ravel())
        first = int(seen[0]) if len(seen) else values.size
        for interval, j in own._dips(values, -errors):
            if interval * _WITH_ENDS + j > first:
                break
            z, value = own._descend(interval, *_around(j))
            if value < -errors[interval, j]:
                left = _around(j)[0]
                return self.time(interval, left) if z <= left else own._crossing(interval, left, z)
        if first == values.size:
            return float(self.breaks[-1]) if self.after[-1] < -self.error[-1] else None
        interval, j = divmod(first, _WITH_ENDS)
        if j == 0:
            return float(self.breaks[interval])
        return own._crossing(interval, float(_ENDS_TOO[j - 1]), float(_ENDS_TOO[j]))

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


def _around(j: int) -> tuple[float, float]:
    """The points of the grid, ends included, on either side of one."""
    return float(_ENDS_TOO[max(j - 1, 0)]), float(_ENDS_TOO[min(j + 1, _WITH_ENDS - 1)])


def trace_of(budget: Budget, start: float, signs: Floats, *, start_error: float = 0.0, open_: float = 0.0) -> Trace:
    """start + ∫_0^t of the signed discounted streams per unit of human capital, on the mesh; start_error: of the start; open_:
    what is uncertain at every date beside it."""
    mesh, integral, lumps = budget.plan.mesh, budget.unit.integral, budget.unit.streams.lumps
    net = np.tensordot(signs, integral.nodes, axes=1)
    moved = signs @ integral.value
    before = after = start + running_sum(moved)[0]
    error = np.append(0.0, np.cumsum(np.abs(signs) @ integral.bound + 64.0 * UNIT * np.abs(moved)))
    if lumps is not None:
        # the sums of one date are netted first
        values, bounds = lumps.values()
        paid = running_sum(signs @ values)[0]
        before, after = before + paid[:-1], after + paid[1:]
        error = error + np.cumsum(np.abs(signs) @ bounds + 8.0 * UNIT * np.abs(signs @ values))
    grid = after[:-1, None] + (mesh.lengths / 2.0)[:, None] * (net @ _TO_GRID.T)
    error = error + (start_error + open_ + 8.0 * UNIT * abs(start))
    return Trace(mesh.breaks, mesh.lengths, before, after, grid, net, error)


def on_grid(coefficients: Floats) -> Floats:
    """Polynomials (m, d) at the points of the grid, (m, 22)."""
    return np.asarray(coefficients @ _GRID_POWERS[: coefficients.shape[-1]])
