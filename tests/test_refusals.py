"""Every refusal says where and what to do, all of them in one run; what is not understood is refused, never left out."""

from __future__ import annotations

import datetime
import textwrap
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from budgetcheck import Assessment, BudgetcheckError, Finding, InputRefused, assess
from budgetcheck.findings import Severity

PLAN = "year,wage,consumption\n2031,100,90\n2032,101,91\n2033,102,92\n"

SOUND = '[market]\nr = 0.03\n[horizon]\nkind = "finite"\nterminal_wealth = 0\n'


def assessed(folder: Path, plan: str = PLAN, toml: str = SOUND) -> Assessment:
    """The assessment of a plan and its assumptions, both as files."""
    (folder / "plan.csv").write_text(plan, encoding="utf-8")
    (folder / "plan.toml").write_text(toml, encoding="utf-8")
    return assess(folder / "plan.csv")


def refused(folder: Path, plan: str = PLAN, toml: str = SOUND) -> tuple[Finding, ...]:
    """The findings of the refusal, warnings left out."""
    with pytest.raises(InputRefused, match=r"plan\.(csv|toml)") as caught:
        assessed(folder, plan, toml)
    return tuple(finding for finding in caught.value.findings if finding.severity is Severity.STOP)


def only(findings: tuple[Finding, ...]) -> Finding:
    """The one finding."""
    assert len(findings) == 1, [finding.sentence for finding in findings]
    return findings[0]


def with_value(section: str, key: str, value: str) -> str:
    """Sound assumptions with one more key, or with another value of one they have."""
    lines = [line for line in SOUND.splitlines() if not line.startswith(f"{key} =")]
    if f"[{section}]" not in lines:
        lines.append(f"[{section}]")
    lines.insert(lines.index(f"[{section}]") + 1, f"{key} = {value}")
    return "\n".join(lines) + "\n"


def test_the_sound_pair_passes(tmp_path: Path) -> None:
    """What the other tests spoil is sound before: no finding at all."""
    result = assessed(tmp_path)
    assert (result.verdict, result.findings) == ("PASS", ())


# ---------------------------------------------------------------------------------------------------- place, text and remedy


@pytest.mark.parametrize(
    ("old", "new", "row", "column", "raw"),
    [
        ("101", "1,01x".replace(",", ""), 3, "wage", "101x"),
        ("101", '"1,234"', 3, "wage", "1,234"),
        ("92", "", 4, "consumption", ""),
        ("92", "NA", 4, "consumption", "NA"),
        ("90", "nan", 2, "consumption", "nan"),
        ("90", "1e999", 2, "consumption", "1e999"),
        ("90", "-5", 2, "consumption", "-5"),
        ("2033", "20333", 4, "year", "20333"),
        ("2033", "2032", 4, "year", "2032"),
        ("consumption", "spending", 1, "spending", "spending"),
    ],
)
def test_a_refused_cell_has_file_line_column_text_and_remedy(
    old: str, new: str, row: int, column: str, raw: str, tmp_path: Path
) -> None:
    """Where it stands, what stands there, and what to do: in the finding's fields and in its sentence."""
    found = next(f for f in refused(tmp_path, PLAN.replace(old, new)) if f.column is not None)
    assert found.file == str(tmp_path / "plan.csv")
    assert (found.row, found.column, found.raw) == (row, column, raw)
    assert f"line {row}, column '{column}': '{raw}': " in found.sentence
    assert found.hint or ";" in found.message


@pytest.mark.parametrize(
    ("section", "key", "value"),
    [("market", "r", '"4 %"'), ("market", "compounding", '"yearly"'), ("amounts", "unit", "0"), ("growth", "growth", "0.01")],
)
def test_a_refused_assumption_has_file_line_key_and_remedy(section: str, key: str, value: str, tmp_path: Path) -> None:
    """The key's line in the assumptions file is named as a cell's is."""
    toml = with_value(section, key, value)
    found = next(f for f in refused(tmp_path, toml=toml) if f.column == key)
    assert found.file == str(tmp_path / "plan.toml")
    assert found.row is not None
    assert toml.splitlines()[found.row - 1] == f"{key} = {value}"
    assert found.hint or "takes" in found.message


@pytest.mark.parametrize(
    "toml",
    [
        '[ market ]\nr = "x"',
        '["market"]\n"r" = "x"',
        "['market']\n'r' = 'x'",
        'market.r = "x"',
        'market = {r = "x"}',
        'market = {compounding = "annual", r = "x"}',
        '[market]\n# r = 0.03\ncompounding = "annual"\n  r   = "x"',
    ],
)
def test_the_line_is_found_in_any_spelling_of_the_key(toml: str, tmp_path: Path) -> None:
    """Quoted keys, dotted keys, inline tables and comments do not hide the line on which the value stands."""
    found = only(refused(tmp_path, toml=f"{toml}\n"))
    assert (found.column, found.raw) == ("r", "x")
    assert found.row is not None
    assert '"x"' in toml.splitlines()[found.row - 1].replace("'", '"')


