"""Conditions of plans out of models: optimal consumption, the flow of wealth, wrong cells found, debts and their limits.

Sources of the figures: F. Modigliani and R. Brumberg (1954), M. Yaari (1964, 1965): the life cycle in closed form; N. G.
Mankiw, Macroeconomics, chapter on consumption; R. Barro and X. Sala-i-Martin, Economic Growth, 2nd ed. (2004), ch. 2 (from
memory); the growth paths and their sources: growth_models.py. Second opinion: scipy's integrator of differential equations.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from decimal import Decimal
from functools import partial
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from growth_models import GrowthPath, Smith, model
from scipy.integrate import solve_ivp
from scipy.interpolate import CubicSpline
from scipy.optimize import brentq

from budgetcheck import NotAffordable, assess
from budgetcheck.assessment import Assessment
from budgetcheck.findings import Severity
from budgetcheck.preferences import BestPath

Settings = dict[str, Any]


def finite(r: str | None, path: str | None = None, **more: Any) -> Settings:
    """A finite plan at a continuous r, in continuous data along a path, or else of totals spread over their periods."""
    amounts = {"timing": "spread"} if path is None else {"timing": "continuous", "path": path}
    given: Settings = {
        "market": {} if r is None else {"r": Decimal(r)},
        "amounts": amounts,
        "horizon": {"kind": "finite", "terminal_wealth": 0},
    }
    for section, body in more.items():
        given[section] = body if isinstance(body, list) else given.get(section, {}) | body
    return given


def best(found: Assessment) -> BestPath:
    """The path that preferences would choose."""
    assert found.preferences is not None
    assert found.preferences.best is not None
    return found.preferences.best


def held(found: Assessment) -> dict[str, bool | None]:
    """Which conditions hold, of those that apply."""
    names = ("flow_of_wealth", "euler", "utility", "marginal_utility", "transversality", "no_ponzi", "borrowing")
    conditions = {name: getattr(found.conditions, name) for name in names}
    return {name: condition.holds for name, condition in conditions.items() if condition is not None}


# ------------------------------------------------------------------------------------------------------------------ life cycle

LIVES = [
    # r, ρ, θ, wealth, income, years of work and of life; human wealth, c(0), growth of c, wealth on retirement, slack when c is
    # one per cent higher; Modigliani & Brumberg 1954, Yaari 1964; computed, c(0) = (K + y(1 − e^(−rN))/r)·κ/(1 − e^(−κT)) with
    # κ = r − (r − ρ)/θ
    (
        ("0.03", "0.02", 2, 50000, 60000, 40, 60),
        (1397611.57617559580671, 46584.7527448156077839, 0.005, 895516.474056610185598, -14476.1157617559580671),
    ),
    (
        ("0.04", "0.04", 1, 0, 1, 45, 65),
        (20.8675277944603365426, 0.901671478889334551850, 0.0, 12.4131091826486655329, -0.208675277944603365426),
    ),
    (("0", "0", 1, 20000, 50000, 30, 50), (1500000.0, 30400.0, 0.0, 608000.0, -15200.0)),
]


def life(figures: tuple[str, str, int, int, int, int, int], consumption: float, **columns: list[float]) -> Assessment:
    """Income until retirement; consumption grows at (r − ρ)/θ, as if with productivity, so that per unit it is constant."""
    r, rho, theta, wealth, income, work, years = figures
    rows = pd.DataFrame({"t": [0, work, years], "income": [income, 0.0, 0.0], "consumption": consumption} | columns)
    given = finite(
        r,
        "step",
        growth={"g": (Decimal(r) - Decimal(rho)) / theta},
        household={"wealth": wealth, "wealth_basis": "per household"},
        amounts={"basis": "per effective unit"},
        columns={"income": {"role": "income", "basis": "per household"}},
        preferences={"rho": Decimal(rho), "theta": theta},
    )
    if "wealth" in columns:
        del given["household"]["wealth"]
    return assess(rows, given)


@pytest.mark.parametrize(("figures", "expected"), LIVES)
def test_consumption_over_a_life(figures: tuple[Any, ...], expected: tuple[float, ...]) -> None:
    """What the best path starts with, whatever the plan in the table; one per cent more overspends by as much."""
    human, first, growth, _, missing = expected
    for share in (1.0, 0.5, 1.01):
        found = life(figures, share * first)
        start = best(found).start
        assert abs(start.value - first) <= start.bound + 2.0**-52 * first
        assert best(found).per_household == start.value
        assert (best(found).growth_first, best(found).growth_last) == pytest.approx((growth, growth), abs=1e-17)
        assert best(found).change == pytest.approx(1.0 / share - 1.0, abs=1e-14)
        assert found.present_values_per_household.income.whole.value == pytest.approx(human, rel=1e-14)
        # consumption at its best growth, if not at its best level
        assert held(found)["euler"] is True
    assert found.slack.per_household is not None
    assert found.slack.per_household.value == pytest.approx(missing, rel=1e-11)
    assert found.verdict == "FAIL"


@pytest.mark.parametrize(("figures", "expected"), LIVES)
def test_wealth_over_a_life(figures: tuple[Any, ...], expected: tuple[float, ...]) -> None:
    """Reported wealth at the start, on retirement and at the end follows from the flows; another figure does not."""
    _, first, _, retired, _ = expected
    found = life(figures, first, wealth=[float(figures[3]), retired, 0.0])
    assert held(found) == dict.fromkeys(("flow_of_wealth", "euler", "marginal_utility", "transversality", "no_ponzi"), True)
    assert found.flow is not None
    assert np.abs(found.flow.residuals).max() <= 1e-13 * (figures[3] + expected[0])
    wrong = life(figures, first, wealth=[float(figures[3]), 1.01 * retired, 0.0])
    assert held(wrong)["flow_of_wealth"] is False
    assert wrong.flow is not None
    assert wrong.flow.first == 0
    assert wrong.flow.suspect is not None
    assert (wrong.flow.suspect.index, wrong.flow.suspect.columns) == (1, ("wealth",))
    assert wrong.flow.suspect.change == pytest.approx(-0.01 * retired, rel=1e-9)


@pytest.mark.parametrize(("figures", "expected"), LIVES)
def test_a_life_in_yearly_totals(figures: tuple[Any, ...], expected: tuple[float, ...]) -> None:
    """The best path does not depend on how income is told: yearly totals by age say the same as rates in two steps."""
    r, rho, theta, wealth, income, work, years = figures
    rows = pd.DataFrame({"age": range(20, 20 + years), "income": [income] * work + [0] * (years - work), "consumption": 1.0})
    given = finite(r, household={"wealth": wealth}, preferences={"rho": Decimal(rho), "theta": theta})
    start = best(assess(rows, given)).start
    assert start.value == pytest.approx(expected[1], abs=start.bound + 1e-14 * expected[1])


def test_propensities_to_consume() -> None:
    """Fifty years to live and thirty to work at r = 0: 0.02 of wealth and 0.6 of income are consumed (Mankiw)."""

    def start(wealth: int, income: int) -> float:
        return best(life(("0", "0", 1, wealth, income, 30, 50), 1.0)).start.value

    assert start(1, 0) == pytest.approx(0.02, rel=1e-14)
    assert start(0, 1) == pytest.approx(0.6, rel=1e-14)
    assert start(70, 3) - start(70, 2) == pytest.approx(0.6, rel=1e-13)


def test_required_wealth_and_single_amounts_change_the_best_path() -> None:
    """At r = 0 and ρ = 0 an inheritance of 50 adds a unit a year over fifty years, a bequest of 100 takes two off (by hand)."""
    rows = pd.DataFrame({"t": [0, 30, 50], "income": [10.0, 0.0, 0.0], "consumption": 1.0})
    given = finite("0", "step", preferences={"rho": 0, "theta": 1})
    assert best(assess(rows, given)).start.value == pytest.approx(6.0, rel=1e-15)
    given["lump_sum"] = [{"t": 20, "role": "income", "amount": 50}]
    assert best(assess(rows, given)).start.value == pytest.approx(7.0, rel=1e-15)
    given["horizon"]["terminal_wealth"] = 100
    assert best(assess(rows, given)).start.value == pytest.approx(5.0, rel=1e-15)


# ----------------------------------------------------------------------------------------------------------- perpetual plans


def for_ever(income: float, r: str, n: str, g: str, rho: str, theta: int, wealth: int, **household: Any) -> Assessment:
    """Constant income per unit of human capital, for ever."""
    rows = pd.DataFrame({"t": [0, 1], "wage": income, "consumption": 1.0})
    given = {
        "market": {"r": Decimal(r)},
        "growth": {"g": Decimal(g), "n": Decimal(n)},
        "household": {"wealth": wealth} | household,
        "amounts": {"timing": "continuous", "path": "linear", "basis": "per effective unit"},
        "horizon": {"kind": "perpetual", "tail": "balanced growth"},
        "preferences": {"rho": Decimal(rho), "theta": theta},
    }
    return assess(rows, given)


@pytest.mark.parametrize("g", ["0", "0.02"])
def test_the_consumption_function(g: str) -> None:
    """c(0) = μ·(k(0) + human wealth), μ = r − n − (r − ρ)/θ = 0.05 (Barro & Sala-i-Martin 2004, eqs 2.14-2.15, from memory)."""
    for wage, wealth in ((1.0, 0), (1.0, 20), (0.0, 20), (3.0, -30)):
        found = for_ever(wage, "0.08", "0.01", g, "0.02", 3, wealth)
        expected = 0.05 * (wealth + wage / (0.08 - 0.01 - float(g)))
        start = best(found).start
        assert abs(start.value - expected) <= start.bound + 2.0**-52 * expected
        assert best(found).growth_first == best(found).growth_last == pytest.approx(0.02, rel=1e-15)


def test_patience_without_limit_has_no_best_path() -> None:
    """Where κ = r − n − (r − ρ)/θ is not positive, waiting always pays and no path exhausts the budget (common practice)."""
    for rho, theta in (("0.005", 1), ("0.01", 1), ("-0.03", 1)):
        found = for_ever(1.0, "0.08", "0.01", "0", rho, theta, 0)
        assert found.preferences is not None
        assert found.preferences.best is None
        assert held(found)["utility"] is False


def test_fair_annuities_do_not_change_the_growth_of_consumption() -> None:
    """At force of mortality μ, c(0) = (r + μ − (r − ρ)/θ)·(k + y/(r + μ)), while growth stays (r − ρ)/θ (Yaari 1965)."""
    found = for_ever(2.0, "0.03", "0", "0", "0.01", 2, 10, hazard=Decimal("0.02"))
    start = best(found).start
    assert abs(start.value - 0.04 * (10 + 2.0 / 0.05)) <= start.bound + 1e-15
    assert best(found).growth_first == best(found).growth_last == pytest.approx(0.01, rel=1e-15)


@pytest.mark.parametrize(
    ("rho", "theta", "g", "rate"),
    [("0.02", 3, "0.02", 0.05), ("0.02", 1, "0.02", 0.01), ("0.01", 1, "0.02", 0.0), ("0.03", Decimal("0.5"), "0.05", -0.005)],
)
def test_when_lifetime_utility_is_finite(rho: str, theta: Any, g: str, rate: float) -> None:
    """ρ − n − (1 − θ)g above zero, exactly in decimals (Barro & Sala-i-Martin 2004, eq. 2.2 and after, from memory)."""
    found = for_ever(1.0, "0.09", "0.01", g, rho, theta, 0).conditions.utility
    assert found is not None
    assert found.rate == pytest.approx(rate, abs=1e-16)
    assert found.holds is (rate > 0)


@pytest.mark.parametrize(("rho", "vanishes"), [("0.05", True), ("0.03", False), ("0.02", False)])
def test_what_is_left_unused_valued_at_marginal_utility(rho: str, vanishes: bool) -> None:
    """With constant consumption below income, what is left grows at r, valued at e^(-ρt): it vanishes only where ρ > r."""
    rows = pd.DataFrame({"t": [0, 1], "wage": 1.0, "consumption": 0.9})
    given = {
        "market": {"r": Decimal("0.03")},
        "amounts": {"timing": "continuous", "path": "linear"},
        "horizon": {"kind": "perpetual", "tail": "balanced growth"},
        "preferences": {"rho": Decimal(rho), "theta": 2},
    }
    found = held(assess(rows, given))
    assert (found["transversality"], found["utility"], found["marginal_utility"]) == (False, True, vanishes)
    assert found["euler"] is (rho == "0.03")


# -------------------------------------------------------------------------------------------------------------- growth models

SAMPLING = {
    "S1": (4, 200),
    "S2": (32, 200),
    "S5": (8, 400),
    "K1": (4, 1000),
    "K2": (4, 400),
    "romer": (4, 400),
    "bsim": (16, 250),
}
"""Rows a year and years: as fine as the first years need, and until the path has converged."""

STARTS = (None, 1.5)
"""k(0)/k*: as published, below the long run, and above it."""


def dates(name: str) -> np.ndarray:
    """t of the rows."""
    per_year, years = SAMPLING[name]
    return np.arange(per_year * years + 1) / per_year


def modelled(name: str, start: float | None = None, consumption: float = 1.0) -> Assessment:
    """The plan of a growth path with its wealth and preferences, its tail declared."""
    path = model(name, start)
    return assess(path.table_with_wealth(dates(name), consumption), path.settings_with_wealth())


def test_rho_of_the_calibrations() -> None:
    """ρ follows from the long run, where r* = ρ + θg: the published calibrations."""
    found = {name: model(name).impatience for name in SAMPLING}
    expected = {"S1": 0.04, "S2": 0.05, "S5": 0.05, "K1": 0.02, "K2": 0.02, "romer": 0.04, "bsim": 0.02}
    assert found == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", SAMPLING)
def test_the_best_path_is_the_model_s(name: str, start: float | None) -> None:
    """Under moving r, preferences ask for the consumption that the model's household chooses, to 1e-7 of it."""
    found = modelled(name, start, consumption=0.9)
    first = model(name, start).at(np.zeros(1))
    assert best(found).start.value == pytest.approx(float(first.c[0]), rel=1e-7)
    assert best(found).change == pytest.approx(1.0 / 0.9 - 1.0, abs=2e-7)
    path = model(name, start)
    growth = (float(first.r[0]) - path.impatience) / path.inverse_elasticity
    assert best(found).growth_first == pytest.approx(growth, rel=1e-9)
    assert best(found).growth_last == pytest.approx(path.g, abs=1e-6)


