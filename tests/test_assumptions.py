"""What an assumptions file may say, key by key: what is accepted, what is refused, and on which line."""

from __future__ import annotations

import datetime
import re
import tomllib
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from budgetcheck.assumptions import NONE, Assumptions, ColumnEntry, LumpSum, Origin, read
from budgetcheck.findings import Finding, InputRefused, Severity
from budgetcheck.keys import BY_PATH, COLUMN_KEYS, KEYS, LUMP_SUM_KEYS


def stated(folder: Path, toml: str) -> Assumptions:
    """The assumptions that a file of this text states."""
    (folder / "plan.toml").write_text(toml, encoding="utf-8")
    return read(folder / "plan.toml")


def accepted(folder: Path, toml: str) -> Assumptions:
    """The same, where nothing at all was found."""
    result = stated(folder, toml)
    assert result.findings == ()
    assert result.attempted == frozenset()
    return result


def refused(folder: Path, toml: str) -> tuple[Finding, ...]:
    """The stops of a file of this text."""
    found = stated(folder, toml).findings
    assert found
    assert {(finding.rule, finding.severity) for finding in found} == {("assumption", Severity.STOP)}
    return found


def only(findings: tuple[Finding, ...]) -> Finding:
    """The one finding."""
    assert len(findings) == 1, [finding.sentence for finding in findings]
    return findings[0]


# ------------------------------------------------------------------------------------------------------------ words and figures

WORDS = {
    "market.curve": ("forward", "zero"),
    "market.prices": ("real", "nominal"),
    "household.wealth_basis": ("per person", "per household", "economy", "per effective unit"),
    "household.wealth_at": ("start", "end"),
    "household.scale": ("OECD", "OECD-modified", "square root"),
    "amounts.basis": ("per person", "per household", "economy", "per effective unit", "per equivalent adult"),
    "amounts.prices": ("real", "nominal"),
    "amounts.day_count": ("ACT/365F", "ACT/ACT ISDA", "30/360", "30E/360"),
    "horizon.tail": ("balanced growth", "growing", "converging"),
}

DEFAULTS: dict[str, str | Fraction | None] = {
    "market.curve": "forward",
    "market.prices": "real",
    "market.inflation": None,
    "household.wealth_at": "start",
    "household.scale": None,
    "household.hazard": None,
    "amounts.prices": "real",
    "amounts.day_count": None,
    "horizon.tail": "balanced growth",
    "horizon.income": None,
    "horizon.consumption": None,
    "horizon.speed": None,
    "horizon.interest": None,
    "limits.borrowing": None,
}


@pytest.mark.parametrize(("path", "word"), [(path, word) for path, words in WORDS.items() for word in words])
def test_every_word_of_the_format_is_taken(path: str, word: str, tmp_path: Path) -> None:
    """As it is written, with its line and the file as its origin."""
    section, key = path.split(".")
    entry = accepted(tmp_path, f'# a plan\n[{section}]\n{key} = "{word}"\n').stated(path)
    assert entry is not None
    assert (entry.value, entry.origin, entry.row) == (word, Origin.FILE, 3)


@pytest.mark.parametrize(
    ("path", "word", "near"),
    [
        ("market.curve", "spot", "the words are forward, zero"),
        ("market.prices", "Nominal", "'nominal'"),
        ("household.wealth_basis", "per equivalent adult", "the nearest word is"),
        ("household.wealth_at", "ends", "'end'"),
        ("household.scale", "oecd modified", "'OECD-modified'"),
        ("amounts.basis", "per adult", "'per equivalent adult'"),
        ("amounts.prices", "current", "the words are real, nominal"),
        ("amounts.day_count", "ACT/ACT", "'ACT/ACT ISDA'"),
        ("horizon.tail", "convergent", "'converging'"),
    ],
)
def test_another_word_is_refused_with_the_nearest(path: str, word: str, near: str, tmp_path: Path) -> None:
    """Words are taken exactly; an equivalent adult counts amounts, not wealth."""
    section, key = path.split(".")
    found = only(refused(tmp_path, f'[{section}]\n{key} = "{word}"\n'))
    assert (found.row, found.column, found.raw) == (2, key, word)
    assert near in (found.hint or "")


