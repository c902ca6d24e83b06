"""How the last rows of a perpetual plan settle: what moves in them, and the curves fitted to it that go on beyond them.

Through the last row of income, consumption (per unit of human capital) and r, each with a speed of its own, an exponential
curve is fitted,

    y(T + s) = y* + d·e^{−μs};

and, where the speed is still falling, an algebraic one, y* + d·(1 + s/σ)^{−p}, whose speed −y″/y′ = (p + 1)/(σ + s) falls for
ever, as under r = r_0/(1 + at).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .plan import LARGEST_EXPONENT, Plan, basis_factor
from .quadrature import NODES, UNIT, WEIGHTS, Floats, Mask

WINDOW = 0.25
"""Share of the plan's span, at its end, that curves are fitted to."""

FEWEST_IN_WINDOW = 5
MOST_IN_WINDOW = 200

POINTS_PER_WINDOW = 25
"""Rows taken from each window for the fit, evenly; a row may be taken more than once where there are fewer."""

LARGEST_MISFIT = 0.1
"""A fit leaves at most this share (root mean square) of the movement it describes; otherwise the rows do not settle."""

SPEEDS = np.geomspace(1e-3, 60.0, 24)
"""Speeds tried, in units of 1/window: from a straight line to a jump."""

SETTLED = 32.0
"""Exponent after which what still moves is below rounding: e^−32 is 1e−14."""

LARGEST_POWER = 100.0
"""An algebraic curve of a higher power is not told from an exponential one."""

PIECES = 64
"""Quadrature pieces of a fitted tail."""

REFINED = 17
"""Speeds tried between the neighbours of the best one, in each of two refinements."""

_BETWEEN = np.linspace(0.0, 1.0, REFINED)[:, None]

_SERIES = ("income", "consumption", "interest")


@dataclass(frozen=True, eq=False)
class LastRows:
    """The window at the end: s (j,) years relative to the last row, ≤ 0; values (3, j): income, consumption, r; noise (3,):
    what printing or floating point may have changed in them."""

    s: Floats
    values: Floats
    noise: Floats

    @property
    def movement(self) -> Floats:
        """How far each series strays from its last value, (3,)."""
        return np.asarray(np.abs(self.values - self.values[:, -1:]).max(axis=1))


@dataclass(frozen=True, kw_only=True)
class Curve:
    """One series beyond the last row: long_run + departure·fading(s). speed: −y″/y′ at the last row, 1/year; power: p of an
    algebraic curve, infinite for an exponential one."""

    long_run: float
    departure: float
    speed: float
    power: float = math.inf

    @property
    def _sigma(self) -> float:
        return (self.power + 1.0) / self.speed

    def fading(self, s: Floats) -> Floats:
        """e^{−μs} or (1 + s/σ)^{−p}."""
        if math.isinf(self.power):
            return np.exp(-self.speed * s)
        return np.exp(-self.power * np.log1p(s / self._sigma))

    def faded(self, s: Floats) -> Floats:
        """∫_0^s fading."""
        if math.isinf(self.power):
            return np.asarray(-np.expm1(-self.speed * s) / self.speed)
        growth = np.log1p(s / self._sigma)
        if abs(self.power - 1.0) < 1e-9:
            return np.asarray(self._sigma * growth)
        return np.asarray(self._sigma * np.expm1((1.0 - self.power) * growth) / (1.0 - self.power))