FIRST_CONSUMPTION = {
    # c(0); S1, S2: Smith 2006, K1, K2: Kurz 1968 (closed forms); romer, bsim: saddle paths solved at 60 digits; all computed
    "S1": 0.672345189951394676910,
    "S2": 0.123306339042264813023,
    "K1": 27.7740432638315722807,
    "K2": 0.662995523095668301671,
    "romer": 1.36087947080096799810,
    "bsim": 0.519099096195776267719,
}


@pytest.mark.parametrize(("name", "first"), FIRST_CONSUMPTION.items())
def test_the_best_path_starts_at_the_published_figure(name: str, first: float) -> None:
    """c(0) = μ(0)·(k(0) + human wealth) with a moving r, to 1e-7 of it."""
    assert best(modelled(name)).start.value == pytest.approx(first, rel=1e-7)


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", SAMPLING)
def test_every_condition_holds_on_an_optimal_path(name: str, start: float | None) -> None:
    """Flow of wealth to 1e-6, Euler equation to 1e-5 a row, utility and both forms of transversality."""
    found = modelled(name, start)
    assert held(found) == dict.fromkeys(
        ("flow_of_wealth", "euler", "utility", "marginal_utility", "transversality", "no_ponzi"), True
    )
    found.require(transversality=True, flow_of_wealth=True, euler=True, utility=True, marginal_utility=True)
    assert found.flow is not None
    assert found.preferences is not None
    assert np.abs(found.flow.residuals).max() < 1e-6
    assert np.abs(found.preferences.euler).max() < 1e-5
    assert abs(found.flow.gap) < 1e-6
    assert found.flow.suspect is None
    assert not [finding for finding in found.findings if finding.rule == "wealth-flow"]


