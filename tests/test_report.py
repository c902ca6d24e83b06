"""The two reports: JSON with the agreed keys and only finite figures, and a page that begins with the verdict."""

from __future__ import annotations

import dataclasses
import json
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from rich.cells import cell_len

from budgetcheck import Assessment, Finding, InputRefused, NotAffordable, assess
from budgetcheck.report import json as json_report
from budgetcheck.report import terminal
from budgetcheck.version import SCHEMA, VERSION

YEARS = "year,wage,consumption\n" + "".join(f"{2031 + i},{100 + i},{90 + i}\n" for i in range(6))
FAILING = YEARS.replace(",9", ",19")
PATH = "t,wage,consumption,r\n" + "".join(f"{i},{100 + i},{90 + (i * i) % 7},0.0{3 + i % 2}\n" for i in range(8))
DEBT = "year,wage,consumption\n2031,50,90\n2032,100,60\n2033,100,60\n"

FINITE = {"market": {"r": 0.03}, "horizon": {"kind": "finite", "terminal_wealth": 0}}
PERPETUAL = {
    "market": {"r": 0.05},
    "growth": {"g": 0.01, "n": 0.01},
    "horizon": {"kind": "perpetual", "tail": "balanced growth"},
}
INCOME_INFINITE = {
    "market": {"r": 0.03},
    "horizon": {"kind": "perpetual", "tail": "growing", "income_growth": 0.04, "consumption_growth": 0.0},
}
CONSUMPTION_INFINITE = {
    "market": {"r": 0.03},
    "horizon": {"kind": "perpetual", "tail": "growing", "income_growth": 0.0, "consumption_growth": 0.04},
}
BOTH_INFINITE = {"market": {"r": 0.01}, "growth": {"g": 0.02}, "horizon": {"kind": "perpetual", "tail": "balanced growth"}}
UNDECIDED = "t,wage,consumption\n0,100,99.5\n1,100,99.9\n2,100,100.6\n"

CASES: dict[str, tuple[str, dict[str, Any]]] = {
    "totals that pass": (YEARS, FINITE),
    "totals that fail": (FAILING, FINITE),
    "exactly affordable": (YEARS.replace(",9", ",10").replace("95", "105"), FINITE),
    "a path with a column r": (PATH, {"horizon": {"kind": "finite", "terminal_wealth": 25}}),
    "undeclared horizon": (YEARS, {"market": {"r": 0.03}}),
    "debt on the way": (DEBT, FINITE),
    "too few rows": (UNDECIDED, FINITE),
    "perpetual": (YEARS, PERPETUAL),
    "undeclared tail": (PATH, {"horizon": {"kind": "perpetual"}}),
    "infinite income": (YEARS, INCOME_INFINITE),
    "infinite consumption": (YEARS, CONSUMPTION_INFINITE),
    "both infinite": (YEARS, BOTH_INFINITE),
    "no income": (re.sub(r",1\d\d,", ",0,", YEARS), {**FINITE, "household": {"wealth": 1000}}),
    "nothing at all": ("year,wage,consumption\n2031,0,0\n2032,0,0\n", FINITE),
    "no consumption": ("year,wage,consumption\n2031,5,0\n2032,5,0\n", PERPETUAL),
    "large figures": (YEARS.replace(",1", ",123456789").replace(",9", ",98765432"), {**FINITE, "amounts": {"unit": 1000}}),
    "small figures": (YEARS, {**FINITE, "amounts": {"unit": 1e-12}}),
}

ALL = pytest.mark.parametrize("name", CASES)


def case(name: str, folder: Path) -> Assessment:
    """The assessment of a case of the table above, from a file."""
    content, settings = CASES[name]
    path = folder / "plan.csv"
    path.write_text(content)
    return assess(path, settings)


def document(assessment: Assessment) -> dict[str, Any]:
    """The JSON report, read back with no constants that JSON does not have."""

    def no_constant(constant: str) -> None:
        raise AssertionError(f"{constant} is not JSON")

    text = json_report.render(assessment)
    assert text.isascii()
    found = json.loads(text, parse_constant=no_constant)
    assert isinstance(found, dict)
    return found


def objects(value: Any, place: str = "") -> Iterator[tuple[str, dict[str, Any]]]:
    """Every object of a JSON value with the place where it stands."""
    if isinstance(value, dict):
        yield place, value
        for key, inner in value.items():
            yield from objects(inner, f"{place}.{key}")
    elif isinstance(value, list):
        for index, inner in enumerate(value):
            yield from objects(inner, f"{place}[{index}]")


