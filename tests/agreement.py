"""An assessment held against the exact account: which bounds are used up, and what is wrong, in words."""

from __future__ import annotations

from math import isfinite
from typing import Protocol

from flint import arb, ctx
from oracle import PRECISION, Exact

from budgetcheck import Assessment


class Claimed(Protocol):
    """A figure with a bound, as somebody claims it."""

    @property
    def value(self) -> float: ...

    @property
    def bound(self) -> float: ...


def share_used(claimed: Claimed, truth: arb) -> float:
    """True error over claimed bound, rounded up; zero where both are zero. At most 1 where the claim is right."""
    with ctx.workprec(PRECISION):
        error = abs(arb(claimed.value) - truth)
        # a claim of no error at all is right where the ball of the truth cannot tell the two apart
        if error == 0 or (claimed.bound == 0 and error.contains(0)):
            return 0.0
        return float((error / arb(claimed.bound)).upper()) if claimed.bound > 0 else float("inf")


def claims(found: Assessment, truth: Exact) -> list[tuple[str, Claimed, arb]]:
    """Every figure with a bound beside its exact value: slack and each present value, by both routes."""
    result: list[tuple[str, Claimed, arb]] = []
    with ctx.workprec(PRECISION):
        for route, account, scale in (
            ("unit", found.present_values, arb(1)),
            ("household", found.present_values_per_household, truth.scale),
        ):
            slack = found.slack.per_effective_unit if route == "unit" else found.slack.per_household
            pairs = [("wealth", account.initial_wealth, truth.wealth), ("terminal", account.terminal_wealth, truth.terminal)]
            sides = [(side, truth.lines[side.name]) for side in account.lines]
            sides += [(account.income, truth.income), (account.consumption, truth.consumption)]
            pairs += [(side.name, side.whole, value) for side, value in sides if value is not None and side.reach == "finite"]
            if slack is not None and truth.slack is not None:
                pairs.append(("slack", slack, truth.slack))
            result += [(f"{name} ({route})", claim, value * scale) for name, claim, value in pairs]
    return result


def misjudged(found: Assessment, truth: Exact) -> list[str]:
    """Columns whose present value is called finite, infinite or unknown when it is not.

    Unknown is right next to a tie of measured rates, and of what fades out beside a side without a finite value, where nothing
    depends on it.
    """
    wrong = []
    for line in found.present_values.lines:
        finite = truth.lines[line.name] is not None
        tied = truth.blur > 0.0 and abs(float(truth.decays[line.side].mid())) <= truth.blur
        beside = truth.slack is None and line.side in truth.fading
        right = tied or beside if line.reach == "unknown" else (line.reach == "finite") is finite
        if not right:
            wrong.append(f"{line.name} is called {line.reach}")
    return wrong


def violations(found: Assessment, truth: Exact) -> list[str]:
    """What is wrong with an assessment, in words; empty for a right one."""
    found_wrong = misjudged(found, truth)
    for name, claim, value in claims(found, truth):
        used = share_used(claim, value)
        if not isfinite(claim.bound):
            found_wrong.append(f"{name} is given as finite, without a finite bound")
        if not used <= 1.0:
            found_wrong.append(f"{name} = {claim.value!r} ± {claim.bound!r} is off by {used:.3g} bounds")
    if not abs(found.routes_differ.value) <= found.routes_differ.bound:
        found_wrong.append(f"the routes differ by {found.routes_differ}")
    return found_wrong


def relative_bound(found: Assessment, truth: Exact) -> float | None:
    """The bound on slack as a share of lifetime resources; None where either has no positive finite value."""
    slack = found.slack.per_effective_unit
    if slack is None or truth.slack is None or truth.income is None:
        return None
    resources = max(float(truth.wealth), 0.0) + float(truth.income)
    return slack.bound / resources if resources > 0.0 else None