@pytest.mark.parametrize("factor", [0.999, 1.001])
@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", SAMPLING)
def test_a_thousandth_off_breaks_transversality_in_both_forms(name: str, start: float | None, factor: float) -> None:
    """All consumption a thousandth lower leaves wealth of value unused for ever: neither form of transversality holds.

    The Euler equation, which speaks of growth alone, still does."""
    path = model(name, start)
    given = path.settings() | {"preferences": dict(path.preferences)}
    found = assess(path.table(dates(name), factor), given)
    assert found.verdict == ("PASS" if factor < 1.0 else "FAIL")
    assert held(found) == {
        "euler": True,
        "utility": True,
        "marginal_utility": False,
        "transversality": False,
        "no_ponzi": factor < 1.0,
    }
    with pytest.raises(NotAffordable):
        found.require(marginal_utility=True)


def test_another_theta_is_told_from_the_model_s() -> None:
    """Consumption that follows one inverse elasticity does not follow another: the first row shows it."""
    path = model("S1")
    given = path.settings_with_wealth() | {"preferences": {"rho": path.impatience, "theta": 1.0}}
    found = assess(path.table_with_wealth(dates("S1")), given)
    assert held(found)["euler"] is False
    assert held(found)["flow_of_wealth"] is True
    assert found.preferences is not None
    # ln c moves by ∫(r − ρ)(1/α − 1) more than its due over the first quarter
    t = np.array([0.0, 0.25])
    missing = (1.0 - path.inverse_elasticity) * (math.log(path.at(t).c[1] / path.at(t).c[0]) + path.g * 0.25)
    assert found.preferences.euler[0] == pytest.approx(missing, rel=1e-5)


