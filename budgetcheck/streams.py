"""Streams of money over time: pieces p·exp(q), lump sums and a tail, closed under sum, restatement and discounting.

Streams live on a mesh of breakpoints 0 = t_0 < … < t_m, the same for everything in one plan. On each interval a stream is
p(z)·exp(q(z)), z in [−1, 1]; streams side by side are added up by adding their integrals. At breakpoints there may be lump
sums; after the last breakpoint a perpetual stream has a tail. Restating by growth or discounting by interest adds ±E, a running
integral of a rate, to q, so that one integral serves all.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from .bounded import Bounded
from .exponents import Cut, Exponent, cut_pieces, padded
from .quadrature import EXP_ERROR, SAFETY, UNDERFLOW, UNIT, Floats, Integral, Mask, integrate, summed


@dataclass(frozen=True, kw_only=True, eq=False)
class Lumps:
    """Lump sums of k streams at breakpoints: amounts·exp(exponent), amounts (k, m + 1) within errors, exponent (k or 1, m + 1)
    within exponent_error; after (k, 1): whether a stream's sums belong to the interval after their breakpoint or to the one
    before, which decides on which side of a jump they stand; at (k, n): the breakpoint of each row's sum; last (k,): that of
    the last period's."""

    amounts: Floats
    errors: Floats
    exponent: Floats
    exponent_error: Floats
    after: Mask
    at: NDArray[np.intp]
    last: NDArray[np.intp]

    def restated(self, exponent: Exponent, sign: int) -> Lumps:
        """The sums times exp(sign·E) at their dates."""
        at = exponent.after if exponent.before is exponent.after else np.where(self.after, exponent.after, exponent.before)
        total = self.exponent + sign * at
        error = (self.exponent_error + exponent.at_error + UNIT * np.abs(total)) * SAFETY
        return replace(self, exponent=total, exponent_error=error)

    def values(self) -> tuple[Floats, Floats]:
        """Amounts as they stand at each breakpoint and proved bounds, both (k, m + 1)."""
        grown = np.exp(self.exponent)
        values = self.amounts * grown
        bounds = 1.11 * self.errors * grown + np.abs(values) * (1.06 * self.exponent_error + EXP_ERROR + 2.0 * UNIT)
        return values, bounds * SAFETY + UNDERFLOW * (self.amounts != 0.0)

    def split(self, cut: Cut) -> Lumps:
        """The same sums on the finer mesh; between them nothing is paid, so the exponent there does not matter."""
        at = np.concatenate([[0], np.cumsum(cut.times)])

        def spread(values: Floats) -> Floats:
            wider = np.zeros((len(values), int(at[-1]) + 1))
            wider[:, at] = values
            return wider

        return replace(
            self,
            amounts=spread(self.amounts),
            errors=spread(self.errors),
            exponent=spread(self.exponent),
            exponent_error=spread(self.exponent_error),
            at=at[self.at],
            last=at[self.last],
        )


