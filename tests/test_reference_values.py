"""Figures published or computed elsewhere, reached through the front door: a table and its assumptions.

A value found must lie within its own proved bound, and half a unit of the last digit in print, of the outside figure. Sources in
short: Blank & Tarquin, Engineering Economy; Sullivan, Wicks & Koelling, Engineering Economy, 14th ed. (2009); Fraser, Jewkes et
al., Engineering Economics; CT1: Institute of Actuaries, examiners' reports; SOA: Society of Actuaries.
"""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Sequence
from decimal import Decimal
from fractions import Fraction
from math import e, exp, log
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from budgetcheck import assess
from budgetcheck.assessment import Assessment
from budgetcheck.bounded import Bounded
from budgetcheck.rates import Rate

Settings = dict[str, dict[str, Any]]


def settings(r: str | None = None, **more: dict[str, Any]) -> Settings:
    """A finite plan at a constant r, effective a year unless said otherwise."""
    market = {} if r is None else {"r": Decimal(r)}
    base: Settings = {"market": market | {"compounding": "annual"}, "horizon": {"kind": "finite", "terminal_wealth": 0}}
    for section, keys in more.items():
        base[section] = base.get(section, {}) | keys
    return base


def continuous(r: str | None, path: str, **more: dict[str, Any]) -> Settings:
    """Yearly rates along a path, discounted at a force of interest."""
    market = more.pop("market", {}) | {"compounding": "continuous"}
    return settings(r, market=market, amounts=more.pop("amounts", {}) | {"timing": "continuous", "path": path}, **more)


def incomes(amounts: Sequence[float], times: Sequence[float] | None = None, **columns: Sequence[float]) -> pd.DataFrame:
    """A plan with nothing but income."""
    t = range(len(amounts)) if times is None else times
    return pd.DataFrame({"t": t, "income": amounts, "consumption": 0.0, **columns})


def income(found: Assessment) -> Bounded:
    """Present value of all income, which is slack too where nothing is consumed."""
    return found.present_values.unit.income.whole


def lumps(amounts: Sequence[float], r: str, timing: str = "in arrears", **market: str) -> Bounded:
    """Present value of lump sums, one in each year."""
    padded = [*amounts, 0.0] if len(amounts) == 1 else amounts
    return income(assess(incomes(padded), settings(r, market=market, amounts={"timing": timing})))


def assert_equal(found: Bounded, figure: str, more: float = 0.0) -> None:
    """Within the proved bound, half a unit of the last digit of the outside figure, and what else the case allows."""
    half = Decimal(5).scaleb(int(Decimal(figure).as_tuple().exponent) - 1)
    gap = abs(Decimal(found.value) - Decimal(figure))
    assert gap <= Decimal(found.bound) + half + Decimal(more), f"{found} is not {figure}"


# ---------------------------------------------------------------------------------------------------- lump sums in tables

ANNUITIES = [
    # Blank & Tarquin, Table 1
    ("0.0025", 10, "9.8639", "44.1842"),
    ("0.0025", 15, "14.7042", "102.2441"),
    ("0.0025", 20, "19.4845", "183.4851"),
    ("0.0025", 25, "24.2055", "287.3230"),
    # Sullivan, Wicks & Koelling, pp. 625-647
    ("0.03", 5, "4.579707", "8.888776"),
    ("0.03", 10, "8.530203", "36.308790"),
    ("0.03", 20, "14.877475", "126.798659"),
    ("0.03", 30, "19.600441", "241.361285"),
    ("0.03", 50, "25.729764", "477.480334"),
    ("0.05", 5, "4.329477", "8.236917"),
    ("0.05", 10, "7.721735", "31.652048"),
    ("0.05", 20, "12.462210", "98.488414"),
    ("0.05", 30, "15.372451", "168.622551"),
    ("0.05", 50, "18.255925", "277.914782"),
    ("0.08", 5, "3.992710", "7.372426"),
    ("0.08", 10, "6.710081", "25.976831"),
    ("0.08", 20, "9.818147", "69.089791"),
    ("0.08", 30, "11.257783", "103.455792"),
    ("0.08", 50, "12.233485", "139.592790"),
]


@pytest.mark.parametrize(("r", "years", "level", "gradient"), ANNUITIES)
def test_annuity_tables(r: str, years: int, level: str, gradient: str) -> None:
    """A level amount in arrears, and one that starts at 0 and grows by 1 a year (Blank & Tarquin; Sullivan et al.)."""
    assert_equal(lumps([1.0] * years, r), level)
    assert_equal(lumps([float(k) for k in range(years)], r), gradient)


@pytest.mark.parametrize(("r", "years", "level", "gradient"), ANNUITIES[-5:])
def test_in_advance_is_a_year_earlier(r: str, years: int, level: str, gradient: str) -> None:
    """The same tables in advance: a first amount that is not discounted, and one amount less at the end."""
    assert_equal(lumps([0.0] + [1.0] * years, r, "in advance"), level)
    assert_equal(lumps([0.0] + [float(k) for k in range(years)], r, "in advance"), gradient)


@pytest.mark.parametrize(("months", "level"), [(10, "9.8639"), (15, "14.7042"), (20, "19.4845"), (25, "24.2055")])
def test_a_monthly_table_in_months(months: int, level: str) -> None:
    """0.25 % a month is 3 % convertible monthly, with t in twelfths (Blank & Tarquin, Table 1)."""
    times = [month / 12 for month in range(months)]
    given = settings("0.03", market={"compounding": "monthly"}, amounts={"timing": "in arrears"})
    assert_equal(income(assess(incomes([1.0] * months, times), given)), level)


@pytest.mark.parametrize(
    ("r", "years", "figure"),
    [
        # Sullivan, Wicks & Koelling: continuous compounding, continuous and discrete flows are tabulated apart; these are discrete
        # in force of interest; the flow in these tables is continuous
        ("0.08", 5, "4.120998"),
    ],
)
def _unused(r: str, years: int, figure: str) -> None: ...


FRASER = (
    "0.99005 1.97025 2.94069 3.90148 4.85271 5.79448 6.72687 7.64999 8.56392 9.46876 10.36459 11.25151 12.12961 12.99896 13.85967 "
    "14.71182 15.55548 16.39075 17.21771 18.03644 18.84703 19.64954 20.44408 21.23071"
).split()


@pytest.mark.parametrize(("years", "figure"), enumerate(FRASER, start=1))
def test_lump_sums_at_a_force_of_interest(years: int, figure: str) -> None:
    """Yearly amounts in arrears at a force of 1 % (Fraser, Jewkes et al., Appendix B)."""
    assert_equal(lumps([1.0] * years, "0.01", compounding="continuous"), figure)