# ------------------------------------------------------------------------------------------------------------ one wrong cell

WRONG = 1.01
ROW = 40
COLUMNS = ("consumption", "wealth", "wage")


def spoilt(rows: pd.DataFrame, column: str, row: int = ROW) -> pd.DataFrame:
    """The table with one per cent added to one cell."""
    rows = rows.copy()
    rows.loc[row, column] *= WRONG
    return rows


def assert_named(found: Assessment, rows: pd.DataFrame, column: str, row: int = ROW) -> None:
    """The cell is the suspect, what would mend it is right to a few per cent, and a warning names it by line and column."""
    assert held(found)["flow_of_wealth"] is False
    assert found.flow is not None
    suspect = found.flow.suspect
    assert suspect is not None
    assert suspect.index == row
    assert column in suspect.columns
    if suspect.columns[0] == column:
        assert suspect.change == pytest.approx(-rows.loc[row, column] * (1.0 - 1.0 / WRONG), rel=0.05)
    named = [f for f in found.findings if f.rule == "wealth-flow" and f.severity is Severity.WARN and f.row == row + 2]
    assert any(finding.column in suspect.columns for finding in named)
    assert any(column == finding.column or repr(column) in finding.message for finding in named)


@pytest.mark.parametrize("column", [*COLUMNS, "r"])
def test_one_wrong_cell_of_a_smooth_path(column: str) -> None:
    """One per cent on one cell of quarterly rows is found by its line and column."""
    path = model("S1")
    rows = spoilt(path.table_with_wealth(dates("S1")), column)
    assert_named(assess(rows, path.settings_with_wealth()), rows, column)