# -------------------------------------------------------------------------------------------------------------------- JSON

AGREED: dict[str, set[str]] = {
    "": {
        "schema", "version", "input_sha256", "units", "verdict", "reason", "would_decide", "slack", "present_values", "error",
        "conditions", "wealth_path", "tail", "assumptions", "findings",
    },
    "slack": {"per_effective_unit", "per_household", "share_of_resources", "consumption_scale", "level_per_year"},
    "slack.per_effective_unit": {"value", "bound"},
    "slack.per_household": {"value", "bound"},
    "present_values": {"initial_wealth", "income", "consumption", "terminal_wealth"},
    "present_values.initial_wealth": {"value", "bound"},
    "present_values.income": {"value", "bound"},
    "present_values.consumption": {"value", "bound"},
    "present_values.terminal_wealth": {"value", "bound"},
    "error": {"numerical", "reconstruction", "tail", "input_rounding", "in_verdict"},
    "conditions": {"no_ponzi", "transversality", "solvency"},
    "conditions.no_ponzi": {"holds", "limit"},
    "conditions.transversality": {"holds", "limit"},
    "conditions.solvency": {"holds"},
    "wealth_path": {"minimum", "per_household", "first_negative"},
    "wealth_path.minimum": {"t", "value"},
    "wealth_path.per_household": {"minimum", "largest_debt"},
    "wealth_path.per_household.minimum": {"t", "value"},
    "tail": {"kind", "share_of_income", "share_of_consumption"},
}  # fmt: skip
"""The agreed keys by place; a report may hold more."""


@pytest.mark.parametrize("place", AGREED)
@pytest.mark.parametrize("name", ["totals that pass", "infinite consumption", "too few rows", "perpetual"])
def test_json_has_the_agreed_keys(name: str, place: str, tmp_path: Path) -> None:
    """Every key of the contract is there in every report, infinite or not."""
    found = document(case(name, tmp_path))
    for step in place.split(".") if place else ():
        assert step in found, f"no {place}"
        found = found[step]
    assert AGREED[place] <= set(found)


def test_json_says_what_it_is(tmp_path: Path) -> None:
    """Schema, version and the fingerprint of the input."""
    found = document(case("totals that pass", tmp_path))
    assert (found["schema"], found["version"]) == (SCHEMA, VERSION)
    assert SCHEMA == "budgetcheck.assessment/1"
    assert re.fullmatch("[0-9a-f]{64}", found["input_sha256"])


def test_json_holds_the_convergence_of_a_perpetual_plan_only(tmp_path: Path) -> None:
    """A condition that does not apply is absent."""
    assert document(case("perpetual", tmp_path))["conditions"]["convergence"]["holds"] is True
    assert document(case("infinite income", tmp_path))["conditions"]["convergence"]["holds"] is False
    assert "convergence" not in document(case("totals that pass", tmp_path))["conditions"]


@ALL
def test_a_figure_that_is_none_is_null_beside_diverges(name: str, tmp_path: Path) -> None:
    """Each value, bound, limit and error is a finite number, or null with the word that says why."""
    names = ("value", "bound", "limit", "in_verdict", "reconstruction", "tail", "numerical")
    unexplained = [
        f"{place}.{name}"
        for place, found in objects(document(case(name, tmp_path)))
        for name in names
        if name in found and found[name] is None and found.get("diverges") is not True
    ]
    assert unexplained == []


@pytest.mark.parametrize(
    ("name", "infinite"),
    [
        ("infinite income", {"income"}),
        ("infinite consumption", {"consumption"}),
        ("both infinite", {"income", "consumption"}),
        ("perpetual", set()),
    ],
)
def test_infinite_present_values_are_named(name: str, infinite: set[str], tmp_path: Path) -> None:
    """Exactly those that diverge, and slack with them."""
    found = document(case(name, tmp_path))
    diverging = {key for key, value in found["present_values"].items() if value.get("diverges")}
    assert diverging == infinite
    assert bool(found["slack"]["per_household"].get("diverges")) == bool(infinite)


@pytest.mark.parametrize(
    "name", ["totals that pass", "totals that fail", "a path with a column r", "perpetual", "debt on the way"]
)
def test_the_account_adds_up(name: str, tmp_path: Path) -> None:
    """Initial wealth and income less consumption and the terminal requirement is slack, in both units."""
    found = document(case(name, tmp_path))
    for values, slack in (
        (found["present_values"], found["slack"]["per_effective_unit"]),
        (found["present_values_per_household"], found["slack"]["per_household"]),
    ):
        left = values["initial_wealth"]["value"] + values["income"]["value"]
        spent = values["consumption"]["value"] + values["terminal_wealth"]["value"]
        assert left - spent == pytest.approx(slack["value"], abs=1e-9)


