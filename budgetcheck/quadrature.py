"""Integrals of the family p(z)·exp(q(z)) with a proved error bound; knows no money and no time.

On an interval of length h mapped to z in [−1, 1] the integrand is entire, so the m-point Gauss–Legendre rule
converges geometrically and its error is bounded by the size of the integrand on an ellipse around the interval:

    |I − I_m| ≤ (h/2)·(64/15)·M·ϱ^(−2m) / (1 − ϱ^(−2))          for every ϱ > 1,                         (1)

M any bound of |p·exp q| on the Bernstein ellipse of parameter ϱ, whose half axis is a = (ϱ + 1/ϱ)/2. There
|p| ≤ Σ|p_j|a^j and Re q ≤ q_0 + Σ_{j≥1}|q_j|a^j, so M needs no search.

Sources: P. Rabinowitz (1969), Rough and ready error estimates in Gaussian integration of analytic functions, CACM 12,
268–270; L. N. Trefethen, Approximation Theory and Approximation Practice, Theorem 19.3 (which counts m = n + 1 points).
Rounding: N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., sections 3.1 and 5.1 (Horner's rule).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.polynomial.legendre import legvander
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]

UNIT = 2.0**-53
"""Unit roundoff of binary64: the largest relative error of one operation, and of reading one decimal figure."""

EXP_ERROR = 8 * UNIT
"""Relative error assumed of numpy.exp: 4 units in the last place, several times what its vector kernels show."""

UNDERFLOW = 2.0**-1022
"""Smallest normal number: the most that one product can lose by gradual underflow (with room to spare)."""

LARGEST_EXPONENT_ERROR = 0.1
"""An exponent known less well than this has no useful bound: a plan that needs it is refused."""

SAFETY = 1.0 + 1e-9
"""Covers the rounding committed in evaluating the bounds themselves (a few hundred operations on positive terms)."""

POINTS = 16
ELLIPSES = (2.5, 4.0, 8.0, 16.0, 40.0)
MOST_HALVINGS = 60

# Positive half of the 16-point Gauss–Legendre rule, 22 digits (Abramowitz & Stegun, table 25.4, carries the first 15).
_HALF_RULE = (
    ("0.09501250983763744018532", "0.1894506104550684962854"),
    ("0.2816035507792589132305", "0.1826034150449235888668"),
    ("0.4580167776572273863424", "0.1691565193950025381893"),
    ("0.6178762444026437484467", "0.1495959888165767320815"),
    ("0.7554044083550030338951", "0.1246289712555338720525"),
    ("0.8656312023878317438805", "0.09515851168249278480993"),
    ("0.9445750230732325760780", "0.06225352393864789286284"),
    ("0.9894009349916499325962", "0.02715245941175409485178"),
)
_ABSCISSAE = np.array([float(x) for x, _ in _HALF_RULE])
_HALF_WEIGHTS = np.array([float(w) for _, w in _HALF_RULE])
NODES: Floats = np.concatenate([-_ABSCISSAE[::-1], _ABSCISSAE])
WEIGHTS: Floats = np.concatenate([_HALF_WEIGHTS[::-1], _HALF_WEIGHTS])


_NODE_POWERS = NODES ** np.arange(1, 32)[:, None]
"""z^1 … z^31 at the nodes, (31, 16), for evaluating polynomials as matrix products."""

_ONES = np.ones(64)

_ELLIPSE_AXES = (np.array(ELLIPSES) + 1.0 / np.array(ELLIPSES)) / 2.0
_ELLIPSE_POWERS = _ELLIPSE_AXES ** np.arange(32)[:, None]
_LOG_SHRINK = np.log(64.0 / 15.0 / (1.0 - np.array(ELLIPSES) ** -2.0)) - 2.0 * POINTS * np.log(np.array(ELLIPSES))


@dataclass(frozen=True, kw_only=True, eq=False)
class Integral:
    """Integrals over each interval, with what is known of their error.

    value : (k, m)      the integral of each of k integrands over each of m intervals
    bound : (k, m)      proved: |value − exact| ≤ bound
    nodes : (k, m, 16)  the integrand at the nodes, for integrals to a point inside an interval
    coarse : (m,)       intervals where truncation dominates rounding, to be halved
    """

    value: Floats
    bound: Floats
    nodes: Floats
    coarse: Mask


def at_nodes(coefficients: Floats) -> Floats:
    """Σ c_j z^j at the nodes, (..., 16). The constant term is added last, so that rounding is u|c_0| + 3d·u·Σ_{j≥1}|c_j|."""
    degree = coefficients.shape[-1] - 1
    if degree == 0:
        return np.repeat(coefficients, POINTS, axis=-1)
    result = np.asarray(coefficients[..., 1:] @ _NODE_POWERS[:degree])
    result += coefficients[..., :1]
    return result


def summed(array: Floats) -> Floats:
    """The sum over the last, short axis; as a product with ones, which is several times faster than a reduction."""
    return np.asarray(array @ _ONES[: array.shape[-1]])


def polynomial(coefficients: Floats, z: Floats | float) -> Floats:
    """Evaluate Σ c_j z^j by Horner's rule; coefficients (..., d + 1), z broadcast against (...)."""
    result = np.array(coefficients[..., -1] + 0.0 * z)
    for j in range(coefficients.shape[-1] - 2, -1, -1):
        result *= z
        result += coefficients[..., j]
    return result


