"""Plans out of growth models, whose slack is known to be zero: right, cut off, scaled, and read back from printed figures.

Sources of the figures, all evaluated to 30 digits from the formulas of: S1, S2, S5: W. T. Smith (2006), B.E. Journal of
Macroeconomics 6(1); K1, K2: M. Kurz (1968) and R. Barro and X. Sala-i-Martin, Economic Growth (2nd ed., 2004), section 2.6.4;
computed from the closed form. romer: calibration of D. Romer, Advanced Macroeconomics, ch. 2 (from memory); bsim: benchmark of
Barro and Sala-i-Martin (2004), ch. 2; computed, saddle path solved at 60 digits.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from growth_models import CALIBRATIONS, GrowthPath, Ramsey, Smith, model

from budgetcheck import assess
from budgetcheck.assessment import Assessment

PATHS = {
    "S1": [
        (0, 0.10344876835692594, 0.9825765838928089, 0.6723451899513947, 3.2016437616733078),
        (1, 0.08908656704906052, 1.0320613625692177, 0.7791294685671791, 3.7101403265103765),
        (5, 0.06250043382533663, 1.1475484084980732, 1.0710410510893613, 5.100195481377911),
        (10, 0.052134091060204384, 1.204377821587237, 1.238172973920299, 5.896061780572852),
        (20, 0.04742111439049235, 1.2331660706293053, 1.3291003518710895, 6.3290492946242365),
        (50, 0.04666893316284028, 1.2379544084088805, 1.3446430888398282, 6.403062327808705),
        (100, 0.0466666668102701, 1.2379689202608117, 1.3446903769063767, 6.403287509077984),
    ],
    "S2": [
        (0, 0.47374065914049956, 0.5512973207358339, 0.12330633904226482, 0.45112075259365175),
        (1, 0.23036066920514822, 0.7206092387007639, 0.30109153806869476, 1.1015544075683956),
        (5, 0.08687344793247417, 0.9798420204974675, 0.8385957653841687, 3.0680332879908607),
        (10, 0.062351862179615844, 1.0663537904335725, 1.111826073134441, 4.067656365126004),
        (20, 0.055141522574121936, 1.0971013545207435, 1.2223295240304048, 4.471937283038066),
        (50, 0.054500424318141324, 1.09998085422588, 1.2330562378787486, 4.5111813580929825),
        (100, 0.05450000000215237, 1.0999827683978112, 1.2330633903863664, 4.51120752580378),
    ],
    "S5": [
        (0, 0.12196510984044036, 20.73971454188222, 26.532924053301695, 361.8126007268413),
        (1, 0.11882015373431454, 21.920523648852487, 28.565992247211884, 389.5362579165257),
        (5, 0.10828927493495724, 26.59312222129204, 36.96072833164646, 504.00993179517894),
        (10, 0.09853694849812691, 32.182539125285516, 47.665975901289606, 649.990580472131),
        (20, 0.08591608233682596, 42.00599295595079, 67.99282536269274, 927.1748913094464),
        (50, 0.07089065476254294, 59.69605192606333, 108.63644877704091, 1481.4061196869216),
        (100, 0.06583022341502222, 67.866916360868, 128.90177674866308, 1757.751501118133),
    ],
    "K1": [
        (0, 0.1367193380540869, 16.201525237235085, 27.774043263831572, 260.3082049146189),
        (1, 0.1338854853024146, 16.962171425777697, 29.078008158476052, 276.72936878974485),
        (5, 0.12384392206825949, 20.074524377744137, 34.41347036184709, 346.4232307735541),
        (10, 0.1136341406987834, 24.071438166515453, 41.26532257116935, 441.3156948248225),
        (20, 0.09859290648694484, 32.14619434726196, 55.10776173816336, 649.0120243408714),
        (50, 0.07514982649872631, 53.80628941074144, 92.23935327555677, 1289.8049701560483),
        (100, 0.06161078025772987, 75.85869480123884, 130.04347680212373, 2039.0152624880984),
    ],
    "K2": [
        (0, 0.6322920129392379, 0.49222394896496585, 0.6629955230956683, 0.30918304330754637),
        (1, 0.6098498142860376, 0.4993301858574272, 0.6725671891140856, 0.32431417945203583),
        (5, 0.5420031169932592, 0.5230974231000746, 0.7045802025429575, 0.3786882255597729),
        (10, 0.48817771177742847, 0.5449099058603961, 0.7339602813629825, 0.43393253136780524),
        (20, 0.43023656258470017, 0.5721716556564438, 0.7706801892515365, 0.5106158984084274),
        (50, 0.3800533917639018, 0.5998863604037689, 0.8080101997275254, 0.5978191531155325),
        (100, 0.3705979058271499, 0.6056294157168683, 0.815745743618639, 0.61711069000264),
    ],
}
"""(t, r, w, c, k) on the way; computed from the closed form."""

SADDLE_PATHS = {
    "romer": (0.07937005259840997, 1.3662172973388824, 1.360879470800968, 8.606629658238704, -0.054031242374328485),
    "bsim": (0.601543403715454, 0.5020485446552715, 0.5190990961957763, 0.33023688179196725, -0.08150247780111869),
}
"""r(0), w(0), c(0), k(0) and the stable eigenvalue; computed, saddle path solved at 60 digits."""

WHOLE_LIFE = {
    "S1": (58.95459503356854, 62.15623879524185),
    "S2": (18.688044770706234, 19.139165523299887),
    "S5": (592.5632726252063, 954.3758733520476),
    "K1": (364.4314868804665, 624.7396917950854),
    "K2": (0.8911746542393983, 1.2003576975469448),
    "romer": (59.437343881809696, 68.0439735400484),
    "bsim": (3.1839786456733887, 3.514215527465356),
}
"""Present values of income and of consumption over the whole life, per unit of human capital; computed (see above)."""

FIFTY_YEARS = {
    "S1": (33.33303364871936, 34.32597390498888, 2.208703505403788),
    "S2": (14.412617677099936, 14.346481066177011, 0.5172573635165767),
    "S5": (489.591215997223, 761.9670776545669, 89.43673906949739),
    "K1": (301.11030948091644, 516.1891019672853, 45.229412428250015),
    "K2": (0.8911746520009274, 1.2003576945318615, 7.766123750987566e-10),
}
"""Present values of 50 years of income and consumption, and of the wealth left then; computed from the closed form."""

SAMPLING = {
    "S1": (4, 200),
    "S2": (32, 200),
    "S5": (8, 400),
    "K1": (4, 1000),
    "K2": (4, 400),
    "romer": (4, 400),
    "bsim": (16, 250),
}
"""Rows a year and years: as fine as the first years of each path need, and until what still moves no longer matters."""

STARTS = (0.1, 0.5, 1.5, 3.0)
"""k(0)/k*, below and above the long run."""


def dates(per_year: int, years: int) -> np.ndarray:
    """t from 0 to `years`."""
    return np.arange(per_year * years + 1) / per_year


def whole(name: str, consumption: float = 1.0) -> Assessment:
    """The assessment of a path followed until it has converged, its tail declared."""
    path = model(name)
    return assess(path.table(dates(*SAMPLING[name]), consumption), path.settings())


def slack(assessment: Assessment) -> float:
    """Slack per unit of human capital."""
    found = assessment.slack.per_effective_unit
    assert found is not None
    return found.value


# ------------------------------------------------------------------------------------------------- the paths themselves


@pytest.mark.parametrize("name", PATHS)
def test_closed_forms_give_the_published_paths(name: str) -> None:
    """The paths that the other tests rest on pass through the values computed elsewhere."""
    expected = np.array(PATHS[name])
    found = np.array(model(name).at(expected[:, 0])).T
    assert found == pytest.approx(expected[:, 1:], rel=1e-14)


@pytest.mark.parametrize("name", SADDLE_PATHS)
def test_saddle_paths_start_where_they_must(name: str) -> None:
    """Initial consumption on the saddle path, and the speed at its end."""
    path = model(name)
    assert isinstance(path, Ramsey)
    start = np.array(path.at(np.zeros(1))).ravel()
    assert (*start, path.stable_eigenvalue) == pytest.approx(SADDLE_PATHS[name], rel=1e-12)


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", CALIBRATIONS)
def test_wealth_follows_its_own_law(name: str, start: float) -> None:
    """dk/dt = (r − g − n)k + w − c on every path, by differences of fourth order on a fine grid."""
    path, step = model(name, start), 0.01
    rows = path.at(5.0 + step * np.arange(200))
    change = (rows.k[:-4] - 8 * rows.k[1:-3] + 8 * rows.k[3:-1] - rows.k[4:]) / (12 * step)
    law = (rows.r - path.g - path.n) * rows.k + rows.w - rows.c
    assert change == pytest.approx(law[2:-2], rel=1e-9, abs=1e-10 * rows.k[0])


@pytest.mark.parametrize("name", CALIBRATIONS)
def test_lifetime_consumption_of_the_paths(name: str) -> None:
    """∫ e^{−Λ} c dt, which the scaled plans below need, agrees with the figures computed elsewhere."""
    path = model(name)
    assert path.lifetime_consumption() == pytest.approx(WHOLE_LIFE[name][1], rel=1e-12)
    if isinstance(path, Smith):
        assert path.consumption_to(np.inf) == pytest.approx(WHOLE_LIFE[name][1], rel=1e-14)


# --------------------------------------------------------------------------------------------- converged, tail declared


@pytest.mark.parametrize("name", SAMPLING)
def test_the_right_plan_passes(name: str) -> None:
    """Followed until it has converged, the household's own plan uses its resources exactly, and nothing is left unused."""
    found = whole(name).require(transversality=True)
    assert abs(slack(found)) <= found.decision.error
    assert abs(slack(found)) < 1e-6
    assert found.conditions.no_ponzi.holds is True
    assert found.conditions.convergence is not None
    assert found.conditions.convergence.holds is True
    assert found.conditions.transversality.rate_of_approach == pytest.approx(model(name).long_run_net_rate, rel=1e-6)