@ALL
def test_errors_are_kept_apart(name: str, tmp_path: Path) -> None:
    """The verdict's error is the sum of the first three kinds; input rounding is not in it."""
    error = document(case(name, tmp_path))["error"]
    parts = [error["numerical"], error["reconstruction"], error["tail"]]
    if None in parts:
        assert error["in_verdict"] is None
        assert error["diverges"] is True
    else:
        assert error["in_verdict"] == pytest.approx(sum(parts), rel=1e-12)
        assert error["input_rounding"] is None or error["input_rounding"] >= 0


@ALL
def test_conditions_hold_or_not_or_are_not_known(name: str, tmp_path: Path) -> None:
    """true, false, or null; no-Ponzi follows the verdict."""
    found = document(case(name, tmp_path))
    assert all(condition["holds"] in (True, False, None) for condition in found["conditions"].values())
    assert found["conditions"]["no_ponzi"]["holds"] is {"PASS": True, "FAIL": False, "UNDECIDED": None}[found["verdict"]]


def test_what_would_decide_is_said_where_nothing_is_decided(tmp_path: Path) -> None:
    """And is null elsewhere."""
    assert document(case("too few rows", tmp_path))["would_decide"]
    assert document(case("totals that pass", tmp_path))["would_decide"] is None


def test_the_path_of_wealth_dates_its_lowest_point(tmp_path: Path) -> None:
    """A year of debt is found, dated and measured per household."""
    path = document(case("debt on the way", tmp_path))["wealth_path"]
    assert path["per_household"]["minimum"]["value"] < 0
    assert path["per_household"]["largest_debt"]["t"] == path["per_household"]["minimum"]["t"]
    assert 0 <= path["first_negative"] <= path["minimum"]["t"] <= 1
    assert document(case("totals that pass", tmp_path))["wealth_path"]["first_negative"] is None


@ALL
def test_every_assumption_has_value_and_origin(name: str, tmp_path: Path) -> None:
    """From the file, an option, the table or a default."""
    entries = document(case(name, tmp_path))["assumptions"]
    assert "market.r" in entries
    for entry in entries.values():
        assert {"value", "origin"} <= set(entry)
        assert entry["origin"] in ("file", "option", "table", "default")


def test_origins_are_those_of_the_run(tmp_path: Path) -> None:
    """All four, in one report."""
    path = tmp_path / "plan.csv"
    path.write_text(PATH)
    entries = document(assess(path, {"growth": {"n": 0.01}}, options={"g": "0.01"}))["assumptions"]
    origins = {key: entries[key]["origin"] for key in ("market.r", "growth.g", "growth.n", "household.wealth")}
    assert origins == {"market.r": "table", "growth.g": "option", "growth.n": "file", "household.wealth": "default"}


@ALL
def test_every_finding_has_rule_severity_place_and_message(name: str, tmp_path: Path) -> None:
    """Findings of an accepted plan are warnings and notes."""
    for finding in document(case(name, tmp_path))["findings"]:
        assert {"rule", "severity", "row", "column", "message"} <= set(finding)
        assert finding["severity"] in ("warn", "note")
        assert finding["message"]


def test_findings_are_ordered_by_weight(tmp_path: Path) -> None:
    """Warnings before notes."""
    path = tmp_path / "plan.csv"
    path.write_text(YEARS)
    found = document(assess(path, {"market": {"r": 0.3}, "preferences": {"rho": 0.1}}))["findings"]
    severities = [finding["severity"] for finding in found]
    assert severities == sorted(severities, key=["stop", "warn", "note"].index)
    assert {"warn", "note"} == set(severities)


def test_a_refusal_is_json_too(tmp_path: Path) -> None:
    """Schema, verdict and findings, each with its line and column."""
    path = tmp_path / "plan.csv"
    path.write_text(YEARS.replace("101", "1,01".replace(",", "x")))
    with pytest.raises(InputRefused, match="line 3") as caught:
        assess(path, FINITE)
    found = json.loads(json_report.render_refused(caught.value.findings))
    assert {"schema", "verdict", "findings"} <= set(found)
    assert (found["schema"], found["verdict"]) == (SCHEMA, "REFUSED")
    finding = found["findings"][0]
    assert (finding["severity"], finding["row"], finding["column"], finding["raw"]) == ("stop", 3, "wage", "1x01")


