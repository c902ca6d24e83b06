"""The lifetime budget: present values of every column, and slack by two routes that must agree.

In levels per household, with the cumulative interest R,

    S·A(0)L(0)/H = K(0)/H + ∫ e^{−R} W·L/H dt − ∫ e^{−R} C·L/H dt − e^{−R(T)} K_T/H                         (1)

and per unit of human capital, with the net discount exponent Λ = R − ∫(g + n),

    S = k(0) + ∫ e^{−Λ} w dt − ∫ e^{−Λ} c dt − e^{−Λ(T)} k_T                                               (2)

(D. Acemoglu, Introduction to Modern Economic Growth, 2009, eqs 8.9–8.11, per head; common practice.) The required wealth K_T
belongs to finite plans; a perpetual plan has tails instead.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

from .bounded import ZERO, Bounded, total
from .plan import LARGEST_EXPONENT, OutOfRange, Plan
from .quadrature import EXP_ERROR, MOST_HALVINGS, SAFETY, UNIT, Floats, Integral
from .rates import Rate
from .streams import Exponent, Mesh, Streams

NEAR_TIE = 10.0
"""A decay of fewer than this many times its own rounding is not told from a tie: its reciprocal would mean nothing."""


class Reach(StrEnum):
    """What is known of a present value over an unlimited horizon."""

    FINITE = "finite"
    INFINITE = "infinite"
    UNKNOWN = "unknown"


@dataclass(frozen=True, kw_only=True)
class PresentValue:
    """Of one column, or of all of one role: the part of the rows, the part of the tail (zero unless finite), and whether the
    whole is finite."""

    name: str
    role: str
    rows: Bounded
    tail: Bounded
    reach: Reach

    @property
    def whole(self) -> Bounded:
        """Rows and tail together; meaningful where the reach is finite."""
        return self.rows + self.tail

    @property
    def value(self) -> float | None:
        """The whole, or None where it is not finite."""
        return self.whole.value if self.reach is Reach.FINITE else None

    @property
    def bound(self) -> float | None:
        """Proved: |value − exact| ≤ bound; None where there is no value."""
        return self.whole.bound if self.reach is Reach.FINITE else None


@dataclass(frozen=True, kw_only=True)
class Account:
    """The lifetime account in one unit: initial wealth, present values by column and by role, the discounted terminal
    requirement (terminal_wealth), and slack, with all tails that are finite or, rows_slack, without tails."""

    initial_wealth: Bounded
    lines: tuple[PresentValue, ...]
    income: PresentValue
    consumption: PresentValue
    terminal_wealth: Bounded
    slack: Bounded
    rows_slack: Bounded


@dataclass(frozen=True, kw_only=True, eq=False)
class Route:
    """One way from a plan to its account: the discounted streams, their integrals, and the exponent that discounts."""

    streams: Streams
    discount: Exponent | None
    integral: Integral
    account: Account


@dataclass(frozen=True, kw_only=True, eq=False)
class Budget:
    """A plan on a mesh fine enough for both routes, with both; equation (1) in `household`, equation (2) in `unit`."""

    plan: Plan
    unit: Route
    household: Route


def budget(plan: Plan) -> Budget:
    """Both routes of a plan. Raises OutOfRange where an exponent is beyond the supported range."""
    for _ in range(MOST_HALVINGS):
        unit, household = per_unit(plan), per_household(plan)
        coarse = unit.integral.coarse | household.integral.coarse
        if not coarse.any():
            break
        plan = plan.split(coarse)
    return Budget(plan=plan, unit=unit, household=household)


def slack_only(plan: Plan) -> Account:
    """The account of equation (2) alone, for estimates of error."""
    for _ in range(MOST_HALVINGS):
        unit = per_unit(plan)
        if not unit.integral.coarse.any():
            break
        plan = plan.split(unit.integral.coarse)
    return unit.account


def per_household(plan: Plan) -> Route:
    """Equation (1): household money discounted with e^{−R}."""
    interest = discount(plan, Rate())
    streams = plan.streams.restated(interest, sign=-1)
    return _route(plan, streams, interest, plan.wealth, _required(plan, interest, ()))


def per_unit(plan: Plan) -> Route:
    """Equation (2): streams restated per unit of human capital, then discounted with e^{−Λ}."""
    growth, net = plan.growth_exponent, discount(plan, plan.growth)
    factor = plan.scale.reciprocal()
    relative = factor.bound / factor.value
    streams = plan.streams.restated(growth, sign=-1, factor=factor).restated(net, sign=-1)
    required = _required(plan, net, (growth,)).times(factor.value, relative)
    return _route(plan, streams, net, plan.wealth.times(factor.value, relative), required)


def discount(plan: Plan, less: Rate) -> Exponent | None:
    """∫(r − less): the exponent that discounts; for declared rates the difference is exact, and None where it is zero."""
    if plan.rows.rates is None:
        return Exponent.constant(plan.interest.beyond - less, plan.mesh)
    path = plan.interest.less(less) if less.sign != 0 else plan.interest
    return Exponent.of(path, plan.mesh.lengths)


def _required(plan: Plan, net: Exponent | None, less: tuple[Exponent | None, ...]) -> Bounded:
    """The terminal requirement in household money, discounted; exponents are added before anything can overflow."""
    if plan.terminal.value == 0.0:
        return ZERO
    grown = Exponent.constant(plan.terminal_growth, plan.mesh)
    signed = [(1.0, grown), (-1.0, net), *((-1.0, other) for other in less)]
    present = [(sign, exponent) for sign, exponent in signed if exponent is not None]
    exponent = sum(sign * float(e.at[-1]) for sign, e in present)
    error = sum(float(e.at_error[-1]) + 2.0 * UNIT * abs(float(e.at[-1])) for _, e in present)
    if abs(exponent) > LARGEST_EXPONENT:
        raise OutOfRange(_beyond(abs(exponent)))
    return plan.terminal.times(math.exp(exponent), 1.01 * error + EXP_ERROR)


def _beyond(size: float) -> str:
    return (
        f"the discount exponent and the logarithm of the amounts reach {min(size, 1e15):.4g}, beyond the supported "
        f"{LARGEST_EXPONENT:g}; shorten the horizon, or check r, g and n (fractions a year), the unit of time and of money"
    )


def _route(plan: Plan, streams: Streams, discount: Exponent | None, wealth: Bounded, terminal: Bounded) -> Route:
    size = max(streams.log_size(plan.mesh.lengths), 0.0 if discount is None else discount.largest)
    if not size <= LARGEST_EXPONENT:
        raise OutOfRange(_beyond(size))
    integral = streams.integral(plan.mesh.lengths)
    account = _account(plan, streams, integral, wealth, terminal)
    return Route(streams=streams, discount=discount, integral=integral, account=account)


def _account(plan: Plan, streams: Streams, integral: Integral, wealth: Bounded, terminal: Bounded) -> Account:
    lumps = None if streams.lumps is None else streams.lumps.values()
    tails = tail_values(streams, plan, integral, lumps)
    lines = []
    for k, amounts in enumerate(plan.rows.amounts):
        rows = total(integral.value[k], integral.bound[k])
        if lumps is not None:
            rows = rows + total(lumps[0][k], lumps[1][k])
        tail, reach = tails[k]
        lines.append(PresentValue(name=amounts.name, role=amounts.role, rows=rows, tail=tail, reach=reach))
    income, consumption = _sum("income", lines), _sum("consumption", lines)
    rows_slack = wealth + income.rows - consumption.rows - terminal
    return Account(
        initial_wealth=wealth,
        lines=tuple(lines),
        income=income,
        consumption=consumption,
        terminal_wealth=terminal,
        slack=rows_slack + income.tail - consumption.tail,
        rows_slack=rows_slack,
    )


def _sum(role: str, lines: list[PresentValue]) -> PresentValue:
    rows = tail = ZERO
    reaches = set()
    for line in lines:
        if line.role == role:
            rows, tail = rows + line.rows, tail + line.tail
            reaches.add(line.reach)
    reach = next((r for r in (Reach.INFINITE, Reach.UNKNOWN) if r in reaches), Reach.FINITE)
    return PresentValue(name=role, role=role, rows=rows, tail=tail, reach=reach)


def tail_values(
    streams: Streams, plan: Plan, integral: Integral, lumps: tuple[Floats, Floats] | None
) -> list[tuple[Bounded, Reach]]:
    """Present value of what follows the last row, for each stream.

    With the decay d of a discounted tail, a level a is worth a/d, and a last period of length h and present value b, repeated,
    is worth Σ_{j≥1} e^{−djh}·b = b/(e^{dh} − 1).
    """
    tail = streams.tail
    if tail is None:
        return [(ZERO, Reach.FINITE)] * len(plan.decays)
    levels, errors = tail.values()
    result = []
    for k, decay in enumerate(plan.decays):
        if not tail.flows[k]:
            result.append((ZERO, Reach.FINITE))
        elif decay.sign is None or 0.0 < decay.value < NEAR_TIE * decay.error:
            result.append((ZERO, Reach.UNKNOWN))
        elif decay.sign <= 0:
            result.append((ZERO, Reach.INFINITE))
        elif tail.period is None:
            level = Bounded(float(levels[k]), float(errors[k]))
            result.append((_perpetuity(level, decay), Reach.FINITE))
        else:
            base = _last_period(plan.mesh, integral, lumps, streams, k)
            result.append((_repetition(base, decay, tail.period), Reach.FINITE))
    return result


def _last_period(mesh: Mesh, integral: Integral, lumps: tuple[Floats, Floats] | None, streams: Streams, k: int) -> Bounded:
    """The present value of stream k over the last row's period."""
    last = mesh.interval == mesh.interval[-1]
    base = total(integral.value[k, last], integral.bound[k, last])
    if lumps is None or streams.lumps is None:
        return base
    at = streams.lumps.at[-1]
    return base + Bounded(float(lumps[0][k, at]), float(lumps[1][k, at]))


def _perpetuity(level: Bounded, decay: Rate) -> Bounded:
    """level/decay, decay > 0; a relative error x ≤ 1/10 of the divisor is one of at most x/(1 − x) < 2x of the quotient."""
    relative = decay.error / decay.value
    return level.times(1.0 / decay.value, 2.0 * relative + 2.0 * UNIT)


def _repetition(base: Bounded, decay: Rate, period: float) -> Bounded:
    """base/(e^{decay·period} − 1); the condition number of 1/expm1(x) is x·e^x/(e^x − 1) ≤ 1 + x."""
    x = decay.value * period
    if x > LARGEST_EXPONENT:
        return Bounded(0.0, (abs(base.value) + base.bound) * math.exp(-LARGEST_EXPONENT))
    relative = decay.error / decay.value
    return base.times(1.0 / math.expm1(x), 2.0 * (relative + 4.0 * UNIT) * (1.0 + x) + EXP_ERROR * SAFETY)
