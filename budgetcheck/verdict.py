"""The verdict: PASS, FAIL or UNDECIDED from slack, what is unknown of it, and a tolerance; never guessed.

PASS when S − e ≥ −τ·scale, FAIL when S + e < −τ·scale, otherwise UNDECIDED. Where present values are infinite, the convergence
cases decide instead, each with a sentence of its own.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from .budget import Account, Reach
from .estimates import TailEstimate
from .figures import significant
from .plan import Plan


@dataclass(frozen=True, kw_only=True)
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


@dataclass(frozen=True, kw_only=True)
class Decision:
    """verdict: PASS, FAIL or UNDECIDED; reason and would_decide: sentences; error: e; threshold: τ·scale; finite: whether slack
    is a finite figure; warning: what makes an infinite case suspicious."""

    verdict: str
    reason: str
    would_decide: str | None
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
    threshold = plan.conventions.tolerance * scale
    income, consumption = account.income.reach, account.consumption.reach
    if income is Reach.FINITE and consumption is Reach.FINITE:
        return _finite(account, errors, tail, threshold, scale)
    if math.isinf(tail.error):
        reason = f"Beyond the last row present values are not finite as the table stands, but {tail.why}."
        return _decision("UNDECIDED", reason, _DECLARE_TAIL, math.inf, threshold, scale)
    if Reach.UNKNOWN in (income, consumption):
        reason = (
            "Beyond the last row r − g − n is within its own rounding of the growth, so that no present value can be stated."
        )
        decides = "A declared constant r (compared exactly), or a last row of r that differs from g + n."
        return _decision("UNDECIDED", reason, decides, math.inf, threshold, scale)
    return _infinite(plan, account, errors, threshold, scale)


_DECLARE_TAIL = 'A declared tail (for example tail = "balanced growth" under [horizon]), or rows further into the future.'


def _decision(
    verdict: str, reason: str, decides: str | None, error: float, threshold: float, scale: float, warning: str | None = None
) -> Decision:
    return Decision(
        verdict=verdict,
        reason=reason,
        would_decide=decides,
        error=error,
        threshold=threshold,
        scale=scale,
        finite=False,
        warning=warning,
    )


def _infinite(plan: Plan, account: Account, errors: Errors, threshold: float, scale: float) -> Decision:
    """At least one present value is infinite: the leading term of the net stream decides."""
    last = {role: sum(a.last for a in plan.rows.amounts if a.role == role) for role in ("income", "consumption")}

    def decided(verdict: str, reason: str, warning: str | None = None) -> Decision:
        return _decision(verdict, reason, None, 0.0, threshold, scale, warning)

    if account.consumption.reach is Reach.FINITE:
        if last["income"] > 0:
            reason = "Lifetime income is infinite while consumption is finite: nothing binds, and any such plan is affordable."
            return decided("PASS", reason, _UNITS_AT_FAULT)
        return decided("FAIL", "Income is negative for ever and its present value infinite: no wealth can make up for it.")
    if account.income.reach is Reach.FINITE:
        return decided("FAIL", "Lifetime consumption is infinite while income is finite: no initial wealth could pay for it.")
    by_role = dict(zip((a.role for a in plan.rows.amounts), plan.decays, strict=True))
    faster = (by_role["consumption"] - by_role["income"]).sign
    net = last["income"] - last["consumption"]
    if faster == 0 and net == 0:
        return _net_of_equal_tails(account, errors, threshold, scale)
    ahead = (faster or 0) > 0 if faster != 0 else net > 0
    how = "outgrows" if faster != 0 else "exceeds"
    if ahead and last["income"] > 0:
        reason = f"Both present values are infinite, and beyond the last row income {how} consumption for ever: nothing binds."
        return decided("PASS", reason, _UNITS_AT_FAULT)
    reason = f"Both present values are infinite, and beyond the last row consumption {how} income for ever."
    return decided("FAIL", reason)


def _net_of_equal_tails(account: Account, errors: Errors, threshold: float, scale: float) -> Decision:
    """Income and consumption are equal for ever after the last row: the rows decide."""
    slack, error = account.rows_slack.value, account.rows_slack.bound + errors.reconstruction + errors.tail
    beyond = "Both present values are infinite, but beyond the last row income equals consumption, so that the rows decide: "
    verdict = "PASS" if slack - error >= -threshold else "FAIL" if slack + error < -threshold else "UNDECIDED"
    reason = f"{beyond}{significant(abs(slack))} per unit of human capital is {'left' if slack >= 0 else 'missing'}."
    decides = None if verdict != "UNDECIDED" else _what_decides(errors)
    return Decision(
        verdict=verdict,
        reason=reason,
        would_decide=decides,
        error=error,
        threshold=threshold,
        scale=scale,
        finite=True,
    )


def _finite(account: Account, errors: Errors, tail: TailEstimate, threshold: float, scale: float) -> Decision:
    slack, e = account.slack.value, errors.in_verdict
    decides = None
    share = _share(slack, scale)
    if slack - e >= -threshold:
        verdict = "PASS"
        if abs(slack) <= threshold + e:
            reason = "The plan is affordable: it uses its lifetime resources exactly, within tolerance."
        else:
            reason = f"The plan is affordable: {share} of lifetime resources is left."
    elif slack + e < -threshold:
        verdict = "FAIL"
        reason = f"The plan is not affordable: it needs {share} more than its lifetime resources."
    else:
        verdict = "UNDECIDED"
        side = "leave" if slack >= 0 else "lack"
        unknown = _share(e, scale) if math.isfinite(e) else "an unknown amount"
        cause = _largest(errors)
        reason = f"The plan seems to {side} {share} of lifetime resources, but {cause} leaves {unknown} open."
        if cause == "the tail":
            reason = f"{reason[:-1]}: {tail.why}."
        decides = _what_decides(errors)
    return Decision(
        verdict=verdict,
        reason=reason,
        would_decide=decides,
        error=e,
        threshold=threshold,
        scale=scale,
        finite=True,
    )


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