def test_refusals_are_the_packages_own_exception(tmp_path: Path) -> None:
    """One class to catch; its text is one sentence for each finding."""
    with pytest.raises(BudgetcheckError, match=r"line 3, column 'wage': 'x1'") as caught:
        assessed(tmp_path, PLAN.replace("101", "x1").replace("92", "x2"))
    assert len(str(caught.value).splitlines()) == len(caught.value.findings) == 2  # type: ignore[attr-defined]


# ------------------------------------------------------------------------------------------------------- all in one run


def test_faults_of_table_and_assumptions_come_together(tmp_path: Path) -> None:
    """Two cells, an unknown key and a wrong type: four findings from one run."""
    plan = PLAN.replace("101", "x1").replace("92", "")
    toml = SOUND + "[amounts]\nunits = 1000\nunit = true\n"
    found = refused(tmp_path, plan, toml)
    assert {(f.row, f.column) for f in found} == {(3, "wage"), (4, "consumption"), (7, "units"), (8, "unit")}


def test_a_missing_rate_does_not_hide_bad_cells(tmp_path: Path) -> None:
    """The missing r and the bad cell are both told."""
    found = refused(tmp_path, PLAN.replace("101", "x1"), '[horizon]\nkind = "finite"\n')
    assert {f.rule for f in found} == {"cell-number", "rate-missing"}


def test_an_assumptions_file_that_is_no_toml_does_not_hide_bad_cells(tmp_path: Path) -> None:
    """Both are told, and nothing is held against the table that the file might have settled."""
    found = refused(tmp_path, PLAN.replace("101", "x1").replace("year,", "year,pay,").replace("\n20", "\n20"), "[market\nr = 1")
    assert any(f.file and f.file.endswith("plan.toml") and f.row == 1 for f in found)
    assert not any(f.rule == "rate-missing" for f in found)
    found = refused(tmp_path, PLAN.replace("101", "x1"), "[market]\nr = 5 %\n")
    assert {(f.rule, f.row) for f in found} == {("assumption", 2), ("cell-number", 3)}


def test_a_missing_table_does_not_hide_faults_of_the_assumptions(tmp_path: Path) -> None:
    """The name is wrong and so is a key: both are told."""
    (tmp_path / "own.toml").write_text("[market]\nrate = 0.03\n")
    with pytest.raises(InputRefused, match=r"no such file(?s:.*)key 'rate'"):
        assess(tmp_path / "absent.csv", tmp_path / "own.toml")


def test_ragged_rows_do_not_hide_bad_cells(tmp_path: Path) -> None:
    """A row of the wrong width and an unreadable cell in a sound row are told in the same run."""
    found = refused(tmp_path, PLAN.replace("2032,101,91", "2032,101").replace("92", "x2"))
    assert {f.row for f in found} == {3, 4}


def test_contradictions_do_not_wait_for_the_cells(tmp_path: Path) -> None:
    """A contradiction between two keys is told beside an unreadable cell."""
    found = refused(tmp_path, PLAN.replace("101", "x1"), with_value("horizon", "tail", '"balanced growth"'))
    assert {f.rule for f in found} == {"cell-number", "assumption"}


def test_negative_consumption_does_not_wait_for_the_other_cells(tmp_path: Path) -> None:
    """A sign that cannot be meant is told beside an unreadable cell."""
    found = refused(tmp_path, PLAN.replace("101", "x1").replace("92", "-92"))
    assert {(f.row, f.column) for f in found} == {(3, "wage"), (4, "consumption")}


def test_a_fault_is_told_once(tmp_path: Path) -> None:
    """An unreadable r is not also a missing one, and a column with a bad role is not also one without."""
    assert only(refused(tmp_path, toml='[market]\nr = "x"\n')).raw == "x"
    plan = "year,wage,consumption,Rent\n2031,100,90,1\n2032,100,90,1\n"
    assert only(refused(tmp_path, plan, SOUND + '[columns]\nRent = "expense"\n')).raw == "expense"
    assert only(refused(tmp_path, plan, SOUND + '[columns]\nrent = "expense"\n')).raw == "expense"


# ------------------------------------------------------------------------------------------------------------- the rate r


def test_a_missing_r_is_refused_with_its_three_sources(tmp_path: Path) -> None:
    """There is no default rate of interest."""
    found = only(refused(tmp_path, toml="[horizon]\nterminal_wealth = 0\n"))
    assert found.rule == "rate-missing"
    for source in ("[market] r", "--r", "column 'r'"):
        assert source in found.message