@dataclass(frozen=True, kw_only=True, eq=False)
class Tail:
    """What follows the last breakpoint T of k perpetual streams.

    Either levels·exp(exponent), levels (k,) within errors (k,), exponent (k or 1,): the stream goes on from there; or, with
    `period` set (years), the last period before T comes again and again. In both cases it grows from then on at a rate of its
    own, which belongs to the plan: decay is the discount rate less that growth. flows (k,) says where anything flows in the
    tail at all.
    """

    levels: Floats
    errors: Floats
    flows: Mask
    exponent: Floats
    exponent_error: Floats
    period: float | None = None

    def restated(self, exponent: Exponent, sign: int) -> Tail:
        """The levels times exp(sign·E(T))."""
        total = self.exponent + sign * float(exponent.before[-1])
        error = (self.exponent_error + float(exponent.at_error[-1]) + UNIT * np.abs(total)) * SAFETY
        levels, errors, flows = self.levels, self.errors, self.flows
        return Tail(levels=levels, errors=errors, flows=flows, exponent=total, exponent_error=error, period=self.period)

    def values(self) -> tuple[Floats, Floats]:
        """The levels at T and proved bounds, both (k,)."""
        grown = np.exp(self.exponent)
        values = self.levels * grown
        bounds = 1.11 * self.errors * grown + np.abs(values) * (1.06 * self.exponent_error + EXP_ERROR + 2.0 * UNIT)
        return values, bounds * SAFETY + UNDERFLOW * (self.levels != 0.0)


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

    def times(self, factors: Sequence[Bounded]) -> Streams:
        """Each stream times its factor, k of them."""
        if all(factor.value == 1.0 and factor.bound == 0.0 for factor in factors):
            return self
        value = np.array([factor.value for factor in factors])
        relative = np.array([factor.bound / abs(factor.value) + 2.0 * UNIT for factor in factors])
        size = np.abs(value)
        p = self.p * value[:, None, None]
        p_error = (size[:, None] * self.p_error + relative[:, None] * summed(np.abs(p))) * SAFETY
        lumps, tail = self.lumps, self.tail
        if lumps is not None:
            amounts = lumps.amounts * value[:, None]
            errors = (lumps.errors * size[:, None] + np.abs(amounts) * relative[:, None]) * SAFETY
            lumps = replace(lumps, amounts=amounts, errors=errors)
        if tail is not None:
            levels = tail.levels * value
            tail = replace(tail, levels=levels, errors=(tail.errors * size + np.abs(levels) * relative) * SAFETY)
        return replace(self, p=p, p_error=p_error, lumps=lumps, tail=tail)

    def restated(self, exponent: Exponent | None, *, sign: int = 1) -> Streams:
        """The streams times exp(sign·E(t)), E = 0 where there is no exponent. Discounting is sign = −1."""
        if exponent is None:
            return self
        width = max(self.q.shape[2], exponent.coefficients.shape[1])
        q = padded(self.q, width) + sign * padded(exponent.coefficients, width)[None]
        return Streams(
            p=self.p,
            p_error=self.p_error,
            q=q,
            q_error=(self.q_error + exponent.error + UNIT * summed(np.abs(q))) * SAFETY,
            lumps=None if self.lumps is None else self.lumps.restated(exponent, sign),
            tail=None if self.tail is None else self.tail.restated(exponent, sign),
        )

    def restated_each(self, exponents: Sequence[Exponent | None]) -> Streams:
        """Each stream times exp(E(t)) with an exponent of its own, k of them."""
        first = exponents[0]
        if all(exponent is first for exponent in exponents):
            return self.restated(first)
        parts = [self._one(k).restated(exponent) for k, exponent in enumerate(exponents)]
        width = max(part.q.shape[2] for part in parts)
        lumps = [part.lumps for part in parts if part.lumps is not None]
        tails = [part.tail for part in parts if part.tail is not None]
        return replace(
            self,
            q=np.concatenate([padded(part.q, width) for part in parts]),
            q_error=np.concatenate([part.q_error for part in parts]),
            lumps=self.lumps and _stacked(self.lumps, lumps),
            tail=self.tail and _stacked(self.tail, tails),
        )

    def _one(self, k: int) -> Streams:
        """The stream k alone."""

        def row(values: Floats) -> Floats:
            return values[k : k + 1] if len(values) > 1 else values

        def side(values: Mask) -> Mask:
            return values[k : k + 1]

        lumps, tail = self.lumps, self.tail
        if lumps is not None:
            lumps = replace(
                lumps, exponent=row(lumps.exponent), exponent_error=row(lumps.exponent_error), after=side(lumps.after)
            )
        if tail is not None:
            tail = replace(tail, exponent=row(tail.exponent), exponent_error=row(tail.exponent_error))
        return replace(self, q=row(self.q), q_error=row(self.q_error), lumps=lumps, tail=tail)

    def split(self, cut: Cut) -> Streams:
        """The same streams on the finer mesh."""
        p, p_rounding = cut_pieces(self.p, cut)
        q, q_rounding = cut_pieces(self.q, cut)
        return replace(
            self,
            p=p,
            q=q,
            p_error=(np.repeat(self.p_error, cut.times, axis=1) + p_rounding) * SAFETY,
            q_error=(np.repeat(self.q_error, cut.times, axis=1) + q_rounding) * SAFETY,
            lumps=None if self.lumps is None else self.lumps.split(cut),
        )

    def integral(self, lengths: Floats) -> Integral:
        """Integrals of each stream over each interval, without lump sums and tail."""
        return integrate(self.p, self.q, lengths, p_error=self.p_error, q_error=self.q_error)

    @property
    def largest_exponent_error(self) -> float:
        """Bound on the error of every exponent."""
        errors = [float(self.q_error.max())]
        if self.lumps is not None:
            errors.append(float(self.lumps.exponent_error.max()))
        if self.tail is not None:
            errors.append(float(self.tail.exponent_error.max()))
        return max(errors)

    def log_size(self, lengths: Floats) -> float:
        """|q| + max(0, ln(|p|·length)), the largest over intervals, lump sums and tails: what the supported range limits."""
        # products are formed before they are multiplied by a short length
        amount = np.log(np.maximum(summed(np.abs(self.p)) * np.maximum(lengths, 1.0), 1.0))
        largest = float((summed(np.abs(self.q)) + amount).max())
        if self.lumps is not None:
            amount = np.log(np.maximum(np.abs(self.lumps.amounts), 1.0))
            largest = max(largest, float((np.abs(self.lumps.exponent) + amount).max()))
        if self.tail is not None:
            amount = np.log(np.maximum(np.abs(self.tail.levels), 1.0))
            largest = max(largest, float((np.abs(self.tail.exponent) + amount).max()))
        return largest


Part = TypeVar("Part", Lumps, Tail)


def _stacked(whole: Part, parts: Sequence[Part]) -> Part:
    """The whole with the exponents of its parts, one for each stream."""
    return replace(
        whole,
        exponent=np.concatenate([part.exponent for part in parts]),
        exponent_error=np.concatenate([part.exponent_error for part in parts]),
    )