@pytest.mark.parametrize(
    ("path", "good", "bad"),
    [
        ("market.inflation", ["-0.5", "0", "0.02", "100"], ["-1", "100.1"]),
        ("household.hazard", ["0", "0.01", "100"], ["-0.01", "100.1"]),
        ("horizon.income", ["-1e15", "0", "52000"], ["1.1e15"]),
        ("horizon.consumption", ["-1e15", "0", "48000"], ["1.1e15"]),
        ("horizon.speed", ["1e-9", "0.05", "1000"], ["0", "-0.05", "1000.5"]),
        ("horizon.interest", ["-0.5", "0", "0.03", "100"], ["-1", "100.1"]),
        ("limits.borrowing", ["0", "50000", "1e15"], ["-1", "1.1e15"]),
    ],
)
def test_a_figure_is_taken_in_its_range_alone(path: str, good: list[str], bad: list[str], tmp_path: Path) -> None:
    """Exactly as printed, both ends included or excluded as the key says; a text in its place is a wrong type."""
    section, key = path.split(".")
    for text in good:
        assert accepted(tmp_path, f"[{section}]\n{key} = {text}\n").figure(path) == Fraction(text)
    for text in bad:
        found = only(refused(tmp_path, f"[{section}]\n{key} = {text}\n"))
        assert (found.row, found.column) == (2, key)
        assert re.search("is out of range|larger than", found.message)
    for text in (f'"{good[-1]}"', "true", "[]", "2031-04-01"):
        assert "is not a number" in only(refused(tmp_path, f"[{section}]\n{key} = {text}\n")).message


@pytest.mark.parametrize(("path", "default"), DEFAULTS.items())
def test_an_absent_key_has_its_default(path: str, default: str | Fraction | None) -> None:
    """None: the table decides, or there is none."""
    entry = NONE.entry(path)
    assert (None if entry is None else entry.value) == default
    assert entry is None or entry.origin is Origin.DEFAULT


def test_rates_have_the_unit_of_rates() -> None:
    """A fraction per year, which its refusal explains."""
    for path in ("market.inflation", "household.hazard", "horizon.speed", "horizon.interest"):
        assert BY_PATH[path].unit == "1/year"
        section, key = path.split(".")
        assert "0.05 for 5 %" in only(read({section: {key: 2000}}).findings).message


def test_the_day_of_wealth_belongs_to_the_household(tmp_path: Path) -> None:
    """wealth_at under [amounts] is no key."""
    found = only(refused(tmp_path, '[amounts]\nwealth_at = "end"\n'))
    assert "is no key of [amounts]" in found.message


def test_every_key_is_listed_once() -> None:
    """A path names one key."""
    assert len(BY_PATH) == len(KEYS)


# ---------------------------------------------------------------------------------------------------------- tables of columns


@pytest.mark.parametrize("role", ["income", "deduction", "consumption", "ignore"])
@pytest.mark.parametrize("form", ['"Gross pay" = "{}"', '"Gross pay" = {{role = "{}"}}', '[columns."Gross pay"]\nrole = "{}"'])
def test_a_role_is_a_word_or_stands_in_a_table(role: str, form: str, tmp_path: Path) -> None:
    """Both say the same, and say nothing else about the column."""
    columns = accepted(tmp_path, f"[columns]\n{form.format(role)}\n").columns
    assert columns == (ColumnEntry(header="Gross pay", role=role, own=(), row=2),)


OWN = '{role = "income", timing = "in arrears", basis = "per person", unit = 1000, quoted = "per year", prices = "nominal"}'


def test_a_columns_table_says_what_its_figures_mean(tmp_path: Path) -> None:
    """The keys of [amounts] that may differ from column to column, each with its path, unit and line."""
    entry = accepted(tmp_path, f'[columns]\nrent = "consumption"\n"Gross pay" = {OWN}\n').columns[1]
    expected = {"timing": "in arrears", "basis": "per person", "unit": 1000, "quoted": "per year", "prices": "nominal"}
    assert set(expected) == set(COLUMN_KEYS)
    for name, value in expected.items():
        own = entry.stated(name)
        assert own is not None
        assert (own.key, own.value, own.row) == (f"columns.Gross pay.{name}", value, 3)
        assert (own.unit, own.origin) == (BY_PATH[f"amounts.{name}"].unit, Origin.FILE)
    assert entry.stated("role") is None
    assert ColumnEntry(header="rent", role="consumption").stated("timing") is None