def test_rho_never_stands_in_for_r(tmp_path: Path) -> None:
    """A subjective discount rate does not discount, and the refusal says so."""
    found = only(refused(tmp_path, toml="[preferences]\nrho = 0.02\ntheta = 2\n"))
    assert found.rule == "rate-missing"
    assert "rho does not stand in" in found.message


@pytest.mark.parametrize("keys", [{"rho": 0.2}, {"theta": 3}, {"rho": 0.2, "theta": 3}])
def test_preferences_beside_r_change_nothing_in_the_verdict(keys: dict[str, float], tmp_path: Path) -> None:
    """Preferences do not enter the verdict; where only one of the two is declared, a note says that nothing comes of it."""
    plain = assessed(tmp_path)
    declared = "\n".join(f"{name} = {value}" for name, value in keys.items())
    preferring = assessed(tmp_path, toml=SOUND + f"[preferences]\n{declared}\n")
    assert preferring.slack == plain.slack
    expected = {(Severity.NOTE, f"preferences.{name}") for name in keys} if len(keys) == 1 else set()
    assert {(f.severity, f.column) for f in preferring.findings} == expected


@pytest.mark.parametrize("options", [{}, {"r": "0.05"}])
def test_two_sources_of_r_are_refused(options: dict[str, str], tmp_path: Path) -> None:
    """A column r beside a declared r is a contradiction, and an option is a declaration too."""
    plan = "year,wage,consumption,r\n2031,100,90,0.03\n2032,100,90,0.03\n"
    (tmp_path / "plan.csv").write_text(plan)
    settings = {} if options else {"market": {"r": 0.03}}
    with pytest.raises(InputRefused, match=r"line 1, column 'r': r has two sources"):
        assess(tmp_path / "plan.csv", settings, options=options)


def test_an_ignored_column_r_is_no_source(tmp_path: Path) -> None:
    """The role 'ignore' settles which of the two is meant."""
    plan = "year,wage,consumption,r\n2031,100,90,0.9\n2032,100,90,junk\n"
    with_column = assessed(tmp_path, plan, SOUND + '[columns]\nr = "ignore"\n')
    without = assessed(tmp_path, "year,wage,consumption\n2031,100,90\n2032,100,90\n")
    assert with_column.slack == without.slack


# ------------------------------------------------------------------------------------------------------ keys and their values


@pytest.mark.parametrize(
    ("section", "key", "near"),
    [
        ("market", "rate", "r"),
        ("market", "R", "r"),
        ("market", "compound", "compounding"),
        ("household", "wealt", "wealth"),
        ("household", "wealth-basis", "wealth_basis"),
        ("household", "member", "members"),
        ("amounts", "timings", "timing"),
        ("horizon", "terminalwealth", "terminal_wealth"),
        ("preferences", "Theta", "theta"),
        ("limits", "tolerence", "tolerance"),
    ],
)
def test_an_unknown_key_is_refused_with_the_nearest(section: str, key: str, near: str, tmp_path: Path) -> None:
    """A slip in a key's name would otherwise be a silent default."""
    found = only(refused(tmp_path, toml=with_value(section, key, "1")))
    assert found.column == key
    assert f"'{near}'" in found.sentence or f" {near}" in (found.hint or "")


@pytest.mark.parametrize(("section", "near"), [("markets", "market"), ("Household", "household"), ("amount", "amounts")])
def test_an_unknown_section_is_refused_with_the_nearest(section: str, near: str, tmp_path: Path) -> None:
    """So would a slip in a section's name."""
    found = only(refused(tmp_path, toml=SOUND + f"[{section}]\nx = 1\n"))
    assert found.column == section
    assert f"'{near}'" in (found.hint or "")


@pytest.mark.parametrize("key", ["r = 0.03", "tolerance = 1e-6", '"market.r" = 0.03', "columns = 3", "market = 0.03"])
def test_a_key_outside_any_section_is_refused(key: str, tmp_path: Path) -> None:
    """A value where a section belongs is never dropped."""
    assert refused(tmp_path, toml=f"{key}\n")


def test_an_array_of_tables_is_no_section(tmp_path: Path) -> None:
    """[[market]] is refused, not read as the last of its tables."""
    found = refused(tmp_path, toml="[[market]]\nr = 0.03\n")
    assert any(f.column == "market" and "section" in f.message for f in found)


