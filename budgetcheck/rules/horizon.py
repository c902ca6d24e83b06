"""Where the plan ends, and whether that is meant."""

from __future__ import annotations

from collections.abc import Iterator

from ..assumptions import Assumptions
from ..findings import Finding, stop, warn
from ..ledger import Ledger
from ..text import quoted
from .check import Check

_FRACTION = "If a percentage was meant, write a fraction: 0.05 for 5 %."


def _horizon(_: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A finite table is never silently taken for a whole life."""
    keys = ("horizon.kind", "horizon.terminal_wealth")
    perpetual = assumptions.word("horizon.kind") == "perpetual"
    missing = [key for key in keys if assumptions.stated(key) is None]
    required = assumptions.stated("horizon.terminal_wealth")
    if perpetual and required is not None:
        message = "a perpetual plan has no end at which terminal_wealth could be required; remove the key."
        yield stop("assumption", message, file=assumptions.file, row=required.row, column="terminal_wealth")
    elif missing and not perpetual:
        message = (
            "the plan is taken to end with its table, with nothing required at the end: "
            f"{' and '.join(quoted(key) for key in missing)} not declared. Is the table the whole life?"
        )
        yield warn("horizon-cut", message, file=assumptions.file)


CHECKS: tuple[Check, ...] = (_horizon,)