@pytest.mark.parametrize("column", [*COLUMNS, "r"])
def test_one_wrong_cell_of_a_printed_table(column: str, tmp_path: Path) -> None:
    """The same in a file that prints ten digits."""
    path, file = model("S1"), tmp_path / "plan.csv"
    rows = path.table_with_wealth(dates("S1"))
    rows.to_csv(file, index=False, float_format="%.10g")
    right = assess(file, path.settings_with_wealth())
    assert held(right)["flow_of_wealth"] is True
    assert right.flow is not None
    assert np.abs(right.flow.residuals).max() < 1e-6
    rows = spoilt(rows, column)
    rows.to_csv(file, index=False, float_format="%.10g")
    assert_named(assess(file, path.settings_with_wealth()), rows, column)


@pytest.mark.parametrize("column", COLUMNS)
@pytest.mark.parametrize("row", [1, ROW, 300])
def test_one_wrong_cell_along_straight_lines(row: int, column: str) -> None:
    """The same where the rows are read along straight lines, early and late."""
    path = model("S1")
    rows = spoilt(path.table_with_wealth(dates("S1")), column, row)
    assert_named(assess(rows, path.settings_with_wealth("linear")), rows, column, row)


def in_totals(path: Smith, years: int, balances: str) -> Settings:
    """The assumptions of yearly totals that end with the path's own wealth."""
    t = np.array([0.0, float(years)])
    start, end = path.at(t).k.tolist()
    given = path.settings_with_wealth()
    return given | {
        "household": {"wealth_at": balances} | ({"wealth": start} if balances == "end" else {}),
        "amounts": {"basis": "per effective unit", "timing": "spread"},
        "horizon": {"kind": "finite", "terminal_wealth": end},
    }


TOTALS = [(name, start, balances) for name in ("S1", "S2", "S5") for start in STARTS for balances in ("start", "end")]


@pytest.mark.parametrize(("name", "start", "balances"), TOTALS)
def test_yearly_totals_with_balances(name: str, start: float | None, balances: str) -> None:
    """Totals and balances made from the closed form agree to rounding, with opening and with closing balances."""
    path = model(name, start)
    assert isinstance(path, Smith)
    found = assess(path.totals(100, balances=balances), in_totals(path, 100, balances))
    assert found.flow is not None
    assert np.abs(found.flow.residuals).max() <= 1e-13 * found.decision.scale
    # opening balances say nothing of the last year's flows
    assert len(found.flow.rows) == (100 if balances == "end" else 99)
    # totals say nothing of what happens inside a year, which the Euler equation is not held to
    assert held(found) == dict.fromkeys(("flow_of_wealth", "euler", "marginal_utility", "transversality", "no_ponzi"), True)
    assert found.error.reconstruction == 0.0
    values = found.present_values
    assert values.income.whole.value == pytest.approx(path.income_to(100.0), rel=1e-12)
    assert values.consumption.whole.value == pytest.approx(path.consumption_to(100.0), rel=1e-12)
    assert values.terminal_wealth.value == pytest.approx(path.wealth_left_at(100.0), rel=1e-12)