@pytest.mark.parametrize("name", SAMPLING)
def test_present_values_over_the_whole_life(name: str) -> None:
    """Rows and tail together give the published present values, as closely as cubic pieces follow the paths."""
    values = whole(name).present_values
    found = (values.income.whole.value, values.consumption.whole.value)
    assert found == pytest.approx(WHOLE_LIFE[name], rel=5e-8)


@pytest.mark.parametrize("name", SAMPLING)
def test_a_ten_thousandth_more_fails(name: str) -> None:
    """Consumption of 1.0001 times the right one is not affordable, and the debt is dated by no-Ponzi."""
    found = whole(name, 1.0001)
    assert found.verdict == "FAIL"
    assert found.conditions.no_ponzi.holds is False
    assert slack(found) == pytest.approx(-1e-4 * WHOLE_LIFE[name][1], abs=1e-6)


@pytest.mark.parametrize("name", SAMPLING)
def test_a_thousandth_less_passes_and_leaves_something_unused(name: str) -> None:
    """Consumption of 0.999 times the right one is affordable, but transversality does not hold."""
    found = whole(name, 0.999)
    assert found.verdict == "PASS"
    assert found.conditions.transversality.holds is False
    assert slack(found) == pytest.approx(1e-3 * WHOLE_LIFE[name][1], abs=1e-6)


