"""Rates that are none, or probably percentages."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ..assumptions import Assumptions
from ..findings import Finding, warn
from ..ledger import Ledger
from ..rates import CONVERSIONS
from .check import Check, cells

LIKELY_PERCENT = 0.25
"""Real rates beyond 25 % a year are crises, not plans, while 1 % written as 1 is 100 % (common practice)."""

LIKELY_PERCENT_GROWTH = 0.2

_FRACTION = "If a percentage was meant, write a fraction: 0.05 for 5 %."


def _rate_cells(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A rate that loses everything, or a hundredfold gain in a year, is no rate."""
    market = assumptions.word("market.compounding") or ""
    growth = assumptions.word("growth.compounding") or market
    columns = [(column, market) for role in ("r", "inflation") for column in ledger.of_role(role)]
    columns += [(column, growth) for role in ("g", "n") for column in ledger.of_role(role)]
    for column, compounding in columns:
        wrong = (column.values <= -CONVERSIONS.get(compounding, 1)) | (column.values < -1) | (column.values > 100)
        what = "is no interest rate;" if column.role == "r" else "is no rate a year;"
        yield from cells(ledger, column, wrong, "rate-scale", what, "write a fraction: 0.05 for 5 %.")


def _percent(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A rate that looks like a percentage."""
    for role, limit in (
        ("r", LIKELY_PERCENT),
        ("inflation", LIKELY_PERCENT),
        ("g", LIKELY_PERCENT_GROWTH),
        ("n", LIKELY_PERCENT_GROWTH),
    ):
        for column in ledger.of_role(role):
            large = np.flatnonzero(np.abs(column.values) >= limit)
            if len(large):
                value, row = column.values[large[0]], ledger.lines[large[0]]
                message = f"{role} is {value:g} in {len(large)} rows, first here: {100 * value:g} % a year. {_FRACTION}"
                yield warn("rate-scale", message, file=ledger.file, row=row, column=column.header)
    for path, limit in (
        ("market.r", LIKELY_PERCENT),
        ("market.inflation", LIKELY_PERCENT),
        ("growth.g", LIKELY_PERCENT_GROWTH),
        ("growth.n", LIKELY_PERCENT_GROWTH),
    ):
        figure = assumptions.figure(path)
        if figure is not None and abs(figure) >= limit:
            message = f"{path} is {float(figure):g}, that is {100 * float(figure):g} % a year. {_FRACTION}"
            yield warn("rate-scale", message, file=assumptions.file, column=path)


CHECKS: tuple[Check, ...] = (
    _rate_cells,
    _percent,
)