@pytest.mark.parametrize("column", [*COLUMNS, "r"])
@pytest.mark.parametrize(("name", "start", "balances"), TOTALS)
def test_one_wrong_cell_of_yearly_totals(name: str, start: float | None, balances: str, column: str, tmp_path: Path) -> None:
    """One per cent on one total or balance is found, in memory and in a file that prints ten digits."""
    path, file = model(name, start), tmp_path / "plan.csv"
    assert isinstance(path, Smith)
    rows = spoilt(path.totals(100, balances=balances), column)
    given = in_totals(path, 100, balances)
    assert_named(assess(rows, given), rows, column)
    rows.to_csv(file, index=False, float_format="%.10g")
    assert_named(assess(file, given), rows, column)


# --------------------------------------------------------------------------------------------------------- the path of wealth


def integrated(
    net: Callable[[float, float], float], start: float, breaks: list[float], jumps: dict[float, float]
) -> tuple[Callable[[float], float], float, float]:
    """dK/dt = net(t, K) from one break to the next with jumps at dates: K(t), and the lowest K with its date."""
    pieces, level, lowest, when = [], start, start, breaks[0]
    for left, right in pairwise(breaks):
        level += jumps.get(left, 0.0)

        def slope(t: float, k: np.ndarray) -> list[float]:
            return [net(t, float(k[0]))]

        found = solve_ivp(slope, (left, right), [level], method="DOP853", rtol=1e-12, atol=1e-9, dense_output=True)
        pieces.append((left, right, found.sol))
        # the lowest point of a piece: an end, or where dK/dt changes sign from below
        t = np.linspace(left, right, 200)
        slopes = [net(s, float(found.sol(s)[0])) for s in t]
        turns = [
            brentq(lambda s, path=found.sol: net(s, float(path(s)[0])), t[i], t[i + 1], xtol=1e-12)
            for i in range(199)
            if slopes[i] < 0.0 <= slopes[i + 1]
        ]
        for s in (left, right, *turns):
            if float(found.sol(s)[0]) < lowest:
                lowest, when = float(found.sol(s)[0]), float(s)
        level = float(found.y[0, -1])

    def at(t: float) -> float:
        sol = next(path for left, right, path in pieces if left <= t <= right)
        return float(sol(t)[0])

    return at, lowest, when


T = np.array([0.0, 4.0, 9.0, 15.0, 22.0, 30.0])
MOVING = pd.DataFrame(
    {
        "t": T,
        "wage": [12.0, 20.0, 31.0, 33.0, 26.0, 9.0],
        "consumption": [17.0, 21.0, 22.0, 20.0, 19.0, 17.0],
        "r": [0.05, 0.02, -0.01, 0.03, 0.06, 0.04],
        "members": [2.0, 3.0, 4.0, 4.0, 2.0, 2.0],
    }
)
SINGLES = [
    {"t": 2, "role": "consumption", "amount": 30, "label": "moving in"},
    {"t": Decimal("6.5"), "role": "income", "amount": 55, "label": "bequest"},
    {"t": 9, "role": "deduction", "amount": 12, "label": "tax"},
]


@pytest.mark.parametrize("path", ["linear", "smooth"])
def test_wealth_against_a_solver_of_differential_equations(path: str) -> None:
    """dK/dt = rK + (W − C)L with moving r, single amounts and changing members: lowest wealth and its date, first debt, end.

    Amounts are per person, the single ones and wealth per household; members are linear in logarithms between rows."""
    curves: dict[str, Callable[[float], float]] = {}
    for name in ("wage", "consumption", "r"):
        values = MOVING[name].to_numpy()
        curves[name] = CubicSpline(T, values) if path == "smooth" else partial(np.interp, xp=T, fp=values)
    logs = np.log(MOVING["members"].to_numpy())

    def net(t: float, k: float) -> float:
        heads = math.exp(float(np.interp(t, T, logs)))
        return float(curves["r"](t)) * k + (float(curves["wage"](t)) - float(curves["consumption"](t))) * heads

    breaks = sorted({*T.tolist(), 2.0, 6.5})
    at, lowest, when = integrated(net, 40.0, breaks, {2.0: -30.0, 6.5: 55.0, 9.0: -12.0})
    found = assess(MOVING, finite(None, path, household={"wealth": 40}, lump_sum=SINGLES))
    household = found.wealth_path.per_household
    assert household.minimum.value == pytest.approx(lowest, rel=1e-9)
    assert household.minimum.t == pytest.approx(when, abs=1e-6)
    assert household.largest_debt is not None
    assert household.largest_debt.value == -household.minimum.value
    first = found.wealth_path.first_negative
    assert first is not None
    # with no allowance for the path between rows the date is that of the solver
    if path == "linear":
        assert first == pytest.approx(brentq(at, 0.1, 2.0 - 1e-9) if at(2.0 - 1e-9) < 0.0 else 2.0, abs=1e-6)
    # e^(−R(T))·K(T) is slack: per household, with everything else
    spline = CubicSpline(T, MOVING["r"]) if path == "smooth" else None
    grown = float(spline.integrate(0.0, 30.0)) if spline else float(np.trapezoid(MOVING["r"], T))
    assert found.slack.per_household is not None
    assert found.slack.per_household.value == pytest.approx(math.exp(-grown) * at(30.0), rel=1e-9)


