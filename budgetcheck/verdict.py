"""The verdict: PASS, FAIL or UNDECIDED from slack, what is unknown of it, and a tolerance; never guessed.

PASS when S − e ≥ −τ·scale, FAIL when S + e < −τ·scale, otherwise UNDECIDED. Where present values are infinite, the convergence
cases decide instead, each with a sentence of its own.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

from .budget import Account, Reach
from .estimates import TailEstimate
from .figures import significant
from .plan import Plan
from .wealth import WealthPath


@dataclass(frozen=True, kw_only=True, eq=False)
class Errors:
    """The four kinds of error, kept apart, per unit of human capital; the first three make `in_verdict`.

    numerical is proved; reconstruction and tail are estimates; input_rounding is shown only, None for figures never printed.
    """

    numerical: float
    reconstruction: float
    tail: float
    input_rounding: float | None

    @property
    def in_verdict(self) -> float:
        """e of the verdict's rule."""
        return self.numerical + self.reconstruction + self.tail


@dataclass(frozen=True, kw_only=True, eq=False)
class Decision:
    """verdict: PASS, FAIL or UNDECIDED; reason and would_decide: sentences; slack: S, of the rows alone where tails are
    infinite; error: e; threshold: τ·scale; finite: whether slack is a finite figure; warning: what makes an infinite case
    suspicious."""

    verdict: str
    reason: str
    would_decide: str | None
    slack: float
    error: float
    threshold: float
    scale: float
    finite: bool
    warning: str | None = None


_UNITS_AT_FAULT = (
    "Income without limit is usually a fault of units: check that r, g and n are fractions a year, in real terms, and that "
    "growth is not counted twice."
)


def scale_of(account: Account) -> float:
    """What slack is measured against: lifetime resources, or where these are zero or infinite lifetime consumption and
    requirement, or where that is infinite too the rows' part."""
    wealth = max(account.initial_wealth.value, 0.0)
    resources = wealth + account.income.whole.value
    if account.income.reach is Reach.FINITE and resources > 0.0:
        return resources
    uses = account.consumption.whole.value + max(account.terminal_wealth.value, 0.0)
    if account.consumption.reach is Reach.FINITE and uses > 0.0:
        return uses
    return max(wealth + account.income.rows.value, account.consumption.rows.value, 0.0)


def decide(plan: Plan, account: Account, errors: Errors, tail: TailEstimate) -> Decision:
    """The verdict on the account per unit of human capital."""
    scale = scale_of(account)
    case = _Case(plan, account, errors, tail, plan.conventions.tolerance * scale, scale)
    if not case.infinite("income") and not case.infinite("consumption"):
        return case.finite()
    if math.isinf(tail.error):
        reason = f"Beyond the last row present values are not finite as the table stands, but {tail.why}."
        return case.undecided(reason, _DECLARE_TAIL)
    if Reach.UNKNOWN in (account.income.reach, account.consumption.reach):
        reason = "Beyond the last row r − g − n is not told from the growth there, so that no present value can be stated."
        return case.undecided(reason, "A declared constant r (compared exactly), or a last row of r that differs from g + n.")
    return case.without_limit()


def breached(decision: Decision, plan: Plan, path: WealthPath) -> Decision:
    """FAIL where wealth provably falls below a declared borrowing limit, whatever slack there is."""
    breach = path.breach
    if breach is None or breach.since is None:
        return decision
    date = plan.rows.timeline.date
    reason = (
        f"The plan exceeds its declared borrowing limit from {date(breach.since)} on, "
        f"by up to {significant(-breach.room.value)} per household at {date(breach.room.t)}."
    )
    if decision.verdict == "FAIL":
        reason = f"{decision.reason} {reason.replace('The plan', 'It also', 1)}"
    return replace(decision, verdict="FAIL", reason=reason, would_decide=None)


_DECLARE_TAIL = 'A declared tail (for example tail = "balanced growth" under [horizon]), or rows further into the future.'


