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

from .exponents import Drift
from .plan import LARGEST_EXPONENT, Factors, Plan
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
    """Income, consumption and the discount rate at the rows of the window, per unit of human capital."""
    c, timeline = plan.conventions, plan.rows.timeline
    lengths = plan.amounts_path.lengths
    times = timeline.times + (lengths / 2.0 if c.periods else 0.0)
    least = min(FEWEST_IN_WINDOW, len(times))
    first = min(int(np.searchsorted(times, times[-1] - WINDOW * (times[-1] - times[0]) - 1e-9)), len(times) - least)
    kept = np.arange(first, len(times))
    if len(kept) > MOST_IN_WINDOW:
        kept = np.unique(np.linspace(first, len(times) - 1, MOST_IN_WINDOW).astype(int))
    values, noise = np.zeros((3, len(kept))), np.zeros(3)
    values[:2], noise[:2] = unit_amounts(plan, kept)
    values[2], noise[2] = _discount_rate(plan, kept)
    return LastRows(s=times[kept] - times[-1], values=values, noise=noise)


def unit_amounts(plan: Plan, kept: NDArray[np.intp]) -> tuple[Floats, Floats]:
    """Income less deductions and consumption at those rows, money per unit of human capital and year, (2, j), without single
    amounts, and what printing or floating point may have changed in them, (2,)."""
    c, lengths = plan.conventions, plan.amounts_path.lengths
    values, noise = np.zeros((2, len(kept))), np.zeros(2)
    factors = Factors(plan.rows, c)
    grown: dict[tuple[str, bool], Floats] = {}
    for amounts, item in zip(plan.rows.amounts, plan.items, strict=False):
        key = item.basis, item.nominal
        if key not in grown:
            grown[key] = _grown(plan, plan.drifts.of_basis(item.basis, nominal=item.nominal) - plan.drifts.growth, kept)
        per_year = 1.0 / lengths[kept] if c.periods and item.quoted == "per period" else 1.0
        level = float(factors.exact(item.basis) * amounts.reading.unit) / plan.scale.value
        factor = level * grown[key] * per_year
        series = 1 if item.role == "consumption" else 0
        values[series] += amounts.values[kept] * factor * (-1.0 if item.role == "deduction" else 1.0)
        noise[series] += _noise(amounts.values[kept], amounts.half_units, kept) * float(np.max(np.abs(factor)))
    return values, noise


def row_breaks(plan: Plan, kept: NDArray[np.intp]) -> NDArray[np.intp]:
    """The breakpoint of each of those rows, of the last row of continuous data too."""
    return np.append(plan.mesh.row_starts, len(plan.mesh.lengths))[kept]


def _grown(plan: Plan, drift: Drift, kept: NDArray[np.intp]) -> Floats:
    """exp of the running integral of a drift at those rows, in period data in the middle of their periods."""
    exponent = drift.exponent(plan.mesh)
    if exponent is None:
        return np.ones(len(kept))
    at = row_breaks(plan, kept)
    if not plan.conventions.periods:
        return np.exp(exponent.after[at])
    return np.exp((exponent.after[at] + exponent.before[row_breaks(plan, kept + 1)]) / 2.0)


def _discount_rate(plan: Plan, kept: NDArray[np.intp]) -> tuple[Floats, float]:
    """The rate that discounts, with what measured growth takes from it beyond its last value, and its noise.

    Where only r is a column it is read off its rows, otherwise off the slope of the exponent that they make together.
    """
    measures, drifts = plan.rows.measures, plan.drifts
    moving = [exponent for _, exponent in drifts.net.parts]
    if not moving:
        return np.full(len(kept), drifts.discounting.beyond.value), 0.0
    if len(moving) == 1 and "r" in measures and plan.conventions.curve == "forward":
        r = measures["r"]
        shift = drifts.discounting.beyond.value - float(r.values[-1])
        return r.values[kept] + shift, _noise(r.values[kept], r.half_units, kept)
    net = plan.net_exponent
    assert net is not None, "a measured rate has an exponent"
    growth = drifts.growth.beyond.value
    ends = np.minimum(kept + 1, plan.row_intervals)
    starts = ends - 1 if not plan.conventions.periods else kept
    at, to = row_breaks(plan, starts), row_breaks(plan, ends)
    slopes = (net.after[to] - net.after[at]) / (plan.mesh.breaks[to] - plan.mesh.breaks[at])
    slopes[-1] = plan.net_beyond.value
    noise = 64.0 * UNIT * float(np.abs(net.after[at]).max()) / float(plan.amounts_path.lengths.min())
    for name in ("r", "g", "n", "inflation", "hazard"):
        if name in measures:
            noise += _noise(measures[name].values[kept], measures[name].half_units, kept)
    return slopes + growth, noise


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


def exponential(fits: Fits, window: int = 0) -> Curves | None:
    """The exponential curves of a window that ends with the last row, the whole one (0) or its second half (2); None where a
    series that moves follows no decaying one."""
    if not fits.sound[window]:
        return None
    departures, speeds = fits.departures[window], fits.speeds[window]
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