@pytest.mark.parametrize("timing", ["continuous", "spread", "in advance", "in arrears", "at mid-period"])
def test_a_column_takes_every_timing(timing: str) -> None:
    """Whether it goes with the table's own timing is settled where both are known."""
    own = read({"columns": {"rent": {"role": "consumption", "timing": timing}}}).columns[0].stated("timing")
    assert own is not None
    assert own.value == timing


@pytest.mark.parametrize(
    ("text", "header_row", "row"),
    [
        ('[columns]\n\n"Gross pay" = {role = "income", timing = "late"}', 3, 3),
        ("[columns]\n'Gross pay' = {timing = \"late\", 'role' = \"income\"}", 2, 2),
        ('[columns]\n"Gross pay".role = "income"\n"Gross pay".timing = "late"', 2, 3),
        ('[columns."Gross pay"]\nrole = "income"\n\ntiming = "late"', 1, 4),
        ('[ columns . "Gross pay" ]\n"timing" = "late"\nrole = "income"', 1, 2),
        ('columns."Gross pay".timing = "late"\ncolumns."Gross pay".role = "income"', 1, 1),
        ('columns = {"Gross pay" = {role = "income", timing = "late"}}', 1, 1),
        ('# [columns]\n[market]\nr = 0.03 # "Gross pay" = 1\n[columns."Gross\\u0020pay"]\nrole="income"\ntiming="late"', 4, 6),
        ('[columns]\na = {role = "ignore"}\n"Gross pay".role = "income"\n"Gross pay".timing = \'\'\'late\'\'\'', 3, 4),
    ],
)
def test_a_columns_table_is_found_in_any_spelling(text: str, header_row: int, row: int, tmp_path: Path) -> None:
    """Inline, dotted or under a header of its own: the faulty key is named with its line, and the role is still read."""
    result = stated(tmp_path, f"{text}\n")
    found = only(result.findings)
    assert (found.row, found.column, found.raw) == (row, "Gross pay.timing", "late")
    assert [(c.role, c.row) for c in result.columns if c.header == "Gross pay"] == [("income", header_row)]
    assert result.attempted == {"columns.gross pay"}


@pytest.mark.parametrize(
    ("table", "column", "reason"),
    [
        ("{}", "pay", "needs a role; write role = "),
        ('{timing = "spread"}', "pay", "needs a role"),
        ('{role = "incom"}', "pay.role", "is no role of a column; the nearest role is 'income'"),
        ("{role = 1}", "pay.role", 'Write "income" or "deduction"'),
        ('{role = "income", time = "spread"}', "pay.time", "is no key of a column; the nearest key is 'timing'"),
        ('{role = "income", path = "linear"}', "pay.path", "is no key of a column"),
        ('{Role = "income"}', "pay.Role", "the nearest key is 'role'"),
        ('{role = "income", basis = "household"}', "pay.basis", "the nearest word is 'per household'"),
        ('{role = "income", quoted = "yearly"}', "pay.quoted", "is not one of the words"),
        ('{role = "income", prices = true}', "pay.prices", 'Write "real" or "nominal"'),
        ('{role = "income", unit = 0}', "pay.unit", "is out of range"),
        ('{role = "income", unit = "1000"}', "pay.unit", "is not a number"),
        ('{role = "income", unit = {a = {b = {c = 1}}}}', "pay.unit", "is not a number"),
        ("[]", "pay", "is no role of a column"),
        ('"deductions"', "pay", "the nearest role is 'deduction'"),
    ],
)
def test_a_faulty_columns_table_is_refused(table: str, column: str, reason: str, tmp_path: Path) -> None:
    """What is missing, unknown, of a wrong type or out of range, with line, place and remedy."""
    found = refused(tmp_path, f"[columns]\npay = {table}\n")
    named = next(finding for finding in found if finding.column == column)
    assert named.row == 2
    assert reason in named.sentence


@pytest.mark.parametrize("keys", ['unit = 1000, timing = "spread"', 'timing = "late", unit = 1000'])
def test_an_ignored_column_says_nothing_else(keys: str, tmp_path: Path) -> None:
    """Conventions for figures that are left out of account are a misunderstanding."""
    result = stated(tmp_path, f'[columns]\nnotes = {{role = "ignore", {keys}}}\n')
    found = next(finding for finding in result.findings if finding.column == "notes")
    assert found.row == 2
    assert "remove timing, unit" in found.sentence
    assert [(entry.role, entry.own) for entry in result.columns] == [("ignore", ())]