@dataclass(frozen=True, kw_only=True)
class Curves:
    """income, consumption: money per unit of human capital and year; interest: r, 1/year."""

    income: Curve
    consumption: Curve
    interest: Curve

    def value(self, growth: float) -> float:
        """Present value, at the last row, of income less consumption along the curves; infinite unless r settles above g + n.

        ∫_0^∞ (f* + d_w φ_w − d_c φ_c)·exp(−δ*s − d_r ∫φ_r) ds, φ the fading of each, by Gauss–Legendre on pieces that grow
        geometrically from a small part of the shortest time constant to where discounting leaves nothing.
        """
        settled = self.interest.long_run - growth
        if not settled > 0.0:
            return math.inf
        net = self.income.long_run - self.consumption.long_run
        end = SETTLED / settled
        quickest = max(settled, self.income.speed, self.consumption.speed, self.interest.speed)
        edges = np.concatenate([[0.0], np.geomspace(min(0.1 / quickest, 0.1 * end), end, PIECES)])
        step = np.diff(edges)[:, None]
        s = edges[:-1, None] + step * (1.0 + NODES) / 2.0
        flow = net + self.income.departure * self.income.fading(s) - self.consumption.departure * self.consumption.fading(s)
        exponent = -settled * s - self.interest.departure * self.interest.faded(s)
        values = (flow * np.exp(np.minimum(exponent, LARGEST_EXPONENT))) @ WEIGHTS
        return float(values @ step[:, 0]) / 2.0


def last_rows(plan: Plan) -> LastRows:
    """Income, consumption and r at the rows of the window, per unit of human capital."""
    c, timeline = plan.conventions, plan.rows.timeline
    lengths = plan.amounts_path.lengths
    times = timeline.times + (lengths / 2.0 if c.periods else 0.0)
    least = min(FEWEST_IN_WINDOW, len(times))
    first = min(int(np.searchsorted(times, times[-1] - WINDOW * (times[-1] - times[0]) - 1e-9)), len(times) - least)
    kept = np.arange(first, len(times))
    if len(kept) > MOST_IN_WINDOW:
        kept = np.unique(np.linspace(first, len(times) - 1, MOST_IN_WINDOW).astype(int))
    per_year = 1.0 / lengths[kept] if c.periods and c.quoted == "per period" else 1.0
    growth = {"per person": -c.g.value, "per effective unit": 0.0}.get(c.basis, -plan.growth.value)
    level = float(basis_factor(c, c.basis) * c.unit) / plan.scale.value
    factor = level * np.exp(growth * times[kept]) * per_year
    values, noise = np.zeros((3, len(kept))), np.zeros(3)
    for amounts in plan.rows.amounts:
        series = 0 if amounts.role == "income" else 1
        values[series] += amounts.values[kept] * factor
        noise[series] += _noise(amounts.values[kept], amounts.half_units, kept) * float(np.max(np.abs(factor)))
    if plan.rows.rates is None:
        values[2] = plan.interest.beyond.value
    else:
        values[2] = plan.rows.rates[kept]
        noise[2] = _noise(plan.rows.rates[kept], plan.rows.rate_half_units, kept)
    return LastRows(s=times[kept] - times[-1], values=values, noise=noise)


def _noise(values: Floats, half_units: Floats | None, kept: NDArray[np.intp]) -> float:
    """A unit in the last digit that the column usually prints (zeros at the end are often dropped), or a few roundings."""
    floor = 16.0 * UNIT * float(np.max(np.abs(values)))
    return floor if half_units is None else max(floor, 2.0 * float(np.median(half_units[kept])))


@dataclass(frozen=True, eq=False)
class Fits:
    """Exponential curves through the last row of three windows: the whole one, its first half and its second half.

    speeds, departures (3, 3): by window and series, 1 and 0 for a series that does not move; sound (3,): whether every series
    that moves follows its curve; last (3,): the values of the last row; half: years from the middle of one half to that of
    the other; moving (3,).
    """

    speeds: Floats
    departures: Floats
    sound: Mask
    last: Floats
    half: float
    moving: Mask


def fit(rows: LastRows, moving: Mask) -> Fits:
    """Least squares, each series with its own speed, through the last row of each window, at POINTS_PER_WINDOW rows of it."""
    s, values = _windows(rows)
    deviation = (values - values[..., -1:])[:, moving]
    count = deviation.shape[1]
    # the windows' series side by side: (3·count, j)
    deviation = deviation.reshape(3 * count, -1)
    s = np.repeat(s, count, axis=0)
    speed, departure, sound = _least_squares(deviation, s)
    speeds, departures = np.ones((3, 3)), np.zeros((3, 3))
    speeds[:, moving], departures[:, moving] = speed.reshape(3, count), departure.reshape(3, count)
    return Fits(
        speeds=speeds,
        departures=departures,
        sound=np.asarray(sound.reshape(3, count).all(axis=1)),
        last=rows.values[:, -1],
        half=-0.5 * float(rows.s[0]),
        moving=moving,
    )


