"""The audit of a ledger: every finding of every rule.

Severity goes by consequence: stop where the figure cannot be meant or cannot be used, warn where a likely slip would change the
verdict, note otherwise.
"""

from __future__ import annotations

from .assumptions import Assumptions
from .findings import Finding
from .ledger import Ledger
from .rules import amounts, heads, horizon, preferences, rates

CHECKS = (*amounts.CHECKS, *rates.CHECKS, *heads.CHECKS, *horizon.CHECKS, *preferences.CHECKS)


def audit(ledger: Ledger, assumptions: Assumptions) -> tuple[Finding, ...]:
    """Every finding of every rule."""
    return tuple(finding for check in CHECKS for finding in check(ledger, assumptions))
