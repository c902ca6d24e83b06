"""The rows of a plan as numbers: amounts as printed, rates made continuous, levels, before any path is drawn through them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from .conventions import Conventions, Reading
from .equivalence import equivalent_adults
from .keys import FLOW_ROLES
from .ledger import Ledger, LedgerColumn
from .quadrature import UNIT, Floats
from .rates import CONVERSIONS
from .timeline import Timeline, every_second

RATES = ("r", "g", "n", "inflation", "hazard")
"""Columns that hold a rate, 1/year."""

LEVELS = ("members", "productivity", "survival", "wealth")
"""Columns that hold a level at a date or over a period."""


@dataclass(frozen=True, eq=False)
class Amounts:
    """One column of amounts: values (n,) as printed, half_units (n,) or None, last: the last figure exactly, and what its
    figures mean."""

    name: str
    role: str
    values: Floats
    half_units: Floats | None
    last: Fraction
    reading: Reading


@dataclass(frozen=True, eq=False)
class Measure:
    """One column of rates, continuous, or of levels: values (n,) within a relative error; slopes (n,): the derivative of each
    by its printed figure; half_units (n,) or None; first, last: the outer figures as printed."""

    values: Floats
    error: float
    slopes: Floats | None
    half_units: Floats | None
    first: Fraction
    last: Fraction


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of a plan as numbers. measures: by the name of the column, "equivalents" being made from those of heads;
    reading_error: relative error of every amount against the decimal figure; proved: False where no bound is wanted, for
    estimates."""

    timeline: Timeline
    amounts: tuple[Amounts, ...]
    measures: Mapping[str, Measure]
    reading_error: float
    proved: bool = True

    def thinned(self) -> Rows:
        """Every second row, the first and the last kept."""
        kept = every_second(len(self.timeline.times))
        amounts = tuple(replace(a, values=a.values[kept], half_units=None) for a in self.amounts)
        measures = {name: replace(m, values=m.values[kept], half_units=None) for name, m in self.measures.items()}
        return replace(self, timeline=self.timeline.thinned(), amounts=amounts, measures=measures, proved=False)


def rows_of(ledger: Ledger, conventions: Conventions) -> Rows:
    """The ledger's columns under their conventions: rates made continuous, heads as members and equivalent adults."""
    c = conventions
    amounts = tuple(
        Amounts(column.header, column.role, column.values, column.half_units, column.last, c.reading_of(column.header))
        for column in ledger.columns
        if column.role in FLOW_ROLES
    )
    printed = any(column.half_units is not None for column in ledger.columns)
    assert ledger.timeline is not None, "a ledger without stops has a timeline"
    compoundings = {"r": c.compounding, "inflation": c.compounding, "g": c.growth_compounding, "n": c.growth_compounding}
    measures = {}
    for column in ledger.columns:
        if column.role in RATES:
            measures[column.role] = _continuous(column, compoundings.get(column.role, "continuous"))
        elif column.role in LEVELS:
            measures[column.role] = Measure(column.values, UNIT, None, column.half_units, column.first, column.last)
    measures |= _heads(ledger, c)
    return Rows(timeline=ledger.timeline, amounts=amounts, measures=measures, reading_error=UNIT if printed else 0.0)


def _heads(ledger: Ledger, conventions: Conventions) -> dict[str, Measure]:
    """Members and equivalent adults from columns of adults and children."""
    adults, children = ledger.of_role("adults"), ledger.of_role("children")
    if not adults or not children:
        return {}
    found = {}
    first = adults[0].first + children[0].first
    if conventions.members is None and not ledger.of_role("members"):
        total = adults[0].values + children[0].values
        found["members"] = Measure(total, 2.0 * UNIT, None, None, first, adults[0].last + children[0].last)
    if conventions.scale is not None:
        values = equivalent_adults(adults[0].values, children[0].values, conventions.scale)
        # the level itself is a number of floating point, taken for exact with the error of its making beside it
        outer = Fraction(float(values[0])), Fraction(float(values[-1]))
        found["equivalents"] = Measure(values, 6.0 * UNIT, None, None, *outer)
    return found


def _continuous(column: LedgerColumn, compounding: str) -> Measure:
    """Cells under a compounding convention as continuous rates, m·ln(1 + i/m), their relative error, and d rate / d cell."""
    cells = column.values
    if compounding == "continuous":
        return Measure(cells, UNIT, np.ones_like(cells), column.half_units, column.first, column.last)
    conversions = CONVERSIONS[compounding]
    x = cells / conversions
    rates = conversions * np.log1p(x)
    # reading x to one rounding moves ln(1 + x) by the condition number x / ((1 + x) ln(1 + x))
    with np.errstate(invalid="ignore", divide="ignore"):
        condition = np.where(x == 0.0, 1.0, np.abs(x / ((1.0 + x) * np.log1p(x))))
    error = float((10.0 + 4.0 * condition.max()) * UNIT)
    return Measure(rates, error, 1.0 / (1.0 + x), column.half_units, column.first, column.last)
