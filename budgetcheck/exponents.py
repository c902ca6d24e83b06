"""Exponents: running integrals of rates over time, on a mesh of breakpoints.

E(t) = ∫_0^t rate, polynomial on each interval, with bounds on its error: cumulative interest R, the growth of people or
productivity, inflation, survival. Restating a stream by growth or discounting it by interest adds ±E to the exponent of the
stream. A drift is a sum of such rates that is not yet integrated: what is constant in it stays an exact rate, so that r − g − n
of declared rates is exact however they are combined.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from .quadrature import SAFETY, UNIT, Floats, Mask, running_sum, summed
from .rates import ZERO, Rate


@dataclass(frozen=True, eq=False)
class Cut:
    """Which intervals are cut in two, mask (m,), and the share of the left piece in each of those; exact: halves."""

    mask: Mask
    share: Floats
    exact: bool

    @classmethod
    def halves(cls, mask: Mask) -> Cut:
        """The intervals under the mask in halves."""
        return cls(mask, np.full(1, 0.5), exact=True)

    @property
    def times(self) -> NDArray[np.intp]:
        """Pieces made of each interval, (m,)."""
        return np.where(self.mask, 2, 1)

    @property
    def lefts(self) -> NDArray[np.intp]:
        """The index of each left piece among the new ones."""
        return np.asarray(np.cumsum(self.times)[self.mask] - 2)


@dataclass(frozen=True, kw_only=True, eq=False)
class Mesh:
    """Breakpoints of a plan. breaks : (m + 1,) years since the start; lengths : (m,) years, each right to one rounding;
    interval : (m,) the interval between rows that each piece is part of."""

    breaks: Floats
    lengths: Floats
    interval: NDArray[np.intp]
    halvings: int = 0

    @property
    def row_starts(self) -> NDArray[np.intp]:
        """The first piece of each interval between rows."""
        if len(self.interval) == self.interval[-1] + 1:
            return self.interval
        return np.flatnonzero(np.diff(self.interval, prepend=-1))

    def split(self, mask: Mask) -> Mesh:
        """Halve the intervals under the mask, (m,)."""
        half = self.lengths[mask] / 2.0
        return self.cut(Cut.halves(mask), half, half)

    def cut(self, cut: Cut, left: Floats, right: Floats) -> Mesh:
        """Cut intervals into pieces of those lengths, one left and one right for each interval that is cut."""
        at, times = cut.lefts, cut.times
        lengths = np.repeat(self.lengths, times)
        lengths[at], lengths[at + 1] = left, right
        breaks = np.empty(len(lengths) + 1)
        breaks[np.concatenate([[0], np.cumsum(times)])] = self.breaks
        breaks[at + 1] = self.breaks[:-1][cut.mask] + left
        return Mesh(breaks=breaks, lengths=lengths, interval=np.repeat(self.interval, times), halvings=self.halvings + 1)


_BINOMIALS = np.array([[math.comb(j, i) for i in range(20)] for j in range(20)], dtype=float)


def cut_pieces(coefficients: Floats, cut: Cut) -> tuple[Floats, Floats]:
    """Coefficients (k, m, d) on the finer mesh, and per piece a bound (k, m') on the rounding of the change of variable."""
    degree = coefficients.shape[-1]
    result = np.repeat(coefficients, cut.times, axis=1)
    error = np.zeros(result.shape[:2])
    if degree == 1:
        return result, error
    left = cut.lefts
    old = coefficients[:, cut.mask]
    row, column = np.arange(degree)[:, None], np.arange(degree)
    binomials = _BINOMIALS[:degree, :degree]
    # halving is exact but for sums; any other share moves each point by a few roundings
    steps = (2.0 if cut.exact else 12.0) * degree
    for offset, scale, shift in ((0, cut.share, cut.share - 1.0), (1, 1.0 - cut.share, cut.share)):
        # z = scale·z' + shift: row j of the matrix holds the coefficients of (scale·z' + shift)^j
        matrix = binomials * scale[:, None, None] ** column * shift[:, None, None] ** np.maximum(row - column, 0)
        result[:, left + offset] = (old[:, :, None, :] @ matrix)[:, :, 0, :]
        error[:, left + offset] = steps * UNIT * np.abs(old).sum(axis=-1)
    return result, error


def padded(coefficients: Floats, width: int) -> Floats:
    """The same polynomials with `width` coefficients."""
    missing = width - coefficients.shape[-1]
    if missing == 0:
        return coefficients
    return np.concatenate([coefficients, np.zeros((*coefficients.shape[:-1], missing))], axis=-1)


@dataclass(frozen=True, kw_only=True, eq=False)
class Exponent:
    """E(t) = ∫_0^t rate: polynomial (m, d) on each interval within error (m,).

    before, after (m + 1,): E at the breakpoints, seen from the interval before and from the one after, which differ where a
    level jumps; both within at_error (m + 1,). beyond: the rate after the last breakpoint, None for a sum, whose drift knows
    it.
    """

    coefficients: Floats
    error: Floats
    before: Floats
    after: Floats
    at_error: Floats
    beyond: Rate | None

    @classmethod
    def of(cls, rate: Floats, rate_error: Floats, lengths: Floats, beyond: Rate) -> Exponent:
        """Integrate a rate, polynomial (m, d) within rate_error (m,); the running sum over intervals is compensated."""
        half = lengths / 2.0
        degree = rate.shape[1]
        raised = rate * half[:, None] / np.arange(1.0, degree + 1.0)
        # each term is ∫_{−1}^z z^j = (z^{j+1} − (−1)^{j+1})/(j + 1)
        minus_one = np.where(np.arange(degree) % 2 == 0, -1.0, 1.0)
        at_left = raised @ minus_one
        increments = 2.0 * raised[:, ::2].sum(axis=1)
        piece_error = lengths * rate_error * SAFETY + 8.0 * UNIT * summed(np.abs(raised))
        at, at_error = running_sum(increments)
        carried = np.concatenate([[0.0], np.cumsum(piece_error)])
        at_error = (at_error + carried) * SAFETY
        coefficients = np.concatenate([(at[:-1] - at_left)[:, None], raised], axis=1)
        error = at_error[:-1] + piece_error + UNIT * np.abs(coefficients[:, 0])
        return cls(coefficients=coefficients, error=error * SAFETY, before=at, after=at, at_error=at_error, beyond=beyond)

    @classmethod
    def constant(cls, rate: Rate, mesh: Mesh) -> Exponent | None:
        """E(t) = rate·t; None where the rate is exactly zero."""
        if rate.sign == 0:
            return None
        at = rate.value * mesh.breaks
        slope = rate.value / 2.0 * mesh.lengths
        coefficients = np.stack([(at[:-1] + at[1:]) / 2.0, slope], axis=1)
        # breakpoints are right to three roundings and one for each halving, the rate to its own error
        at_error = ((4.0 + mesh.halvings) * UNIT * abs(rate.value) + rate.error) * mesh.breaks
        error = at_error[1:] + 2.0 * UNIT * np.abs(slope)
        return cls(coefficients=coefficients, error=error, before=at, after=at, at_error=at_error, beyond=rate)

    @classmethod
    def linear(cls, values: Floats, value_error: Floats, beyond: Rate) -> Exponent:
        """Straight lines between values (m + 1,) at the breakpoints, each within value_error (m + 1,)."""
        left, right = values[:-1], values[1:]
        coefficients = np.stack([(left + right) / 2.0, (right - left) / 2.0], axis=1)
        error = np.maximum(value_error[:-1], value_error[1:]) + 2.0 * UNIT * (np.abs(left) + np.abs(right))
        return cls(coefficients=coefficients, error=error, before=values, after=values, at_error=value_error, beyond=beyond)

    @classmethod
    def stepwise(cls, values: Floats, value_error: Floats, beyond: Rate) -> Exponent:
        """One value (m,) on each interval, within value_error (m,), jumping at the breakpoints; zero before the first."""
        return cls(
            coefficients=values[:, None],
            error=value_error,
            before=np.concatenate([values[:1], values]),
            after=np.concatenate([values, values[-1:]]),
            at_error=np.concatenate([value_error[:1], np.maximum(value_error[:-1], value_error[1:]), value_error[-1:]]),
            beyond=beyond,
        )

    @property
    def largest(self) -> float:
        """Bound on |E| over the rows."""
        return float(summed(np.abs(self.coefficients)).max())

    def signed(self, sign: int) -> Exponent:
        """sign·E."""
        if sign == 1:
            return self
        after = -self.after
        before = after if self.before is self.after else -self.before
        return Exponent(
            coefficients=-self.coefficients,
            error=self.error,
            before=before,
            after=after,
            at_error=self.at_error,
            beyond=None,
        )

    def times(self, by: Fraction) -> Exponent:
        """by·E."""
        factor, size = float(by), abs(float(by)) * SAFETY
        after = factor * self.after
        before = after if self.before is self.after else factor * self.before
        coefficients = factor * self.coefficients
        largest = np.maximum(np.abs(before), np.abs(after))
        return Exponent(
            coefficients=coefficients,
            error=size * self.error + 3.0 * UNIT * summed(np.abs(coefficients)),
            before=before,
            after=after,
            at_error=size * self.at_error + 3.0 * UNIT * largest,
            beyond=None if self.beyond is None else self.beyond.times(by),
        )

    def plus(self, other: Exponent, sign: int) -> Exponent:
        """E + sign·other."""
        width = max(self.coefficients.shape[1], other.coefficients.shape[1])
        coefficients = padded(self.coefficients, width) + sign * padded(other.coefficients, width)
        after = self.after + sign * other.after
        before = after
        if self.before is not self.after or other.before is not other.after:
            before = self.before + sign * other.before
        size = np.maximum(np.abs(before), np.abs(after))
        return Exponent(
            coefficients=coefficients,
            error=(self.error + other.error + UNIT * summed(np.abs(coefficients))) * SAFETY,
            before=before,
            after=after,
            at_error=(self.at_error + other.at_error + UNIT * size) * SAFETY,
            beyond=None,
        )

    def split(self, cut: Cut) -> Exponent:
        """The same exponent on the finer mesh."""
        coefficients, rounding = cut_pieces(self.coefficients[None], cut)
        error = (np.repeat(self.error, cut.times) + rounding[0]) * SAFETY
        places = np.concatenate([[0], np.cumsum(cut.times)])
        after, at_error = np.empty(len(error) + 1), np.empty(len(error) + 1)
        after[places], at_error[places] = self.after, self.at_error
        left = cut.lefts
        after[left + 1] = coefficients[0, left].sum(axis=-1)
        at_error[left + 1] = error[left] + coefficients.shape[-1] * UNIT * np.abs(coefficients[0, left]).sum(axis=-1)
        before = after
        if self.before is not self.after:
            before = after.copy()
            before[places] = self.before
        return Exponent(
            coefficients=coefficients[0], error=error, before=before, after=after, at_error=at_error, beyond=self.beyond
        )

    def joined(self, other: Exponent) -> Exponent:
        """This exponent, then the other from where this one ends: its intervals follow, and it starts at zero there."""
        width = max(self.coefficients.shape[1], other.coefficients.shape[1])
        end, end_error = float(self.before[-1]), float(self.at_error[-1])
        later = padded(other.coefficients, width).copy()
        later[:, 0] += end
        before, after = other.before[1:] + end, other.after[1:] + end
        return Exponent(
            coefficients=np.concatenate([padded(self.coefficients, width), later]),
            error=np.concatenate([self.error, (other.error + end_error + UNIT * np.abs(later[:, 0])) * SAFETY]),
            before=np.concatenate([self.before, before]),
            after=np.concatenate([self.after[:-1], [end], after]),
            at_error=np.concatenate([self.at_error, (other.at_error[1:] + end_error + UNIT * np.abs(after)) * SAFETY]),
            beyond=other.beyond,
        )


@dataclass(frozen=True, kw_only=True, eq=False)
class Drift:
    """A rate over time: a constant one, kept exact, and measured parts, each the exponent of a column with its sign."""

    constant: Rate = ZERO
    parts: tuple[tuple[int, Exponent], ...] = ()

    def __add__(self, other: Drift) -> Drift:
        return self._with(other, 1)

    def __sub__(self, other: Drift) -> Drift:
        return self._with(other, -1)

    def _with(self, other: Drift, sign: int) -> Drift:
        parts = list(self.parts)
        for theirs, exponent in other.parts:
            # a column that is added and taken away again leaves nothing, not even rounding
            same = next((k for k, (mine, known) in enumerate(parts) if known is exponent and mine == -sign * theirs), None)
            if same is None:
                parts.append((sign * theirs, exponent))
            else:
                del parts[same]
        constant = self.constant + other.constant if sign == 1 else self.constant - other.constant
        return Drift(constant=constant, parts=tuple(parts))

    def times(self, by: Fraction) -> Drift:
        """The drift times a rational number."""
        return Drift(constant=self.constant.times(by), parts=tuple((sign, part.times(by)) for sign, part in self.parts))

    @cached_property
    def beyond(self) -> Rate:
        """The rate after the last breakpoint."""
        rate = self.constant
        for sign, exponent in self.parts:
            assert exponent.beyond is not None, "a part is no sum"
            rate = rate + exponent.beyond if sign == 1 else rate - exponent.beyond
        return rate

    def exponent(self, mesh: Mesh) -> Exponent | None:
        """Its running integral on the mesh of its parts; None where it is exactly zero."""
        total = Exponent.constant(self.constant, mesh)
        for sign, exponent in self.parts:
            total = exponent.signed(sign) if total is None else total.plus(exponent, sign)
        return total


NO_DRIFT = Drift()
