"""Amounts that cannot be meant, or are probably not."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ..assumptions import Assumptions
from ..findings import Finding, warn
from ..keys import FLOW_ROLES
from ..ledger import Ledger
from .check import Check, cells


def _sign(ledger: Ledger, _: Assumptions) -> Iterator[Finding]:
    """Negative consumption is a sign convention (outflows as negatives), never a plan; negative income is unusual."""
    for column in ledger.of_role("consumption"):
        wrong = column.values < 0
        hint = "write consumption as positive amounts." if wrong.all() else "write the amount consumed, 0 or more."
        yield from cells(ledger, column, wrong, "sign", "consumption is negative;", hint)
    for column in (*ledger.of_role("income"), *ledger.of_role("deduction")):
        negative = np.flatnonzero(column.values < 0)
        if len(negative):
            first = ledger.lines[negative[0]]
            meant = "an outflow" if column.role == "income" else "a refund, or a sign that says 'taken off' twice,"
            message = f"{column.role} is negative in {len(negative)} rows, first in line {first}; is {meant} meant?"
            yield warn("sign", message, file=ledger.file, row=first, column=column.header)


def _geometric(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A path that is linear in logarithms has no zero."""
    if assumptions.word("amounts.path") == "geometric":
        for column in (column for role in FLOW_ROLES for column in ledger.of_role(role)):
            message = "a geometric path needs amounts above zero;"
            wrong = column.values <= 0
            yield from cells(ledger, column, wrong, "assumption", message, 'declare another path, such as "linear".')


CHECKS: tuple[Check, ...] = (
    _sign,
    _geometric,
)
