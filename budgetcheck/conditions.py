"""The conditions a lifetime plan must meet, each with its figures and a sentence.

With D(t) = e^{−Λ(t)}k(t), whose limit is slack plus the discounted terminal requirement:
solvency at every date, k(t) no less than minus what wages still to come can repay, which with c ≥ 0 follows from S ≥ 0;
no-Ponzi, lim D ≥ 0 beyond what is required; transversality, nothing of value left unused, lim D equal to it;
convergence, every present value finite (r > g + n + the stream's own growth per unit, beyond the last row).
Acemoglu (2009), eqs 8.9–8.17 (per head); common practice.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from .budget import Account, Reach
from .figures import significant
from .plan import Plan
from .verdict import Decision
from .wealth import WealthPath


@dataclass(frozen=True, kw_only=True)
class Condition:
    """holds: True, False, or None where the error forbids a statement; sentence: the same in words, with the figures.

    limit: of discounted wealth, per unit of human capital, infinite where it has none; rate_of_approach: at which it is
    approached, net_rate: r − g − n beyond the last row, both 1/year; since: the first date, in years since the start, at
    which solvency fails. None where a figure does not apply.
    """

    holds: bool | None
    sentence: str
    limit: float | None = None
    rate_of_approach: float | None = None
    net_rate: float | None = None
    since: float | None = None


@dataclass(frozen=True, kw_only=True)
class Conditions:
    """convergence is None for a finite plan, to which it does not apply."""

    convergence: Condition | None
    no_ponzi: Condition
    transversality: Condition
    solvency: Condition


def conditions(plan: Plan, account: Account, decision: Decision, path: WealthPath) -> Conditions:
    """The conditions of a plan, from its account per unit of human capital, the decision on it and its path of wealth."""
    return Conditions(
        convergence=_convergence(plan, account) if plan.conventions.perpetual else None,
        no_ponzi=_no_ponzi(plan, account, decision),
        transversality=_transversality(plan, account, decision),
        solvency=_solvency(plan, decision, path),
    )


def _convergence(plan: Plan, account: Account) -> Condition:
    net = (plan.interest.beyond - plan.growth).value
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
        rate = min(decay.value for decay in plan.decays)
        speed = f"; discounted wealth approaches its limit at {rate:.4g} a year"
    sentence = {
        True: f"Nothing of value is left unused (limit {significant(account.slack.value, 3)}, within tolerance{speed}).",
        False: f"Something is {'left unused' if account.slack.value > 0 else 'missing'} for good: "
        f"{significant(account.slack.value)} per unit of human capital{speed}.",
        None: f"Whether anything is left unused cannot be told yet (limit {significant(account.slack.value, 3)}{speed}).",
    }[holds]
    limit = account.slack.value + account.terminal_wealth.value
    return Condition(holds=holds, limit=limit, rate_of_approach=rate, sentence=sentence)


def _solvency(plan: Plan, decision: Decision, path: WealthPath) -> Condition:
    """With consumption never negative it follows from the verdict's inequality; where that fails, the path dates it."""
    holds = {"PASS": True, "FAIL": False}.get(decision.verdict)
    if holds:
        return Condition(holds=True, sentence="At every date what is owed can be repaid out of income still to come.")
    if holds is None:
        return Condition(holds=None, sentence="Whether debts can always be repaid out of income still to come cannot be told.")
    if path.first_insolvent is None:
        when = "only after the last row" if plan.conventions.perpetual and decision.finite else "sooner or later"
        return Condition(holds=False, sentence=f"{when.capitalize()} more is owed than income still to come can repay.")
    date = plan.rows.timeline.date(path.first_insolvent)
    sentence = f"From {date} on more is owed than income still to come can repay."
    return Condition(holds=False, since=path.first_insolvent, sentence=sentence)