@pytest.mark.parametrize(
    ("section", "key", "value", "near"),
    [
        ("market", "compounding", '"anual"', "annual"),
        ("market", "compounding", '"Annual"', "annual"),
        ("amounts", "timing", '"arrears"', "in arrears"),
        ("amounts", "basis", '"household"', "per household"),
        ("amounts", "path", '"smoth"', "smooth"),
        ("amounts", "quoted", '"per years"', "per year"),
        ("horizon", "kind", '"perpetuity"', "perpetual"),
        ("horizon", "tail", '"balanced"', "balanced growth"),
        ("household", "wealth_basis", '"per-household"', "per household"),
    ],
)
def test_an_unknown_word_is_refused_with_the_nearest(section: str, key: str, value: str, near: str, tmp_path: Path) -> None:
    """Words are taken exactly; the nearest one is offered, not assumed."""
    found = next(f for f in refused(tmp_path, toml=with_value(section, key, value)) if f.column == key)
    assert found.raw == value.strip('"')
    assert near in (found.hint or "")


NO_NUMBERS = [
    "true",
    "false",
    '"0.05"',
    '""',
    "2031-04-01",
    "2031-04-01T00:00:00Z",
    "12:30:00",
    "[0.05]",
    "{value = 0.05}",
    "nan",
    "+nan",
    "inf",
    "-inf",
    "1e999",
    "-1e400",
    "1e-400",
    "1e999999999",
    "1e-999999999",
    "2e15",
]


@pytest.mark.parametrize("value", NO_NUMBERS)
@pytest.mark.parametrize(("section", "key"), [("market", "r"), ("household", "wealth"), ("limits", "tolerance")])
def test_what_is_no_finite_number_is_refused_where_one_belongs(section: str, key: str, value: str, tmp_path: Path) -> None:
    """Truth values, texts, dates, arrays, NaN, infinities, overflow and underflow are no numbers."""
    found = only(refused(tmp_path, toml=with_value(section, key, value)))
    assert found.column == key
    assert found.raw is not None


@pytest.mark.parametrize("value", ["1", "1.5", "true", "2031-04-01", "[]", "nan"])
def test_what_is_no_word_is_refused_where_one_belongs(value: str, tmp_path: Path) -> None:
    """A number is no word; the words that the key takes are listed."""
    found = only(refused(tmp_path, toml=with_value("market", "compounding", value)))
    assert '"annual"' in found.sentence


@pytest.mark.parametrize(
    ("section", "key", "value"),
    [
        ("market", "r", "-1"),
        ("market", "r", "100.5"),
        ("growth", "g", "-1.5"),
        ("growth", "n", "250"),
        ("household", "members", "0"),
        ("household", "members", "-2"),
        ("household", "productivity", "0"),
        ("household", "households", "-1"),
        ("amounts", "unit", "0"),
        ("amounts", "unit", "-1000"),
        ("preferences", "theta", "0"),
        ("limits", "tolerance", "0"),
        ("limits", "tolerance", "-1e-6"),
        ("limits", "tolerance", "0.5"),
    ],
)
def test_a_figure_out_of_range_is_refused_with_the_range(section: str, key: str, value: str, tmp_path: Path) -> None:
    """The message says what the key takes."""
    found = only(refused(tmp_path, toml=with_value(section, key, value)))
    assert "out of range" in found.message
    assert "and at most" in found.message
    assert found.raw is not None


@pytest.mark.parametrize("value", ["0.03", "3e-2", "+0.03", "0.030"])
def test_every_spelling_of_a_number_means_the_same(value: str, tmp_path: Path) -> None:
    """TOML's own spellings of one figure are one figure."""
    assert assessed(tmp_path, toml=with_value("market", "r", value)).slack == assessed(tmp_path).slack


@pytest.mark.parametrize(
    "value",
    ["9" * 400, "9" * 5000, "-" + "9" * 4000, "0x" + "f" * 6000, "0b" + "1" * 20000, "1e15" + "0" * 3, "0." + "0" * 400 + "1"],
    ids=["400 digits", "5000 digits", "negative", "hexadecimal", "binary", "exponent", "tiny"],
)
def test_a_huge_number_is_refused_briefly(value: str, tmp_path: Path) -> None:
    """A number that no plan can mean is refused by name, in a message that can be read."""
    with pytest.raises(InputRefused, match=r"plan\.toml") as caught:
        assessed(tmp_path, toml=with_value("household", "wealth", value))
    assert len(str(caught.value)) < 600


def test_a_number_of_many_digits_is_refused_as_in_a_cell(tmp_path: Path) -> None:
    """Digits beyond what a cell may hold are refused by their length, before any arithmetic on them."""
    with pytest.raises(InputRefused, match=r"plan\.toml"):
        assessed(tmp_path, toml=with_value("market", "r", "0.03" + "0" * 20_000 + "1"))


