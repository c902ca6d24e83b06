"""Conventions held against figures from outside: timings, tables of periods, zero rates, scales, prices, lump sums, lives.

A figure found must lie within its own proved bound, and half a unit of the last digit in print, of the outside figure. Sources
in short: Blank & Tarquin, Engineering Economy, Table 1; Fraser, Jewkes et al., Engineering Economics, Appendix A; Sullivan,
Wicks & Koelling, Engineering Economy, 14th ed. (2009), pp. 625-647; SOA: Society of Actuaries; CM1, CT1: Institute and Faculty
of Actuaries; SSA: US Social Security Administration.
"""

from __future__ import annotations

import math
from decimal import Decimal
from fractions import Fraction
from importlib.metadata import PackageNotFoundError, distribution
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from budgetcheck import assess
from budgetcheck.assessment import Assessment
from budgetcheck.bounded import Bounded

Settings = dict[str, Any]

ROUNDING = 2.0**-50
"""Relative error allowed where a factor such as 1 + i is applied to a printed figure in floating point."""


def settings(r: str | None, **more: dict[str, Any] | list[dict[str, Any]]) -> Settings:
    """A finite plan at an effective annual r, or at a column of rates."""
    market = {"compounding": "annual"} | ({} if r is None else {"r": Decimal(r)})
    base: Settings = {"market": market, "horizon": {"kind": "finite", "terminal_wealth": 0}}
    for section, body in more.items():
        base[section] = body if isinstance(body, list) else base.get(section, {}) | body
    return base


def table(times: Any, kind: str = "t", **columns: Any) -> pd.DataFrame:
    """Rows at those times; income and consumption are zero unless given."""
    return pd.DataFrame({kind: list(times)} | {"income": 0.0, "consumption": 0.0} | columns)


def income(found: Assessment) -> Bounded:
    """Present value of all income, deductions taken off, per unit of human capital."""
    return found.present_values.income.whole


def consumption(found: Assessment) -> Bounded:
    """Present value of all consumption, per unit of human capital."""
    return found.present_values.consumption.whole


def slack(found: Assessment) -> Bounded:
    """Slack per household."""
    assert found.slack.per_household is not None
    return found.slack.per_household


def assert_printed(found: Bounded, figure: str, factor: float = 1.0, more: float = 0.0) -> None:
    """Within the proved bound and half a unit of the last digit of a printed figure, both scaled by a factor."""
    half = 0.5 * 10.0 ** int(Decimal(figure).as_tuple().exponent)
    expected = float(figure) * factor
    allowed = found.bound + half * abs(factor) + ROUNDING * abs(expected) + more
    assert abs(found.value - expected) <= allowed, f"{found} is not {figure} x {factor}"


def quarters(count: int, first: int = 2031) -> list[str]:
    """Labels of that many quarters, such as 2031Q1."""
    return [f"{first + k // 4}Q{k % 4 + 1}" for k in range(count)]


def months(count: int, first: int = 2031) -> list[str]:
    """Labels of that many months, such as 2031-01."""
    return [f"{first + k // 12}-{k % 12 + 1:02d}" for k in range(count)]


# -------------------------------------------------------------------------------------------------------------------- timings

ANNUITIES = [
    # Sullivan, Wicks & Koelling: effective rate, years, level (P/A), gradient (P/G: 0 at first, 1 more each year)
    ("0.03", 10, "8.530203", "36.308790"),
    ("0.03", 30, "19.600441", "241.361285"),
    ("0.05", 10, "7.721735", "31.652048"),
    ("0.05", 20, "12.462210", "98.488414"),
    ("0.08", 5, "3.992710", "7.372426"),
    ("0.08", 20, "9.818147", "69.089791"),
]

EARLIER = {"in arrears": 0.0, "at mid-period": 0.5, "in advance": 1.0}
"""How much earlier than at the end of the year each timing pays: each factor (1 + i) is a year (compound interest)."""


@pytest.mark.parametrize("timing", EARLIER)
@pytest.mark.parametrize(("r", "years", "level", "gradient"), ANNUITIES)
def test_a_whole_table_of_one_timing(r: str, years: int, level: str, gradient: str, timing: str) -> None:
    """A level and a rising amount: the printed table in arrears, times 1 + i in advance and its root at mid-period."""
    factor = (1.0 + float(r)) ** EARLIER[timing]
    rising = table(range(years), income=1.0, consumption=np.arange(float(years)))
    found = assess(rising, settings(r, amounts={"timing": timing}))
    assert_printed(income(found), level, factor)
    assert_printed(consumption(found), gradient, factor)