def test_reported_wealth_against_a_solver() -> None:
    """A column of wealth out of a solver agrees with the flows, single amounts and members included, before and after jumps."""
    curves = {name: MOVING[name].to_numpy() for name in ("wage", "consumption", "r")}
    logs = np.log(MOVING["members"].to_numpy())

    def net(t: float, k: float) -> float:
        wage, spent, r = (float(np.interp(t, T, curves[name])) for name in ("wage", "consumption", "r"))
        return r * k + (wage - spent) * math.exp(float(np.interp(t, T, logs)))

    at, _, _ = integrated(net, 40.0, sorted({*T.tolist(), 2.0, 6.5}), {2.0: -30.0, 6.5: 55.0, 9.0: -12.0})
    # at the row of t = 9 wealth is stated before the tax of that day
    wealth = [at(t) for t in T]
    rows = MOVING.assign(wealth=wealth)
    found = assess(rows, finite(None, "linear", lump_sum=SINGLES))
    assert found.flow is not None
    assert np.abs(found.flow.residuals).max() < 1e-8
    assert held(found)["flow_of_wealth"] is True


# ----------------------------------------------------------------------------------------------------------- borrowing limits


def borrower(limit: str | None, **more: Any) -> Assessment:
    """Consumption of 10 and income of 2t at r = 0: wealth −10t + t², a debt of at most 25, at t = 5, and slack 0 at t = 10."""
    limits = {} if limit is None else {"limits": {"borrowing": Decimal(limit)}}
    rows = pd.DataFrame({"t": [0, 10], "wage": [0.0, 20.0], "consumption": 10.0})
    return assess(rows, finite("0", "linear", **limits, **more))


@pytest.mark.parametrize(("limit", "since"), [("24.99", 4.9), ("24", 4.0), ("16", 2.0), ("9", 1.0), ("0", 0.0)])
def test_a_debt_above_its_limit_fails(limit: str, since: float) -> None:
    """Just below the largest debt the plan fails with the date, although every debt is repaid in the end (by hand)."""
    found = borrower(limit)
    condition = found.conditions.borrowing
    assert condition is not None
    assert condition.holds is False
    # to ten minutes
    assert condition.since == pytest.approx(since, abs=2e-5)
    assert condition.room == pytest.approx(float(limit) - 25.0, abs=1e-12)
    assert found.verdict == "FAIL"
    assert f"from {found.date(condition.since or 0.0)} on" in found.reason
    # the lifetime budget is another matter: slack is zero, nothing is left unpaid
    assert (found.conditions.no_ponzi.holds, found.conditions.transversality.holds) == (True, True)
    assert found.slack.per_household is not None
    assert abs(found.slack.per_household.value) <= found.slack.per_household.bound


def test_a_debt_that_lasts_a_moment_is_dated() -> None:
    """With 24.99 to start with, wealth 24.99 - 10t + t^2 is below zero from 4.9 to 5.1 only (by hand)."""
    found = borrower(None, household={"wealth": Decimal("24.99")}).wealth_path
    assert found.per_household.minimum.value == pytest.approx(-0.01, abs=1e-12)
    assert found.first_negative == pytest.approx(4.9, abs=2e-5)


