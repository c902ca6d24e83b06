"""The rows of a plan as numbers: amounts as printed, and interest made continuous, before any path is drawn through them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from .ledger import Ledger
from .quadrature import UNIT, Floats
from .rates import CONVERSIONS
from .timeline import Timeline, every_second


@dataclass(frozen=True, eq=False)
class Amounts:
    """One column of amounts: values (n,) as printed, half_units (n,) or None, last: the last figure exactly."""

    name: str
    role: str
    values: Floats
    half_units: Floats | None
    last: Fraction


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of a plan as numbers. rates (n,), continuous, within a relative rate_error, with the derivative of each by its
    printed figure, rate_slopes (n,); reading_error: relative error of every figure against the decimal one; proved: False
    where no bound is wanted, for estimates."""

    timeline: Timeline
    amounts: tuple[Amounts, ...]
    rates: Floats | None
    rate_error: float
    rate_slopes: Floats | None
    rate_half_units: Floats | None
    reading_error: float
    proved: bool = True

    def thinned(self) -> Rows:
        """Every second row, the first and the last kept."""
        kept = every_second(len(self.timeline.times))
        amounts = tuple(replace(a, values=a.values[kept], half_units=None) for a in self.amounts)
        rates = None if self.rates is None else self.rates[kept]
        return replace(self, timeline=self.timeline.thinned(), amounts=amounts, rates=rates, proved=False)


def rows_of(ledger: Ledger, compounding: str) -> Rows:
    """The ledger's columns of amounts, and its column of rates under their compounding made continuous."""
    amounts = tuple(
        Amounts(column.header, column.role, column.values, column.half_units, column.last)
        for column in ledger.columns
        if column.role in ("income", "consumption")
    )
    printed = any(column.half_units is not None for column in ledger.columns)
    assert ledger.timeline is not None, "a ledger without stops has a timeline"
    rates = ledger.of_role("r")
    values, error, slopes = _continuous(rates[0].values, compounding) if rates else (None, 0.0, None)
    return Rows(
        timeline=ledger.timeline,
        amounts=amounts,
        rates=values,
        rate_error=error,
        rate_slopes=slopes,
        rate_half_units=rates[0].half_units if rates else None,
        reading_error=UNIT if printed else 0.0,
    )


def _continuous(cells: Floats, compounding: str) -> tuple[Floats, float, Floats]:
    """Cells under a compounding convention as continuous rates, m·ln(1 + i/m), their relative error, and d rate / d cell."""
    if compounding == "continuous":
        return cells, UNIT, np.ones_like(cells)
    conversions = CONVERSIONS[compounding]
    x = cells / conversions
    rates = conversions * np.log1p(x)
    # reading x to one rounding moves ln(1 + x) by the condition number x / ((1 + x) ln(1 + x))
    with np.errstate(invalid="ignore", divide="ignore"):
        condition = np.where(x == 0.0, 1.0, np.abs(x / ((1.0 + x) * np.log1p(x))))
    return rates, float((10.0 + 4.0 * condition.max()) * UNIT), 1.0 / (1.0 + x)