@pytest.mark.parametrize("timing", EARLIER)
@pytest.mark.parametrize("rest", ["spread", "in arrears", "in advance", "at mid-period"])
@pytest.mark.parametrize(("r", "years", "level", "gradient"), ANNUITIES[::2])
def test_one_column_with_a_timing_of_its_own(r: str, years: int, level: str, gradient: str, rest: str, timing: str) -> None:
    """A column's own timing holds for it alone, whatever the rest of the table does (Sullivan et al.)."""
    given = settings(r, amounts={"timing": rest}, columns={"rent": {"role": "consumption", "timing": timing}})
    rows = table(range(years), income=1.0, rent=np.arange(float(years)))
    found = assess(rows, given)
    own = {line.name: line.whole for line in found.present_values.lines}
    assert_printed(own["rent"], gradient, (1.0 + float(r)) ** EARLIER[timing])
    if rest == "spread":
        # paid evenly over the year: i/δ times the annuity in arrears (compound interest)
        assert_printed(own["income"], level, float(r) / math.log1p(float(r)))
    else:
        assert_printed(own["income"], level, (1.0 + float(r)) ** EARLIER[rest])


@pytest.mark.parametrize(("timing", "factor"), [("in arrears", 1.0), ("in advance", 1.06)])
def test_increasing_and_decreasing_annuities(timing: str, factor: float) -> None:
    """(Ia)10 and (Da)10 at 6 %, in arrears and in advance (Exam FM practice deck)."""
    rows = table(range(10), income=np.arange(1.0, 11.0), consumption=np.arange(10.0, 0.0, -1.0))
    found = assess(rows, settings("0.06", amounts={"timing": timing}))
    assert_printed(income(found), "36.9624", factor)
    assert_printed(consumption(found), "43.9985", factor)


def test_an_evenly_spread_annuity_in_print() -> None:
    """a20 at 4 % is 13.5903, and i/delta is 1.019869 (compound-interest tables, from memory)."""
    found = income(assess(table(range(20), income=1.0), settings("0.04", amounts={"timing": "spread"})))
    assert_printed(found, "13.5903", 1.019869, more=13.5903 * 5e-7)


@pytest.mark.parametrize(("r", "years", "level", "gradient"), ANNUITIES)
def test_wages_in_arrears_and_rent_in_advance(r: str, years: int, level: str, gradient: str) -> None:
    """Rent due on the first day costs 1 + i times what a wage of the same size on the last day is worth (Sullivan et al.)."""
    columns = {
        "pay": {"role": "income", "timing": "in arrears"},
        "rent": {"role": "consumption", "timing": "in advance"},
    }
    rows = pd.DataFrame({"year": range(2031, 2031 + years), "pay": 1.0, "rent": 1.0})
    found = assess(rows, settings(r, columns=columns))
    assert_printed(income(found), level)
    assert_printed(consumption(found), level, 1.0 + float(r))
    assert_printed(slack(found), level, -float(r))
    # the first rent is owed before there is any pay
    assert found.wealth_path.first_negative == 0.0
    assert found.verdict == "FAIL"


def test_pay_of_the_last_day_meets_rent_of_the_next() -> None:
    """Sums of one date are netted: pay on the last day of each year for the rent of the next leaves nothing and no debt."""
    columns = {
        "pay": {"role": "income", "timing": "in arrears"},
        "rent": {"role": "consumption", "timing": "in advance"},
    }
    rows = pd.DataFrame({"year": range(2031, 2042), "pay": [1.0] * 10 + [0.0], "rent": [0.0] + [1.0] * 10})
    found = assess(rows, settings("0.08", columns=columns))
    assert_printed(income(found), "6.710081")
    assert_printed(consumption(found), "6.710081")
    assert abs(slack(found).value) <= slack(found).bound
    assert found.wealth_path.first_negative is None
    assert abs(found.wealth_path.minimum.value) <= found.wealth_path.minimum.error


@pytest.mark.parametrize("when", ["end", "begin"])
def test_levels_and_loans_of_a_second_opinion(when: str) -> None:
    """numpy-financial's pv and npv say the same of level payments and of uneven ones."""
    financial = pytest.importorskip("numpy_financial")
    timing = "in advance" if when == "begin" else "in arrears"
    uneven = np.array([3.0, 0.0, 7.5, 1.25, 0.0, 12.0, 4.0])
    for rate in ("0.01", "0.035", "0.12"):
        given = settings(rate, amounts={"timing": timing})
        found = assess(table(range(len(uneven)), income=2.5, consumption=uneven), given)
        level = financial.pv(float(rate), len(uneven), -2.5, when=when)
        assert income(found).value == pytest.approx(level, rel=1e-13)
        cash_flow = uneven if when == "begin" else np.append(0.0, uneven)
        assert consumption(found).value == pytest.approx(financial.npv(float(rate), cash_flow), rel=1e-13)


# -------------------------------------------------------------------------------------------------------- quarters and months

MONTHLY = [
    # Blank & Tarquin: months, level, gradient at 0.25 % a month
    (10, "9.8639", "44.1842"),
    (15, "14.7042", "102.2441"),
    (20, "19.4845", "183.4851"),
    (25, "24.2055", "287.3230"),
]