@pytest.mark.parametrize(
    "value",
    ["[" * 2000 + "]" * 2000, "[" * 100_000 + "]" * 100_000, "{a = " * 300 + "1" + "}" * 300, "a." * 5000 + "b"],
    ids=["2000 lists", "100000 lists", "300 tables", "no value"],
)
def test_deep_nesting_is_refused(value: str, tmp_path: Path) -> None:
    """Depth ends neither the parser nor what walks its tree."""
    assert refused(tmp_path, toml=f"[market]\nr = {value}\n")


def test_deep_dotted_keys_are_refused(tmp_path: Path) -> None:
    """Dotted keys nest without any bracket."""
    assert refused(tmp_path, toml=SOUND + "[amounts]\n" + "unit." * 3000 + "x = 1\n")
    assert refused(tmp_path, toml="[" + "a." * 3000 + "x]\ny = 1\n" + SOUND)


def test_a_file_of_two_mebibytes_is_no_assumptions_file(tmp_path: Path) -> None:
    """Refused by its size, unread."""
    found = only(refused(tmp_path, toml=SOUND + "#" * (2 << 20)))
    assert "larger than 1 MiB" in found.message


@pytest.mark.parametrize(
    ("content", "row", "reason"),
    [
        (b"[market]\nr = 5 %\n", 2, "TOML"),
        (b"[market]\nr = 0,05\n", 2, "TOML"),
        (b"[market]\nr = 1_000_\n", 2, "TOML"),
        (b"[market]\nr = 0.03\nr = 0.04\n", 3, "TOML"),
        (b"[market]\nr = 0.03\n[market]\n", 3, "TOML"),
        (b"[market]\nr = 0.03 # \xe9\n", 2, "UTF-8"),
        ("[market]\nr = 0.03\n".encode("utf-16"), 1, "UTF-8"),
        (b"[market]\nr = 0.0\x003\n", 2, "TOML"),
        (b"year,wage\n2031,1\n", 1, "TOML"),
        (b"[market]\nr =", 2, "TOML"),
    ],
)
def test_what_is_no_toml_is_refused_with_its_line(content: bytes, row: int, reason: str, tmp_path: Path) -> None:
    """The parser's reason is passed on with the line; a key given twice is such a fault."""
    (tmp_path / "plan.csv").write_text(PLAN)
    (tmp_path / "plan.toml").write_bytes(content)
    with pytest.raises(InputRefused, match=rf"plan\.toml, line {row}: .*{reason}"):
        assess(tmp_path / "plan.csv")


def test_a_byte_order_mark_before_the_assumptions_is_harmless(tmp_path: Path) -> None:
    """As before a table."""
    assert assessed(tmp_path, toml="\ufeff" + SOUND).slack == assessed(tmp_path).slack


@pytest.mark.parametrize("name", ["absent.toml", "."])
def test_an_assumptions_file_that_is_none_is_refused(name: str, tmp_path: Path) -> None:
    """A named file that is absent, or a folder, is never the same as no file."""
    (tmp_path / "plan.csv").write_text(PLAN)
    with pytest.raises(InputRefused, match=r"no such assumptions file"):
        assess(tmp_path / "plan.csv", tmp_path / name)


# ------------------------------------------------------------------------------------------------------------ contradictions


@pytest.mark.parametrize(
    ("toml", "named"),
    [
        ('[amounts]\ntiming = "spread"\npath = "linear"\n', "path"),
        ('[amounts]\ntiming = "continuous"\nquoted = "per year"\n', "quoted"),
        ('[horizon]\nkind = "perpetual"\nterminal_wealth = 5\n', "terminal_wealth"),
        ('[horizon]\nkind = "finite"\ntail = "balanced growth"\n', "tail"),
        ('[horizon]\nkind = "perpetual"\ntail = "growing"\nincome_growth = 0.01\n', "consumption_growth"),
        ('[horizon]\nkind = "perpetual"\nincome_growth = 0.01\n', "income_growth"),
        ('[horizon]\nkind = "perpetual"\ntail = "balanced growth"\nconsumption_growth = 0\n', "consumption_growth"),
    ],
)
def test_keys_that_contradict_each_other_are_refused(toml: str, named: str, tmp_path: Path) -> None:
    """A key that another one makes void is settled by its author, not by the program."""
    found = only(refused(tmp_path, toml="[market]\nr = 0.05\n" + toml))
    assert (found.rule, found.file) == ("assumption", str(tmp_path / "plan.toml"))
    assert named in found.sentence


def test_a_contradiction_names_its_line(tmp_path: Path) -> None:
    """Keys stand on lines, here too."""
    found = only(refused(tmp_path, toml='[market]\nr = 0.05\n[amounts]\ntiming = "spread"\npath = "linear"\n'))
    assert found.row == 5


