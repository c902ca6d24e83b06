"""People, productivity and survival."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ..assumptions import Assumptions
from ..findings import Finding
from ..ledger import Ledger
from .check import Check, cells

_FRACTION = "If a percentage was meant, write a fraction: 0.05 for 5 %."


def _heads(ledger: Ledger, _: Assumptions) -> Iterator[Finding]:
    """People cannot be fewer than none, nor a household without an adult, nor a level of productivity or survival zero."""
    for role, low, inclusive, message, hint in (
        ("members", 0.0, False, "a household has no members;", "write how many persons it has, more than 0."),
        ("productivity", 0.0, False, "an index of productivity is zero or negative;", "write a positive index."),
        ("adults", 1.0, True, "a household has no adult;", "equivalence scales count from one adult."),
        ("children", 0.0, True, "a number of children is negative;", "write 0 or more."),
        ("survival", 0.0, False, "nobody is left alive;", "end the plan before survival is zero."),
        ("hazard", 0.0, True, "a force of mortality is negative;", "write deaths per person and year, 0 or more."),
    ):
        for column in ledger.of_role(role):
            wrong = column.values < low if inclusive else column.values <= low
            yield from cells(ledger, column, wrong, "head-count", message, hint)
    for column in ledger.of_role("survival"):
        rises = np.concatenate([[False], np.diff(column.values) > 0.0])
        yield from cells(ledger, column, rises, "head-count", "survival rises;", "write the share still alive at each date.")


CHECKS: tuple[Check, ...] = (_heads,)