@pytest.mark.parametrize("scale", [0.99, 1.01])
@pytest.mark.parametrize("name", SAMPLING)
def test_slack_of_scaled_consumption(name: str, scale: float) -> None:
    """One per cent of consumption is one per cent of its present value; the scale that balances the plan undoes it."""
    found = whole(name, scale)
    assert slack(found) == pytest.approx((1.0 - scale) * WHOLE_LIFE[name][1], abs=1e-6)
    assert found.slack.consumption_scale == pytest.approx(1.0 / scale, rel=1e-7)


# ------------------------------------------------------------------------------------------------ not converged, declared


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", CALIBRATIONS)
def test_a_declared_tail_is_taken_at_its_word(name: str, start: float) -> None:
    """A plan that stops moving at T before it has converged has the slack e^{−Λ(T)}(k − (c − w)/(r − n − g)), not zero."""
    path = model(name, start)
    for years in (40, 60, 200):
        found = assess(path.table(dates(8, years)), path.settings())
        expected = path.slack_if_growth_is_balanced_after(years)
        assert found.error.tail == 0.0
        assert abs(slack(found) - expected) <= found.decision.error + 1e-11 * found.decision.scale
        threshold = found.decision.threshold
        assert found.verdict in ({"PASS", "UNDECIDED"} if expected >= -threshold else {"FAIL", "UNDECIDED"})


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", CALIBRATIONS)
def test_the_error_covers_what_lies_between_the_rows(name: str, start: float) -> None:
    """However coarsely a path is sampled, the change of slack on leaving out rows is no less than what the rows hide."""
    path = model(name, start)
    for years in (20, 50, 100):
        expected = path.slack_if_growth_is_balanced_after(years)
        for per_year in (1, 2, 4):
            found = assess(path.table(dates(per_year, years)), path.settings())
            if found.decision.finite:
                gap = abs(slack(found) - expected)
                assert gap <= found.decision.error + 1e-11 * found.decision.scale, (years, per_year, found.error)


