"""How values at rows become a path between rows: step, linear, geometric, smooth; and the adjoint, row weights.

Every path is piecewise p(z)·exp(q(z)) with z in [−1, 1] over each interval between two rows. Where the values enter
linearly (step, linear, smooth) an integral of the path against any kernel is Σ weight·value; `row_weights` returns those
weights from the kernel's moments ∫ z^j·kernel over the intervals. For the geometric path they are the derivatives with
respect to the values.

Arrays carry the columns of one table first, then rows or intervals: values (c, n), coefficients (c, n − 1, d + 1). The relative
error of the values is one number or, by column, (c, 1).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from .quadrature import SAFETY, UNIT, Floats, Mask, polynomial, summed

_HERMITE = np.array([[2.0, -3.0, 0.0, 1.0], [2.0, 3.0, 0.0, -1.0], [1.0, -1.0, -1.0, 1.0], [-1.0, -1.0, 1.0, 1.0]]) / 4.0
"""Cubic Hermite basis on [−1, 1] in powers of z: value left, value right, derivative left, derivative right."""

_DERIVATIVE_BASIS_PEAK = 8.0 / 27.0
"""Largest value on [−1, 1] of the two derivative members of the Hermite basis, at z = ∓1/3."""

NAMES = ("step", "linear", "geometric", "smooth")


@dataclass(frozen=True, kw_only=True)
class Coefficients:
    """One or several columns as p(z)·exp(q(z)) on each interval.

    p : (c, m, P), q : (c or 1, m, Q); p_error, q_error : (c or 1, m), bounds on |p − exact p|, |q − exact q| over the
    interval, exact meaning the path through the decimal figures.
    """

    p: Floats
    q: Floats
    p_error: Floats
    q_error: Floats


def _without_exponent(p: Floats, p_error: Floats) -> Coefficients:
    intervals = p.shape[1]
    return Coefficients(p=p, q=np.zeros((1, intervals, 1)), p_error=p_error, q_error=np.zeros((1, intervals)))


@dataclass(frozen=True, eq=False)
class Step:
    """The value of a row holds until the next row: f(t) = y_i on [t_i, t_{i+1})."""

    lengths: Floats

    def coefficients(self, values: Floats, relative_error: Floats | float) -> Coefficients:
        """values (c, n) or (c, n − 1); the value of a last row without a period is not used."""
        kept = values[:, : len(self.lengths)]
        return _without_exponent(kept[:, :, None], relative_error * np.abs(kept))

    def row_weights(self, moments: Floats) -> Floats:
        """moments (k, m), k ≥ 1, the integrals of z^j·kernel. Returns (m,)."""
        return np.asarray(moments[0])


@dataclass(frozen=True, eq=False)
class Linear:
    """Straight lines between rows: f = (1 − z)/2·y_i + (1 + z)/2·y_{i+1}."""

    lengths: Floats

    def coefficients(self, values: Floats, relative_error: Floats | float) -> Coefficients:
        """values (c, n). The error is that of reading, relative_error·|y|, and one rounding."""
        left, right = values[:, :-1], values[:, 1:]
        p = np.stack([(left + right) / 2.0, (right - left) / 2.0], axis=-1)
        error = (relative_error + 2.0 * UNIT) * (np.abs(left) + np.abs(right))
        return _without_exponent(p, error)

    def row_weights(self, moments: Floats) -> Floats:
        """moments (k, m), k ≥ 2. Returns (n,)."""
        weights = np.zeros(moments.shape[1] + 1)
        weights[:-1] += (moments[0] - moments[1]) / 2.0
        weights[1:] += (moments[0] + moments[1]) / 2.0
        return weights


@dataclass(frozen=True, eq=False)
class Geometric:
    """Linear in logarithms: f = exp((1 − z)/2·ln y_i + (1 + z)/2·ln y_{i+1}); values must be positive."""

    lengths: Floats

    def coefficients(self, values: Floats, relative_error: Floats | float) -> Coefficients:
        """values (c, n), all positive. f is sqrt(y_i y_{i+1})·exp(z·ln(y_{i+1}/y_i)/2), which keeps q small."""
        left, right = values[:, :-1], values[:, 1:]
        # the square root of each factor, not of the product, which could overflow
        middle = np.sqrt(left) * np.sqrt(right)
        # log1p of the relative difference keeps its accuracy where neighbours are nearly equal
        near = np.abs(right - left) < 0.5 * left
        slope = np.where(near, np.log1p(np.where(near, (right - left) / left, 0.0)), np.log(right) - np.log(left)) / 2.0
        logs = np.where(near, 0.0, np.abs(np.log(left)) + np.abs(np.log(right)))
        q = np.stack([np.zeros_like(slope), slope], axis=-1)
        q_error = relative_error + 4.0 * UNIT * (1.0 + np.abs(slope) + logs)
        p_error = (relative_error + 4.0 * UNIT) * middle
        return Coefficients(p=middle[:, :, None], q=q, p_error=p_error, q_error=q_error)

    def row_weights(self, moments: Floats, values: Floats) -> Floats:
        """Derivatives by value: moments (2, m) of z^j·f·kernel, values (n,). Returns (n,)."""
        weights = np.zeros(len(values))
        weights[:-1] += (moments[0] - moments[1]) / 2.0
        weights[1:] += (moments[0] + moments[1]) / 2.0
        return weights / values


@dataclass(frozen=True, eq=False)
class Smooth:
    """The C² cubic spline with not-a-knot ends (2 rows: the line, 3 rows: the parabola).

    The slopes s at the rows solve, with h the interval lengths and d the divided differences,

        h_i s_{i−1} + 2(h_{i−1} + h_i) s_i + h_{i−1} s_{i+1} = 3(h_i d_{i−1} + h_{i−1} d_i)                  (2)

    and at each end h_1 s_0 + (h_0 + h_1) s_1 = [(3h_0 + 2h_1) h_1 d_0 + h_0² d_1]/(h_0 + h_1)             (3)
    (C. de Boor, A Practical Guide to Splines, ch. IV). Subtracting (3) from the neighbouring row of (2) leaves a strictly
    diagonally dominant tridiagonal system for the inner slopes, hence an H-matrix, whose inverse is bounded entry by entry
    by that of its comparison matrix (A. Ostrowski 1937): the residual, with all that rounding can hide in it, carried
    through the comparison matrix, bounds the error of every slope.
    """

    lengths: Floats

    @cached_property
    def _bands(self) -> tuple[Floats, Floats, Floats]:
        """Lower, main and upper diagonal of the reduced system, (n − 3,), (n − 2,), (n − 3,)."""
        h = self.lengths
        main = 2.0 * (h[:-1] + h[1:])
        lower, upper = h[2:].copy(), h[:-2].copy()
        main[0] = h[0] + h[1]
        main[-1] = h[-2] + h[-1]
        return lower, main, upper

    def _solve(self, right: Floats, *, comparison: bool = False, transposed: bool = False) -> Floats:
        """Solve the reduced system for right sides (n − 2, k)."""
        from scipy.linalg.lapack import dgtsv

        lower, main, upper = self._bands
        if transposed:
            lower, upper = upper, lower
        sign = -1.0 if comparison else 1.0
        *_, solution, info = dgtsv(sign * lower, main, sign * upper, right)
        if info != 0:
            raise ArithmeticError(f"the spline's tridiagonal system is singular (LAPACK dgtsv reports {info})")
        return np.asarray(solution)

    def _right_sides(self, d: Floats) -> tuple[Floats, Floats, Floats]:
        """Right sides of the reduced system, (c, n − 2), and of (3) at the left and right end, (c,)."""
        h = self.lengths
        right = 3.0 * (h[1:] * d[:, :-1] + h[:-1] * d[:, 1:])
        left_end = ((3.0 * h[0] + 2.0 * h[1]) * h[1] * d[:, 0] + h[0] ** 2 * d[:, 1]) / (h[0] + h[1])
        right_end = ((3.0 * h[-1] + 2.0 * h[-2]) * h[-2] * d[:, -1] + h[-1] ** 2 * d[:, -2]) / (h[-1] + h[-2])
        right[:, 0] -= left_end
        right[:, -1] -= right_end
        return right, left_end, right_end

    def _slopes(self, values: Floats, d: Floats) -> Floats:
        """Slopes at the rows, (c, n), for n ≥ 4 rows, from the divided differences d, (c, n − 1)."""
        h = self.lengths
        right, left_end, right_end = self._right_sides(d)
        inner = self._solve(right.T).T
        slopes = np.empty_like(values)
        slopes[:, 1:-1] = inner
        slopes[:, 0] = (left_end - (h[0] + h[1]) * inner[:, 0]) / h[1]
        slopes[:, -1] = (right_end - (h[-1] + h[-2]) * inner[:, -1]) / h[-2]
        return slopes

    def _slope_errors(self, values: Floats, d: Floats, slopes: Floats, relative_error: Floats | float) -> Floats:
        """Proved bounds on the error of the slopes, (c, n): the residual of the reduced system, with all that rounding can hide
        in it, through the inverse of the comparison matrix."""
        h = self.lengths
        d_error = (np.abs(values[:, :-1]) + np.abs(values[:, 1:])) / h * (relative_error + UNIT) + 3.0 * UNIT * np.abs(d)
        inner, sizes = slopes[:, 1:-1], np.abs(slopes[:, 1:-1])
        lower, main, upper = self._bands
        product, size = main * inner, main * sizes
        product[:, 1:] += lower * inner[:, :-1]
        size[:, 1:] += lower * sizes[:, :-1]
        product[:, :-1] += upper * inner[:, 1:]
        size[:, :-1] += upper * sizes[:, 1:]
        in_right, in_left_end, in_right_end = self._magnitudes(np.abs(d), d_error)
        residual = np.abs(self._right_sides(d)[0] - product) + 8.0 * UNIT * size + in_right
        errors = np.empty_like(values)
        errors[:, 1:-1] = self._compared(residual)
        near, far = h[0] + h[1], h[-1] + h[-2]
        errors[:, 0] = (near * (errors[:, 1] + 6.0 * UNIT * sizes[:, 0]) + in_left_end) / h[1]
        errors[:, -1] = (far * (errors[:, -2] + 6.0 * UNIT * sizes[:, -1]) + in_right_end) / h[-2]
        return errors * SAFETY

    def _magnitudes(self, d_size: Floats, d_error: Floats) -> tuple[Floats, Floats, Floats]:
        """Bounds on the error of the right sides: every term's size times 14 roundings plus the error of d in it."""
        h = self.lengths
        spread = d_error + 14.0 * UNIT * d_size
        inner = 3.0 * (h[1:] * spread[:, :-1] + h[:-1] * spread[:, 1:])
        left_end = ((3.0 * h[0] + 2.0 * h[1]) * h[1] * spread[:, 0] + h[0] ** 2 * spread[:, 1]) / (h[0] + h[1])
        right_end = ((3.0 * h[-1] + 2.0 * h[-2]) * h[-2] * spread[:, -1] + h[-1] ** 2 * spread[:, -2]) / (h[-1] + h[-2])
        inner[:, 0] += left_end
        inner[:, -1] += right_end
        return inner, left_end, right_end

    def _compared(self, residual: Floats) -> Floats:
        """x ≥ |A⁻¹|·residual, entry by entry: x solves the comparison system, inflated until that is verified."""
        lower, main, upper = self._bands
        candidate = self._solve(residual.T, comparison=True).T
        candidate = np.abs(candidate) * (1.0 + 1e-6) + np.finfo(float).tiny
        rest = main * candidate
        rest[:, 1:] -= lower * candidate[:, :-1]
        rest[:, :-1] -= upper * candidate[:, 1:]
        slack = rest - 8.0 * UNIT * 2.0 * main * candidate
        short = slack < residual
        if short.any():
            # ⟨A⟩x ≥ residual failed by rounding somewhere: scale a constant vector, which dominance makes sufficient
            h = self.lengths
            margin = h[:-1] + h[1:]
            margin[0], margin[-1] = h[1], h[-2]
            sure = margin - 16.0 * UNIT * main
            sizes = np.where(sure > 0.0, residual / np.where(sure > 0.0, sure, 1.0), np.inf)
            worst = np.max(sizes, axis=1, keepdims=True)
            candidate = np.where(short.any(axis=1, keepdims=True), np.broadcast_to(worst, candidate.shape), candidate)
        return np.asarray(candidate)

    def coefficients(self, values: Floats, relative_error: Floats | float | None) -> Coefficients:
        """values (c, n). p is the Hermite form of the spline on each interval; q is zero. Without a relative_error no bound is
        worked out, for estimates that need none."""
        rows = values.shape[1]
        if rows == 2:
            return Linear(self.lengths).coefficients(values, 0.0 if relative_error is None else relative_error)
        if rows == 3:
            return self._parabola(values, 0.0 if relative_error is None else relative_error)
        d = np.diff(values, axis=1) / self.lengths
        slopes = self._slopes(values, d)
        half = self.lengths / 2.0
        members = np.stack([values[:, :-1], values[:, 1:], slopes[:, :-1] * half, slopes[:, 1:] * half], axis=-1)
        p = members @ _HERMITE
        if relative_error is None:
            return _without_exponent(p, np.zeros((1, len(half))))
        slope_errors = self._slope_errors(values, d, slopes, relative_error)
        error = (relative_error + 12.0 * UNIT) * summed(np.abs(members))
        error += _DERIVATIVE_BASIS_PEAK * half * (slope_errors[:, :-1] + slope_errors[:, 1:])
        return _without_exponent(p, error * SAFETY)

    def _parabola(self, values: Floats, relative_error: Floats | float) -> Coefficients:
        """The parabola through three rows, from Newton's divided differences."""
        h = self.lengths
        d = np.diff(values, axis=1) / h
        bend = (d[:, 1] - d[:, 0]) / (h[0] + h[1])
        p = np.empty((len(values), 2, 3))
        for i in range(2):
            half = h[i] / 2.0
            p[:, i, 0] = (values[:, i] + values[:, i + 1]) / 2.0 - bend * half**2
            p[:, i, 1] = (values[:, i + 1] - values[:, i]) / 2.0
            p[:, i, 2] = bend * half**2
        reach = np.max(h) ** 2 * (np.abs(values) @ np.array([1.0, 2.0, 1.0]))[:, None] / (np.min(h) * (h[0] + h[1]))
        size = np.abs(values[:, :-1]) + np.abs(values[:, 1:]) + reach
        return _without_exponent(p, (relative_error + 12.0 * UNIT) * size)

    def row_weights(self, moments: Floats) -> Floats:
        """moments (4, m) of z^j·kernel. Returns (n,): the adjoint of `coefficients`."""
        h = self.lengths
        rows = len(h) + 1
        if rows == 2:
            return Linear(h).row_weights(moments)
        if rows == 3:
            basis = self.coefficients(np.eye(3), 0.0).p
            return np.asarray(np.einsum("imj,jm->i", basis, moments[:3]))
        members = _HERMITE @ moments[:4]
        weights, by_slope = np.zeros(rows), np.zeros(rows)
        weights[:-1] += members[0]
        weights[1:] += members[1]
        by_slope[:-1] += members[2] * h / 2.0
        by_slope[1:] += members[3] * h / 2.0
        by_difference = self._slopes_adjoint(by_slope)
        weights[1:] += by_difference / h
        weights[:-1] -= by_difference / h
        return weights

    def _slopes_adjoint(self, by_slope: Floats) -> Floats:
        """The derivative by the divided differences, (n − 1,), given the derivative by the slopes, (n,)."""
        h = self.lengths
        near, far = h[0] + h[1], h[-1] + h[-2]
        inner = by_slope[1:-1].copy()
        inner[0] -= near / h[1] * by_slope[0]
        inner[-1] -= far / h[-2] * by_slope[-1]
        solved = self._solve(inner[:, None], transposed=True)[:, 0]
        by_d = np.zeros(len(h))
        by_d[:-1] += 3.0 * h[1:] * solved
        by_d[1:] += 3.0 * h[:-1] * solved
        left = by_slope[0] / h[1] - solved[0]
        right = by_slope[-1] / h[-2] - solved[-1]
        by_d[0] += left * (3.0 * h[0] + 2.0 * h[1]) * h[1] / near
        by_d[1] += left * h[0] ** 2 / near
        by_d[-1] += right * (3.0 * h[-1] + 2.0 * h[-2]) * h[-2] / far
        by_d[-2] += right * h[-1] ** 2 / far
        return by_d