@dataclass(frozen=True, eq=False)
class _Case:
    """What a verdict is made from."""

    plan: Plan
    account: Account
    errors: Errors
    tail: TailEstimate
    threshold: float
    scale: float

    def last(self, role: str) -> Fraction:
        """What flows for ever after on one side, up to a common factor: the sum of its last figures, exactly, or what a
        converging tail leads to."""
        if self.plan.long_run is not None:
            return self.plan.long_run[role != "income"]
        taken = [-item.last if item.role == "deduction" else item.last for item in self.plan.items if item.side == role]
        return sum(taken, Fraction(0))

    def comparable(self) -> bool:
        """Whether the last figures of all columns have the same meaning, so that their sums can be compared."""
        items = [item for item in self.plan.items if item.last != 0]
        return self.plan.long_run is not None or len({item.meaning for item in items}) <= 1

    def infinite(self, role: str) -> bool:
        """Whether a role's present value is, or may be, infinite; flows that cancel for ever do not count."""
        side = self.account.income if role == "income" else self.account.consumption
        if side.reach is Reach.UNKNOWN and self.plan.long_run is not None:
            return True
        return side.reach is not Reach.FINITE and (self.last(role) != 0 or not self.comparable())

    def _decision(self, verdict: str, reason: str, **figures: Any) -> Decision:
        given = {"would_decide": None, "slack": 0.0, "error": 0.0, "finite": False} | figures
        return Decision(verdict=verdict, reason=reason, threshold=self.threshold, scale=self.scale, **given)

    def undecided(self, reason: str, decides: str) -> Decision:
        """Nothing can be said of slack."""
        return self._decision("UNDECIDED", reason, would_decide=decides, error=math.inf)

    def without_limit(self) -> Decision:
        """At least one present value is infinite: the leading term of the net stream decides."""
        income, consumption = self.last("income"), self.last("consumption")
        if not self.infinite("consumption"):
            if income > 0:
                reason = "Lifetime income is infinite while consumption is finite: nothing binds, any such plan is affordable."
                return self._decision("PASS", reason, warning=_UNITS_AT_FAULT)
            reason = "Income is negative for ever and its present value infinite: no wealth can make up for it."
            return self._decision("FAIL", reason)
        if not self.infinite("income"):
            reason = "Lifetime consumption is infinite while income is finite: no initial wealth could pay for it."
            return self._decision("FAIL", reason)
        c = self.plan.conventions
        faster = (c.income_growth - c.consumption_growth).sign
        both = "Both present values are infinite, and beyond the last row"
        if faster == 0 and not self.comparable():
            reason = f"{both} columns of different timing, basis or prices are not compared."
            return self.undecided(reason, "One timing, basis and kind of prices for all columns.")
        if faster == 0 and income == consumption:
            return self._equal_for_ever()
        if faster is None:
            return self.undecided(f"{both} it cannot be told which grows faster.", "Growth rates under one compounding.")
        # what grows faster decides by its own sign, equal growth by the difference
        ahead = income > 0 if faster > 0 else False if faster < 0 else income > consumption
        how = "exceeds" if faster == 0 else "outgrows"
        if ahead:
            return self._decision("PASS", f"{both} income {how} consumption for ever: nothing binds.", warning=_UNITS_AT_FAULT)
        return self._decision("FAIL", f"{both} consumption {how} income for ever.")

    def _equal_for_ever(self) -> Decision:
        """Income and consumption are equal after the last row: the rows decide."""
        slack = self.account.rows_slack
        error = slack.bound + self.errors.reconstruction + self.errors.tail
        amount = f"{significant(abs(slack.value))} per unit of human capital is {'left' if slack.value >= 0 else 'missing'}"
        reason = (
            "Both present values are infinite, but beyond the last row income equals consumption, so that the rows decide: "
            f"{amount}."
        )
        return self._by_rule(slack.value, error, passes=reason, fails=reason, open_reason=reason)

    def finite(self) -> Decision:
        """The rule of the verdict on a finite slack."""
        slack, error = self.account.slack.value, self.errors.in_verdict
        share, cause = _share(slack, self.scale), _largest(self.errors)
        passes = f"The plan is affordable: {share} of lifetime resources is left."
        if abs(slack) <= self.threshold + error:
            passes = "The plan is affordable: it uses its lifetime resources exactly, within tolerance."
        unknown = _share(error, self.scale) if math.isfinite(error) else "an unknown amount"
        why = f": {self.tail.why}" if cause == "the tail" else ""
        side = "leave" if slack >= 0 else "lack"
        return self._by_rule(
            slack,
            error,
            passes=passes,
            fails=f"The plan is not affordable: it needs {share} more than its lifetime resources.",
            open_reason=f"The plan seems to {side} {share} of lifetime resources, but {cause} leaves {unknown} open{why}.",
        )

    def _by_rule(self, slack: float, error: float, *, passes: str, fails: str, open_reason: str) -> Decision:
        figures = {"slack": slack, "error": error, "finite": True}
        if slack - error >= -self.threshold:
            return self._decision("PASS", passes, **figures)
        if slack + error < -self.threshold:
            return self._decision("FAIL", fails, **figures)
        return self._decision("UNDECIDED", open_reason, would_decide=_what_decides(self.errors), **figures)


def _share(amount: float, scale: float) -> str:
    if scale <= 0.0:
        return f"{significant(abs(amount), 4)} per unit of human capital"
    return f"{100.0 * abs(amount) / scale:.3g} %"


def _largest(errors: Errors) -> str:
    """The part of e that matters most."""
    parts = {
        "the tail": errors.tail,
        "the path between rows": errors.reconstruction,
        "rounding of the calculation": errors.numerical,
    }
    return max(parts, key=lambda part: parts[part])


def _what_decides(errors: Errors) -> str:
    cause = _largest(errors)
    if cause == "the tail":
        return _DECLARE_TAIL
    if cause == "the path between rows":
        few = " (at least 4)" if math.isinf(errors.reconstruction) else ""
        return f'Finer rows{few}, or a declared path that the plan means, such as path = "linear" under [amounts].'
    return (
        f"Present values known to better than {errors.numerical:.2g}: a declared constant r (compared exactly with g + n), "
        f"r further from g + n beyond the last row, or a shorter horizon."
    )