@pytest.mark.parametrize("timing", EARLIER)
@pytest.mark.parametrize(("count", "level", "gradient"), MONTHLY)
def test_a_table_of_months(count: int, level: str, gradient: str, timing: str) -> None:
    """0.25 % a month is 3 % convertible monthly; months are twelfths of a year (Blank & Tarquin)."""
    given = settings("0.03", market={"compounding": "monthly"}, amounts={"timing": timing})
    rows = table(months(count), "month", income=1.0, consumption=np.arange(float(count)))
    found = assess(rows, given)
    assert_printed(income(found), level, 1.0025 ** EARLIER[timing])
    assert_printed(consumption(found), gradient, 1.0025 ** EARLIER[timing])


@pytest.mark.parametrize("timing", EARLIER)
@pytest.mark.parametrize(("r", "count", "level", "gradient"), ANNUITIES)
def test_a_table_of_quarters(r: str, count: int, level: str, gradient: str, timing: str) -> None:
    """i a quarter is 4i convertible quarterly; quarters are fourths of a year (Sullivan et al.)."""
    given = settings(str(4 * Decimal(r)), market={"compounding": "quarterly"}, amounts={"timing": timing})
    rows = table(quarters(count), "quarter", income=1.0, consumption=np.arange(float(count)))
    found = assess(rows, given)
    assert_printed(income(found), level, (1.0 + float(r)) ** EARLIER[timing])
    assert_printed(consumption(found), gradient, (1.0 + float(r)) ** EARLIER[timing])


@pytest.mark.parametrize(("labels", "kind", "parts"), [(quarters(20), "quarter", 4), (months(20), "month", 12)])
@pytest.mark.parametrize("timing", [*EARLIER, "spread"])
def test_annual_rates_in_short_periods(timing: str, labels: list[str], kind: str, parts: int) -> None:
    """A table that prints rates a year pays a fourth of them a quarter and a twelfth a month (common practice)."""
    per_year = table(labels, kind, income=float(parts))
    by_year = assess(per_year, settings("0.05", amounts={"timing": timing, "quoted": "per year"}))
    by_period = assess(table(labels, kind, income=1.0), settings("0.05", amounts={"timing": timing}))
    assert income(by_year).value == pytest.approx(income(by_period).value, rel=1e-14)


def test_payments_every_month_at_an_effective_rate() -> None:
    """A twelfth every month is worth i/i(12) times a year's end payment: at 4 %, i(12) is 0.039285 (tables, from memory)."""
    rows = table(months(240), "month", income=1.0)
    found = income(assess(rows, settings("0.04", amounts={"timing": "in arrears", "quoted": "per year"})))
    assert_printed(found, "13.5903", 0.04 / 0.039285, more=13.84 * 0.5e-6 / 0.039285)


def test_quarterly_payments_at_an_effective_rate() -> None:
    """250 a quarter for six years at 8 % effective (Exam FM practice page, whose own rounding is good to 1.5)."""
    rows = table(quarters(24), "quarter", income=250.0)
    assert_printed(income(assess(rows, settings("0.08", amounts={"timing": "in arrears"}))), "4758", more=1.5)


MACRO = {
    # statsmodels, datasets/macrodata: real disposable income and consumption, billions of 2005 dollars at annual rates;
    # computed with flows and the real interest rate held over each quarter: income, consumption, slack, final discount factor
    "continuous": (
        "177735.4288748601280192737",
        "160631.4059852267292047717",
        "17104.02288963339881450204",
        "0.50749166086211",
    ),
    "annual": ("179757.2729758217212486098", "162481.8530866920755719132", "17275.41988912964567669661", "0.51875817786957"),
}


@pytest.mark.parametrize("compounding", MACRO)
def test_half_a_century_of_labelled_quarters(compounding: str, tmp_path: Path) -> None:
    """The United States, 1959Q1 to 2009Q3, by quarter label, from a file and from a table in memory."""
    macrodata = pytest.importorskip("statsmodels.datasets.macrodata")
    data = macrodata.load_pandas().data
    labels = [f"{int(year)}Q{int(quarter)}" for year, quarter in zip(data.year, data.quarter, strict=True)]
    rates = [Decimal(str(percent)) / 100 for percent in data.realint]
    plan = tmp_path / "quarters.csv"
    rows = zip(labels, data.realdpi, data.realcons, rates, strict=True)
    lines = [f"{label},{dpi},{cons},{rate}" for label, dpi, cons, rate in rows]
    plan.write_text("\n".join(["quarter,income,consumption,r", *lines]) + "\n", encoding="utf-8")
    given = settings(None, market={"compounding": compounding}, amounts={"quoted": "per year"})
    given["lump_sum"] = [{"t": Fraction(203, 4), "role": "income", "amount": 1, "label": "last"}]
    earned, spent, left, last = MACRO[compounding]
    frame = table(labels, "quarter", income=data.realdpi, consumption=data.realcons, r=[float(rate) for rate in rates])
    for source in (plan, frame):
        found = assess(source, given)
        values = {line.name: line.whole for line in found.present_values.lines}
        more = 1e-13 * float(earned) if source is frame else 0.0  # the rates are binary numbers there
        assert_printed(values["income"], earned, more=more)
        assert_printed(values["consumption"], spent, more=more)
        assert_printed(values["last"], last)
        assert_printed(slack(found), str(Decimal(left) + Decimal(last)), more=more + 1e-12)
        assert found.error.reconstruction == 0.0
        assert (found.date(0.0), found.date(50.5)) == ("1959Q1", "2009Q3")