@pytest.mark.parametrize(("cells", "rule"), [("bad,1", "cell-number"), ("1,-1", "sign")])
def test_a_long_list_of_faults_is_bounded_and_counted(cells: str, rule: str, tmp_path: Path) -> None:
    """A thousand places in JSON, twenty of each rule on a terminal, and always the whole number."""
    path = tmp_path / "plan.csv"
    path.write_text("year,wage,consumption\n" + "".join(f"{1001 + i},{cells}\n" for i in range(1503)))
    with pytest.raises(InputRefused, match="line 2,") as caught:
        assess(path, FINITE)
    text = json_report.render_refused(caught.value.findings)
    assert len(json.loads(text)["findings"]) <= 1001
    page = terminal.render_refused(caught.value.findings)
    assert 20 <= page.count(f"[{rule}]") <= 21
    # 1503 is a line number too, but one beyond the places that are listed
    assert re.search(r"\b1503\b", page)
    assert re.search(r"\b1503\b", text)


def test_figures_of_a_frame_have_no_rounding(tmp_path: Path) -> None:
    """They were never printed: null, and nothing diverges."""
    frame = pd.DataFrame({"year": [2031, 2032], "wage": [100.0, 100.0], "consumption": [90.0, 90.0]})
    error = document(assess(frame, FINITE))["error"]
    assert error["input_rounding"] is None
    assert "diverges" not in error


# ---------------------------------------------------------------------------------------------------------------- terminal


@ALL
@pytest.mark.parametrize("full", [False, True], ids=["", "full"])
def test_the_report_begins_with_the_verdict_and_ends_with_the_caution(name: str, full: bool, tmp_path: Path) -> None:
    """Whoever reads one line reads the verdict; whoever reads to the end is told what this is not."""
    assessment = case(name, tmp_path)
    page = terminal.render(assessment, full=full)
    assert page.startswith(f"{assessment.verdict}  ")
    assert " ".join(page.split()).endswith(terminal.CAUTION)
    assert "not financial advice" in terminal.CAUTION


@ALL
@pytest.mark.parametrize("width", [72, 80, 100])
def test_no_line_is_wider_than_the_page(name: str, width: int, tmp_path: Path) -> None:
    """And no figure is shortened to fit."""
    for full in (False, True):
        page = terminal.render(case(name, tmp_path), width=width, full=full)
        assert max(cell_len(line) for line in page.splitlines()) <= width
        assert "…" not in page.replace("… and", "")


@ALL
def test_a_narrow_page_holds_the_same_account(name: str, tmp_path: Path) -> None:
    """Forty columns: every figure of the account is there, whole, on one line."""
    assessment = case(name, tmp_path)
    wide, narrow = terminal.render(assessment), terminal.render(assessment, width=40)
    assert max(cell_len(line) for line in narrow.splitlines()) <= 40
    account = wide[wide.index("Lifetime account") : wide.index("Conditions")]
    assert [figure for figure in re.findall(r"[−\d][\d,.]*\d(?:e[+−-]\d+)?", account) if figure not in narrow] == []


@ALL
def test_the_report_holds_what_the_verdict_rests_on(name: str, tmp_path: Path) -> None:
    """Units, account, conditions, assumptions with their origins, and every finding."""
    assessment = case(name, tmp_path)
    page = terminal.render(assessment)
    words = " ".join(page.split())
    for part in ("per unit of human capital", "per household", "money", "present value", "No-Ponzi", "Transversality"):
        assert part in words
    for side in ("Initial wealth", "Income", "Consumption", "Terminal requirement", "Slack"):
        assert re.search(rf"^ *{side} ", page, re.MULTILINE)
    listed = words[words.index("Assumptions") :]
    for entry in assessment.assumptions:
        paragraph = listed[listed.index(f" {entry.origin} ") :]
        assert f" {entry.key} = " in paragraph
    for finding in assessment.findings:
        assert "".join(finding.sentence.split()) in "".join(page.split())
    assert assessment.reason in words
    assert assessment.would_decide is None or assessment.would_decide in words


@ALL
def test_the_full_report_lists_one_assumption_a_line(name: str, tmp_path: Path) -> None:
    """Each with its value, unit and origin."""
    assessment = case(name, tmp_path)
    lines = terminal.render(assessment, full=True).splitlines()
    for entry in assessment.assumptions:
        line = next(line for line in lines if line.strip().startswith(f"{entry.key} "))
        assert line.endswith(f"({entry.origin})")


def test_warnings_stand_above_the_account_and_notes_below(tmp_path: Path) -> None:
    """A warning may change the verdict, a note may not."""
    path = tmp_path / "plan.csv"
    path.write_text(YEARS)
    page = terminal.render(assess(path, {"market": {"r": 0.3}, "preferences": {"rho": 0.1}}))
    assert page.index("Warning:") < page.index("Lifetime account") < page.index("note [preferences]")


