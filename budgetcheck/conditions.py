"""The conditions a lifetime plan must meet, each with its figures and a sentence.

With D(t) = e^{−Λ(t)}k(t), whose limit is slack plus the discounted terminal requirement:
solvency at every date, k(t) no less than minus what wages still to come can repay, which with c ≥ 0 follows from S ≥ 0;
no-Ponzi, lim D ≥ 0 beyond what is required; transversality, nothing of value left unused, lim D equal to it;
convergence, every present value finite (r > g + n + the stream's own growth per unit, beyond the last row).
Acemoglu (2009), eqs 8.9–8.17 (per head); common practice. A declared borrowing limit bounds k from below; where wealth is
reported, it must follow from the flows; where preferences are declared, consumption must follow the Euler equation, the utility
integral converge and nothing valued at marginal utility be left.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from .budget import Account, Reach
from .figures import significant
from .plan import Plan
from .verdict import Decision
from .wealth import WealthPath

if TYPE_CHECKING:
    from .flow import Flow
    from .preferences import Preferences


@dataclass(frozen=True, kw_only=True, eq=False)
class Condition:
    """holds: True, False, or None where the error forbids a statement; sentence: the same in words, with the figures.

    limit: of discounted wealth, per unit of human capital, infinite where it has none; rate_of_approach: at which it is
    approached, net_rate: r − g − n beyond the last row, both 1/year; since: the first date, in years since the start, at
    which solvency fails or the borrowing limit is exceeded; room: the least distance from that limit, household money;
    largest: the largest residual by row; gap: the sum of residuals; rate: at which the utility integral converges, 1/year. None
    where a figure does not apply.
    """

    holds: bool | None
    sentence: str
    limit: float | None = None
    rate_of_approach: float | None = None
    net_rate: float | None = None
    since: float | None = None
    room: float | None = None
    largest: float | None = None
    gap: float | None = None
    rate: float | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class Conditions:
    """Each is None where it does not apply: convergence and utility to a finite plan, borrowing without a declared limit, flow
    of wealth without a column of it, euler, utility and marginal_utility without preferences."""

    convergence: Condition | None
    no_ponzi: Condition
    transversality: Condition
    solvency: Condition
    borrowing: Condition | None = None
    flow_of_wealth: Condition | None = None
    euler: Condition | None = None
    utility: Condition | None = None
    marginal_utility: Condition | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class Evidence:
    """What conditions are judged from: the plan, its account per unit of human capital, the decision on its slack, its path of
    wealth, and what reported wealth and preferences say, None where there are none."""

    plan: Plan
    account: Account
    decision: Decision
    path: WealthPath
    flow: Flow | None
    preferences: Preferences | None


def conditions(e: Evidence) -> Conditions:
    """The conditions of a plan."""
    plan, account, decision = e.plan, e.account, e.decision
    transversality = _transversality(plan, account, decision)
    return Conditions(
        convergence=_convergence(plan, account) if plan.conventions.perpetual else None,
        no_ponzi=_no_ponzi(plan, account, decision),
        transversality=transversality,
        solvency=_solvency(plan, account, decision, e.path),
        borrowing=_borrowing(plan, e.path),
        flow_of_wealth=None if e.flow is None else _flow_of_wealth(plan, e.flow),
        euler=None if e.preferences is None else _euler(plan, e.preferences),
        utility=None if e.preferences is None else _utility(e.preferences),
        marginal_utility=None if e.preferences is None else _marginal_utility(e.preferences, transversality),
    )


def _convergence(plan: Plan, account: Account) -> Condition:
    net = plan.net_beyond.value
    reaches = {account.income.reach, account.consumption.reach}
    margin = f"beyond the last row r − g − n = {net:.4g} a year"
    if Reach.UNKNOWN in reaches:
        return Condition(
            holds=None,
            net_rate=net,
            sentence=f"Whether present values are finite cannot be told: {margin}, within its rounding of the growth there.",
        )
    if Reach.INFINITE in reaches:
        which = " and ".join(side.name for side in (account.income, account.consumption) if side.reach is Reach.INFINITE)
        return Condition(
            holds=False, net_rate=net, sentence=f"The present value of {which} is infinite: {margin}, not above its growth."
        )
    return Condition(holds=True, net_rate=net, sentence=f"Every present value is finite: {margin}, above the growth of each.")


def _no_ponzi(plan: Plan, account: Account, decision: Decision) -> Condition:
    holds = {"PASS": True, "FAIL": False}.get(decision.verdict)
    limit = account.slack.value + account.terminal_wealth.value if decision.finite else math.inf
    where = "in the limit" if plan.conventions.perpetual else "at the end of the plan"
    required = "" if plan.terminal.value == 0.0 else f", of which {significant(account.terminal_wealth.value)} is required"
    value = (
        "" if math.isinf(limit) else f" (discounted wealth {where}: {significant(limit)} per unit of human capital{required})"
    )
    sentence = {
        True: f"No debt is left unpaid {where}{value}.",
        False: f"The plan leaves a debt that is never repaid {where}{value}."
        if required == ""
        else f"The wealth required {where} is not reached{value}.",
        None: f"Whether a debt is left unpaid {where} cannot be told{value}.",
    }[holds]
    return Condition(holds=holds, limit=limit, sentence=sentence)


def _transversality(plan: Plan, account: Account, decision: Decision) -> Condition:
    if not decision.finite:
        sentence = "With present values that are not finite, no limit of wealth can be stated."
        return Condition(holds=None, limit=math.inf, sentence=sentence)
    slack, threshold = abs(account.slack.value), decision.threshold
    holds: bool | None = None
    if slack + decision.error <= threshold:
        holds = True
    elif slack - decision.error > threshold:
        holds = False
    rate = None
    speed = ""
    if plan.conventions.perpetual:
        tail = plan.streams.tail
        flowing = [] if tail is None else [decay.value for decay, flows in zip(plan.decays, tail.flows, strict=True) if flows]
        rate = min(flowing) if flowing and min(flowing) > 0.0 else None
        speed = "" if rate is None else f"; discounted wealth approaches its limit at {rate:.4g} a year"
    sentence = {
        True: f"Nothing of value is left unused (limit {significant(account.slack.value, 3)}, within tolerance{speed}).",
        False: f"Something is {'left unused' if account.slack.value > 0 else 'missing'} for good: "
        f"{significant(account.slack.value)} per unit of human capital{speed}.",
        None: f"Whether anything is left unused cannot be told yet (limit {significant(account.slack.value, 3)}{speed}).",
    }[holds]
    limit = account.slack.value + account.terminal_wealth.value
    return Condition(holds=holds, limit=limit, rate_of_approach=rate, sentence=sentence)


def _solvency(plan: Plan, account: Account, decision: Decision, path: WealthPath) -> Condition:
    """With consumption never negative it follows from the verdict's inequality; where that fails, the path dates it."""
    holds = {"PASS": True, "FAIL": False}.get(decision.verdict)
    if holds:
        return Condition(holds=True, sentence="At every date what is owed can be repaid out of income still to come.")
    if holds is None:
        return Condition(holds=None, sentence="Whether debts can always be repaid out of income still to come cannot be told.")
    if path.first_insolvent is None:
        known = decision.finite and all(side.reach is Reach.FINITE for side in (account.income, account.consumption))
        when = "only after the last row" if plan.conventions.perpetual and known else "sooner or later"
        return Condition(holds=False, sentence=f"{when.capitalize()} more is owed than income still to come can repay.")
    date = plan.rows.timeline.date(path.first_insolvent)
    sentence = f"From {date} on more is owed than income still to come can repay."
    return Condition(holds=False, since=path.first_insolvent, sentence=sentence)