# ------------------------------------------------------------------------------------------------------------------ zero rates

STEPS = (("0", "5", "0.01"), ("5", "15", "0.03"), ("15", "30", "0.05"), ("30", "50", "0.02"))
"""From, to, r: 1 % for 5 years, 3 % for 10, 5 % for 15, 2 % for 20."""


def zero(compounding: str = "continuous", **more: Any) -> Settings:
    """A column r of zero rates from t = 0."""
    return settings(None, market={"curve": "zero", "compounding": compounding}, **more)


def averages() -> tuple[list[float], list[float]]:
    """Times and zero rates of the steps: a zero rate is the average of the forward rates up to its date (common practice)."""
    times, rates, grown = [0.0], [0.01], Fraction(0)
    for start, end, rate in STEPS:
        grown += (Fraction(end) - Fraction(start)) * Fraction(rate)
        times.append(float(end))
        rates.append(float(grown / Fraction(end)))
    return times, rates


def test_zero_rates_of_a_rate_in_steps() -> None:
    """Totals under the zero rates of a rate in steps: annuity and discount factor (computed, sums of exponentials)."""
    times, rates = averages()
    single = {"t": 50, "role": "income", "amount": 1, "label": "factor"}
    given = zero(amounts={"timing": "spread", "quoted": "per year"}, lump_sum=[single])
    found = assess(table(times, consumption=[1.0] * 4 + [0.0], r=rates), given)
    assert_printed(consumption(found), "26.0184883405571154211754196824")
    assert_printed(income(found), "0.223130160148429828933280470764")


def test_zero_rates_are_averages_of_forward_rates() -> None:
    """The same plan under forward rates and under their averages as zero rates has the same slack to its end."""
    times, rates = averages()
    forward = [0.01, 0.03, 0.05, 0.02, 0.02]
    yearly = {"timing": "spread", "quoted": "per year"}
    paid = {"income": [3.0, 1.0, 2.0, 0.5, 0.0], "consumption": [1.0, 2.0, 0.5, 1.5, 0.0]}
    by_zero = assess(table(times, r=rates, **paid), zero(amounts=yearly))
    by_forward = assess(table(times, r=forward, **paid), settings(None, market={"compounding": "continuous"}, amounts=yearly))
    assert slack(by_zero).value == pytest.approx(slack(by_forward).value, rel=1e-13)


@pytest.mark.parametrize(
    ("years", "first", "last", "figure"),
    [
        (15, 0.05, 0.125, "9.15812989672322442599869389445"),
        (50, 0.02, 0.070, "24.2153523380934190435655747905"),
        (40, 0.06, 0.0400, "16.2515752119807894620072228571"),
    ],
)
def test_zero_rates_of_a_rate_along_a_line(years: int, first: float, last: float, figure: str) -> None:
    """Where r moves along a line its zero rates do, half as steeply (computed, error function)."""
    rows = table([0, years], income=1.0, r=[first, (first + last) / 2])
    found = income(assess(rows, zero(amounts={"timing": "continuous", "path": "linear"})))
    assert_printed(found, figure, more=2.0**-52 * years * float(figure))


def test_zero_rates_of_a_rate_that_converges() -> None:
    """A level flow for 40 years per unit under the zero rates of r = 5 % - 4 %·e^(-0.2t) (computed, Kummer's function)."""
    t = np.arange(8 * 40 + 1) / 8
    with np.errstate(invalid="ignore"):
        rates = np.where(t > 0, 0.05 + 0.04 * np.expm1(-0.2 * t) / (0.2 * t), 0.01)
    given = zero(
        amounts={"timing": "continuous", "path": "smooth", "basis": "per effective unit"}, growth={"g": Decimal("0.02")}
    )
    found = assess(table(t, income=1.0, r=rates), given)
    assert found.decision.error < 1e-5
    assert abs(income(found).value - 27.44311466878949) <= found.decision.error


def test_zero_rates_of_a_rate_that_fades() -> None:
    """Thirty years of a level flow under the zero rates of r = 0.04/(1 + 0.1t) (computed, power law)."""
    t = np.arange(8 * 30 + 1) / 8
    with np.errstate(invalid="ignore"):
        rates = np.where(t > 0, 0.4 * np.log1p(0.1 * t) / t, 0.04)
    found = assess(table(t, income=1.0, r=rates), zero(amounts={"timing": "continuous", "path": "smooth"}))
    assert found.decision.error < 1e-5
    assert abs(income(found).value - 21.62327849990117) <= found.decision.error