@pytest.mark.parametrize("name", ["totals that pass", "totals that fail", "perpetual"])
def test_the_two_reports_agree(name: str, tmp_path: Path) -> None:
    """The page's slack is the JSON's, rounded; both name the same verdict, reason and file."""
    assessment = case(name, tmp_path)
    page, found = terminal.render(assessment), document(assessment)
    slack = re.search(r"^ *Slack +([−\d.,]+) +([−\d.,]+)$", page, re.MULTILINE)
    assert slack is not None
    shown = [float(figure.replace(",", "").replace("−", "-")) for figure in slack.groups()]
    assert shown[0] == pytest.approx(found["slack"]["per_effective_unit"]["value"], rel=1e-5)
    assert shown[1] == pytest.approx(found["slack"]["per_household"]["value"], rel=1e-5)
    assert found["reason"] in " ".join(page.split())


def test_infinite_figures_are_said_in_words(tmp_path: Path) -> None:
    """No 'inf' in a column of figures."""
    page = terminal.render(case("infinite consumption", tmp_path), full=True)
    assert re.search(r"^ *Consumption +infinite +infinite$", page, re.MULTILINE)
    assert not re.search(r"\b(inf|nan)\b", page, re.IGNORECASE)


def test_colour_changes_no_word(tmp_path: Path) -> None:
    """Styles are added to the same text."""
    assessment = case("totals that fail", tmp_path)
    coloured = terminal.render(assessment, color=True)
    assert "\x1b[" in coloured
    plain = re.sub(r"\x1b\[[0-9;]*m", "", coloured)
    assert plain.split() == terminal.render(assessment).split()


def test_a_refusal_lists_its_faults(tmp_path: Path) -> None:
    """REFUSED first, the number of faults, and each with place, text and remedy."""
    path = tmp_path / "plan.csv"
    path.write_text(YEARS.replace("101", "x1").replace("93", ""))
    with pytest.raises(InputRefused, match="line 3") as caught:
        assess(path, FINITE)
    page = terminal.render_refused(caught.value.findings)
    assert page.startswith("REFUSED  No verdict: 2 faults")
    for finding in caught.value.findings:
        assert "".join(finding.sentence.split()) in "".join(page.split())
    assert max(cell_len(line) for line in page.splitlines()) <= 80


# ------------------------------------------------------------------------------------------------------------------ Python


def test_require_returns_the_assessment_of_a_plan_that_passes(tmp_path: Path) -> None:
    """For use in a test suite, in one line."""
    assessment = case("totals that pass", tmp_path)
    assert assessment.require() is assessment


@pytest.mark.parametrize("name", ["totals that fail", "too few rows", "infinite consumption"])
def test_require_raises_with_the_report(name: str, tmp_path: Path) -> None:
    """Anything but PASS raises, and the message is the report."""
    assessment = case(name, tmp_path)
    with pytest.raises(NotAffordable, match=rf"^{assessment.verdict}  (?s:.*)Lifetime account"):
        assessment.require()


def test_require_may_ask_for_transversality(tmp_path: Path) -> None:
    """A plan that leaves something unused passes, but not this."""
    with pytest.raises(NotAffordable, match="Transversality  does not hold"):
        case("totals that pass", tmp_path).require(transversality=True)
    frame = pd.DataFrame({"year": [2031, 2032], "wage": [100.0, 100.0], "consumption": [100.0, 100.0]})
    assert assess(frame, FINITE).require(transversality=True).verdict == "PASS"


def test_results_are_frozen(tmp_path: Path) -> None:
    """An assessment and a finding are facts."""
    assessment = case("undeclared horizon", tmp_path)
    with pytest.raises(dataclasses.FrozenInstanceError, match="verdict"):
        assessment.verdict = "PASS"  # type: ignore[misc]
    finding: Finding = assessment.findings[0]
    with pytest.raises(dataclasses.FrozenInstanceError, match="severity"):
        finding.severity = "note"  # type: ignore[misc,assignment]


def test_the_names_are_those_of_the_json(tmp_path: Path) -> None:
    """What JSON calls a thing, Python calls it too."""
    assessment = case("totals that pass", tmp_path)
    for name in AGREED[""] - {"schema", "units"}:
        assert hasattr(assessment, name)
    for place in ("slack", "error", "tail"):
        for name in AGREED[place]:
            assert hasattr(getattr(assessment, place), name)