def _borrowing(plan: Plan, path: WealthPath) -> Condition | None:
    """A declared limit on debt, at every date of the rows."""
    breach = path.breach
    if breach is None:
        return None
    room, date = breach.room, plan.rows.timeline.date
    if breach.since is not None:
        sentence = (
            f"From {date(breach.since)} on more is owed than the declared limit; "
            f"{significant(-room.value)} per household beyond it at {date(room.t)}."
        )
        return Condition(holds=False, since=breach.since, room=room.value, sentence=sentence)
    if room.value < room.error:
        sentence = f"Whether debt stays within the declared limit cannot be told at {date(room.t)}."
        return Condition(holds=None, room=room.value, sentence=sentence)
    sentence = f"Debt stays within the declared limit; {significant(room.value)} per household remain at {date(room.t)}."
    return Condition(holds=True, room=room.value, sentence=sentence)


def _flow_of_wealth(plan: Plan, flow: Flow) -> Condition:
    """Reported wealth follows from the flows, row by row."""
    largest, date = flow.largest[0], plan.rows.timeline.date
    when = date(float(plan.rows.timeline.times[largest.index]))
    figures = {"largest": abs(largest.value), "gap": flow.gap}
    size = (
        f"largest residual {significant(abs(largest.value), 3)} per unit of human capital, present value, in the row of {when}"
    )
    if not np.isfinite(flow.tolerances).all():
        return Condition(
            holds=None, sentence=f"Whether reported wealth follows from the flows cannot be told: {size}.", **figures
        )
    if flow.first is None:
        return Condition(holds=True, sentence=f"Reported wealth follows from the flows: {size}.", **figures)
    since = float(plan.rows.timeline.times[flow.first])
    gap = f"all together {significant(flow.gap, 3)} of slack"
    sentence = f"Reported wealth contradicts the flows from {date(since)} on: {size}; {gap}."
    return Condition(holds=False, since=since, sentence=sentence, **figures)