def truncation_bound(size: Floats, q: Floats, swing: Floats, lengths: Floats) -> Floats:
    """Bound (1) for each integrand and interval, the least over a few ellipses.

    size : (k, m, P) with |p_j| ≤ size_j; q : (k or 1, m) the constant terms q_0; swing : (k or 1, m, Q) with |q_j| ≤ swing_j
    for j ≥ 1; lengths : (m,). Returns (k, m); infinite where no ellipse gives a representable bound.
    """
    grown = swing @ _ELLIPSE_POWERS[1 : swing.shape[-1] + 1]
    grown += q[..., None]
    grown += _LOG_SHRINK
    beyond = grown > 709.0
    np.exp(np.minimum(grown, 709.0, out=grown), out=grown)
    with np.errstate(over="ignore"):
        bound = (size @ _ELLIPSE_POWERS[: size.shape[-1]]) * grown
        if beyond.any():
            bound = np.where(beyond & (bound > 0.0), np.inf, bound)
        return np.asarray(bound.min(axis=-1) * (lengths * (SAFETY / 2.0)))


def integrate(p: Floats, q: Floats, lengths: Floats, *, p_error: Floats, q_error: Floats) -> Integral:
    """Integrate p·exp(q) over every interval by the 16-point Gauss–Legendre rule, with a proved bound.

    p : (k, m, P), q : (k or 1, m, Q) coefficients in z; lengths : (m,) in the unit of the variable, each right to one
    rounding; p_error, q_error : (k or 1, m) bounds on |p − exact p| and |q − exact q| over the interval. The bound is
    the sum of (1) and of rounding: nodes and evaluation of p and of q (an absolute error in q is a relative error of
    exp q), exp itself, weights, products, the sum over nodes and the length.
    """
    half = lengths / 2.0
    exponentials = at_nodes(q)
    np.exp(exponentials, out=exponentials)
    nodes = at_nodes(p)
    nodes *= exponentials
    value = (nodes @ WEIGHTS) * half
    mass = (exponentials @ WEIGHTS) * half
    # the part of p within p_error is integrated too: it joins the constant term of the truncation bound
    sizes, swings = np.abs(p), np.abs(q[..., 1:])
    sizes[..., 0] += p_error
    size, swing = summed(sizes), summed(swings)
    truncation = truncation_bound(sizes, q[..., 0], swings, lengths)
    p_steps, q_steps = 3 * p.shape[-1], 3 * q.shape[-1]
    # exp(x) − 1 ≤ 1.06·x for an error x of up to LARGEST_EXPONENT_ERROR in q
    in_exponent = 1.06 * (UNIT * (np.abs(q[..., 0]) + (q_steps + 1) * swing) + q_error) + EXP_ERROR
    relative = in_exponent + UNIT * (p_steps + POINTS + 6)
    gross = mass * size
    bound = gross * relative + 1.11 * mass * p_error + truncation
    mean = np.add.reduce(gross, axis=-1, keepdims=True) / gross.shape[-1]
    target = np.maximum(gross, mean)
    return Integral(
        value=value,
        bound=bound * SAFETY + (size + 1.0) * (lengths * UNDERFLOW),
        nodes=nodes,
        coarse=np.asarray((truncation > UNIT * target).any(axis=0)),
    )


_SERIES: Floats = (np.arange(POINTS) + 0.5)[:, None] * legvander(NODES, POINTS - 1).T * WEIGHTS
"""From the values of f at the nodes to the Legendre series of its interpolant, (16, 16)."""


def antiderivative_at(z: Floats) -> Floats:
    """B (i, 16) with ∫_{−1}^{z_i} f ≈ Σ_k B[i, k] f(node k): the interpolant at the nodes, integrated exactly."""
    values = legvander(z, POINTS)
    integral = np.empty((len(z), POINTS))
    integral[:, 0] = 1.0 + z
    # ∫_{−1}^z P_n = (P_{n+1} − P_{n−1})/(2n + 1)
    integral[:, 1:] = (values[:, 2:] - values[:, : POINTS - 1]) / (2.0 * np.arange(1, POINTS) + 1.0)
    return np.asarray(integral @ _SERIES)


ANTIDERIVATIVE: Floats = antiderivative_at(NODES)


def running_sum(terms: Floats) -> tuple[Floats, Floats]:
    """Partial sums 0, x_1, x_1 + x_2, … along the last axis, compensated, with a bound on their rounding.

    terms : (..., m). Returns sums and bounds, both (..., m + 1). Algorithm Sum2 of T. Ogita, S. M. Rump and S. Oishi (2005),
    Accurate sum and dot product, SIAM J. Sci. Comput. 26, Proposition 4.5: |error| ≤ u|s| + γ²_{m−1}Σ|x|. The rounding
    of each partial sum is recovered exactly by Knuth's TwoSum, so the whole is vectorised.
    """
    shape = (*terms.shape[:-1], terms.shape[-1] + 1)
    plain, absolute = np.zeros(shape), np.zeros(shape)
    np.cumsum(terms, axis=-1, out=plain[..., 1:])
    np.cumsum(np.abs(terms), axis=-1, out=absolute[..., 1:])
    before, after = plain[..., :-1], plain[..., 1:]
    virtual = after - before
    lost = (before - (after - virtual)) + (terms - virtual)
    sums = plain.copy()
    sums[..., 1:] += np.cumsum(lost, axis=-1)
    count = float(terms.shape[-1])
    bounds = UNIT * np.abs(sums) + 1.01 * (count * UNIT) ** 2 * absolute
    return sums, bounds * SAFETY