def test_a_column_has_one_entry(tmp_path: Path) -> None:
    """A word and a table for one header contradict each other, even where they agree; the second is named."""
    found = only(refused(tmp_path, '[columns]\nRent = "consumption"\n[columns." rent "]\nrole = "consumption"\n'))
    assert (found.row, found.column) == (3, "rent")
    assert "is given a role twice" in found.message


# ------------------------------------------------------------------------------------------------------------------ lump sums

LUMPS = """
[[lump_sum]]
role = "income"
amount = 25000
t = 12.5

[[lump_sum]]   # a roof
label = "roof"
role = "consumption"
amount = -18000.50
year = 2041
basis = "per household"

[["lump_sum"]]
date = 2035-07-01
amount = 3e3
role = "deduction"
"""


def test_lump_sums_are_read_in_their_order(tmp_path: Path) -> None:
    """Exact figures, a label of their own or their number, and the line of their header."""
    assert accepted(tmp_path, LUMPS).lump_sums == (
        LumpSum(role="income", amount=Fraction(25000), label="lump sum 1", t=Fraction(25, 2), row=2),
        LumpSum(
            role="consumption",
            amount=Fraction(-36001, 2),
            label="roof",
            year=Fraction(2041),
            basis="per household",
            row=7,
        ),
        LumpSum(role="deduction", amount=Fraction(3000), label="lump sum 3", date="2035-07-01", row=14),
    )


@pytest.mark.parametrize("basis", ["per person", "per household", "economy", "per effective unit"])
def test_a_lump_sum_takes_a_basis_of_wealth(basis: str) -> None:
    """It is paid once, by whoever holds wealth."""
    assert read({"lump_sum": [{"t": 1, "role": "income", "amount": 5, "basis": basis}]}).lump_sums[0].basis == basis


@pytest.mark.parametrize("date", ["2036-02-29", datetime.date(2036, 2, 29)])
def test_a_date_is_a_date_or_its_text(date: object) -> None:
    """In a mapping as in a file; it is kept as year, month and day."""
    assert read({"lump_sum": [{"date": date, "role": "income", "amount": Decimal("0.1")}]}).lump_sums == (
        LumpSum(role="income", amount=Fraction(1, 10), label="lump sum 1", date="2036-02-29"),
    )


GOOD = {"role": '"income"', "amount": "5", "t": "1"}