def test_a_growth_in_geometric_paths_needs_amounts_above_zero(tmp_path: Path) -> None:
    """A zero on a path that is linear in logarithms is refused by cell."""
    plan = "t,wage,consumption\n0,100,90\n1,0,91\n2,102,92\n3,100,90\n"
    found = only(refused(tmp_path, plan, SOUND + '[amounts]\npath = "geometric"\n'))
    assert (found.row, found.column, found.raw) == (3, "wage", "0")


# ----------------------------------------------------------------------------------------------------- what is no single plan


def test_a_panel_is_not_taken_for_one_plan(tmp_path: Path) -> None:
    """A column of households is refused by name, unless all rows are declared to be of one."""
    plan = "year,wage,consumption,household\n2031,100,90,1\n2032,100,90,1\n"
    found = only(refused(tmp_path, plan))
    assert (found.row, found.column) == (1, "household")
    assert "panel" in found.message
    assert assessed(tmp_path, plan, SOUND + '[columns]\nhousehold = "ignore"\n').verdict == "PASS"


def test_a_table_without_a_time_column_is_told_every_kind(tmp_path: Path) -> None:
    """All that could be one are named."""
    found = refused(tmp_path, "day,wage,consumption\n2031-01-01,100,90\n2032-01-01,100,90\n")
    sentences = " ".join(f.sentence for f in found)
    assert all(f"'{kind}'" in sentences for kind in ("t", "year", "date", "quarter", "month", "age"))


# -------------------------------------------------------------------------------------------------------------------- roles


def test_a_column_without_a_role_is_refused(tmp_path: Path) -> None:
    """An unknown column is never left out silently; a near miss is named."""
    plan = "year,wage,consumption,consumtion\n2031,100,90,1\n2032,100,90,1\n"
    found = only(refused(tmp_path, plan))
    assert (found.row, found.column) == (1, "consumtion")
    assert "'consumption'" in (found.hint or "")


def test_a_role_for_an_absent_column_is_refused(tmp_path: Path) -> None:
    """A slip in a header under [columns] is named, with the nearest header."""
    found = only(refused(tmp_path, PLAN, SOUND + '[columns]\nconsumptoin = "consumption"\n'))
    assert "'consumption'" in (found.hint or "")


@pytest.mark.parametrize("second", ['rent = "ignore"', 'RENT = "income"', '" Rent " = "ignore"', '" Rent " = "consumption"'])
def test_two_roles_for_one_column_are_refused(second: str, tmp_path: Path) -> None:
    """Headers are compared without case and blanks, so that two entries for one column contradict each other."""
    plan = "year,wage,consumption,Rent\n2031,100,90,50\n2032,100,90,50\n"
    found = only(refused(tmp_path, plan, SOUND + f'[columns]\nRent = "consumption"\n{second}\n'))
    assert found.file == str(tmp_path / "plan.toml")


def test_wage_and_income_together_need_their_roles(tmp_path: Path) -> None:
    """One may be part of the other."""
    plan = "year,wage,income,consumption\n2031,100,120,90\n2032,100,120,90\n"
    assert "may be part of the other" in only(refused(tmp_path, plan)).message
    roles = '[columns]\nwage = "income"\nincome = "income"\n'
    assert assessed(tmp_path, plan, SOUND + roles).verdict == "PASS"


@pytest.mark.parametrize(
    ("plan", "missing"), [("year,wage\n2031,1\n2032,1\n", "consumption"), ("year,consumption\n1999,1\n2000,1\n", "wage")]
)
def test_a_missing_stream_is_refused_and_not_zero(plan: str, missing: str, tmp_path: Path) -> None:
    """A plan without income or without consumption says so with a column of zeros."""
    assert f"no {missing.replace('wage', 'income')} column" in only(refused(tmp_path, plan)).message


@pytest.mark.parametrize("column", ["wage,consumption", "wage, Wage"])
def test_no_role_can_be_guessed_from_position(column: str, tmp_path: Path) -> None:
    """A table without headers has its first row for one, and is refused."""
    assert refused(tmp_path, "2031,100,90\n2032,101,91\n")


# ---------------------------------------------------------------------------------------------------------------- DataFrame

RATES: dict[str, Any] = {"market": {"r": 0.03}, "horizon": {"kind": "finite", "terminal_wealth": 0}}


def frame(**columns: Any) -> pd.DataFrame:
    """Three years, with some columns replaced."""
    sound = {"year": [2031, 2032, 2033], "wage": [100.0, 101.0, 102.0], "consumption": [90.0, 91.0, 92.0]}
    return pd.DataFrame({**sound, **columns})


