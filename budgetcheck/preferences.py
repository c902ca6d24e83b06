"""Preferences held against a plan: the Euler equation, the utility integral, and the path that exhausts the budget.

With constant inverse elasticity of intertemporal substitution θ and subjective discount rate ρ, consumption per unit of human
capital should grow at

    (dc/dt)/c = (r − ρ)/θ − g,        c(t) = c(0)·exp(∫_0^t (r − ρ)/θ − g),                                  (1)

and c(0) = (k(0) + ∫ e^{−Λ} w dt − e^{−Λ(T)} k_T) / ∫ exp(∫ ((r − ρ)/θ − g) − Λ) dt exhausts the budget. Lifetime utility is
finite where ρ − n − (1 − θ)g > 0. With fair annuities the hazard discounts utility and income alike and leaves (1) as it is.
Sources: R. Barro and X. Sala-i-Martin, Economic Growth, 2nd ed. (2004), section 2.1; M. Yaari (1965), Review of Economic
Studies 32.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from .bounded import Bounded
from .budget import Budget, Reach, worth_of_one
from .exponents import Drift, Exponent
from .paths import Smooth
from .plan import LARGEST_EXPONENT, Plan
from .quadrature import UNIT, Floats
from .rates import Rate
from .settling import row_breaks, unit_amounts
from .timeline import every_second
from .usual import usual


@dataclass(frozen=True, kw_only=True, eq=False)
class Preferences:
    """euler (j,): residual of (1) over each row, ln c(t_{i+1})/c(t_i) less the integral, NaN where consumption is zero;
    euler_error (j,): what rounding of the printed figures and the path of r between rows leave open in it (an estimate);
    utility_rate: ρ − n − (1 − θ)g beyond the last row, with the hazard and the growth of consumption, None for a finite plan;
    marginal_rate: at which discounted wealth valued at marginal utility moves in the limit, where slack is not zero, and
    marginal_margin: how far from zero it must be to count, 1/year;
    best: the path that exhausts the budget, None where there is none.
    """

    euler: Floats
    euler_error: Floats
    utility_rate: Rate | None
    marginal_rate: Rate | None
    marginal_margin: float
    best: BestPath | None


@dataclass(frozen=True, kw_only=True)
class BestPath:
    """start: c(0), money per unit of human capital and year, proved; per_household: the same; growth_first, growth_last: of
    consumption per person, 1/year, at the start and beyond or at the end of the rows; planned: what the plan consumes in its
    first row, asked: what this path would, both per unit of human capital and year; change: asked/planned − 1."""

    start: Bounded
    per_household: float
    growth_first: float
    growth_last: float
    planned: float
    asked: float
    change: float | None


def preferences(budget: Budget) -> Preferences | None:
    """What the declared preferences say of a plan; None where none are declared, or r is nominal and inflation unknown."""
    plan = budget.plan
    c = plan.conventions
    if c.rho is None or c.theta is None or not _real(plan):
        return None
    growth = _growth(plan, c.rho, c.theta)
    rows = plan.row_intervals if c.periods else plan.row_intervals + 1
    kept = np.arange(rows)
    consumption = unit_amounts(plan, kept)[0][1]
    exponent = growth.exponent(plan.mesh)
    at = _at_rows(plan, exponent, kept)
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = np.where(consumption > 0.0, np.log(np.where(consumption > 0.0, consumption, 1.0)), np.nan)
    utility = marginal = None
    if c.perpetual:
        tail_growth = growth_of_consumption(plan)
        impatience = c.rho + plan.drifts.hazard.beyond - plan.drifts.people.beyond
        utility = impatience - (plan.drifts.productivity.beyond + tail_growth).times(1 - c.theta)
        marginal = plan.net_beyond - (utility + tail_growth)
    return Preferences(
        euler=np.diff(logs) - np.diff(at),
        euler_error=_open(plan, consumption) + _interpolation(plan) / float(c.theta) + _inside_periods(plan, logs),
        utility_rate=utility,
        marginal_rate=marginal,
        marginal_margin=_still_moving(plan),
        best=_best(budget, growth, float(consumption[0]), float(at[0])),
    )


def _still_moving(plan: Plan) -> float:
    """How far r moves over the last quarter of the rows, at least the tolerance: on a path that follows (1) what is left keeps
    its value at marginal utility, and its rate is zero but for what r has not settled yet."""
    measure, c = plan.rows.measures.get("r"), plan.conventions
    moved = 0.0 if measure is None or c.tail_declared else float(np.ptp(measure.values[3 * len(measure.values) // 4 :]))
    return max(moved, c.tolerance)


def _real(plan: Plan) -> bool:
    """Whether rates are in real terms."""
    c = plan.conventions
    return not c.market_nominal or c.inflation is not None or "inflation" in plan.rows.measures


def growth_of_consumption(plan: Plan) -> Rate:
    """The growth of consumption per unit of human capital beyond the last row."""
    return plan.conventions.consumption_growth


def _growth(plan: Plan, rho: Rate, theta: Fraction) -> Drift:
    """(r − ρ)/θ − g."""
    return (plan.drifts.interest - Drift(constant=rho)).times(1 / theta) - plan.drifts.productivity


def _at_rows(plan: Plan, exponent: Exponent | None, kept: np.ndarray) -> Floats:
    """The exponent at the rows, in period data in the middle of their periods."""
    if exponent is None:
        return np.zeros(len(kept))
    if not plan.conventions.periods:
        return np.asarray(exponent.after[row_breaks(plan, kept)])
    return np.asarray((exponent.after[row_breaks(plan, kept)] + exponent.before[row_breaks(plan, kept + 1)]) / 2.0)


def _open(plan: Plan, consumption: Floats) -> Floats:
    """Half a unit of the last printed digits of both rows, relative to their consumption."""
    share = np.full(len(consumption), 8.0 * UNIT)
    for amounts in plan.rows.amounts:
        if amounts.role == "consumption" and amounts.half_units is not None:
            with np.errstate(divide="ignore", invalid="ignore"):
                relative = amounts.half_units[: len(share)] / np.abs(amounts.values[: len(share)])
            share = np.maximum(share, np.where(np.isfinite(relative), relative, 0.0))
    return np.asarray(share[:-1] + share[1:])


def _interpolation(plan: Plan) -> Floats | float:
    """How far ∫r over a row usually moves thereabouts when every second row of r is left out: more than what its path between
    rows leaves open."""
    measure, lengths = plan.rows.measures.get("r"), plan.rows.timeline.lengths
    if measure is None or not isinstance(plan.amounts_path, Smooth) or len(lengths) < 6 or plan.conventions.curve == "zero":
        return 0.0
    thin = plan.rows.timeline.thinned().lengths
    kept = every_second(len(lengths) + 1)
    fine = plan.amounts_path.coefficients(measure.values[None], None).p[0]
    coarse = Smooth(thin).coefficients(measure.values[kept][None], None).p[0]
    even = np.arange(fine.shape[1])[::2]
    whole = lengths * (fine[:, even] / (even + 1.0)).sum(axis=1)
    even = np.arange(coarse.shape[1])[::2]
    pairs = thin * (coarse[:, even] / (even + 1.0)).sum(axis=1)
    difference = np.abs(np.add.reduceat(whole, kept[:-1]) - pairs)
    return np.repeat(usual(difference), np.diff(kept))


def _inside_periods(plan: Plan, logs: Floats) -> Floats | float:
    """In period data a total says what flows in the middle of its period only to second order: (h²/24)·(γ² + γ′) for each row,
    γ the growth of consumption, and several times that for a margin."""
    if not plan.conventions.periods or len(logs) < 3:
        return 0.0
    growth = np.diff(logs)
    bend = np.abs(np.diff(growth, append=growth[-1:])) + np.abs(np.diff(growth, prepend=growth[:1]))
    return np.where(np.isfinite(bend), (growth**2 + bend) / 8.0, np.inf)


def _best(budget: Budget, growth: Drift, planned: float, shift: float) -> BestPath | None:
    """The path of (1) that exhausts the budget; None where its present value is infinite or nothing is there to consume."""
    plan, account = budget.plan, budget.unit.account
    if account.income.reach is not Reach.FINITE:
        return None
    worth = worth_of_one(plan, growth - plan.drifts.net)
    resources = account.initial_wealth + account.income.whole - account.terminal_wealth
    if worth is None or not resources.value - resources.bound > 0.0:
        return None
    reciprocal = worth.reciprocal()
    start = resources.times(reciprocal.value, reciprocal.bound / reciprocal.value)
    c = plan.conventions
    assert c.rho is not None, "preferences are declared"
    asked = start.value * math.exp(min(shift, LARGEST_EXPONENT))
    per_person = (growth + plan.drifts.productivity).exponent(plan.mesh)
    first = 0.0 if per_person is None else float(_slope(per_person, plan, 0, -1.0))
    last = (growth + plan.drifts.productivity).beyond.value
    return BestPath(
        start=start,
        per_household=start.value * plan.scale.value,
        growth_first=first,
        growth_last=last,
        planned=planned,
        asked=asked,
        change=asked / planned - 1.0 if planned > 0.0 else None,
    )


def _slope(exponent: Exponent, plan: Plan, piece: int, z: float) -> float:
    """The rate at a point of a piece."""
    coefficients = exponent.coefficients[piece]
    powers = np.arange(1, len(coefficients))
    return float((coefficients[1:] * powers * z ** (powers - 1.0)).sum() * 2.0 / plan.mesh.lengths[piece])