def _euler(plan: Plan, found: Preferences) -> Condition:
    """Consumption grows at (r − ρ)/θ, in integral form over each row."""
    known = np.isfinite(found.euler)
    if not known.any():
        return Condition(holds=None, sentence="Without two rows of consumption above zero there is nothing to compare.")
    sizes = np.where(known, np.abs(found.euler), -1.0)
    worst = int(np.argmax(sizes))
    largest, when = float(sizes[worst]), plan.rows.timeline.date(float(plan.rows.timeline.times[worst]))
    unknown = found.euler_error + plan.conventions.tolerance
    holds: bool | None = True
    if (sizes[known] > unknown[known]).any():
        holds = False
    elif not known.all():
        holds = None
    size = f"over a row, ln c misses its due growth by at most {significant(largest, 3)} (row of {when})"
    said = {
        True: "Consumption follows",
        False: "Consumption does not follow",
        None: "Where it is not zero, consumption follows",
    }
    sentence = f"{said[holds]} the Euler equation: {size}."
    return Condition(holds=holds, largest=largest, sentence=sentence)


def _utility(found: Preferences) -> Condition | None:
    """The utility integral of a perpetual plan converges where ρ − n − (1 − θ)g > 0."""
    if found.utility_rate is None:
        return None
    rate, sign = found.utility_rate.value, found.utility_rate.sign
    holds = None if sign is None else sign > 0
    said = {
        True: "Lifetime utility is finite",
        False: "Lifetime utility is not finite",
        None: "Whether lifetime utility is finite is not told",
    }
    return Condition(
        holds=holds, rate=rate, sentence=f"{said[holds]}: beyond the last row it is discounted at {rate:.4g} a year."
    )


def _marginal_utility(found: Preferences, transversality: Condition) -> Condition:
    """Wealth valued at marginal utility vanishes in the limit, or is all required at the end of a finite plan."""
    if found.utility_rate is None:
        sentence = {
            True: "Valued at marginal utility, nothing is left at the end.",
            False: "Valued at marginal utility, something is left or missing at the end.",
            None: "Whether anything of marginal utility is left at the end cannot be told.",
        }[transversality.holds]
        return Condition(holds=transversality.holds, sentence=sentence)
    assert found.marginal_rate is not None, "a perpetual plan has both rates"
    bounded = found.utility_rate.sign
    holds: bool | None = None
    if transversality.holds is True:
        holds = None if bounded is None else bounded > 0
    elif transversality.holds is False and bounded is not None:
        holds = found.marginal_rate.value < -found.marginal_margin and bounded > 0
    moves = f"what is left is valued at a rate of {found.marginal_rate.value:.4g} a year"
    sentence = {
        True: "Valued at marginal utility, wealth vanishes in the limit.",
        False: f"Valued at marginal utility, wealth does not vanish in the limit ({moves}).",
        None: "Whether wealth valued at marginal utility vanishes in the limit cannot be told.",
    }[holds]
    return Condition(holds=holds, rate=found.marginal_rate.value, sentence=sentence)