@pytest.mark.parametrize(
    ("changed", "column", "row", "reason"),
    [
        ({"t": None}, "lump_sum 2", 5, "has no date; give exactly one of t, year, date"),
        ({"year": "2040"}, "lump_sum 2", 5, "has t and year; give exactly one"),
        ({"year": "2040", "date": "2040-01-01"}, "lump_sum 2", 5, "has t and year and date"),
        ({"role": None}, "lump_sum 2", 5, 'needs role; write role = "income" or "deduction" or "consumption"'),
        ({"amount": None}, "lump_sum 2", 5, "needs amount; write amount = a figure"),
        ({"role": '"ignore"'}, "lump_sum 2.role", 6, "is not one of the words"),
        ({"role": '"incomes"'}, "lump_sum 2.role", 6, "the nearest word is 'income'"),
        ({"amount": '"5"'}, "lump_sum 2.amount", 7, "is not a number"),
        ({"amount": "true"}, "lump_sum 2.amount", 7, "is not a number"),
        ({"amount": "nan"}, "lump_sum 2.amount", 7, "is not a finite number"),
        ({"amount": "2e15"}, "lump_sum 2.amount", 7, "is larger than"),
        ({"t": "-0.5"}, "lump_sum 2.t", 8, "a figure of at least 0"),
        ({"t": "2031-01-01"}, "lump_sum 2.t", 8, "is not a number"),
        ({"t": None, "year": '"2031"'}, "lump_sum 2.year", 8, "is not a number"),
        ({"t": None, "date": "2031-01-01T00:00:00Z"}, "lump_sum 2.date", 8, "with a time of day"),
        ({"t": None, "date": "2031-01-01 12:00:00"}, "lump_sum 2.date", 8, "with a time of day"),
        ({"t": None, "date": "12:00:00"}, "lump_sum 2.date", 8, "is not a date"),
        ({"t": None, "date": "2031"}, "lump_sum 2.date", 8, "is not a date"),
        ({"t": None, "date": '"2031-02-29"'}, "lump_sum 2.date", 8, "that no calendar has"),
        ({"t": None, "date": '"20310228"'}, "lump_sum 2.date", 8, "is not a date"),
        ({"t": None, "date": '"2031-W09-1"'}, "lump_sum 2.date", 8, "is not a date"),
        ({"t": None, "date": '"2031-1-1"'}, "lump_sum 2.date", 8, "write year, month and day, such as 2031-04-01"),
        ({"label": "5"}, "lump_sum 2.label", 9, "is no label"),
        ({"label": '" "'}, "lump_sum 2.label", 9, "is no label"),
        ({"label": f'"{"x" * 81}"'}, "lump_sum 2.label", 9, "of 1 to 80 characters"),
        ({"basis": '"per equivalent adult"'}, "lump_sum 2.basis", 9, "is not one of the words"),
        ({"amounts": "5"}, "lump_sum 2.amounts", 9, "is no key of [[lump_sum]]; the nearest key is 'amount'"),
        ({"timing": '"spread"'}, "lump_sum 2.timing", 9, "is no key of [[lump_sum]]"),
    ],
)
def test_a_faulty_lump_sum_is_refused(
    changed: dict[str, str | None], column: str, row: int, reason: str, tmp_path: Path
) -> None:
    """By its number and the line of the key, or of its header where a key is missing; the others are still read."""
    keys = {name: value for name, value in {**GOOD, **changed}.items() if value is not None}
    text = "\n".join(f"{name} = {value}" for name, value in keys.items())
    result = stated(tmp_path, f'[[lump_sum]]\nrole = "income"\namount = 5\nt = 1\n[[lump_sum]]\n{text}\n')
    found = only(result.findings)
    assert (found.column, found.row) == (column, row)
    assert reason in found.sentence
    assert [entry.row for entry in result.lump_sums] == [1]
    assert result.attempted == {"lump_sum.1"}


@pytest.mark.parametrize("text", ['[lump_sum]\nt = 1\nrole = "income"\namount = 5', "lump_sum = {t = 1}", "lump_sum = 5"])
def test_a_single_table_is_no_list_of_lump_sums(text: str, tmp_path: Path) -> None:
    """The remedy is a pair of brackets, and is named."""
    found = only(refused(tmp_path, f"{text}\n"))
    assert (found.row, found.column) == (1, "lump_sum")
    assert "write [[lump_sum]]" in (found.hint or "")


@pytest.mark.parametrize("element", ["5", '"income"', "[]", "2031-01-01"])
def test_what_is_no_table_is_no_lump_sum(element: str, tmp_path: Path) -> None:
    """An array in brackets may hold tables alone; the line is the element's."""
    text = f'lump_sum = [\n  {{t = 1, role = "income", amount = 5}}, # sound\n  {element}\n]\n'
    found = only(refused(tmp_path, text))
    assert (found.row, found.column) == (3, "lump_sum 2")
    assert "is no table" in found.message


def test_more_than_two_hundred_lump_sums_are_refused(tmp_path: Path) -> None:
    """What recurs that often is a column of the table; the first one too many is named."""
    one = '[[lump_sum]]\nrole = "income"\namount = 5\nt = 1\n'
    assert len(accepted(tmp_path, one * 200).lump_sums) == 200
    found = only(refused(tmp_path, one * 201))
    assert (found.row, found.column) == (801, "lump_sum 201")
    assert "at most 200" in found.message


def test_a_mistyped_name_of_the_lump_sums_is_refused(tmp_path: Path) -> None:
    """It would otherwise be a payment left out of account."""
    assert "'lump_sum'" in (only(refused(tmp_path, "[[lump_sums]]\nt = 1\n")).hint or "")


def test_the_keys_of_a_lump_sum_are_its_fields() -> None:
    """Every key is read into the field of its name."""
    assert set(LUMP_SUM_KEYS) | {"row"} == set(LumpSum.__dataclass_fields__)


# ------------------------------------------------------------------------------------------------------------- all in one run