def test_a_dip_right_after_a_row_is_found() -> None:
    """Income of 9.98 + t against 10 a year: wealth t^2/2 - 0.02t is at its lowest, -0.0002, at t = 0.02 (by hand)."""
    rows = pd.DataFrame({"t": [0, 10], "wage": [9.98, 19.98], "consumption": 10.0})
    found = assess(rows, finite("0", "linear", limits={"borrowing": Decimal("0.0001")}))
    minimum = found.wealth_path.per_household.minimum
    assert (minimum.t, minimum.value) == pytest.approx((0.02, -0.0002), abs=1e-9)
    assert held(found)["borrowing"] is False
    assert found.conditions.borrowing is not None
    assert found.conditions.borrowing.since == pytest.approx(0.02 - math.sqrt(0.0002), abs=2e-5)
    assert found.verdict == "FAIL"


@pytest.mark.parametrize("limit", ["25.01", "25.000001", "100"])
def test_a_debt_within_its_limit_passes(limit: str) -> None:
    """Just above the largest debt the plan passes, with what remains of the limit (by hand)."""
    found = borrower(limit)
    condition = found.conditions.borrowing
    assert condition is not None
    assert (condition.holds, condition.since, found.verdict) == (True, None, "PASS")
    assert condition.room == pytest.approx(float(limit) - 25.0, rel=1e-6, abs=1e-12)
    assert found.wealth_path.per_household.largest_debt is not None
    assert found.wealth_path.per_household.largest_debt.t == pytest.approx(5.0, abs=1e-6)
    assert borrower(None).conditions.borrowing is None


def test_a_limit_exactly_at_the_largest_debt_is_no_breach() -> None:
    """At 25 the limit is reached and not exceeded: never a FAIL."""
    assert borrower("25").verdict == "PASS"


@pytest.mark.parametrize(("limit", "verdict"), [("129.7442", "FAIL"), ("129.7443", "PASS")])
def test_a_debt_that_bears_interest(limit: str, verdict: str) -> None:
    """Ten a year for ten years at a force of 5 % are a debt of 10·(e^0.5 − 1)/0.05 = 129.74425 (compound interest)."""
    years = range(2031, 2061)
    rows = pd.DataFrame({"year": years, "income": [0.0] * 10 + [30.0] * 20, "consumption": [10.0] * 30})
    found = assess(rows, finite("0.05", limits={"borrowing": Decimal(limit)}))
    assert found.verdict == verdict
    assert found.conditions.no_ponzi.holds is True
    largest = found.wealth_path.per_household.largest_debt
    assert largest is not None
    assert largest.value == pytest.approx(10.0 * math.expm1(0.5) / 0.05, rel=1e-14)
    assert found.date(largest.t) == "2041"
    if verdict == "FAIL":
        assert found.conditions.borrowing is not None
        assert found.conditions.borrowing.since == pytest.approx(math.log1p(0.05 * 12.97442) / 0.05, abs=2e-5)


def test_no_limit_excuses_a_debt_that_is_never_repaid() -> None:
    """Within its limit and yet unaffordable: the verdict follows slack, and so does no-Ponzi."""
    rows = pd.DataFrame({"t": [0, 10], "wage": 9.0, "consumption": 10.0})
    found = assess(rows, finite("0", "linear", limits={"borrowing": 11}))
    assert held(found) == {"borrowing": True, "no_ponzi": False, "transversality": False}
    assert found.verdict == "FAIL"


def test_a_limit_follows_its_basis(tmp_path: Path) -> None:
    """A limit per person grows with the members: two persons at 13 each may owe 26, one may not owe 25."""
    for members, verdict in ((1, "FAIL"), (2, "PASS")):
        rows = pd.DataFrame({"t": [0, 10], "wage": [0.0, 20.0], "consumption": 10.0})
        given = finite(
            "0",
            "linear",
            household={"members": members, "wealth_basis": "per person"},
            amounts={"basis": "per household"},
            limits={"borrowing": 13},
        )
        assert assess(rows, given).verdict == verdict


def test_income_that_grows_forgives_no_breach_of_a_growth_model() -> None:
    """A household that starts from debt in S1's economy stays above the natural limit, but not above a tighter one."""
    path: GrowthPath = model("S1")
    rows = path.table(dates("S1"))
    human = path.lifetime_consumption() - float(path.at(np.zeros(1)).k[0])
    given = path.settings()
    given["household"] = {"wealth": -0.5 * human}
    rows["consumption"] *= 0.5 * human / path.lifetime_consumption()
    for limit, holds in ((0.9, True), (0.4, False)):
        found = assess(rows, given | {"limits": {"borrowing": limit * human}})
        assert held(found)["borrowing"] is holds
        assert found.verdict == ("PASS" if holds else "FAIL")
        assert found.conditions.no_ponzi.holds is True