def test_a_sound_frame_is_read_like_its_csv(tmp_path: Path) -> None:
    """The same verdict and slack, but no rounding of figures that were never printed."""
    framed, filed = assess(frame(), RATES), assessed(tmp_path)
    assert framed.slack.per_household is not None
    assert filed.slack.per_household is not None
    assert framed.slack.per_household.value == pytest.approx(filed.slack.per_household.value, rel=1e-14)
    assert framed.error.input_rounding is None


@pytest.mark.parametrize(
    ("cells", "rule"),
    [
        ([100.0, float("nan"), 102.0], "cell-missing"),
        ([100.0, None, 102.0], "cell-missing"),
        (pd.array([100, None, 102], dtype="Int64"), "cell-missing"),
        (pd.array([100.5, None, 102], dtype="Float64"), "cell-missing"),
        (np.array([100, None, 102], dtype=object), "cell-missing"),
        ([100.0, float("inf"), 102.0], "not-finite"),
        ([100.0, -float("inf"), 102.0], "not-finite"),
        ([100.0, 1e300, 102.0], "not-finite"),
        ([100.0, 5e-324, 102.0], "not-finite"),
        (np.array([100, 2**63, 102], dtype="uint64"), "not-finite"),
        (["100", "1,234", "102"], "cell-number"),
        (["100", "1_000", "102"], "cell-number"),
        (np.array([100, True, 102], dtype=object), "cell-number"),
        (np.array([100, 1j, 102], dtype=object), "cell-number"),
        (np.array([100, [1], 102], dtype=object), "cell-number"),
        (np.array([100, Decimal("NaN"), 102], dtype=object), "cell-missing"),
        (np.array([100, datetime.date(2031, 1, 1), 102], dtype=object), "cell-number"),
    ],
    ids=lambda value: value if isinstance(value, str) else f"{getattr(value, 'dtype', 'list')}: {list(value)[1]}",
)
def test_a_bad_cell_of_a_frame_is_refused_by_row_and_column(cells: Any, rule: str) -> None:
    """Row i of a frame is line i + 2, as if it had been written as CSV."""
    with pytest.raises(InputRefused, match=r"DataFrame, line 3, column 'wage'") as caught:
        assess(frame(wage=cells), RATES)
    assert [finding.rule for finding in caught.value.findings] == [rule]


@pytest.mark.parametrize(
    "cells",
    [
        [True, True, False],
        pd.array([True, False, True], dtype="boolean"),
        np.array([1j, 2j, 3j]),
        pd.date_range("2031-01-01", periods=3),
        pd.timedelta_range("1D", periods=3),
        pd.Categorical(["a", "b", "c"]),
        pd.interval_range(0, 3),
    ],
    ids=lambda cells: str(getattr(cells, "dtype", "bool")),
)
def test_a_column_that_holds_no_numbers_is_refused_cell_by_cell(cells: Any) -> None:
    """Truth values are not ones and zeros, dates are not counts of nanoseconds."""
    with pytest.raises(InputRefused, match=r"column 'wage': .* is not a number") as caught:
        assess(frame(wage=cells), RATES)
    assert [finding.row for finding in caught.value.findings] == [2, 3, 4]


@pytest.mark.parametrize(
    "cells",
    [
        pd.array([100, 101, 102], dtype="Int64"),
        pd.array([100.0, 101.0, 102.0], dtype="Float64"),
        np.array([100, 101, 102], dtype="int8"),
        np.array([100, 101, 102], dtype="uint16"),
        np.array([100, 101, 102], dtype="float32"),
        np.array([100, 101, 102], dtype="float16"),
        np.array([100, 101, 102], dtype=np.longdouble),
        pd.array([100.0, 101.0, 102.0], dtype=pd.SparseDtype("float64")),
        np.array([100, 101.0, np.float64(102)], dtype=object),
        np.array([Decimal(100), Decimal(101), Decimal(102)], dtype=object),
        pd.Categorical([100, 101, 102]),
    ],
    ids=lambda cells: str(cells.dtype),
)
def test_numbers_of_any_type_are_the_same_numbers(cells: Any) -> None:
    """Integers, short floats and extension types give the slack of plain floats, and were never printed."""
    result, plain = assess(frame(wage=cells), RATES), assess(frame(), RATES)
    assert result.slack.per_household is not None
    assert plain.slack.per_household is not None
    assert result.slack.per_household.value == plain.slack.per_household.value
    assert result.error.input_rounding is None


def test_two_columns_of_one_name_are_refused() -> None:
    """As in a file; the case of letters and blanks around them do not tell columns apart."""
    for second in ("wage", " Wage"):
        table = frame()
        table.insert(3, second, [1.0, 2.0, 3.0], allow_duplicates=True)
        with pytest.raises(InputRefused, match=r"line 1, column '[wW]age': .*twice"):
            assess(table, RATES)


