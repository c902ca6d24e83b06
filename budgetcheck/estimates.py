"""Errors that can be estimated, not proved: of reconstructing a path from its rows, and of an undeclared tail.

Reconstruction: a continuous plan is known only at its rows. The change of slack when every second row is left out is larger
than the error that remains, by about the order of the interpolation (16 for a smooth path), wherever the rows are fine enough
at all.

Tail: where the author declared none, balanced growth is assumed after the last row although the last rows may still move.
Twice the difference between balanced growth and a converging tail fitted to the last rows is taken as the error.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .budget import Budget, slack_only
from .plan import OutOfRange, Plan, build
from .quadrature import UNIT, Floats, Mask
from .rates import Rate
from .streams import Exponent, Mesh, RatePath, Streams

FEWEST_ROWS = 4
"""Below this a reconstruction error cannot be estimated."""

TAIL_FACTOR = 2.0
"""On cut-off growth paths, from above and from below their long-run values, once the difference was too small and twice was
not."""

WINDOW = 0.25
"""Share of the plan's span, at its end, that a converging tail is fitted to."""

FEWEST_IN_WINDOW = 5
MOST_IN_WINDOW = 200

LARGEST_MISFIT = 0.1
"""A fit leaves at most this share (root mean square) of the movement it describes; otherwise the rows do not converge."""

SPEEDS = np.geomspace(1e-3, 60.0, 40)
"""Speeds tried, in units of 1/window: from a straight line to a jump."""

STEPS_PER_TIME_CONSTANT = 4.0
"""Rows a time constant of the fitted tail: cubic pieces then follow it to 1e−5 of what still moves."""

SETTLED = 32.0
"""Time constants after which what still moves is below rounding: e^−32 is 1e−14."""


@dataclass(frozen=True, kw_only=True)
class ConvergingFit:
    """y(t) = long_run + (y_T − long_run)·e^{−speed·(t − T)}, with one speed (1/year) for income, consumption (money per unit of
    human capital and year) and r (1/year)."""

    speed: float
    income: float
    consumption: float
    interest: float


@dataclass(frozen=True, kw_only=True)
class TailEstimate:
    """error: of slack, per unit of human capital; fit: None where nothing moves or nothing could be fitted; why: the reason in
    words."""

    error: float
    fit: ConvergingFit | None
    why: str


def reconstruction(budget: Budget) -> float:
    """Estimated error of slack from interpolating between rows; zero where the path is what the plan means."""
    plan = budget.plan
    c = plan.conventions
    if c.periods or (c.path_declared and plan.path != "smooth"):
        return 0.0
    if len(plan.rows.timeline.times) < FEWEST_ROWS:
        return math.inf
    try:
        coarse = slack_only(build(plan.rows.thinned(), c, plan.path))
    except OutOfRange:
        return math.inf
    return abs(budget.unit.account.slack.value - coarse.slack.value)


@dataclass(frozen=True, eq=False)
class _LastRows:
    """The window at the end: s (j,) years relative to the last row, ≤ 0; values (3, j): income, consumption, r; noise (3,):
    what printing or floating point may have changed in them."""

    s: Floats
    values: Floats
    noise: Floats

    @property
    def movement(self) -> Floats:
        """How far each series strays from its last value, (3,)."""
        return np.asarray(np.abs(self.values - self.values[:, -1:]).max(axis=1))


def tail(budget: Budget) -> TailEstimate:
    """Estimated error of slack from assuming balanced growth after the last row of a perpetual plan."""
    plan = budget.plan
    if not plan.conventions.perpetual:
        return TailEstimate(error=0.0, fit=None, why="the plan has no tail")
    if plan.conventions.tail_declared:
        return TailEstimate(error=0.0, fit=None, why="the tail is declared")
    rows = _last_rows(plan)
    moving = rows.movement > rows.noise
    weight = _discount_at_end(budget)
    if not moving.any():
        error = TAIL_FACTOR * weight * _frozen(rows, plan)
        return TailEstimate(error=error, fit=None, why="the last rows do not move beyond the rounding of their figures")
    if len(rows.s) < FEWEST_IN_WINDOW:
        return TailEstimate(error=math.inf, fit=None, why="there are too few rows to fit a converging tail to")
    fit = _fit(rows, moving)
    if fit is None:
        return TailEstimate(error=math.inf, fit=None, why="the last rows do not settle towards long-run values")
    return _difference(rows, fit, plan, weight)