@pytest.mark.parametrize("name", FIFTY_YEARS)
def test_fifty_years_that_end_with_the_wealth_the_path_has_then(name: str) -> None:
    """A finite piece of the path with its own wealth as requirement has slack zero, and the published present values."""
    path = model(name)
    settings = path.settings(tail=None)
    settings["horizon"] = {"kind": "finite", "terminal_wealth": float(path.at(np.array([50.0])).k[0])}
    found = assess(path.table(dates(20, 50)), settings).require()
    values = found.present_values
    parts = (values.income.whole.value, values.consumption.whole.value, values.terminal_wealth.value)
    assert parts == pytest.approx(FIFTY_YEARS[name], rel=1e-7)
    assert abs(slack(found)) <= found.decision.error + 1e-12 * found.decision.scale


# ------------------------------------------------------------------------------------------------- cut off, tail undeclared


def cut_off(
    path: GrowthPath, per_year: int, declared: str | None, scales: tuple[float, ...]
) -> Iterator[tuple[float, Assessment]]:
    """The path cut off at four dates, the tail undeclared, each with every scale of consumption."""
    for years in (20, 40, 60, 200):
        for scale in scales:
            yield scale, assess(path.table(dates(per_year, years), scale), path.settings(declared, None))


def check_honest(found: Assessment, scale: float, consumption: float, unknown: float = 0.0) -> None:
    """The error covers the truth, and the verdict, where there is one, is right; unknown: of the figures themselves."""
    truth = (1.0 - scale) * consumption
    wrong = {1.0: {"FAIL"}, 1.0001: {"PASS"}, 0.9999: {"FAIL"}}[scale]
    assert found.verdict not in wrong, found.reason
    if found.decision.finite:
        assert abs(slack(found) - truth) <= found.decision.error + unknown + 1e-11 * consumption, found.tail.estimate
    else:
        assert found.verdict == "UNDECIDED"


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("name", CALIBRATIONS)
def test_the_error_covers_what_a_cut_off_path_hides(name: str, start: float) -> None:
    """Wherever a path is cut off and however coarsely it is sampled, no verdict is wrong by a ten thousandth."""
    path = model(name, start)
    consumption = path.lifetime_consumption()
    for per_year in (1, 2, 4):
        for scale, found in cut_off(path, per_year, "smooth", (1.0, 1.0001, 0.9999)):
            check_honest(found, scale, consumption)
        for scale, found in cut_off(path, per_year, None, (1.0,)):
            check_honest(found, scale, consumption)


@pytest.mark.parametrize("name", CALIBRATIONS)
def test_most_long_plans_are_decided(name: str) -> None:
    """Honesty is not bought with silence: 200 undeclared years of quarters decide a per cent, from above and below."""
    for start in (0.5, 1.5):
        path = model(name, start)
        verdicts = [assess(path.table(dates(4, 200), scale), path.settings(tail=None)).verdict for scale in (0.99, 1.01)]
        assert verdicts == ["PASS", "FAIL"]


def printed(table: pd.DataFrame, digits: int, file: Path) -> Path:
    """The table as a CSV file with that many significant digits, trailing zeros dropped as most programs do."""
    table.to_csv(file, index=False, float_format=f"%.{digits}g")
    return file


@pytest.mark.parametrize("digits", [6, 9])
@pytest.mark.parametrize("name", CALIBRATIONS)
def test_printed_figures_hide_no_tail(name: str, digits: int, tmp_path: Path) -> None:
    """With rounded figures the errors of the verdict and of input rounding together cover the truth."""
    for start in STARTS:
        path = model(name, start)
        consumption = path.lifetime_consumption()
        for years in (20, 40, 60, 200):
            for scale in (1.0, 0.9999):
                file = printed(path.table(dates(4, years), scale), digits, tmp_path / "plan.csv")
                found = assess(file, path.settings(tail=None))
                assert found.error.input_rounding is not None
                if found.decision.finite:
                    error = found.decision.error + found.error.input_rounding
                    assert abs(slack(found) - (1.0 - scale) * consumption) <= error, (start, years, scale, found.tail.estimate)