Path = Step | Linear | Geometric | Smooth


def path_named(name: str, lengths: Floats) -> Path:
    """The path of that name over intervals of those lengths (years), (m,)."""
    paths: dict[str, type[Path]] = {"step": Step, "linear": Linear, "geometric": Geometric, "smooth": Smooth}
    return paths[name](lengths)


def overshoots(values: Floats, p: Floats) -> Mask:
    """Where a cubic (c, m, ≤ 4) leaves the range of the four nearest rows by more than a tenth of it; (c, m)."""
    padded = np.concatenate([values[:, :1], values, values[:, -1:]], axis=1)
    quadruple = np.lib.stride_tricks.sliding_window_view(padded, 4, axis=1)
    low, high = quadruple.min(axis=-1), quadruple.max(axis=-1)
    c = np.zeros((*p.shape[:2], 4))
    c[..., : p.shape[-1]] = p
    a, b, e = 3.0 * c[..., 3], 2.0 * c[..., 2], c[..., 1]
    with np.errstate(invalid="ignore", divide="ignore"):
        root = np.sqrt(b * b - 4.0 * a * e)
        stationary = [(-b + root) / (2.0 * a), (-b - root) / (2.0 * a), -e / b]
    # a stationary point that does not exist, or lies outside, is replaced by the left end, which is a row
    inside = [polynomial(c, np.where(np.abs(z) <= 1.0, z, -1.0)) for z in stationary]
    allowance = 0.1 * (high - low) + 1e-12 * np.maximum(np.abs(low), np.abs(high))
    top, bottom = np.max(inside, axis=0), np.min(inside, axis=0)
    return np.asarray((top > high + allowance) | (bottom < low - allowance))
