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

import numpy as np

from .bounded import ZERO, Bounded, total
from .exponents import Cut, Drift, Exponent, Mesh
from .plan import LARGEST_EXPONENT, OutOfRange, Plan
from .quadrature import EXP_ERROR, LARGEST_EXPONENT_ERROR, MOST_HALVINGS, SAFETY, UNIT, Floats, Integral
from .rates import Rate
from .streams import Streams

NEAR_TIE = 10.0
"""A decay of fewer than this many times its own rounding is not told from a tie: its reciprocal would mean nothing."""


class Reach(StrEnum):
    """What is known of a present value over an unlimited horizon."""

    FINITE = "finite"
    INFINITE = "infinite"
    UNKNOWN = "unknown"


@dataclass(frozen=True, kw_only=True, eq=False)
class PresentValue:
    """Of one column, or of all of one role: the part of the rows, the part of the tail (zero unless finite), and whether the
    whole is finite."""

    name: str
    role: str
    rows: Bounded
    tail: Bounded
    reach: Reach

    @property
    def side(self) -> str:
        """The side of the account it belongs to."""
        return "consumption" if self.role == "consumption" else "income"

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


@dataclass(frozen=True, kw_only=True, eq=False)
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
            return Budget(plan=plan, unit=unit, household=household)
        plan = plan.split(coarse)
    raise OutOfRange(_UNRESOLVED)


def slack_only(plan: Plan) -> Account:
    """The account of equation (2) alone, for estimates of error."""
    for _ in range(MOST_HALVINGS):
        unit = per_unit(plan)
        if not unit.integral.coarse.any():
            return unit.account
        plan = plan.split(unit.integral.coarse)
    raise OutOfRange(_UNRESOLVED)


def per_household(plan: Plan) -> Route:
    """Equation (1): household money discounted with e^{−R}."""
    interest = plan.discount_exponent
    return _route(plan, plan.streams.restated(interest, sign=-1), interest, plan.wealth, _required(plan, (interest,)))


def per_unit(plan: Plan) -> Route:
    """Equation (2): streams restated per unit of human capital, then discounted with e^{−Λ}."""
    growth, net = plan.growth_exponent, plan.net_exponent
    factor = plan.scale.reciprocal()
    relative = factor.bound / factor.value
    own = plan.streams.times([factor] * len(plan.items)).restated(growth, sign=-1)
    required = _required(plan, (net, growth)).times(factor.value, relative)
    return _route(plan, own.restated(net, sign=-1), net, plan.wealth.times(factor.value, relative), required)


def _required(plan: Plan, less: tuple[Exponent | None, ...]) -> Bounded:
    """The terminal requirement in household money, discounted; exponents are added before anything can overflow."""
    if plan.terminal.value == 0.0 or plan.conventions.perpetual:
        return ZERO
    signed = [(1.0, plan.requirement.exponent(plan.mesh)), *((-1.0, other) for other in less)]
    present = [(sign, exponent) for sign, exponent in signed if exponent is not None]
    exponent = sum(sign * float(e.before[-1]) for sign, e in present)
    error = sum(float(e.at_error[-1]) + 2.0 * UNIT * abs(float(e.before[-1])) for _, e in present)
    if abs(exponent) > LARGEST_EXPONENT:
        raise OutOfRange(_beyond(abs(exponent)))
    if error > LARGEST_EXPONENT_ERROR:
        raise OutOfRange(_UNRESOLVED)
    return plan.terminal.times(math.exp(exponent), 1.06 * error + EXP_ERROR)


def _beyond(size: float) -> str:
    return (
        f"the discount exponent and the logarithm of the amounts reach {min(size, 1e15):.4g}, beyond the supported "
        f"{LARGEST_EXPONENT:g}; shorten the horizon, or check r, g and n (fractions a year), the unit of time and of money"
    )


_UNRESOLVED = (
    "rates are so extreme, or rows so uneven, that floating point does not resolve the discount exponent; check r, g and n "
    "(fractions a year) and the unit of time"
)


def _route(plan: Plan, streams: Streams, discount: Exponent | None, wealth: Bounded, terminal: Bounded) -> Route:
    size = max(streams.log_size(plan.mesh.lengths), 0.0 if discount is None else discount.largest)
    if not size <= LARGEST_EXPONENT:
        raise OutOfRange(_beyond(size))
    if streams.largest_exponent_error > LARGEST_EXPONENT_ERROR:
        raise OutOfRange(_UNRESOLVED)
    integral = streams.integral(plan.mesh.lengths)
    account = _account(plan, streams, integral, wealth, terminal)
    return Route(streams=streams, discount=discount, integral=integral, account=account)