def _windows(rows: LastRows) -> tuple[Floats, Floats]:
    """s (3, j), relative to the last row of each window, and values (3, 3, j), by window, at evenly chosen rows of each."""
    middle = int(np.searchsorted(rows.s, 0.5 * rows.s[0]))
    end = len(rows.s) - 1
    chosen = np.linspace((0, 0, middle), (end, middle, end), POINTS_PER_WINDOW, axis=1).round().astype(int)
    s = rows.s[chosen]
    return s - s[:, -1:], np.moveaxis(rows.values[:, chosen], 0, 1)


def _least_squares(deviation: Floats, s: Floats) -> tuple[Floats, Floats, Mask]:
    """For each of k series (k, j), speed and departure d of deviation ≈ d·(e^{−speed·s} − 1), and whether it follows them."""
    # a half window may hold no more than its last row
    span = np.where(s[:, 0] < 0.0, -s[:, 0], 1.0)
    speeds = SPEEDS[:, None] / span
    series = np.arange(len(deviation))
    squares = np.einsum("kj,kj->k", deviation, deviation)
    for _ in range(3):
        shape = np.expm1(-speeds[:, :, None] * s)
        norms = np.maximum(np.einsum("gkj,gkj->gk", shape, shape), np.finfo(float).tiny)
        products = np.einsum("gkj,kj->gk", shape, deviation)
        explained = products**2 / norms
        best = np.argmax(explained, axis=0)
        speed, departure, left = speeds[best, series], (products / norms)[best, series], squares - explained[best, series]
        low, high = speeds[np.maximum(best - 1, 0), series], speeds[np.minimum(best + 1, len(speeds) - 1), series]
        speeds = low + (high - low) * _BETWEEN
    follows = (squares > 0.0) & (left <= LARGEST_MISFIT**2 * squares)
    return speed, departure, follows & (s[:, 0] < 0.0) & (speed > 1.0001 * SPEEDS[0] / span)


def exponential(fits: Fits) -> Curves | None:
    """The exponential curves of the whole window; None where a series that moves follows no decaying one."""
    if not fits.sound[0]:
        return None
    departures, speeds = fits.departures[0], fits.speeds[0]
    curves = {
        name: Curve(long_run=float(last - departure), departure=float(departure), speed=float(speed))
        for name, last, departure, speed in zip(_SERIES, fits.last, departures, speeds, strict=True)
    }
    return Curves(**curves)


def slowing(fits: Fits) -> Curves | None:
    """Algebraic curves for the series whose speed falls from the first half of the window to the second, exponential ones for
    the others; None where none falls, or the halves cannot tell. A series that settles nowhere (p ≤ 0) departs infinitely."""
    if not fits.sound[1:].all():
        return None
    before, after = fits.speeds[1], fits.speeds[2]
    # 1/speed = (σ + s)/(p + 1) grows in a straight line, known in the middle of each half
    growth = (1.0 / after - 1.0 / before) / fits.half
    falling = fits.moving & (growth * (LARGEST_POWER + 1.0) > 1.0)
    if not falling.any():
        return None
    curves = {}
    for k, name in enumerate(_SERIES):
        last, departure, speed, power = float(fits.last[k]), float(fits.departures[2, k]), float(after[k]), math.inf
        if falling[k]:
            power = 1.0 / float(growth[k]) - 1.0
            slope = departure * speed
            speed = 1.0 / (1.0 / speed + float(growth[k]) * 0.5 * fits.half)
            # the slope at the last row is d·p/σ = d·p·speed/(p + 1)
            departure = slope * (power + 1.0) / (power * speed) if power > 0.0 else math.copysign(math.inf, departure)
        curves[name] = Curve(long_run=last - departure, departure=departure, speed=speed, power=power)
    return Curves(**curves)
