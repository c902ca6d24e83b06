"""What a rule of the audit is: a function from a ledger and assumptions to findings."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

from ..assumptions import Assumptions
from ..findings import Finding, rest, stop
from ..ledger import Ledger, LedgerColumn

Check = Callable[[Ledger, Assumptions], Iterator[Finding]]

MOST_PER_RULE = 1000


def cells(ledger: Ledger, column: LedgerColumn, wrong: np.ndarray, rule: str, message: str, hint: str) -> Iterator[Finding]:
    """A stop for every cell of a column that is wrong, the first MOST_PER_RULE by name."""
    found = np.flatnonzero(wrong)
    for index in found[:MOST_PER_RULE]:
        yield stop(
            rule,
            message,
            file=ledger.file,
            row=ledger.lines[index],
            column=column.header,
            raw=f"{column.values[index]:.17g}",
            hint=hint,
        )
    yield from rest(rule, len(found), MOST_PER_RULE, "cells of this column likewise", file=ledger.file, column=column.header)
