"""Laws that hold exactly, whatever the plan (common practice; checks of arithmetic, not of a published figure)."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import pandas as pd
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

import budgetcheck
from budgetcheck import Assessment

ULP = 2.0**-52

rates = st.floats(-0.05, 0.12).map(lambda x: round(x, 4))
amounts = st.floats(0.0, 1e5).map(lambda x: round(x, 2))
positive = st.floats(1.0, 1e5).map(lambda x: round(x, 2))
timings = st.sampled_from(("continuous", "spread", "in advance", "in arrears", "at mid-period"))
paths = st.sampled_from(("step", "linear", "geometric", "smooth"))
bases = st.sampled_from(("per person", "per household", "economy", "per effective unit"))
compoundings = st.sampled_from(("continuous", "annual", "semiannual", "quarterly", "monthly", "daily"))


@dataclass(frozen=True)
class Case:
    """A plan as a table and its assumptions."""

    table: pd.DataFrame
    assumptions: dict[str, dict[str, Any]]

    def assess(self) -> Assessment:
        """Assess it."""
        return budgetcheck.assess(self.table, self.assumptions)

    def having(self, section: str, **values: object) -> Case:
        """The same plan with other assumptions in one section."""
        return replace(self, assumptions={**self.assumptions, section: {**self.assumptions.get(section, {}), **values}})


@st.composite
def cases(draw: st.DrawFn, *, timing: st.SearchStrategy[str] = timings, perpetual: bool | None = None) -> Case:
    """Plans over the whole family."""
    rows = draw(st.integers(2, 9))
    gaps = draw(st.lists(st.floats(0.1, 5.0).map(lambda x: round(x, 3)), min_size=rows - 1, max_size=rows - 1))
    times = [round(sum(gaps[:i]), 3) for i in range(rows)]
    table = pd.DataFrame(
        {
            "t": times,
            "wage": draw(st.lists(positive, min_size=rows, max_size=rows)),
            "consumption": draw(st.lists(positive, min_size=rows, max_size=rows)),
        }
    )
    market: dict[str, Any] = {"compounding": draw(compoundings)}
    if draw(st.booleans()):
        table["r"] = draw(st.lists(rates, min_size=rows, max_size=rows))
    else:
        market["r"] = draw(rates)
    how = draw(timing)
    stated: dict[str, Any] = {"timing": how, "basis": draw(bases)}
    if how == "continuous":
        stated["path"] = draw(paths)
    endless = draw(st.booleans()) if perpetual is None else perpetual
    horizon: dict[str, Any] = {"kind": "perpetual", "tail": "balanced growth"}
    if not endless:
        horizon = {"kind": "finite", "terminal_wealth": draw(amounts)}
    household = {"wealth": draw(amounts), "members": draw(st.integers(1, 6)), "productivity": 1.25, "households": 3}
    growth = {"g": draw(rates), "n": draw(rates)}
    return Case(table, {"market": market, "growth": growth, "household": household, "amounts": stated, "horizon": horizon})


def slack(assessment: Assessment) -> tuple[float, float]:
    """Slack per household and what is proved of it."""
    assume(assessment.slack.per_household is not None)
    assert assessment.slack.per_household is not None
    return assessment.slack.per_household.value, assessment.slack.per_household.bound


@given(cases())
def test_both_routes_agree(case: Case) -> None:
    """Levels discounted with e^(−R) and units of human capital discounted with e^(−Λ) give one slack, within the bounds."""
    difference = case.assess().routes_differ
    assert abs(difference.value) <= difference.bound


@given(cases(), st.sampled_from((2.0, 0.5, 1024.0)))
def test_amounts_are_linear(case: Case, factor: float) -> None:
    """Multiplying every amount by a power of two multiplies slack by it."""
    table = case.table.assign(wage=case.table.wage * factor, consumption=case.table.consumption * factor)
    scaled = Case(table, case.assumptions)
    for section, key in (("household", "wealth"), ("horizon", "terminal_wealth")):
        if key in case.assumptions[section]:
            scaled = scaled.having(section, **{key: case.assumptions[section][key] * factor})
    one, bound = slack(case.assess())
    other, other_bound = slack(scaled.assess())
    assert abs(other - factor * one) <= factor * bound + other_bound


@given(cases(), st.sampled_from((1000, 0.001, 7)))
def test_the_money_unit_changes_nothing(case: Case, unit: float) -> None:
    """Amounts printed in thousands and declared so give the slack of amounts printed in full."""
    table = case.table.assign(wage=case.table.wage / unit, consumption=case.table.consumption / unit)
    one, bound = slack(case.assess())
    other, other_bound = slack(Case(table, case.assumptions).having("amounts", unit=unit).assess())
    size = float(abs(case.table[["wage", "consumption"]]).to_numpy().max()) * 1e3
    # the division above is rounded, by at most one unit in the last place of each amount
    assert abs(other - one) <= bound + other_bound + 4 * ULP * max(size, abs(one), _gross(case))


def _gross(case: Case) -> float:
    values = case.assess().present_values_per_household
    return abs(values.income.whole.value) + abs(values.consumption.whole.value)


@given(cases(), st.integers(-2000, 2000))
def test_the_origin_of_time_changes_nothing(case: Case, origin: int) -> None:
    """t counts from the first row, whatever is printed there."""
    printed = [f"{t + origin:.3f}" for t in case.table.t]
    text = Case(case.table.assign(t=printed), case.assumptions)
    plain = Case(case.table.assign(t=[f"{t:.3f}" for t in case.table.t]), case.assumptions)
    one, bound = slack(plain.assess())
    other, other_bound = slack(text.assess())
    assert abs(one - other) <= bound + other_bound


@given(cases(timing=st.just("continuous"), perpetual=False), st.data())
def test_splitting_the_plan_adds_up(case: Case, data: st.DataObject) -> None:
    """Slack to T is slack to any row between, with any wealth required there, plus the discounted slack of going on with it."""
    path = data.draw(st.sampled_from(("step", "linear", "geometric")))
    case = case.having("amounts", path=path, basis="per household")
    row, handed_on = data.draw(st.integers(1, 8)), data.draw(positive)
    assume(1 <= row < len(case.table) - 1)
    first = Case(case.table[: row + 1], case.assumptions).having("horizon", terminal_wealth=handed_on).assess()
    rest = Case(case.table[row:], case.assumptions).having("household", wealth=handed_on).assess()
    whole, bound = slack(case.assess())
    (one, one_bound), (two, two_bound) = slack(first), slack(rest)
    factor = first.present_values_per_household.terminal_wealth.value / handed_on
    # the second part reads its dates anew, as differences of floating-point times
    rounding = 1e-13 * factor * _gross(case)
    assert abs(whole - (one + factor * two)) <= bound + one_bound + 1.01 * factor * two_bound + rounding


@given(cases(), st.data())
def test_slack_rises_with_wages_and_falls_with_consumption(case: Case, data: st.DataObject) -> None:
    """For totals and for step, linear and geometric paths no row of wages lowers slack, and none of consumption raises it."""
    assume(case.assumptions["amounts"].get("path") != "smooth")
    row = data.draw(st.integers(0, len(case.table) - 1))
    before, bound = slack(case.assess())
    for column, direction in (("wage", 1.0), ("consumption", -1.0)):
        table = case.table.copy()
        table.loc[row, column] *= 1.5
        after, after_bound = slack(Case(table, case.assumptions).assess())
        assert direction * (after - before) >= -(bound + after_bound)


@given(cases())
def test_weights_give_the_present_values(case: Case) -> None:
    """Where values enter linearly a present value is the sum of weight times value; a negative weight is reported."""
    assume(case.assumptions["amounts"].get("path") != "geometric")
    assessment = case.assess()
    lines = assessment.present_values.lines
    for line, weights, column in zip(lines, assessment.weights.amounts, ("wage", "consumption"), strict=True):
        assume(line.reach == "finite")
        value = math.fsum(weights * case.table[column].to_numpy())
        gross = math.fsum(abs(weights) * case.table[column].to_numpy())
        assert math.isclose(value, line.whole.value, rel_tol=0, abs_tol=1e-11 * gross + 1e-300)
    reported = any(finding.rule == "negative-weight" for finding in assessment.findings)
    assert reported == bool((assessment.weights.amounts < 0).any())


@given(st.lists(st.tuples(amounts, amounts, amounts), min_size=2, max_size=8), rates, timings)
def test_a_column_may_be_divided(rows: list[tuple[float, float, float]], r: float, timing: str) -> None:
    """Two columns of a role are worth what their sum is worth, each with its own present value."""
    stated: dict[str, Any] = {"market": {"r": r}, "horizon": {"kind": "finite", "terminal_wealth": 0}}
    stated["amounts"] = {"timing": timing, **({"path": "smooth"} if timing == "continuous" else {})}
    first, second, consumed = zip(*rows, strict=True)
    parts = pd.DataFrame({"t": range(len(rows)), "wage": first, "pension": second, "consumption": consumed})
    summed = parts.assign(wage=[a + b for a, b in zip(first, second, strict=True)]).drop(columns="pension")
    divided = budgetcheck.assess(parts, {**stated, "columns": {"pension": "income"}})
    whole = budgetcheck.assess(summed, stated)
    assert [line.name for line in divided.present_values.lines] == ["wage", "pension", "consumption"]
    one, two = divided.present_values.income.whole, whole.present_values.income.whole
    gross = math.fsum(abs(divided.weights.amounts[0])) * 2e5
    assert abs(one.value - two.value) <= one.bound + two.bound + ULP * gross


@given(rates, rates, st.integers(1, 9))
def test_exact_ties_are_seen_in_decimals(g: float, n: float, digits: int) -> None:
    """r = g + n is a tie although the floating-point sum may differ: present values are infinite, and equal flows cancel."""
    g, n = round(g, digits), round(n, digits)
    r = round(g + n, digits)
    stated = {
        "market": {"r": r},
        "growth": {"g": g, "n": n},
        "household": {"wealth": 1},
        "amounts": {"timing": "continuous", "path": "linear", "basis": "per effective unit"},
        "horizon": {"kind": "perpetual", "tail": "balanced growth"},
    }
    table = pd.DataFrame({"t": [0, 1], "wage": [1.0, 2.0], "consumption": [1.0, 2.0]})
    assessment = budgetcheck.assess(table, stated)
    assert assessment.conditions.convergence is not None
    assert assessment.conditions.convergence.holds is False
    assert assessment.verdict == "PASS"
    more = budgetcheck.assess(table.assign(consumption=[1.0, 2.0001]), stated)
    assert more.verdict == "FAIL"


@pytest.mark.parametrize("compounding", ["annual", "quarterly", "monthly"])
def test_ties_under_compounding(compounding: str) -> None:
    """(1 + r/m) = (1 + g/m)(1 + n/m) is a tie too, seen in rational arithmetic."""
    m = {"annual": 1, "quarterly": 4, "monthly": 12}[compounding]
    # (1 + 0.02)(1 + 0.01) − 1 = 0.0302 per conversion period
    stated = {
        "market": {"r": round(0.0302 * m, 6), "compounding": compounding},
        "growth": {"g": round(0.02 * m, 6), "n": round(0.01 * m, 6)},
        "amounts": {"timing": "spread"},
        "horizon": {"kind": "perpetual", "tail": "balanced growth"},
    }
    table = pd.DataFrame({"t": [0, 1], "wage": [1.0, 2.0], "consumption": [1.0, 1.0]})
    assessment = budgetcheck.assess(table, stated)
    assert assessment.conditions.convergence is not None
    assert assessment.conditions.convergence.holds is False
