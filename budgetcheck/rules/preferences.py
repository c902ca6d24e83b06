"""Preferences beside the market interest rate."""

from __future__ import annotations

from collections.abc import Iterator

from ..assumptions import Assumptions
from ..findings import Finding, note
from ..ledger import Ledger
from .check import Check

_FRACTION = "If a percentage was meant, write a fraction: 0.05 for 5 %."


def _preferences(_: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """The subjective discount rate is no interest rate, and conditions on preferences take both of their figures."""
    stated = [assumptions.stated(key) for key in ("preferences.rho", "preferences.theta")]
    if stated[0] is not None and stated[1] is not None:
        return
    for entry in stated:
        if entry is not None:
            other = "theta" if entry.key.endswith("rho") else "rho"
            message = (
                f"{entry.key} does not enter the verdict: the plan is discounted with the market interest rate; conditions on "
                f"preferences need preferences.{other} too."
            )
            yield note("preferences", message, file=assumptions.file, row=entry.row, column=entry.key)


CHECKS: tuple[Check, ...] = (_preferences,)
