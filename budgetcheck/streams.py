"""Streams of money over time: pieces p·exp(q), lump sums and a tail, closed under sum, restatement and discounting.

Streams live on a mesh of breakpoints 0 = t_0 < … < t_m, the same for everything in one plan. On each interval a stream is
p(z)·exp(q(z)), z in [−1, 1]; streams side by side are added up by adding their integrals. At breakpoints there may be lump
sums; after the last breakpoint a perpetual stream has a tail. An exponent is a running integral of a rate, E(t) = ∫_0^t rate,
polynomial on each interval: restating by growth or discounting by interest adds ±E to q, so that one integral serves all.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from .bounded import ONE, Bounded
from .quadrature import EXP_ERROR, SAFETY, UNIT, Floats, Integral, Mask, integrate, running_sum, summed
from .rates import Rate


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
        if self.halvings == 0:
            return self.interval
        return np.flatnonzero(np.diff(self.interval, prepend=-1))

    def split(self, mask: Mask) -> Mesh:
        """Halve the intervals under the mask, (m,)."""
        times = np.where(mask, 2, 1)
        first = np.concatenate([[0], np.cumsum(times)[:-1]])
        lengths = np.repeat(np.where(mask, self.lengths / 2.0, self.lengths), times)
        breaks = np.empty(len(lengths) + 1)
        breaks[first], breaks[-1] = self.breaks[:-1], self.breaks[-1]
        breaks[first[mask] + 1] = self.breaks[:-1][mask] + self.lengths[mask] / 2.0
        interval = np.repeat(self.interval, times)
        return Mesh(breaks=breaks, lengths=lengths, interval=interval, halvings=self.halvings + 1)


def _split_pieces(coefficients: Floats, mask: Mask) -> tuple[Floats, Floats]:
    """Coefficients (k, m, d) on the halved mesh, and per piece a bound (k, m') on the rounding of the change of variable."""
    degree = coefficients.shape[-1]
    times = np.where(mask, 2, 1)
    result = np.repeat(coefficients, times, axis=1)
    error = np.zeros(result.shape[:2])
    left = np.cumsum(times)[mask] - 2
    old = coefficients[:, mask]
    for offset, shift in ((0, -0.5), (1, 0.5)):
        # z = z'/2 + shift: column j of the matrix holds the coefficients of (z'/2 + shift)^j
        matrix = np.zeros((degree, degree))
        for j in range(degree):
            for i in range(j + 1):
                matrix[j, i] = math.comb(j, i) * 0.5**i * shift ** (j - i)
        result[:, left + offset] = old @ matrix
        error[:, left + offset] = 2.0 * degree * UNIT * np.abs(old).sum(axis=-1)
    return result, error


@dataclass(frozen=True, kw_only=True, eq=False)
class RatePath:
    """A rate over time, 1/year: polynomial (m, d) on each interval, within error (m,); beyond the last row it is constant."""

    coefficients: Floats
    error: Floats
    beyond: Rate

    @classmethod
    def constant(cls, rate: Rate, intervals: int) -> RatePath:
        """The same rate throughout."""
        return cls(coefficients=np.full((intervals, 1), rate.value), error=np.full(intervals, rate.error), beyond=rate)

    def less(self, rate: Rate) -> RatePath:
        """The path less a constant rate."""
        coefficients = self.coefficients.copy()
        coefficients[:, 0] -= rate.value
        error = (self.error + rate.error + UNIT * np.abs(coefficients[:, 0])) * SAFETY
        return RatePath(coefficients=coefficients, error=error, beyond=self.beyond - rate)

    def split(self, mask: Mask) -> RatePath:
        """The same path on the halved mesh."""
        coefficients, rounding = _split_pieces(self.coefficients[None], mask)
        error = np.repeat(self.error, np.where(mask, 2, 1)) + rounding[0]
        return RatePath(coefficients=coefficients[0], error=error * SAFETY, beyond=self.beyond)


@dataclass(frozen=True, kw_only=True, eq=False)
class Exponent:
    """E(t) = ∫_0^t rate: polynomial (m, d) on each interval within error (m,); at breakpoints (m + 1,) within at_error."""

    coefficients: Floats
    error: Floats
    at: Floats
    at_error: Floats
    beyond: Rate

    @classmethod
    def of(cls, rate: RatePath, lengths: Floats) -> Exponent:
        """Integrate a rate path; the running sum over intervals is compensated."""
        half = lengths / 2.0
        degree = rate.coefficients.shape[1]
        raised = rate.coefficients * half[:, None] / np.arange(1.0, degree + 1.0)
        # each term is ∫_{−1}^z z^j = (z^{j+1} − (−1)^{j+1})/(j + 1)
        minus_one = np.where(np.arange(degree) % 2 == 0, -1.0, 1.0)
        at_left = raised @ minus_one
        increments = 2.0 * raised[:, ::2].sum(axis=1)
        size = summed(np.abs(raised))
        piece_error = lengths * rate.error * SAFETY + 8.0 * UNIT * size
        at, at_error = running_sum(increments)
        carried = np.concatenate([[0.0], np.cumsum(piece_error)])
        at_error = (at_error + carried) * SAFETY
        coefficients = np.concatenate([(at[:-1] - at_left)[:, None], raised], axis=1)
        error = at_error[:-1] + piece_error + UNIT * np.abs(coefficients[:, 0])
        return cls(coefficients=coefficients, error=error * SAFETY, at=at, at_error=at_error, beyond=rate.beyond)

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
        return cls(coefficients=coefficients, error=error, at=at, at_error=at_error, beyond=rate)

    @property
    def largest(self) -> float:
        """Bound on |E| over the rows."""
        return float(summed(np.abs(self.coefficients)).max())


@dataclass(frozen=True, kw_only=True, eq=False)
class Lumps:
    """Lump sums of k streams at breakpoints: amounts·exp(exponent), amounts (k, m + 1) within errors, exponent (m + 1,) within
    exponent_error; at (n,): the breakpoints where each row's sum is paid."""

    amounts: Floats
    errors: Floats
    exponent: Floats
    exponent_error: Floats
    at: NDArray[np.intp]

    def restated(self, exponent: Exponent, sign: int) -> Lumps:
        """The sums times exp(sign·E) at their dates."""
        total = self.exponent + sign * exponent.at
        error = (self.exponent_error + exponent.at_error + UNIT * np.abs(total)) * SAFETY
        return replace(self, exponent=total, exponent_error=error)

    def values(self) -> tuple[Floats, Floats]:
        """Amounts as they stand at each breakpoint and proved bounds, both (k, m + 1)."""
        grown = np.exp(self.exponent)
        values = self.amounts * grown
        bounds = self.errors * grown + np.abs(values) * (1.01 * self.exponent_error + EXP_ERROR + 2.0 * UNIT)
        return values, bounds * SAFETY

    def split(self, mask: Mask) -> Lumps:
        """The same sums on the halved mesh; between them nothing is paid, so the exponent there does not matter."""
        at = np.concatenate([[0], np.cumsum(np.where(mask, 2, 1))])
        count = int(at[-1]) + 1
        amounts, errors = np.zeros((len(self.amounts), count)), np.zeros((len(self.amounts), count))
        exponent, exponent_error = np.zeros(count), np.zeros(count)
        amounts[:, at], errors[:, at] = self.amounts, self.errors
        exponent[at], exponent_error[at] = self.exponent, self.exponent_error
        return Lumps(amounts=amounts, errors=errors, exponent=exponent, exponent_error=exponent_error, at=at[self.at])


@dataclass(frozen=True, kw_only=True, eq=False)
class Tail:
    """What follows the last breakpoint T of k perpetual streams.

    Either levels·exp(exponent), levels (k,) within errors (k,): the stream goes on from there; or, with `period` set (years),
    the last period before T comes again and again. In both cases it grows from then on at a rate of its own, which belongs to
    the plan: decay is the discount rate less that growth. flows (k,) says where anything flows in the tail at all.
    """

    levels: Floats
    errors: Floats
    flows: Mask
    period: float | None = None
    exponent: float = 0.0
    exponent_error: float = 0.0

    def restated(self, exponent: Exponent, sign: int) -> Tail:
        """The levels times exp(sign·E(T))."""
        total = self.exponent + sign * float(exponent.at[-1])
        error = (self.exponent_error + float(exponent.at_error[-1]) + UNIT * abs(total)) * SAFETY
        return replace(self, exponent=total, exponent_error=error)

    def values(self) -> tuple[Floats, Floats]:
        """The levels at T and proved bounds, both (k,)."""
        grown = math.exp(self.exponent)
        values = self.levels * grown
        bounds = self.errors * grown + np.abs(values) * (1.01 * self.exponent_error + EXP_ERROR + 2.0 * UNIT)
        return values, bounds * SAFETY


@dataclass(frozen=True, kw_only=True, eq=False)
class Streams:
    """k flows of money per year side by side on one mesh; the integral of their sum is the sum of their integrals.

    p : (k, m, P), q : (k or 1, m, Q), coefficients in z; p_error, q_error : (k or 1, m).
    """

    p: Floats
    q: Floats
    p_error: Floats
    q_error: Floats
    lumps: Lumps | None = None
    tail: Tail | None = None

    def restated(self, exponent: Exponent | None, *, sign: int = 1, factor: Bounded = ONE) -> Streams:
        """The streams times factor·exp(sign·E(t)), E = 0 where there is no exponent. Discounting is sign = −1."""
        p, p_error, lumps, tail = self.p, self.p_error, self.lumps, self.tail
        if factor != ONE:
            relative = factor.bound / abs(factor.value) + 2.0 * UNIT
            p = self.p * factor.value
            p_error = (abs(factor.value) * self.p_error + relative * summed(np.abs(p))) * SAFETY
            lumps, tail = self._scaled(factor.value, relative)
        q, q_error = self.q, self.q_error
        if exponent is not None:
            width = max(self.q.shape[2], exponent.coefficients.shape[1])
            q = _padded(self.q, width) + sign * _padded(exponent.coefficients, width)[None]
            q_error = (self.q_error + exponent.error + UNIT * summed(np.abs(q))) * SAFETY
        if exponent is not None:
            lumps = None if lumps is None else lumps.restated(exponent, sign)
            tail = None if tail is None else tail.restated(exponent, sign)
        return Streams(p=p, q=q, p_error=p_error, q_error=q_error, lumps=lumps, tail=tail)

    def _scaled(self, factor: float, relative: float) -> tuple[Lumps | None, Tail | None]:
        lumps, tail = self.lumps, self.tail
        if lumps is not None:
            amounts = lumps.amounts * factor
            errors = (lumps.errors * abs(factor) + np.abs(amounts) * relative) * SAFETY
            lumps = replace(lumps, amounts=amounts, errors=errors)
        if tail is not None:
            levels = tail.levels * factor
            errors = (tail.errors * abs(factor) + np.abs(levels) * relative) * SAFETY
            tail = replace(tail, levels=levels, errors=errors)
        return lumps, tail

    def split(self, mask: Mask) -> Streams:
        """The same streams on the halved mesh."""
        p, p_rounding = _split_pieces(self.p, mask)
        q, q_rounding = _split_pieces(self.q, mask)
        times = np.where(mask, 2, 1)
        return replace(
            self,
            p=p,
            q=q,
            p_error=(np.repeat(self.p_error, times, axis=1) + p_rounding) * SAFETY,
            q_error=(np.repeat(self.q_error, times, axis=1) + q_rounding) * SAFETY,
            lumps=None if self.lumps is None else self.lumps.split(mask),
        )

    def integral(self, lengths: Floats) -> Integral:
        """Integrals of each stream over each interval, without lump sums and tail."""
        return integrate(self.p, self.q, lengths, p_error=self.p_error, q_error=self.q_error)

    def log_size(self, lengths: Floats) -> float:
        """|q| + max(0, ln(|p|·length)), the largest over intervals, lump sums and tails: what the supported range limits."""
        amount = np.log(np.maximum(summed(np.abs(self.p)) * lengths, 1.0))
        largest = float((summed(np.abs(self.q)) + amount).max())
        if self.lumps is not None:
            amount = np.log(np.maximum(np.abs(self.lumps.amounts), 1.0))
            largest = max(largest, float((np.abs(self.lumps.exponent) + amount).max()))
        if self.tail is not None:
            amount = np.log(np.maximum(np.abs(self.tail.levels), 1.0))
            largest = max(largest, float((abs(self.tail.exponent) + amount).max()))
        return largest


def _padded(coefficients: Floats, width: int) -> Floats:
    missing = width - coefficients.shape[-1]
    if missing == 0:
        return coefficients
    return np.concatenate([coefficients, np.zeros((*coefficients.shape[:-1], missing))], axis=-1)