@pytest.mark.parametrize("timing", ["spread", "continuous"])
def test_a_flat_curve_of_zero_rates(timing: str) -> None:
    """At 0.5 % for every term the discount factors are the table's (Fraser, Jewkes et al.)."""
    terms = {1: "0.99502", 10: "0.95135", 20: "0.90506", 50: "0.77929", 100: "0.60729"}
    sums = [{"t": term, "role": "income", "amount": 1, "label": str(term)} for term in terms]
    path = {"path": "linear"} if timing == "continuous" else {}
    given = zero("annual", amounts={"timing": timing} | path, lump_sum=sums)
    found = assess(table([0, 4, 30, 70, 100], r=[0.005] * 5), given)
    for line in found.present_values.lines[2:]:
        assert_printed(line.whole, terms[int(line.name)])


def test_the_last_forward_rate_goes_on() -> None:
    """Beyond the last zero rate of period data the last forward rate goes on (common practice)."""
    # 2 % for ten years and 4 % for ten more: zero rates 2 % and 3 %; the period from 20 on is at 4 % as well
    given = zero(amounts={"timing": "in arrears"})
    found = income(assess(table([0, 10, 20], income=[0.0, 0.0, 1.0], r=[0.02, 0.02, 0.03]), given))
    assert found.value == pytest.approx(math.exp(-10 * 0.02 - 20 * 0.04), rel=1e-14)


# ----------------------------------------------------------------------------------------------------------- households, scales

SCALES = {"OECD": 2.7, "OECD-modified": 2.1, "square root": 2.0}
"""Two adults and two children (OECD, What are equivalence scales?; Statistics Norway)."""


@pytest.mark.parametrize(("scale", "size"), SCALES.items())
def test_a_plan_per_equivalent_adult(scale: str, size: float) -> None:
    """1 a year per equivalent adult at 5 % for 20 years exhausts 12.462210 times the scale (Sullivan et al.)."""
    given = settings(
        "0.05",
        household={"scale": scale, "wealth": Decimal("12.462210") * Decimal(str(size))},
        amounts={"timing": "in arrears", "basis": "per equivalent adult"},
    )
    found = assess(table(range(20), consumption=1.0, adults=2, children=2), given)
    assert_printed(slack(found), "0.000000", size)
    assert_printed(found.present_values_per_household.consumption.whole, "12.462210", size)


@pytest.mark.parametrize(
    ("scale", "sizes"),
    [
        ("OECD", (2.7, 2.2, 1.7, 1.0)),
        ("OECD-modified", (2.1, 1.8, 1.5, 1.0)),
        ("square root", (2.0, math.sqrt(3.0), math.sqrt(2.0), 1.0)),
    ],
)
def test_children_leave_home(scale: str, sizes: tuple[float, ...]) -> None:
    """Four, three, two and one in the household, at r = 0: a year's spending follows the scale (weights of the OECD note)."""
    given = settings(
        "0",
        household={"scale": scale, "wealth": 10},
        amounts={"timing": "spread", "basis": "per equivalent adult"},
    )
    heads = {"adults": [2, 2, 2, 1], "children": [2, 1, 0, 0]}
    found = assess(table([0, 1, 2, 3], consumption=1.0, **heads), given)
    assert slack(found).value == pytest.approx(10.0 - sum(sizes), abs=slack(found).bound + 1e-14)


def test_heads_are_members_too() -> None:
    """Amounts per person beside a scale count heads: a child benefit for four, consumption for 2.1 equivalent adults."""
    given = settings(
        "0.05",
        household={"scale": "OECD-modified"},
        amounts={"timing": "in arrears", "basis": "per person"},
        columns={"consumption": {"role": "consumption", "basis": "per equivalent adult"}},
    )
    found = assess(table(range(20), income=2.1 / 4, consumption=1.0, adults=2, children=2), given)
    values = found.present_values_per_household
    assert_printed(values.income.whole, "12.462210", 2.1)
    assert_printed(values.consumption.whole, "12.462210", 2.1)
    assert abs(slack(found).value) <= slack(found).bound + 1e-14


# ------------------------------------------------------------------------------------------------------------- nominal and real


def four_ways(*, stated: bool) -> list[tuple[str, Settings]]:
    """Real and nominal r with real and nominal amounts at r = 3 %, π = 2.5 %: 1 + i = (1 + r)(1 + π) (I. Fisher, from memory).

    stated: whether inflation is declared where it need not be."""
    r, inflation = Decimal("0.03"), Decimal("0.025")
    nominal = (1 + r) * (1 + inflation) - 1
    ways = []
    for market in ("real", "nominal"):
        for amounts in ("real", "nominal"):
            body: dict[str, Any] = {"r": nominal if market == "nominal" else r, "prices": market}
            if market != amounts or stated:
                body["inflation"] = inflation
            ways.append((amounts, settings(None, market=body, amounts={"prices": amounts})))
    return ways


