"""Figures published or computed elsewhere, reached through the front door: a table and its assumptions.

A value found must lie within its own proved bound, and half a unit of the last digit in print, of the outside figure. Sources
in short: Blank & Tarquin, Engineering Economy; Sullivan, Wicks & Koelling, Engineering Economy, 14th ed. (2009); Fraser, Jewkes
et al., Engineering Economics; CT1: Institute of Actuaries, examiners' reports; SOA: Society of Actuaries.
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
    return found.present_values.income.whole


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


FRASER = [
    (1, "0.99005"),
    (2, "1.97025"),
    (3, "2.94069"),
    (4, "3.90148"),
    (5, "4.85271"),
    (6, "5.79448"),
    (7, "6.72687"),
    (8, "7.64999"),
    (9, "8.56392"),
    (10, "9.46876"),
    (11, "10.36459"),
    (12, "11.25151"),
    (13, "12.12961"),
    (14, "12.99896"),
    (15, "13.85967"),
    (16, "14.71182"),
    (17, "15.55548"),
    (18, "16.39075"),
    (19, "17.21771"),
    (20, "18.03644"),
    (21, "18.84703"),
    (22, "19.64954"),
    (23, "20.44408"),
    (24, "21.23071"),
]


@pytest.mark.parametrize(("years", "figure"), FRASER)
def test_lump_sums_at_a_force_of_interest(years: int, figure: str) -> None:
    """Yearly amounts in arrears at a force of 1 % (Fraser, Jewkes et al., Appendix B)."""
    assert_equal(lumps([1.0] * years, "0.01", compounding="continuous"), figure)


SULLIVAN = [
    ("0.10", 5, "3.741237"),
    ("0.10", 10, "6.010412"),
    ("0.10", 20, "8.221519"),
    ("0.10", 30, "9.034940"),
    ("0.10", 50, "9.444265"),
    ("0.20", 5, "2.855071"),
    ("0.20", 10, "3.905393"),
    ("0.20", 20, "4.433930"),
    ("0.20", 30, "4.505460"),
    ("0.20", 50, "4.516451"),
    ("0.08", 5, "3.958357"),
    ("0.08", 10, "6.611723"),
    ("0.08", 20, "9.582562"),
    ("0.08", 30, "10.917446"),
    ("0.08", 50, "11.786756"),
]


@pytest.mark.parametrize(("r", "years", "figure"), SULLIVAN)
def test_higher_forces_of_interest(r: str, years: int, figure: str) -> None:
    """Yearly amounts in arrears at a force of interest (Sullivan, Wicks & Koelling, pp. 625-647)."""
    assert_equal(lumps([1.0] * years, r, compounding="continuous"), figure)


@pytest.mark.parametrize(
    ("amounts", "r", "figure"),
    [
        ([1.0] * 10, "0.06", "7.360087"),  # Exam FM practice deck
        ([float(k) for k in range(1, 11)], "0.06", "36.9624"),  # Exam FM practice deck, (Ia)10
        ([4.0 * k for k in range(1, 9)], "0.06", "104.21"),  # Exam FM practice deck, 4(Ia)8
        ([20000.0 * k for k in range(1, 11)], "0.09", "615808.63"),  # university worksheet, 20000(Ia)10
        ([float(k) for k in range(10, 0, -1)], "0.06", "43.9985"),  # Exam FM practice deck, (Da)10
        ([0.0] * 11 + [50000.0], "0.03", "35069"),  # Exam FM practice page
        ([1.0] * 10, "0.05", "7.7217"),  # US Treasury Table B, from memory
        ([0.0] * 9 + [1.0], "0.05", ".613913"),  # US Treasury Table B, from memory
        ([1.0] * 20, "0.04", "13.5903"),  # compound-interest tables, from memory
        ([1.0] * 30, "0.06", "13.7648"),  # compound-interest tables, from memory
        ([1.11**k for k in range(6)], "0.08", "5.9559"),  # Blank & Tarquin, from memory
        ([80000 * 1.09**k for k in range(40)], "0.20", "711730.71"),  # Hillier et al., Corporate Finance, ex. 4.22, from memory
        ([20000 * 1.03**k for k in range(40)], "0.10", "265121.57"),  # Ross, Westerfield & Jaffe, ch. 4, from memory
    ],
)
def test_textbook_annuities(amounts: list[float], r: str, figure: str) -> None:
    """Level, increasing, decreasing and geometric amounts in arrears."""
    assert_equal(lumps(amounts, r), figure)


def test_a_geometric_gradient_with_a_price_and_a_salvage_value() -> None:
    """8000 at once, then 1700 growing by 11 %, and 200 back at the end of year 6 (Blank & Tarquin, from memory)."""
    costs = [8000.0] + [1700 * 1.11**k for k in range(6)]
    costs[-1] -= 200.0
    assert_equal(lumps(costs, "0.08", "in advance"), "17999")


def test_a_gradient_that_was_printed_truncated() -> None:
    """1500 growing by 10 % for six years at 8 % (civil-engineering review page, cut off to whole units)."""
    assert 8728.0 <= lumps([1500 * 1.1**k for k in range(6)], "0.08").value < 8729.0


def test_quarterly_rent_at_an_effective_rate() -> None:
    """250 a quarter for six years at 8 % effective (Exam FM practice page, whose own rounding is good to 1.5)."""
    given = settings("0.08", amounts={"timing": "in arrears"})
    assert_equal(income(assess(incomes([250.0] * 24, [k / 4 for k in range(24)]), given)), "4758", more=1.0)


SURVIVORS = [
    # age, annuity-due at 5 %: SOA Standard Ultimate Life Table; computed from Makeham's law with its parameters
    (20, "19.966393800426799399"),
    (40, "18.457756571743027079"),
    (60, "14.904074300627305024"),
    (65, "13.549790037743113944"),
    (80, "8.5484056064300613648"),
]


@pytest.mark.parametrize(("age", "figure"), SURVIVORS)
def test_life_annuities(age: int, figure: str) -> None:
    """One unit a year in advance while alive, under a force of mortality 0.00022 + 2.7e-6 * 1.124^age, until nobody is left."""
    alive = [exp(-0.00022 * k - 2.7e-6 / log(1.124) * 1.124**age * (1.124**k - 1)) for k in range(120 - age)]
    assert_equal(lumps(alive, "0.05", "in advance"), figure, more=1e-13)


# ------------------------------------------------------------------------------------------------- discount factors, rates

DISCOUNT_FACTORS = [(1, "0.99502"), (10, "0.95135"), (20, "0.90506"), (50, "0.77929"), (100, "0.60729")]


def factor(r: str, compounding: str, years: int = 1) -> Bounded:
    """What one unit of wealth, required at the end, is worth at the start."""
    given = settings(r, market={"compounding": compounding}, horizon={"terminal_wealth": 1}, amounts={"path": "linear"})
    return assess(pd.DataFrame({"t": [0, years], "income": 0.0, "consumption": 0.0}), given).present_values.terminal_wealth


@pytest.mark.parametrize(("years", "figure"), DISCOUNT_FACTORS)
def test_discount_factors(years: int, figure: str) -> None:
    """A plan with nothing but required wealth gives the discount factor at 0.5 % (Fraser, Jewkes et al., Appendix A)."""
    assert_equal(factor("0.005", "annual", years), figure)


COMPOUNDINGS = [
    # conversions a year, effective rate and force of a nominal 6 %; computed from (1 + i/m)^m - 1 and m ln(1 + i/m)
    ("annual", "0.0600000000000000000000000000000", "0.0582689081239757755257183511185"),
    ("semiannual", "0.0609000000000000000000000000000", "0.0591176044830888054652388113694"),
    ("quarterly", "0.0613635506250000000000000000000", "0.0595544499750026193416389799127"),
    ("monthly", "0.0616778118644995687897076174316", "0.0598504981324688833452264295121"),
    ("daily", "0.0618313106778536893507684790999", "0.0599950690335231709878762641240"),
]


@pytest.mark.parametrize(("compounding", "effective", "force"), COMPOUNDINGS)
def test_compounding(compounding: str, effective: str, force: str) -> None:
    """A nominal 6 % under every convention: the rate itself, and the discount factor of one year."""
    rate = Rate.declared(Fraction(6, 100), compounding)
    assert_equal(Bounded(rate.value, rate.error), force)
    one = factor("0.06", compounding)
    assert abs(Fraction(one.value) - 1 / (1 + Fraction(effective))) <= Fraction(one.bound) + Fraction(1, 10**27)


@pytest.mark.parametrize(
    ("effective", "force"),
    [
        ("0.01", "0.00995033085316808284821535754426"),
        ("0.03", "0.0295588022415444027326194056847"),
        ("0.05", "0.0487901641694320030653744042232"),
        ("0.10", "0.0953101798043248600439521232808"),
        ("-0.02", "-0.0202027073175194484080453010242"),
        ("0.04", "0.039221"),  # compound-interest tables, from memory
        ("0.05", "0.048790"),  # compound-interest tables, from memory
    ],
)
def test_effective_rates(effective: str, force: str) -> None:
    """The force of an effective rate, ln(1 + i), below zero too (computed, where no other source stands beside it)."""
    rate = Rate.declared(Fraction(effective), "annual")
    assert_equal(Bounded(rate.value, rate.error), force)


@pytest.mark.parametrize(
    ("nominal", "compounding", "figure"),
    [
        ("0.04", "semiannual", "0.0396"),  # SOA Exam FM sample question 1
        ("0.06", "semiannual", "0.059118"),  # Exam FM practice page
    ],
)
def test_forces_in_print(nominal: str, compounding: str, figure: str) -> None:
    """The force of interest equal to a nominal rate convertible several times a year."""
    rate = Rate.declared(Fraction(nominal), compounding)
    assert_equal(Bounded(rate.value, rate.error), figure)


def test_a_nominal_rate_of_discount() -> None:
    """1000 becomes 1747.17 in four years at a rate of discount of 13.8692 % convertible monthly (CT1, April 2011)."""
    interest = Decimal("0.138692") / (1 - Decimal("0.138692") / 12)
    grown = factor(str(interest), "monthly", 4)
    assert grown.value * 1747.17 == pytest.approx(1000.0, abs=0.005 / 1.747 + 1000.0 * 4 * 5e-7)


# ----------------------------------------------------------------------------------------------------------- continuous flows

CONTINUOUS = [
    # force, years, level and increasing annuity; computed from (1 - e^(-rn))/r and (level - n e^(-rn))/r
    ("0.01", 1, "0.995016625083194642609402281996", "0.496679133402658903549630481631"),
    ("0.01", 10, "9.51625819640404268357509405536", "46.7884016044446951932603460892"),
    ("0.01", 30, "25.9181779318282133933126220682", "369.363131137667741130640868868"),
    ("0.01", 60, "45.1188363905973567371541082767", "1219.01382249557707794465732428"),
    ("0.03", 1, "0.985148881716394102249054934694", "0.490111605596197510550886091144"),
    ("0.03", 10, "8.63939264394273779777087402274", "41.0403479041853045700712076520"),
    ("0.03", 30, "19.7810113419800296038848586785", "252.797384992068541579374382970"),
    ("0.03", 60, "27.8233703926137820567731759856", "596.847903310619658632163091989"),
    ("0.05", 1, "0.975411509985719818171493604407", "0.483641709700116181601365692546"),
    ("0.05", 10, "7.86938680574733152792400930018", "36.0816041724199458377202790053"),
    ("0.05", 30, "15.5373967970314034213343905847", "176.869839851570171066719529236"),
    ("0.05", 60, "19.0042586326427211404131516870", "320.340690611417691233052134960"),
    ("0.08", 1, "0.961045670167052713615501880345", "0.474116547255211633809275384659"),
    ("0.08", 10, "6.88338794853473010712372018731", "29.8762288420314274102837042144"),
    ("0.08", 30, "11.3660255838823437078103472490", "108.056087314999607581939758083"),
    ("0.08", 60, "12.3971281618872496394829746654", "148.791791736825598862515663243"),
]


@pytest.mark.parametrize(("force", "years", "level", "increasing"), CONTINUOUS)
def test_continuous_annuities(force: str, years: int, level: str, increasing: str) -> None:
    """A level flow, as a rate along a path or as totals spread over years, and one that grows from 0 by 1 a year."""
    table = pd.DataFrame({"t": [0, years], "income": 1.0, "consumption": 1.0})
    for path in ("step", "linear", "geometric", "smooth"):
        assert_equal(income(assess(table, continuous(force, path))), level)
    spread = settings(force, market={"compounding": "continuous"}, amounts={"timing": "spread"})
    if years > 1:
        assert_equal(income(assess(incomes([1.0] * years), spread)), level)
    assert_equal(income(assess(incomes([0.0, float(years)], [0, years]), continuous(force, "linear"))), increasing)


@pytest.mark.parametrize(
    ("r", "g", "figure"),
    [
        ("0.03", "0.02", "32.9679953964360699255567074852"),
        ("0.03", "0.03", "40.0000000000000000000000000000"),
        ("0.02", "0.035", "54.8079200260339316583578445442"),
        ("0.05", "0.0499999999999", "39.9999999999200000000001066667"),
    ],
)
def test_continuous_geometric_annuities(r: str, g: str, figure: str) -> None:
    """Forty years of a flow that grows with productivity, at rates that tie or almost do (computed, (1 - e^-(r-g)n)/(r-g))."""
    given = continuous(r, "linear", growth={"g": Decimal(g)}, amounts={"basis": "per effective unit"})
    assert_equal(income(assess(incomes([1.0, 1.0], [0, 40]), given)), figure)


def test_a_rent_that_steps_up_and_one_that_rises_steadily() -> None:
    """20000 more each year for ten years at 9 %, paid continuously in yearly steps or along a line (university worksheet)."""
    steps = settings("0.09", amounts={"timing": "spread"})
    assert_equal(income(assess(incomes([20000.0 * k for k in range(1, 11)]), steps)), "643122.05")
    line = settings("0.09", amounts={"timing": "continuous", "path": "linear"})
    assert_equal(income(assess(incomes([0.0, 200000.0], [0, 10]), line)), "575136.47")


def test_one_unit_a_year_at_ten_per_cent() -> None:
    """(1 - 1/e)/0.1 in ten years (compound-interest tables, from memory)."""
    assert_equal(income(assess(incomes([1.0, 1.0], [0, 10]), continuous("0.1", "linear"))), "6.3212")


# ------------------------------------------------------------------------------------------------------------- moving interest


def rated(folder: Path, times: Sequence[str], rates: Sequence[str], path: str, amounts: str = "1", **more: Any) -> Assessment:
    """A plan from a file, whose rates are the decimals that they look like; income is `amounts` throughout."""
    file = folder / "plan.csv"
    rows = [f"{t},{amounts},0,{r}" for t, r in zip(times, rates, strict=True)]
    file.write_text("\n".join(["t,income,consumption,r", *rows]) + "\n", encoding="utf-8")
    return assess(file, continuous(None, path, **more))


@pytest.mark.parametrize(
    ("years", "first", "last", "figure"),
    [
        (15, "0.05", "0.125", "9.15812989672322442599869389445"),
        (50, "0.02", "0.070", "24.2153523380934190435655747905"),
        (40, "0.06", "0.0400", "16.2515752119807894620072228571"),
    ],
)
def test_linear_interest(years: int, first: str, last: str, figure: str, tmp_path: Path) -> None:
    """A level flow discounted at a rate along a line (computed, error function)."""
    assert_equal(income(rated(tmp_path, ["0", str(years)], [first, last], "linear")), figure)


def test_stepwise_interest(tmp_path: Path) -> None:
    """1 % for 5 years, 3 % for 10, 5 % for 15, 2 % for 20: annuity and discount factor (computed, sum of exponentials)."""
    times, rates = ["0", "5", "15", "30", "50"], ["0.01", "0.03", "0.05", "0.02", "0.02"]
    found = rated(tmp_path, times, rates, "step", horizon={"terminal_wealth": 1})
    assert_equal(income(found), "26.0184883405571154211754196824")
    assert_equal(found.present_values.terminal_wealth, "0.223130160148429828933280470764")


EXPONENTIAL = [
    # from, to, speed, n + g, forty years, the whole life; computed, Kummer's function (DLMF 13.4.1)
    (0.01, 0.05, 0.2, "0.02", 27.44311466878949, 39.70565539688997),
    (0.0, 0.04, 0.1, "0.025", 40.2442117856002, 94.77420548929803),
]


@pytest.mark.parametrize(("first", "last", "speed", "growth", "forty", "whole"), EXPONENTIAL)
def test_interest_that_converges(first: float, last: float, speed: float, growth: str, forty: float, whole: float) -> None:
    """A level flow per unit of human capital under r = r* + (r0 - r*)e^(-at): forty years, and a whole life with its tail
    declared or not, each within its reported error."""
    own = {"basis": "per effective unit"}
    for years, expected, horizon in (
        (40, forty, {}),
        (400, whole, {"kind": "perpetual", "tail": "balanced growth"}),
        (400, whole, {"kind": "perpetual"}),
        (60, whole, {"kind": "perpetual"}),
    ):
        t = np.arange(8 * years + 1) / 8
        given = continuous(None, "smooth", growth={"g": Decimal(growth)}, amounts=own)
        given["horizon"] = horizon or given["horizon"]
        found = assess(incomes(np.ones_like(t), t, r=last + (first - last) * np.exp(-speed * t)), given)
        assert found.decision.error < 0.01 * expected
        assert abs(income(found).value - expected) <= found.decision.error


def test_interest_that_fades() -> None:
    """Under r = 0.04/(1 + 0.1t) thirty years of a level flow are worth what the power law says (computed)."""
    t = np.arange(8 * 30 + 1) / 8
    found = assess(incomes(np.ones_like(t), t, r=0.04 / (1 + 0.1 * t)), continuous(None, "smooth"))
    assert found.decision.error < 1e-6
    assert abs(income(found).value - 21.62327849990117) <= found.decision.error


@pytest.mark.parametrize("years", [40, 100, 400])
def test_interest_that_fades_for_ever_is_not_taken_for_settled(years: int) -> None:
    """Under r = 0.08/(1 + 0.05t) a level flow for ever is worth 100/3 (computed, power law), within the error if at all."""
    t = np.arange(4 * years + 1) / 4
    given = continuous(None, "smooth", horizon={"kind": "perpetual"})
    del given["horizon"]["terminal_wealth"]
    found = assess(incomes(np.ones_like(t), t, r=0.08 / (1 + 0.05 * t)), given)
    assert not found.decision.finite or abs(income(found).value - 100 / 3) <= found.decision.error


def test_force_and_flow_along_lines(tmp_path: Path) -> None:
    """15 years of 100 + 10t at a force 0.05 + 0.005t (interest theory notes, section 13)."""
    table = pd.DataFrame({"t": [0, 15], "income": [100, 250], "consumption": 0, "r": [0.05, 0.125]})
    assert_equal(income(assess(table, continuous(None, "linear"))), "1461.71")


def test_flow_accumulated_at_a_fading_force() -> None:
    """60 + 10t for 25 years at a force 1/(6 + t) accumulates to 7750 (interest theory notes, section 13)."""
    t = np.arange(25 * 16 + 1) / 16
    found = assess(incomes(60 + 10 * t, t, r=1 / (6 + t)), continuous(None, "smooth"))
    assert found.decision.error < 1e-4
    assert abs(income(found).value - 7750 * 6 / 31) <= found.decision.error


def test_accumulation_under_a_force_in_two_pieces() -> None:
    """1000 grows to 1747.17 from t = 3 to 7, at 0.04 + 0.003t^2 until 5 and 0.01 + 0.03t after (CT1, April 2011)."""
    later = np.array([5.0, 6.0, 7.0])
    wanted = continuous(None, "linear", horizon={"terminal_wealth": Decimal("1747.17")})
    at_five = assess(incomes([0.0] * 3, later, r=0.01 + 0.03 * later), wanted).present_values.terminal_wealth.value
    earlier = np.array([3.0, 3.5, 4.0, 4.5, 5.0])
    first = continuous(None, "smooth", horizon={"terminal_wealth": at_five}, household={"wealth": 1000})
    found = assess(incomes([0.0] * 5, earlier, r=0.04 + 0.003 * earlier**2), first)
    assert found.slack.per_effective_unit is not None
    assert abs(found.slack.per_effective_unit.value) <= 0.005 / 1.74717 + found.decision.error
    assert found.decision.error < 1e-9


def test_a_deferred_stream_under_a_force_in_three_pieces(tmp_path: Path) -> None:
    """50e^(0.01t) from t = 9 to 12 at 0.04 + 0.01t until 4, 0.12 - 0.01t until 8, then 0.06 (CT1, April 2007; computed)."""
    own = {"basis": "per effective unit"}
    stream = continuous("0.06", "linear", growth={"g": Decimal("0.01")}, amounts=own)
    at_nine = income(assess(incomes([50 * e**0.09] * 2, [0, 3]), stream)).value
    waiting = continuous("0.06", "linear", horizon={"terminal_wealth": at_nine})
    at_eight = assess(incomes([0.0, 0.0], [8, 9]), waiting).present_values.terminal_wealth.value
    given = {"horizon": {"terminal_wealth": at_eight}}
    found = rated(tmp_path, ["0", "4", "8"], ["0.04", "0.08", "0.04"], "linear", "0", **given).present_values.terminal_wealth
    assert_equal(found, "88.8165155277468605152845210797", more=1e-13)


# ------------------------------------------------------------------------------------------------------------- balanced growth

BALANCED = [
    # w, c, r, n, g, k(0), income, consumption, slack; computed from w/(r - n - g), c/(r - n - g)
    ("1", "1.1", "0.06", "0.01", "0.02", "3.3333333333333333", "100/3", "110/3"),
    ("0.8", "0.9", "0.05", "0.02", "0.01", "5", "40", "45"),
    ("2", "1.9", "0.045", "0.005", "0.0175", "-4", "800/9", "760/9"),
]


def perpetual(folder: Path, w: str, c: str, r: str, n: str, g: str, wealth: str) -> Assessment:
    """A plan on its balanced growth path from the start, from a file, so that its figures are decimals."""
    file = folder / "plan.csv"
    file.write_text(f"t,wage,consumption\n0,{w},{c}\n1,{w},{c}\n", encoding="utf-8")
    given = continuous(
        r,
        "linear",
        growth={"g": Decimal(g), "n": Decimal(n)},
        household={"wealth": Decimal(wealth)},
        amounts={"basis": "per effective unit"},
    )
    given["horizon"] = {"kind": "perpetual", "tail": "balanced growth"}
    return assess(file, given)


@pytest.mark.parametrize(("w", "c", "r", "n", "g", "wealth", "income", "consumption"), BALANCED)
def test_balanced_growth(
    w: str, c: str, r: str, n: str, g: str, wealth: str, income: str, consumption: str, tmp_path: Path
) -> None:
    """Constant flows for ever are worth w/(r - n - g) and c/(r - n - g) (Acemoglu 2009, ch. 8); slack is exact."""
    found = perpetual(tmp_path, w, c, r, n, g, wealth)
    values, slack = found.present_values, found.slack.per_effective_unit
    assert abs(Fraction(values.income.whole.value) - Fraction(income)) <= Fraction(values.income.whole.bound)
    assert abs(Fraction(values.consumption.whole.value) - Fraction(consumption)) <= Fraction(values.consumption.whole.bound)
    expected = Fraction(wealth) + Fraction(income) - Fraction(consumption)
    assert slack is not None
    assert abs(Fraction(slack.value) - expected) <= Fraction(slack.bound)
    assert found.verdict == "PASS"
    affordable = Fraction(w) + (Fraction(r) - Fraction(n) - Fraction(g)) * Fraction(wealth)
    assert found.slack.consumption_scale == pytest.approx(float(affordable / Fraction(c)), rel=1e-13)


@pytest.mark.parametrize(
    ("w", "c", "r", "n", "g", "verdict"),
    [
        ("1", "1.1", "0.03", "0.01", "0.02", "FAIL"),
        ("1.1", "1", "0.03", "0.01", "0.02", "PASS"),
        ("1", "1.1", "0.025", "0.01", "0.02", "FAIL"),
        ("1.1", "1", "0.025", "0.01", "0.02", "PASS"),
    ],
)
def test_nothing_is_finite_up_to_r_equal_to_growth(
    w: str, c: str, r: str, n: str, g: str, verdict: str, tmp_path: Path
) -> None:
    """At r = n + g, an exact tie in decimals, and below, both present values are infinite and the larger flow wins."""
    found = perpetual(tmp_path, w, c, r, n, g, "1000")
    assert found.verdict == verdict
    assert found.slack.per_effective_unit is None
    assert found.conditions.convergence is not None
    assert found.conditions.convergence.holds is False


@pytest.mark.parametrize("r", ["0.03", "0.025"])
def test_equal_flows_leave_wealth_at_an_exact_tie(r: str, tmp_path: Path) -> None:
    """Where the net flow is nothing for ever, slack is the wealth that is never used, even at r = n + g and below."""
    found = perpetual(tmp_path, "1", "1", r, "0.01", "0.02", "7")
    assert (found.verdict, found.slack.per_effective_unit is not None) == ("PASS", True)
    assert_equal(found.slack.per_effective_unit or Bounded(0.0, 0.0), "7")


# ------------------------------------------------------------------------------------------------------------------ life cycle

# Modigliani & Brumberg 1954; Yaari 1964; all computed from the closed form


def working_life(r: str, work: int, life: int, income: float, consumption: float, wealth: float) -> Assessment:
    """Yearly totals, spread: income until retirement, consumption until death."""
    table = pd.DataFrame({"t": range(life), "income": [income] * work + [0.0] * (life - work), "consumption": consumption})
    given = settings(r, market={"compounding": "continuous"}, amounts={"timing": "spread"}, household={"wealth": wealth})
    return assess(table, given)


@pytest.mark.parametrize(
    ("r", "work", "life", "income", "wealth", "human", "first"),
    [
        ("0.04", 45, 65, 1.0, 0.0, "20.8675277944603365425798819892", 0.901671478889334551849908960214),
        ("0", 30, 50, 50000.0, 20000.0, "1500000.00000000000000000000000", 30400.0),
    ],
)
def test_level_consumption_over_a_life(
    r: str, work: int, life: int, income: float, wealth: float, human: str, first: float
) -> None:
    """With r = rho consumption is level; what exhausts the budget passes, one per cent more fails by a known sum."""
    found = working_life(r, work, life, income, first, wealth)
    slack, values = found.slack.per_effective_unit, found.present_values
    assert slack is not None
    assert found.verdict == "PASS"
    assert abs(slack.value) <= slack.bound + 2.0**-53 * values.consumption.whole.value
    assert found.conditions.transversality.holds is True
    assert_equal(values.income.whole, human)
    more = working_life(r, work, life, income, 1.01 * first, wealth)
    assert more.verdict == "FAIL"
    assert more.slack.per_household is not None
    assert more.slack.per_household.value == pytest.approx(-0.01 * (float(human) + wealth), rel=1e-12)


def test_growing_consumption_over_a_life() -> None:
    """60000 a year for 40 of 60 years 50000 to start with, consumption growing by 0.5 %: both stages balance."""
    first, saved, growth = 46584.7527448156077838769853300, 895516.474056610185597856252485, 0.005
    at_work = pd.DataFrame({"t": [0, 40], "income": 60000.0, "consumption": [first, first * exp(growth * 40)]})
    given = continuous("0.03", "geometric", household={"wealth": 50000}, horizon={"terminal_wealth": saved})
    work = assess(at_work, given).require(transversality=True)
    assert work.slack.per_household is not None
    assert abs(work.slack.per_household.value) <= work.slack.per_household.bound + 1e-14 * first * 40
    assert_equal(income(work), "1397611.57617559580671004478583")
    retired = pd.DataFrame({"t": [0, 20], "income": 0.0, "consumption": first * exp(growth * 40)})
    unit = {"basis": "per effective unit"}
    given = continuous("0.03", "linear", growth={"g": Decimal("0.005")}, household={"wealth": saved}, amounts=unit)
    rest = assess(retired, given).require(transversality=True)
    assert rest.slack.per_household is not None
    assert abs(rest.slack.per_household.value) <= rest.slack.per_household.bound + 1e-14 * first * 40


# ---------------------------------------------------------------------------------------------------------------- real figures

MACRO = {
    # statsmodels, datasets/macrodata: real disposable income and consumption, billions of 2005 dollars at annual rates;
    # computed with flows and the real interest rate held over each quarter: income, consumption, slack, final discount factor
    "continuous": (
        "177735.4288748601280192737",
        "160631.4059852267292047717",
        "17104.02288963339881450204",
        "0.5074916608621080557537864",
    ),
    "annual": (
        "179757.2729758217212486098",
        "162481.8530866920755719132",
        "17275.41988912964567669661",
        "0.5187581778695682301758477",
    ),
}


@pytest.mark.parametrize("compounding", MACRO)
def test_half_a_century_of_quarters(compounding: str, tmp_path: Path) -> None:
    """The United States, 1959Q1 to 2009Q3, through the command line: quarters of annual rates, often at negative interest."""
    macrodata = pytest.importorskip("statsmodels.datasets.macrodata")
    data = macrodata.load_pandas().data
    rows = zip(data.index, data.realdpi, data.realcons, data.realint, strict=True)
    lines = [f"{i / 4},{dpi},{cons},{Decimal(str(percent)) / 100}" for i, dpi, cons, percent in rows]
    plan = tmp_path / "quarters.csv"
    plan.write_text("\n".join(["t,income,consumption,r", *lines]) + "\n", encoding="utf-8")
    plan.with_suffix(".toml").write_text(
        f'''[market]
compounding = "{compounding}"
[amounts]
timing = "spread"
quoted = "per year"
[horizon]
kind = "finite"
terminal_wealth = 1
''',
        encoding="utf-8",
    )
    command = [sys.executable, "-W", "error", "-m", "budgetcheck", "assess", str(plan), "--report", "json"]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    report = json.loads(done.stdout)
    values = report["present_values"]
    income, consumption, slack, last = MACRO[compounding]
    assert_equal(Bounded(values["income"]["value"], values["income"]["bound"]), income)
    assert_equal(Bounded(values["consumption"]["value"], values["consumption"]["bound"]), consumption)
    assert_equal(Bounded(values["terminal_wealth"]["value"], values["terminal_wealth"]["bound"]), last)
    found = report["slack"]["per_effective_unit"]
    assert_equal(Bounded(found["value"], found["bound"]), str(Decimal(slack) - Decimal(last)))
    assert (report["verdict"], report["error"]["reconstruction"]) == ("PASS", 0.0)


def test_a_hundred_thousand_rows_lose_nothing() -> None:
    """(1 − e^(−rT))/r over 100,000 rows of a column r (compound interest, closed form): running sums do not drift."""
    t = np.arange(100_001) / 1000
    table = incomes(np.ones_like(t), t, r=np.full_like(t, 0.03))
    found = assess(table, continuous(None, "linear"))
    # e^(−3) = 0.049787068367863944 (from memory, any table of exponentials)
    expected = (1 - 0.049787068367863944) / 0.03
    assert income(found).bound < 1e-12 * expected
    # the figures are the binary numbers nearest to 0.03 and to multiples of 0.001, each off by up to 2**-53 of itself
    assert abs(income(found).value - expected) <= income(found).bound + 4 * 2.0**-53 * expected
