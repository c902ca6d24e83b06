"""Corners in which a figure, a date or a verdict is easily got wrong; expected values by hand, or from ball arithmetic."""

from __future__ import annotations

import io
import math
from decimal import Decimal, localcontext
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from oracle import exact

from budgetcheck import Assessment, InputRefused, assess

LINEAR = {"timing": "continuous", "path": "linear"}
PERPETUAL = {"kind": "perpetual", "tail": "balanced growth"}
FINITE = {"kind": "finite", "terminal_wealth": 0}


def plan(text: str, **tree: Any) -> Assessment:
    """The assessment of a table written as 't,wage,consumption / 0,1,1 / 1,1,1'."""
    return assess(pd.read_csv(io.StringIO(text.replace(" / ", "\n")), dtype=str), tree)


def test_a_drift_hidden_under_the_last_digit_gives_no_pass() -> None:
    """Wages that fall by 0.15 % a year, printed in whole units, seem to stand still over the last rows; the plan they are from
    lacks 16.3 (its tail in closed form), and that may not come out as PASS."""
    rows = [f"{2030 + t},{round(53.4 * math.exp(-0.0015 * (t + 0.5)))},52" for t in range(41)]
    text = "year,wage,consumption\n" + "\n".join(rows)
    found = assess(
        pd.read_csv(io.StringIO(text), dtype=str),
        {"market": {"r": 0.02}, "household": {"wealth": 100}, "horizon": {"kind": "perpetual"}},
    )
    assert found.verdict == "UNDECIDED"


@pytest.mark.parametrize("shift", ["0", "0.01", "0.02"])
def test_a_rate_that_moves_as_far_as_it_could_move_again_is_undecided(shift: str) -> None:
    """r falls from 0.03 to 0.02 in the last rows with g = 0.01; one more such step leaves nothing to discount with. Adding the
    same to r and to g changes nothing."""
    up = Decimal(shift)
    rates = [Decimal("0.03") + up] * 35 + [Decimal("0.02") + up] * 6
    frame = pd.DataFrame({"t": [str(t) for t in range(41)], "wage": "1", "consumption": "2", "r": [str(r) for r in rates]})
    tree = {
        "growth": {"g": Decimal("0.01") + up},
        "household": {"wealth": 250},
        "amounts": {"basis": "per effective unit"},
        "horizon": {"kind": "perpetual"},
    }
    assert assess(frame, tree).verdict == "UNDECIDED"


def test_rates_that_floating_point_does_not_resolve_are_refused(tmp_path: Path) -> None:
    """An annual rate of −1 + 5.7e−17 is no rate that 53 bits hold: no bound of the exponent would mean anything."""
    rows = "\n".join(f"{2000 + i},0,{'1e-70' if i == 5 else 0},-0.99999999999999994337862" for i in range(6))
    (tmp_path / "plan.csv").write_text(f"year,wage,consumption,r\n{rows}\n")
    tree = {
        "market": {"compounding": "annual"},
        "amounts": {"timing": "in advance"},
        "household": {"wealth": 1.3e11},
        "horizon": FINITE,
    }
    with pytest.raises(InputRefused, match="does not resolve"):
        assess(tmp_path / "plan.csv", tree)


def test_no_figure_overflows_within_the_supported_range() -> None:
    """Large amounts on short intervals behind a large exponent: the products of the two count, not only their integrals."""
    r = "-0." + "9" * 15
    text = f"t,wage,consumption,r / 0,0,0,{r} / 18,0,0,{r} / 18.00000000034,1e15,1e15,0 / 18.00000000072,1e15,1e14,0"
    tree = {"market": {"compounding": "annual"}, "household": {"productivity": Decimal("1e-15")}, "horizon": FINITE}
    with pytest.raises(InputRefused, match="supported"):
        plan(text, amounts={"timing": "continuous", "path": "step"}, **tree)


def test_wealth_in_household_money_is_refused_before_it_overflows() -> None:
    """The factor A(0)·L(0)/H counts in the size of wealth too."""
    with pytest.raises(InputRefused, match="supported"):
        plan(
            "t,wage,consumption / 0,0,0 / 1000,0,1e-10",
            market={"r": Decimal("0.68")},
            household={"productivity": Decimal("1e15")},
            amounts=LINEAR,
            horizon=FINITE,
        )