@pytest.mark.parametrize("timing", EARLIER)
@pytest.mark.parametrize("stated", [False, True])
def test_four_ways_of_saying_prices(timing: str, stated: bool) -> None:
    """Real or nominal rates with real or nominal amounts: one slack, (P/A, 3 %, 20) for the real ones (Sullivan et al.)."""
    paid = np.arange(1.0, 21.0) - EARLIER[timing]
    found = []
    for amounts, given in four_ways(stated=stated):
        prices = 1.025**paid if amounts == "nominal" else np.ones(20)
        required = 5.0 * (1.025**20 if amounts == "nominal" else 1.0)
        given["amounts"]["timing"] = timing
        given["horizon"] = {"kind": "finite", "terminal_wealth": required}
        result = assess(table(range(20), income=3.0 * prices, consumption=2.0 * prices), given)
        assert_printed(income(result), "14.877475", 3.0 * 1.03 ** EARLIER[timing], more=1e-12)
        # (P/F, 3 %, 20) = 0.553676 (compound-interest tables, from memory)
        assert_printed(result.present_values.terminal_wealth, "0.553676", 5.0)
        found.append(slack(result))
    for other in found[1:]:
        assert abs(other.value - found[0].value) <= other.bound + found[0].bound + 1e-13


def test_four_ways_under_moving_inflation() -> None:
    """The same with a column of inflation: prices grow row by row, and only the mixture of both kinds needs to know."""
    inflation, real = np.array([0.01, 0.05, 0.08, 0.0, -0.02, 0.03]), np.array([0.02, 0.03, -0.01, 0.04, 0.05, 0.01])
    level = np.cumprod(1.0 + inflation)  # in arrears: at the end of each year
    wage, spent = np.array([5.0, 6.0, 7.0, 7.0, 3.0, 2.0]), np.array([4.0, 5.0, 5.0, 6.0, 5.0, 4.0])
    expected = float(((wage - spent) / np.cumprod(1.0 + real)).sum())
    for market in ("real", "nominal"):
        for amounts in ("real", "nominal"):
            prices = level if amounts == "nominal" else 1.0
            rates = (1.0 + real) * (1.0 + inflation) - 1.0 if market == "nominal" else real
            rows = table(range(6), income=wage * prices, consumption=spent * prices, r=rates, inflation=inflation)
            given = settings(None, market={"prices": market}, amounts={"timing": "in arrears", "prices": amounts})
            assert slack(assess(rows, given)).value == pytest.approx(expected, rel=1e-13)


def test_a_pension_at_current_prices_in_a_real_plan() -> None:
    """A column with prices of its own: what is not indexed loses at π, as if it were discounted at i (I. Fisher)."""
    given = settings(
        "0.03", market={"inflation": Decimal("0.02")}, columns={"pension": {"role": "income", "prices": "nominal"}}
    )
    given["amounts"] = {"timing": "in arrears"}
    rows = pd.DataFrame({"t": range(10), "pension": 1.0, "consumption": 1.0})
    found = assess(rows, given)
    # (1 − 1.0506^−10)/0.0506, by hand
    assert income(found).value == pytest.approx((1.0 - 1.0506**-10) / 0.0506, rel=1e-13)
    assert_printed(consumption(found), "8.530203")


# ------------------------------------------------------------------------------------------------------- lump sums, deductions

FACTORS = [(1, "0.99502"), (10, "0.95135"), (20, "0.90506"), (50, "0.77929"), (100, "0.60729")]
"""Years and (P/F, 0.5 %, n) (Fraser, Jewkes et al.)."""


@pytest.mark.parametrize("timing", ["continuous", "spread", "in arrears"])
@pytest.mark.parametrize(("years", "figure"), FACTORS)
def test_single_amounts(years: int, figure: str, timing: str) -> None:
    """An inheritance is worth (P/F) times itself, in continuous data and in totals, between rows and at the very end."""
    for sign, role in ((1.0, "income"), (-1.0, "deduction"), (-1.0, "consumption")):
        single = {"t": years, "role": role, "amount": 1, "label": "single"}
        given = settings("0.005", amounts={"timing": timing}, lump_sum=[single])
        if timing == "continuous":
            given["amounts"]["path"] = "linear"
        for times in ([0, 100], [0, 30, 60, 90, 120], [0, years + 0.5, 200]):
            found = slack(assess(table(times), given))
            assert_printed(Bounded(sign * found.value, found.bound), figure)


def test_single_amounts_by_calendar_year_and_date() -> None:
    """A year's single amount falls on its first day, a date's on that date (ACT/ACT ISDA counts whole years as such)."""
    sums = [
        {"year": 2041, "role": "income", "amount": 1, "label": "10"},
        {"date": "2051-01-01", "role": "income", "amount": 1, "label": "20"},
    ]
    by_year = table(range(2031, 2071), "year")
    by_date = table([f"{year}-01-01" for year in range(2031, 2071)], "date")
    by_quarter = table(quarters(160), "quarter")
    for rows in (by_year, by_date, by_quarter):
        found = assess(rows, settings("0.005", lump_sum=sums))
        for line in found.present_values.lines[2:]:
            assert_printed(line.whole, dict(FACTORS)[int(line.name)])


def test_a_balloon_payment() -> None:
    """50000 due in 12 years at 3 % (Exam FM practice page), in any money basis of one person per household."""
    for basis in ("per household", "per person", "per effective unit"):
        single = {"t": 12, "role": "consumption", "amount": 50000, "basis": basis}
        given = settings("0.03", household={"wealth": 35069}, lump_sum=[single])
        assert_printed(slack(assess(table(range(2031, 2051), "year"), given)), "0")