def _last_rows(plan: Plan) -> _LastRows:
    """Income, consumption and r at the rows of the window, per unit of human capital."""
    c, timeline = plan.conventions, plan.rows.timeline
    lengths = plan.amounts_path.lengths
    times = timeline.times + (lengths / 2.0 if c.periods else 0.0)
    least = min(FEWEST_IN_WINDOW, len(times))
    first = min(int(np.searchsorted(times, times[-1] - WINDOW * (times[-1] - times[0]) - 1e-9)), len(times) - least)
    kept = np.unique(np.linspace(first, len(times) - 1, min(MOST_IN_WINDOW, len(times) - first)).astype(int))
    per_year = 1.0 / lengths[kept] if c.periods and c.quoted == "per period" else 1.0
    basis = {"per person": -c.g.value, "per effective unit": 0.0}.get(c.basis, -plan.growth.value)
    level = {"per household": 1.0, "economy": 1.0 / float(c.households)}.get(c.basis, float(c.members))
    level = float(c.productivity * c.members) if c.basis == "per effective unit" else level
    factor = float(c.unit) * level / plan.scale.value * np.exp(basis * times[kept]) * per_year
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
    return _LastRows(s=times[kept] - times[-1], values=values, noise=noise)


def _noise(values: Floats, half_units: Floats | None, kept: NDArray[np.intp]) -> float:
    """A unit in the last printed digit, or a few roundings."""
    floor = 16.0 * UNIT * float(np.max(np.abs(values)))
    return floor if half_units is None else max(floor, 2.0 * float(np.max(half_units[kept])))


def _discount_at_end(budget: Budget) -> float:
    discount = budget.unit.discount
    return 1.0 if discount is None else math.exp(-float(discount.at[-1]))


def _decay(plan: Plan, interest: float) -> float:
    return interest - plan.growth.value


def _frozen(rows: _LastRows, plan: Plan) -> float:
    """What a lasting shift of each series by as much as it strays in the window would change in the tail."""
    income, consumption, interest = rows.movement
    decay = _decay(plan, float(rows.values[2, -1]))
    if income == consumption == interest == 0.0 or decay <= 0.0:
        return 0.0
    net = abs(float(rows.values[0, -1] - rows.values[1, -1]))
    return float((income + consumption) / decay + net / decay**2 * interest)


def _fit(rows: _LastRows, moving: Mask) -> ConvergingFit | None:
    """Least squares through the last row with one speed for all series that move, each scaled by its movement."""
    window = -float(rows.s[0])
    deviation = rows.values - rows.values[:, -1:]
    scaled = deviation[moving] / rows.movement[moving][:, None]
    speeds = SPEEDS / window
    for _ in range(3):
        misfit, _ = _misfit(scaled, rows.s, speeds)
        best = int(np.argmin(misfit))
        if best == 0 and speeds[0] <= SPEEDS[0] / window * 1.0001:
            return None
        low, high = speeds[max(best - 1, 0)], speeds[min(best + 1, len(speeds) - 1)]
        speed = float(speeds[best])
        speeds = np.linspace(low, high, 17)
    misfit, slopes = _misfit(deviation, rows.s, np.array([speed]))
    relative = _misfit(scaled, rows.s, np.array([speed]))[0][0] / (scaled**2).sum()
    if relative > LARGEST_MISFIT**2:
        return None
    departures = np.where(moving, slopes[0], 0.0)
    long_run = rows.values[:, -1] - departures
    return ConvergingFit(speed=speed, income=float(long_run[0]), consumption=float(long_run[1]), interest=float(long_run[2]))