@pytest.mark.parametrize("digits", ["2e-45", "5e-46"])
def test_declared_rates_are_told_from_a_tie_far_below_rounding(digits: str) -> None:
    """r is above g + n by 2e−45 or 5e−46, compounded annually: present values are finite, and right to their bounds."""
    with localcontext(prec=100):
        rate = (1 + Decimal("0.02")) * (1 + Decimal("0.03")) - 1 + Decimal(digits)
    tree = {
        "market": {"r": rate, "compounding": "annual"},
        "growth": {"g": Decimal("0.02"), "n": Decimal("0.03")},
        "amounts": {"basis": "per effective unit", **LINEAR},
        "horizon": PERPETUAL,
    }
    text = "t,wage,consumption / 0,3,2 / 1,3,2"
    found, truth = plan(text, **tree), exact(text.replace(" / ", "\n"), tree)
    income = found.present_values.income
    assert income.value is not None
    assert truth.income is not None
    assert abs(income.value - float(truth.income)) <= income.bound + 1e-12 * abs(income.value)


def test_wealth_below_zero_between_two_rows_is_found() -> None:
    """Wealth 7.49 − t/2 + t²/120 is below zero for about 28.9 < t < 31.1 (by hand), also where it is no lower than at a later
    row."""
    for text in ("t,wage,consumption / 0,0.5,1 / 60,1.5,1", "t,wage,consumption / 0,0.5,1 / 60,1.5,1 / 120,1.251,1"):
        found = plan(text, market={"r": 0}, household={"wealth": Decimal("7.49")}, amounts=LINEAR, horizon=FINITE).wealth_path
        assert found.first_negative == pytest.approx(30 - math.sqrt(1.2), abs=1e-4)
        debt = found.per_household.largest_debt
        assert debt is not None
        assert (debt.t, debt.value) == (pytest.approx(30, abs=1e-3), pytest.approx(0.01, abs=1e-9))


def test_a_debt_to_begin_with_is_a_debt_from_the_start() -> None:
    """Initial wealth below zero, although the first wage makes up for it at once."""
    found = plan(
        "t,wage,consumption / 0,10,1 / 1,1,2 / 2,1,1",
        market={"r": 0},
        household={"wealth": -5},
        amounts={"timing": "in advance"},
        horizon=FINITE,
    ).wealth_path
    assert found.first_negative == 0.0
    assert found.minimum.value == -5.0


def test_what_is_uncertain_at_a_date_is_what_came_before_it() -> None:
    """With r = −0.1 the bound grows by e^{0.1 t}; wealth at the start is exact all the same."""
    rows = " / ".join(f"{10 * i},1,1" if i else "0,0,0.5" for i in range(41))
    found = plan(
        f"t,wage,consumption / {rows}", market={"r": Decimal("-0.1")}, household={"wealth": -50}, amounts=LINEAR, horizon=FINITE
    ).wealth_path
    assert found.first_negative == 0.0
    assert found.minimum.error < 1e-9


def test_with_too_few_rows_the_path_of_wealth_is_not_claimed() -> None:
    """Three rows of an undeclared path: nothing is known between them."""
    text = "t,wage,consumption / 0,1,2 / 10,1,2 / 20,5,2"
    found = plan(text, market={"r": 0}, household={"wealth": 8}, horizon=FINITE)
    assert found.wealth_path.per_household.minimum.error == math.inf
    assert "no debt" not in found.report(found)


def test_a_wage_taxed_away_for_ever_is_worth_its_rows() -> None:
    """Income and deductions that cancel beyond the last row leave a finite present value, and a scale with all of wealth in
    it."""
    found = plan(
        "t,gross,tax,consumption / 0,5,2,3 / 1,5,3,2 / 2,5,5,0",
        market={"r": Decimal("0.02")},
        growth={"g": Decimal("0.02")},
        household={"wealth": 100, "wealth_basis": "per effective unit"},
        amounts={"basis": "per effective unit", **LINEAR},
        horizon=PERPETUAL,
        columns={"gross": "income", "tax": "deduction"},
    )
    # r = g: (3 + 2)/2 + (2 + 0)/2 by the trapezoidal rule, which is exact here
    assert found.present_values.income.value == pytest.approx(3.5)
    assert found.slack.share_of_resources == pytest.approx((103.5 - 3.5) / 103.5)
    assert found.verdict == "PASS"


def test_a_negative_factor_on_consumption_means_nothing() -> None:
    """Where debt exceeds lifetime income no scale of consumption exhausts the budget."""
    found = plan(
        "t,wage,consumption / 0,1,1 / 10,1,1 / 20,1,2",
        market={"r": Decimal("0.02")},
        household={"wealth": -100},
        amounts=LINEAR,
        horizon=FINITE,
    )
    assert found.slack.consumption_scale is None


def test_a_level_amount_over_five_centuries() -> None:
    """Slack a year at r = 0.3 is slack times 0.3 once the end no longer matters, however few rows there are (common
    practice)."""
    found = plan(
        "t,wage,consumption / 0,1,0 / 500,0,0", market={"r": Decimal("0.3")}, amounts={"timing": "in advance"}, horizon=FINITE
    )
    assert found.slack.level_per_year == pytest.approx(0.3, rel=1e-12)