@pytest.mark.parametrize(("r", "years", "level", "gradient"), ANNUITIES)
def test_deductions_are_taken_off_income(r: str, years: int, level: str, gradient: str) -> None:
    """A tax of a fourth leaves three fourths of the annuity as income; it is no consumption (Sullivan et al.)."""
    given = settings(r, amounts={"timing": "in arrears"}, columns={"tax": "deduction"})
    found = assess(table(range(years), income=1.0, tax=0.25, consumption=0.75), given)
    own = {line.name: line.whole for line in found.present_values.lines}
    assert_printed(own["tax"], level, 0.25)
    assert_printed(income(found), level, 0.75)
    assert abs(slack(found).value) <= slack(found).bound
    assert found.slack.consumption_scale == pytest.approx(1.0, rel=1e-14)


def test_a_deduction_with_a_timing_of_its_own() -> None:
    """Contributions of a rising amount, due in advance, against pay in arrears (Sullivan et al., 8 %, 20 years)."""
    columns = {"tax": {"role": "deduction", "timing": "in advance"}}
    given = settings("0.08", amounts={"timing": "in arrears"}, columns=columns)
    found = assess(table(range(20), income=100.0, tax=np.arange(20.0)), given)
    # 100·9.818147 − 1.08·69.089791
    expected = 981.8147 - 1.08 * 69.089791
    assert abs(income(found).value - expected) <= 0.5e-4 + 1.08 * 0.5e-6 + income(found).bound


# ------------------------------------------------------------------------------------------------------------------------ lives

MAKEHAM = [
    # age, annuity-due at 5 %: SOA Standard Ultimate Life Table; computed from Makeham's law with its parameters
    (20, "19.966393800426799399"),
    (40, "18.457756571743027079"),
    (60, "14.904074300627305024"),
    (65, "13.549790037743113944"),
    (80, "8.5484056064300613648"),
]


def force_to(age: float, years: np.ndarray) -> np.ndarray:
    """∫ of the force of mortality 0.00022 + 2.7e-6·1.124^x from an age on."""
    return 0.00022 * years + 2.7e-6 / math.log(1.124) * 1.124**age * (1.124**years - 1.0)


@pytest.mark.parametrize("column", ["survival", "hazard"])
@pytest.mark.parametrize(("age", "figure"), MAKEHAM)
def test_annuities_due_under_makeham_mortality(age: int, figure: str, column: str) -> None:
    """One a year in advance while alive, by the share alive at each birthday or by each year's mean force of mortality."""
    # of those alive at 125 nobody would notice the rest
    years = np.arange(126.0 - age)
    grown = force_to(age, years)
    life = {"survival": np.exp(-grown), "hazard": np.append(np.diff(grown), 1.0)}[column]
    rows = table(age + years.astype(int), "age", income=1.0, **{column: life})
    found = income(assess(rows, settings("0.05", amounts={"timing": "in advance"})))
    assert_printed(found, figure, more=1e-13)


def test_an_annuity_under_a_constant_force() -> None:
    """At constant force μ a continuous whole-life annuity is 1/(δ + μ), and a perpetual plan finds it (life contingencies)."""
    given = {
        "market": {"r": Decimal("0.03")},
        "household": {"hazard": Decimal("0.02")},
        "amounts": {"timing": "continuous", "path": "linear"},
        "horizon": {"kind": "perpetual", "tail": "balanced growth"},
    }
    found = income(assess(table([0, 1], income=1.0), given))
    assert abs(found.value - 20.0) <= found.bound


def test_deferred_deaths_from_numbers_of_lives() -> None:
    """10|4 q of a life aged 28 is 0.003606: (9872.8954 − 9837.0661)/9936.3549 at 38, 42 and 28 (CM1 specimen, July 2020)."""
    sums = [{"t": 10, "role": "income", "amount": 1}, {"t": 14, "role": "consumption", "amount": 1}]
    lives = [9936.3549, 9872.8954, 9837.0661]
    for timing in ({"timing": "continuous", "path": "linear"}, {"timing": "spread"}):
        found = assess(table([28, 38, 42], "age", survival=lives), settings("0", amounts=timing, lump_sum=sums))
        assert_printed(slack(found), "0.003606")


COMMUTATION = {0: "100000.000", 55: "465.579", 65: "154.907"}
"""D_x at 10 %, US white males 1989-91; N_1 = 983885.02, N_56 = 3743.07, N_66 = 1041.41 (SSA, Actuarial Study 113, 5.J)."""