def _misfit(deviation: Floats, s: Floats, speeds: Floats) -> tuple[Floats, Floats]:
    """For each speed, the sum of squares left and the best departures B of deviation ≈ B·(e^{−speed·s} − 1)."""
    shape = np.expm1(-np.outer(speeds, s))
    slopes = (shape @ deviation.T) / (shape**2).sum(axis=1, keepdims=True)
    left = deviation[None] - slopes[:, :, None] * shape[:, None, :]
    return (left**2).sum(axis=(1, 2)), slopes


def _difference(rows: _LastRows, fit: ConvergingFit, plan: Plan, weight: float) -> TailEstimate:
    """Twice the difference between the two tails, discounted to the start."""
    now = _decay(plan, float(rows.values[2, -1]))
    settled = _decay(plan, fit.interest)
    if settled <= 0.0:
        return TailEstimate(error=math.inf, fit=fit, why="the fitted long-run r does not exceed g + n")
    if now <= 0.0:
        return TailEstimate(error=math.inf, fit=fit, why="r does not exceed g + n at the last row, and still moves")
    # a row of totals speaks of the middle of its period, and the tail starts at the period's end
    after = float(plan.amounts_path.lengths[-1]) / 2.0 if plan.conventions.periods else 0.0
    faded = math.exp(-fit.speed * after)
    departure = (rows.values[:, -1] - np.array([fit.income, fit.consumption, fit.interest])) * faded
    balanced = float(rows.values[0, -1] - rows.values[1, -1]) / now
    converging = _converging(fit, departure, settled)
    error = TAIL_FACTOR * weight * abs(converging - balanced)
    why = f"a converging tail fitted to the last rows (speed {fit.speed:.3g} a year) differs by half of this"
    return TailEstimate(error=error if math.isfinite(error) else math.inf, fit=fit, why=why)


def _converging(fit: ConvergingFit, departure: Floats, settled: float) -> float:
    """Present value, at the last row, of a net flow that converges while the rate that discounts it converges too.

    Both parts of the flow, the settled one and the fading one, are members of the family; the rate is carried by cubic pieces
    (Hermite, exact at both ends) until what still moves is below rounding, and is constant from there on.
    """
    end = SETTLED / (fit.speed + settled)
    pieces = max(8, math.ceil(end * fit.speed * STEPS_PER_TIME_CONSTANT))
    breaks = np.linspace(0.0, end, pieces + 1)
    lengths = np.diff(breaks)
    mesh = Mesh(breaks=breaks, lengths=lengths, interval=np.arange(pieces))
    fading = departure[2] * np.exp(-fit.speed * breaks)
    slope = -fit.speed * fading * lengths[0] / 2.0
    left, right, d_left, d_right = fading[:-1], fading[1:], slope[:-1], slope[1:]
    cubic = np.stack(
        [
            (2.0 * (left + right) + d_left - d_right) / 4.0 + settled,
            (3.0 * (right - left) - d_left - d_right) / 4.0,
            (d_right - d_left) / 4.0,
            (left - right + d_left + d_right) / 4.0,
        ],
        axis=1,
    )
    none = np.zeros((1, pieces))
    net = RatePath(coefficients=cubic, error=none[0], beyond=Rate.along_path(settled, 0.0))
    p = np.broadcast_to(np.array([fit.income - fit.consumption, departure[0] - departure[1]])[:, None, None], (2, pieces, 1))
    q = np.zeros((2, pieces, 2))
    q[1, :, 0] = -fit.speed * (breaks[:-1] + lengths / 2.0)
    q[1, :, 1] = -fit.speed * lengths / 2.0
    discount = Exponent.of(net, lengths)
    streams = Streams(p=p, q=q, p_error=none, q_error=none).restated(discount, sign=-1)
    rest = (fit.income - fit.consumption) / settled * math.exp(-float(discount.at[-1]))
    return float(streams.integral(mesh.lengths).value.sum()) + rest