@pytest.mark.parametrize("name", [0, 1.5, None, True, ("wage", "gross"), pd.Timestamp("2031-01-01")])
def test_a_name_that_is_no_text_is_a_column_without_a_role(name: Any) -> None:
    """It is shown as text and refused, not dropped."""
    table = frame()
    table[name] = 1.0
    with pytest.raises(InputRefused, match=r"has no role; give it one") as caught:
        assess(table, RATES)
    assert caught.value.findings[0].raw == str(table.columns[-1])


def test_columns_on_two_levels_are_refused() -> None:
    """A header is one name."""
    table = frame()
    table.columns = pd.MultiIndex.from_product([["plan"], table.columns])
    with pytest.raises(InputRefused, match=r"DataFrame, line 1"):
        assess(table, RATES)


@pytest.mark.parametrize(
    ("table", "reason"),
    [
        (pd.DataFrame(), "no columns"),
        (pd.DataFrame(index=[1, 2, 3]), "no columns"),
        (frame().iloc[:0], "0 rows"),
        (frame().iloc[:1], "1 row"),
        (pd.DataFrame({"year": [], "wage": [], "consumption": []}, dtype=object), "0 rows"),
    ],
)
def test_an_empty_frame_is_refused(table: pd.DataFrame, reason: str) -> None:
    """No columns, no rows, one row: each says what is missing."""
    with pytest.raises(InputRefused, match=reason):
        assess(table, RATES)


def test_the_index_of_a_frame_is_not_read() -> None:
    """Neither as time nor as order; labels that repeat do no harm."""
    plain = assess(frame(), RATES)
    assert assess(frame().set_axis([7, 7, 7], axis=0), RATES).slack == plain.slack
    with pytest.raises(InputRefused, match=r"no time column"):
        assess(frame().set_index("year"), RATES)


def test_a_frame_is_not_changed() -> None:
    """Assessing leaves the caller's table as it was."""
    table = frame(wage=np.array([100, 101.0, "102"], dtype=object))
    before = table.copy(deep=True)
    assess(table, RATES)
    pd.testing.assert_frame_equal(table, before)


# ------------------------------------------------------------------------------------------------- assumptions as a mapping


@pytest.mark.parametrize(
    "value",
    [
        float("nan"),
        float("inf"),
        -float("inf"),
        1e300,
        10**400,
        10**5000,
        -(10**5000),
        True,
        np.True_,
        "0.03",
        None,
        [],
        {},
        1j,
        Decimal("NaN"),
        Decimal("sNaN"),
        Decimal("Infinity"),
        Decimal("1e400"),
        Fraction(10**400),
        Fraction(1, 10**400),
        np.float64("nan"),
        datetime.date(2031, 1, 1),
        object(),
    ],
    ids=lambda value: type(value).__name__,
)
def test_what_is_no_finite_number_is_refused_in_a_mapping(value: Any) -> None:
    """Whatever object stands where a number belongs, it is a number in range or it is refused."""
    with pytest.raises(InputRefused, match=r"column 'r'"):
        assess(frame(), {"market": {"r": value}})


@pytest.mark.parametrize("value", [0.03, np.float64(0.03), Decimal("0.03"), Fraction(3, 100)])
def test_a_number_of_any_type_is_read_in_a_mapping(value: Any) -> None:
    """The decimal figure that Python prints is what is meant."""
    assert assess(frame(), {**RATES, "market": {"r": value}}).slack == assess(frame(), RATES).slack


@pytest.mark.parametrize(
    "tree", [{"market": None}, {"market": [0.03]}, {3: {"r": 0.03}}, {"market": {3: 0.03}}, {"columns": []}]
)
def test_a_mapping_of_another_shape_is_refused(tree: Any) -> None:
    """As the file of that shape would be."""
    with pytest.raises(InputRefused, match=r"column"):
        assess(frame(), tree)


def test_a_mapping_is_read_like_its_file(tmp_path: Path) -> None:
    """The same keys in the same shape give the same result."""
    toml = textwrap.dedent(
        """
        [market]
        r = 0.03
        compounding = "annual"
        [household]
        wealth = 12.5
        [horizon]
        kind = "finite"
        terminal_wealth = 3
        """
    )
    tree = {
        "market": {"r": 0.03, "compounding": "annual"},
        "household": {"wealth": 12.5},
        "horizon": {"kind": "finite", "terminal_wealth": 3},
    }
    filed = assessed(tmp_path, toml=toml)
    assert assess(tmp_path / "plan.csv", tree).slack == filed.slack