@pytest.mark.parametrize(("age", "deferred"), [(0, 1041.41 / 100000.0), (55, 1041.41 / 465.579)])
def test_a_reserve_while_alive(age: int, deferred: float) -> None:
    """What an annuity from 65 on costs earlier is a_65 = 6.7228, paid if alive: N_66/D_x (SSA, Actuarial Study 113)."""
    alive = [float(COMMUTATION[x]) * 1.1**x for x in (age, 65)]
    timing = {"timing": "continuous", "path": "linear"}
    given = settings("0.10", amounts=timing, horizon={"terminal_wealth": Decimal("6.7228")})
    found = assess(table([age, 65], "age", survival=alive), given).present_values.terminal_wealth
    # half units of a_65, of D_65 and of D_55
    assert found.value == pytest.approx(deferred, rel=0.5e-4 / 6.7228 + 0.5e-3 / 154.907 + 0.5e-3 / 465.579)


def test_temporary_and_deferred_annuities_add_up() -> None:
    """a_55 = 8.0396 and a_65 = 6.7228 say what ten years from 55 are worth; the plan between them balances (SSA, Study 113)."""
    alive = [float(COMMUTATION[x]) * 1.1**x for x in (55, 65)]
    paid = (3743.07 - 1041.41) / 465.579  # N_56 − N_66 over D_55
    given = settings(
        "0.10",
        household={"wealth": Decimal("8.0396")},
        amounts={"timing": "continuous", "path": "linear"},
        horizon={"terminal_wealth": Decimal("6.7228")},
        lump_sum=[{"t": 0, "role": "consumption", "amount": paid}],
    )
    assert abs(slack(assess(table([55, 65], "age", survival=alive), given)).value) <= 2e-4


def life_table(package: str, file: str) -> Path:
    """A data file inside an installed package, which is not imported."""
    try:
        return Path(str(distribution(package).locate_file(file)))
    except PackageNotFoundError:
        pytest.skip(f"the package {package} with its life tables is not installed")


HUMAN_MORTALITY = [
    # Human Mortality Database, US, period tables (version of 05 Sep 2024), as in the package lifetables; computed: continuous
    # whole-life annuity at force 0.03 + m_x, m_x held over each year of age and from 110 on: file, year, from 25, from 65
    ("bltper_1x1.txt", "1933", "23.008505402496733185", "9.9816524603995582012"),
    ("bltper_1x1.txt", "2019", "26.160603896199053444", "14.184415703526696300"),
    ("fltper_1x1.txt", "1933", "23.403697204293279337", "10.408614102490577845"),
    ("fltper_1x1.txt", "2019", "26.727192582854274146", "14.880335803740969825"),
    ("mltper_1x1.txt", "1933", "22.654066246683130234", "9.5823537320838626714"),
    ("mltper_1x1.txt", "2019", "25.593136041794043905", "13.401670688273707576"),
]


@pytest.mark.parametrize(("name", "year", "from_25", "from_65"), HUMAN_MORTALITY)
def test_life_annuities_of_whole_populations(name: str, year: str, from_25: str, from_65: str, tmp_path: Path) -> None:
    """One a year while alive, under each year's force of mortality as a column hazard, the last of which stays for ever."""
    lines = life_table("lifetables", f"lifetables/data/hmd/{name}").read_text(encoding="utf-8").splitlines()
    if "05 Sep 2024" not in lines[0]:
        pytest.skip("the life tables are another version")
    deaths = [cells[1:3] for line in lines if (cells := line.split())[:1] == [year]]
    plan = tmp_path / "life.csv"
    for first, figure in ((25, from_25), (65, from_65)):
        rows = [f"{age.rstrip('+')},1,0,{m}" for age, m in deaths[first:]]
        plan.write_text("\n".join(["age,income,consumption,hazard", *rows]) + "\n", encoding="utf-8")
        given = {"market": {"r": Decimal("0.03")}, "horizon": {"kind": "perpetual", "tail": "balanced growth"}}
        assert_printed(income(assess(plan, given)), figure)


@pytest.mark.parametrize(("age", "figure"), [(25, "27.334995120921163776"), (65, "14.881359206540910123")])
def test_annuities_due_of_a_cohort_table(age: int, figure: str) -> None:
    """One a year in advance at 3 %, US Social Security 2007, women, as in the package pylifecontingencies (computed)."""
    file = life_table("pylifecontingencies", "pylifecontingencies/data/demoUsa.parquet")
    pytest.importorskip("pyarrow", reason="the life table is a parquet file")
    lives = pd.read_parquet(file)
    lives = lives.loc[lives["age"] >= age, ["age", "USSS2007F"]].dropna()
    rows = table(lives["age"].astype(int), "age", income=1.0, survival=lives["USSS2007F"].to_numpy())
    assert_printed(income(assess(rows, settings("0.03", amounts={"timing": "in advance"}))), figure, more=1e-13)


def test_hazard_discounts_both_sides_of_the_account() -> None:
    """Under fair annuities a plan whose consumption equals its income each year has slack 0 whatever the mortality (Yaari)."""
    hazard = np.linspace(0.001, 0.3, 60)
    rows = table(range(40, 100), "age", income=np.linspace(2.0, 1.0, 60), consumption=np.linspace(2.0, 1.0, 60), hazard=hazard)
    found = assess(rows, settings("0.02"))
    assert abs(slack(found).value) <= slack(found).bound
    assert found.verdict == "PASS"
