"""The figures of an assessment that follow from a computed budget: slack in every unit, the tail, what was read."""

from __future__ import annotations

import numpy as np

from .assessment import Slack, Span, Tail
from .bounded import Bounded
from .budget import Account, Budget, PresentValue, Reach, worth_of_one
from .estimates import TailEstimate
from .exponents import NO_DRIFT
from .ledger import Ledger
from .plan import Plan
from .quadrature import WEIGHTS, at_nodes
from .verdict import Decision


def agreement(computed: Budget) -> Bounded:
    """Slack per household divided by A(0)L(0)/H, less slack per unit: zero within its bound, or the program is at fault."""
    scaled = computed.household.account.slack.times(1.0 / computed.plan.scale.value, 3.0 * 2.0**-53)
    difference = scaled - computed.unit.account.slack
    if not abs(difference.value) <= difference.bound:
        raise ArithmeticError(
            f"the two routes to slack differ by {difference.value:g}, more than the proved {difference.bound:g}"
        )
    return difference


def slack(computed: Budget, decision: Decision) -> Slack:
    """Slack in every unit, or none where it is not finite."""
    if not decision.finite:
        return Slack(
            per_effective_unit=None, per_household=None, share_of_resources=None, consumption_scale=None, level_per_year=None
        )
    unit, household = computed.unit.account, computed.household.account
    consumed = unit.consumption.whole.value
    available = unit.slack.value + consumed
    annuity = _annuity(computed)
    finite = unit.consumption.reach is Reach.FINITE
    return Slack(
        per_effective_unit=unit.slack,
        per_household=household.slack,
        share_of_resources=_ratio(unit.slack.value, decision.scale),
        consumption_scale=_ratio(available, consumed) if finite and available >= 0.0 else None,
        level_per_year=_ratio(household.slack.value, annuity),
    )


def _ratio(part: float, whole: float | None) -> float | None:
    """part/whole, or None where that is no figure."""
    if not whole or abs(part) > 1e290 * abs(whole):
        return None
    return part / whole


def _annuity(computed: Budget) -> float | None:
    """Present value of one unit of money a year, real, over the plan; None where a perpetual one has none."""
    plan, interest = computed.plan, computed.household.discount
    rate = plan.drifts.discounting.beyond
    if interest is not None and float(np.abs(interest.coefficients[:, 1:]).sum(axis=1).max()) < 1.0:
        # on intervals so short the rule's error is below rounding, and the exponent is there already
        value = float((np.exp(-at_nodes(interest.coefficients)) @ WEIGHTS) @ plan.mesh.lengths / 2.0)
        if not plan.conventions.perpetual:
            return value
        return value + float(np.exp(-interest.before[-1])) / rate.value if rate.sign == 1 else None
    worth = worth_of_one(plan, NO_DRIFT - plan.drifts.discounting)
    return None if worth is None else worth.value


def tail(plan: Plan, account: Account, estimate: TailEstimate) -> Tail:
    """How much of the present values comes from after the last row."""
    if not plan.conventions.perpetual:
        return Tail(kind="none", share_of_income=None, share_of_consumption=None, estimate=estimate)
    kind = next(str(entry.value) for entry in plan.conventions.entries if entry.key == "horizon.tail")

    def share(side: PresentValue) -> float | None:
        whole = side.whole.value
        return side.tail.value / whole if side.reach is Reach.FINITE and whole != 0.0 else None

    return Tail(
        kind=kind, share_of_income=share(account.income), share_of_consumption=share(account.consumption), estimate=estimate
    )


def span(ledger: Ledger, plan: Plan, source: str | None) -> Span:
    """What was read, in words."""
    c, timeline = plan.conventions, plan.rows.timeline
    date = timeline.date
    end = float(timeline.times[-1] if not c.periods else timeline.times[-1] + timeline.last_length)
    return Span(
        file=ledger.file,
        assumptions=source,
        rows=len(ledger.lines),
        first=date(0.0),
        last=date(float(timeline.times[-1])),
        end="perpetual" if c.perpetual else f"ends at {date(end)}",
        reading=_reading(plan),
    )


def _reading(plan: Plan) -> str:
    """How the amounts are read, in words."""
    if not plan.conventions.periods:
        return f"yearly rates, {plan.path} path between rows"
    timings = {amounts.reading.timing for amounts in plan.rows.amounts}
    if len(timings) > 1:
        return "totals of different timing"
    (timing,) = timings
    return "spread totals" if timing == "spread" else f"lump sums {timing}"