def _account(plan: Plan, streams: Streams, integral: Integral, wealth: Bounded, terminal: Bounded) -> Account:
    lumps = None if streams.lumps is None else streams.lumps.values()
    tails = tail_values(streams, plan, integral, lumps)
    # pieces of an extended tail follow those of the rows
    end = int(np.searchsorted(plan.mesh.interval, plan.row_intervals))
    extended = end < len(plan.mesh.interval)
    lines = []
    for k, item in enumerate(plan.items):
        rows = total(integral.value[k, :end], integral.bound[k, :end])
        tail, reach = tails[k]
        if lumps is not None:
            rows = rows + _paid(streams, lumps, k, end, rows=True)
        if extended:
            tail = tail + total(integral.value[k, end:], integral.bound[k, end:])
            if lumps is not None:
                tail = tail + _paid(streams, lumps, k, end, rows=False)
        lines.append(PresentValue(name=item.name, role=item.role, rows=rows, tail=tail, reach=reach))
    income, consumption = (_sum(side, lines, _cancels(plan, side)) for side in ("income", "consumption"))
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


def _paid(streams: Streams, lumps: tuple[Floats, Floats], k: int, end: int, *, rows: bool) -> Bounded:
    """The lump sums of stream k in the rows, or after them; at the end of the rows itself what belongs before it is theirs."""
    assert streams.lumps is not None, "there are lump sums"
    split = end + (0 if streams.lumps.after[k, 0] and end < lumps[0].shape[1] - 1 else 1)
    kept = slice(None, split) if rows else slice(split, None)
    return total(lumps[0][k, kept], lumps[1][k, kept])


def _cancels(plan: Plan, side: str) -> bool:
    """Whether what flows for ever on one side of the account is nothing in sum, exactly: wages and the same amount of
    deductions."""
    items = [item for item in plan.items if item.side == side and item.last != 0]
    if len(items) < 2 or plan.extended or len({item.meaning for item in items}) > 1:
        return False
    return sum(-item.last if item.role == "deduction" else item.last for item in items) == 0


def _sum(side: str, lines: list[PresentValue], cancels: bool) -> PresentValue:
    """All of one side; deductions are taken off income. Tails that cancel add up to nothing, whatever each of them is."""
    rows = tail = ZERO
    reaches = set()
    for line in lines:
        if line.side == side:
            rows = rows - line.rows if line.role == "deduction" else rows + line.rows
            tail = tail - line.tail if line.role == "deduction" else tail + line.tail
            reaches.add(line.reach)
    reach = next((r for r in (Reach.INFINITE, Reach.UNKNOWN) if r in reaches), Reach.FINITE)
    if cancels and reach is not Reach.FINITE:
        tail, reach = ZERO, Reach.FINITE
    return PresentValue(name=side, role=side, rows=rows, tail=tail, reach=reach)


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
    """The present value of stream k over the last period."""
    last = mesh.interval == mesh.interval[-1]
    base = total(integral.value[k, last], integral.bound[k, last])
    if lumps is None or streams.lumps is None:
        return base
    at = int(streams.lumps.last[k])
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


def worth_of_one(plan: Plan, drift: Drift) -> Bounded | None:
    """∫ exp(∫ drift) dt over the plan, tail included: what a flow of 1 a year that grows and is discounted so is worth; None
    where that is infinite or beyond floating point. drift: of the plan's mesh."""
    mesh = plan.mesh
    for _ in range(MOST_HALVINGS):
        exponent = drift.exponent(mesh)
        none = np.zeros((1, len(mesh.lengths)))
        stream = Streams(p=np.ones((1, len(mesh.lengths), 1)), q=none[:, :, None], p_error=none, q_error=none).restated(
            exponent
        )
        if stream.log_size(mesh.lengths) > LARGEST_EXPONENT or stream.largest_exponent_error > LARGEST_EXPONENT_ERROR:
            return None
        integral = stream.integral(mesh.lengths)
        if not integral.coarse.any():
            break
        cut = Cut.halves(integral.coarse)
        mesh = mesh.split(integral.coarse)
        drift = Drift(constant=drift.constant, parts=tuple((sign, part.split(cut)) for sign, part in drift.parts))
    worth = total(integral.value[0], integral.bound[0])
    if not plan.conventions.perpetual:
        return worth
    decay = Rate() - drift.beyond
    if decay.sign != 1:
        return None
    level, error = (1.0, 0.0) if exponent is None else (math.exp(exponent.before[-1]), float(exponent.at_error[-1]))
    return worth + _perpetuity(Bounded(level, level * (1.06 * error + EXP_ERROR)), decay)