FAULTY = """\
[market]
curve = "spot"
inflation = "0.02"
[household]
hazard = -1
wealth_att = "end"
[amounts]
day_count = "ACT"
[horizon]
speed = 0
[columns]
pay = {role = "incom", unit = 0}
tax = {timing = "spread"}
[[lump_sum]]
amount = "5"
t = 1
[[lump_sum]]
role = "income"
amount = 5
year = 2031
date = 2031-01-01T00:00:00Z
[limits]
borrowing = -1
"""


def test_every_fault_is_found_in_one_run(tmp_path: Path) -> None:
    """Keys, columns and lump sums, each with its line; nothing faulty is in force."""
    result = stated(tmp_path, FAULTY)
    assert sorted((finding.row or 0, finding.column) for finding in result.findings) == [
        (2, "curve"),
        (3, "inflation"),
        (5, "hazard"),
        (6, "wealth_att"),
        (8, "day_count"),
        (10, "speed"),
        (12, "pay.role"),
        (12, "pay.unit"),
        (13, "tax"),
        (14, "lump_sum 1"),
        (15, "lump_sum 1.amount"),
        (17, "lump_sum 2"),
        (21, "lump_sum 2.date"),
        (23, "borrowing"),
    ]
    assert (result.declared, result.columns, result.lump_sums) == ((), (), ())


def test_a_mapping_is_refused_like_its_file(tmp_path: Path) -> None:
    """The same sentences, without the lines."""
    filed = stated(tmp_path, FAULTY).findings
    mapped = read(tomllib.loads(FAULTY)).findings
    assert [(f.column, f.message, f.raw, f.hint) for f in filed] == [(f.column, f.message, f.raw, f.hint) for f in mapped]
    assert {(f.file, f.row) for f in mapped} == {(None, None)}


# --------------------------------------------------------------------------------------------------------------------- places


@pytest.mark.parametrize(
    ("before", "row"),
    [
        ('label = """\n[household]\nhazard = 1\n"""\n', 6),
        ("label = '''\nhazard = 1\n'''\n", 5),
        ('label = "hazard = 1 \\" # {["\n', 3),
        ("list = [\n  [1, 2], # ]\n  {a = [\n]},\n]\n", 7),
        ('list = [{a = 1}, """\n"""]\r\n', 4),
        ("# hazard = 1\n\n", 4),
    ],
)
def test_texts_lists_and_comments_do_not_shift_lines(before: str, row: int, tmp_path: Path) -> None:
    """What only looks like a key is none, and what spans several lines counts them all."""
    (tmp_path / "plan.toml").write_bytes(f"[household]\n{before}hazard = -1\n".encode())
    found = next(finding for finding in read(tmp_path / "plan.toml").findings if finding.column == "hazard")
    assert found.row == row


NAMES = st.sampled_from(["t", "role", "Gross pay", "columns", "1", "a.b", "=", "#", "[x]", "é"])
VALUES = st.recursive(
    st.sampled_from(["1", "-1.5e3", "true", '"a = 1 # ["', "'}'", '"""\n[x]\n"""', "2031-04-01"]),
    lambda inner: st.lists(inner, max_size=3).map(lambda items: "[" + ",\n".join(items) + "]"),
    max_leaves=6,
)


@settings(deadline=None, max_examples=200)
@given(names=st.lists(NAMES, unique=True, min_size=1, max_size=6), data=st.data())
def test_every_key_of_any_file_is_found_on_its_line(names: list[str], data: st.DataObject, tmp_path_factory: Any) -> None:
    """An unknown key is named with the line on which it stands, whatever stands before it."""
    lines, expected = ["[market]"], []
    for name in names:
        expected.append((len(lines) + 1, name))
        lines += f'"{name}" = {data.draw(VALUES)}'.split("\n")
    folder = tmp_path_factory.mktemp("places")
    assert [(finding.row, finding.column) for finding in refused(folder, "\n".join(lines))] == expected


def test_a_line_of_a_thousand_points_is_refused_unparsed(tmp_path: Path) -> None:
    """A key of very many parts would keep the parser busy for hours."""
    (tmp_path / "plan.toml").write_text(f"[market]\n{'a.' * 400_000}b = 1\n")
    with pytest.raises(InputRefused, match=r"plan\.toml, line 2: has a line with more than 1000 points"):
        read(tmp_path / "plan.toml")
