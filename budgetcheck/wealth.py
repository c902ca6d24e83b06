"""The path of wealth that a plan implies: its lowest point, inside the rows' periods too, and whether debt occurs.

e^{−Λ(t)} k(t) = D(t) = k(0) + ∫_0^t e^{−Λ}(w − c) ds,        K(t)/H = A(0)L(0)/H · e^{R(t)} D(t)
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from .budget import Budget, Reach
from .exponents import Exponent
from .plan import LARGEST_EXPONENT, OutOfRange
from .quadrature import Floats
from .trace import Extreme, Trace, on_grid, trace_of


@dataclass(frozen=True, kw_only=True, eq=False)
class HouseholdWealth:
    """minimum: the lowest wealth; largest_debt: the same as a positive amount, None without debt."""

    minimum: Extreme
    largest_debt: Extreme | None


@dataclass(frozen=True, kw_only=True, eq=False)
class Breach:
    """since: the first date with a debt above the declared limit, beyond its error, None without one; room: the least distance
    from the limit, household money, negative beyond it."""

    since: float | None
    room: Extreme


@dataclass(frozen=True, kw_only=True, eq=False)
class WealthPath:
    """minimum: the lowest wealth per unit of human capital; per_household: in household money; first_negative: the first date
    with wealth below zero beyond its error; first_insolvent: the first date at which what is left to consume is worth more
    than all there is to pay for it, beyond its error; breach: against a declared borrowing limit, None without one;
    until: the date to which the path is followed, years since the start;
    discounted_nodes (m, 16): D at the nodes."""

    minimum: Extreme
    per_household: HouseholdWealth
    first_negative: float | None
    first_insolvent: float | None
    breach: Breach | None
    until: float
    discounted_nodes: Floats


def wealth_path(budget: Budget, reconstruction: float) -> WealthPath:
    """The path of wealth; reconstruction: the estimate of what interpolation between rows leaves open, in units of slack."""
    plan, unit = budget.plan, budget.unit
    initial = unit.account.initial_wealth
    trace = trace_of(budget, initial.value, plan.signs, start_error=initial.bound, open_=reconstruction)
    _check_range(trace, unit.discount, 1.0)
    _check_range(trace, budget.household.discount, plan.scale.value)
    own = replace(trace, exponent=unit.discount)
    household = replace(trace, exponent=budget.household.discount, factor=plan.scale.value).lowest()
    debt = household.value < -household.error
    return WealthPath(
        minimum=own.lowest(),
        per_household=HouseholdWealth(
            minimum=household,
            largest_debt=Extreme(t=household.t, value=-household.value, error=household.error) if debt else None,
        ),
        first_negative=own.first_below(),
        first_insolvent=_first_insolvent(budget, reconstruction),
        breach=_breach(budget, trace),
        until=float(plan.mesh.breaks[-1]),
        discounted_nodes=trace.at_nodes,
    )


def _breach(budget: Budget, trace: Trace) -> Breach | None:
    """Where K(t)/H falls below minus the borrowing limit, which is money of its own date in the basis of wealth."""
    plan = budget.plan
    limit = plan.borrowing
    if limit is None:
        return None
    exponent = (plan.requirement - plan.drifts.discounting).exponent(plan.mesh)
    allowed = trace.with_allowance(limit.value / plan.scale.value, exponent)
    _check_range(allowed, budget.household.discount, plan.scale.value)
    household = replace(allowed, exponent=budget.household.discount, factor=plan.scale.value)
    return Breach(since=allowed.first_below(), room=household.lowest())


def _first_insolvent(budget: Budget, reconstruction: float) -> float | None:
    """The date from which k(t) falls short of −(present value of wages still to come, less the terminal requirement).

    In discounted form the shortfall is S + ∫_t e^{−Λ}c < 0: what is left to consume no longer covers the missing slack.
    """
    account = budget.unit.account
    slack, consumption = account.slack, account.consumption
    if consumption.reach is not Reach.FINITE or account.income.reach is not Reach.FINITE or slack.value >= -slack.bound:
        return None
    start = slack.value + consumption.whole.value
    error = slack.bound + consumption.whole.bound
    signs = np.where(budget.plan.consumption, -1.0, 0.0)
    return trace_of(budget, start, signs, start_error=error, open_=reconstruction).first_below()


def _check_range(trace: Trace, exponent: Exponent | None, factor: float) -> None:
    """Refuse a path whose undiscounted amounts floating point cannot carry."""
    size = math.log(max(float(np.abs(trace.grid).max()), float(np.abs(trace.after).max()), 1.0)) + max(math.log(factor), 0.0)
    if exponent is None or size + exponent.largest <= LARGEST_EXPONENT:
        return
    # only now is it worth looking date by date: where discounted wealth is large, its exponent may be negative
    inside = on_grid(exponent.coefficients) + np.log(np.maximum(np.abs(trace.grid), 1.0))
    edges = np.maximum(np.maximum(np.abs(trace.after), np.abs(trace.before)), 1.0)
    at_breaks = np.maximum(exponent.before, exponent.after) + np.log(edges)
    largest = max(float(inside.max()), float(at_breaks.max())) + max(math.log(factor), 0.0)
    if largest > LARGEST_EXPONENT:
        raise OutOfRange(
            f"wealth along the plan reaches e^{largest:.4g}, beyond the supported e^{LARGEST_EXPONENT:g}; "
            "shorten the horizon, or check r, g and n (fractions a year)"
        )
