"""What a figure, a CSV table and a time axis may look like; whatever else they look like is refused, never guessed at."""

from __future__ import annotations

import io
import os
import sys
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from budgetcheck import Assessment, Finding, InputRefused, assess
from budgetcheck import table as table_module
from budgetcheck.numerals import Misread, exact, read_column

SETTINGS = {"market": {"r": 0.03}, "horizon": {"kind": "finite", "terminal_wealth": 0}}

PLAN = "year,wage,consumption\n2031,100,90\n2032,101,91\n2033,102,92\n"


def saved(folder: Path, content: str | bytes, name: str = "plan.csv") -> Path:
    """A plan's file with exactly these bytes."""
    path = folder / name
    path.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)
    return path


def assessed(folder: Path, content: str | bytes, settings: dict[str, object] | None = None) -> Assessment:
    """The assessment of a plan with these bytes."""
    return assess(saved(folder, content), SETTINGS if settings is None else settings)


def refused(folder: Path, content: str | bytes, settings: dict[str, object] | None = None) -> tuple[Finding, ...]:
    """The stops with which a plan of these bytes is refused."""
    with pytest.raises(InputRefused, match=r"plan\.csv") as caught:
        assessed(folder, content, settings)
    return caught.value.findings


def only(findings: tuple[Finding, ...]) -> Finding:
    """The one finding."""
    assert len(findings) == 1, [finding.sentence for finding in findings]
    return findings[0]


# ----------------------------------------------------------------------------------------------------------------- figures


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0", 0),
        ("12", 12),
        ("+12", 12),
        ("-3", -3),
        ("\u22123", -3),
        ("1.50", Fraction(3, 2)),
        (".5", Fraction(1, 2)),
        ("5.", 5),
        ("1e3", 1000),
        ("1E+3", 1000),
        ("2.5e-3", Fraction(1, 400)),
        ("007", 7),
        ("  12 ", 12),
        ("\t12\t", 12),
        ("0.1", Fraction(1, 10)),
        ("1e15", 10**15),
        ("0.000", 0),
        ("-0", 0),
        ("0e5", 0),
        ("1e-100", Fraction(1, 10**100)),
    ],
)
def test_a_plain_figure_is_read_exactly(text: str, value: object) -> None:
    """Sign, digits, one decimal point, an exponent: the decimal figure as printed, with no rounding."""
    assert exact(text) == value
    column = read_column([text])
    assert column.misread == ()
    assert column.values[0] == float(Fraction(value))  # type: ignore[arg-type]


NO_FIGURES = [
    # what float() reads and a reader of tables must not
    ("1_000", "cell-number"),
    ("１２", "cell-number"),
    ("١٢", "cell-number"),
    ("१२", "cell-number"),
    ("\u00a012", "cell-number"),
    ("12\u00a0", "cell-number"),
    ("\u200912", "cell-number"),
    ("12\u3000", "cell-number"),
    ("12\x0b", "cell-number"),
    ("12\n", "cell-number"),
    ("nan", "not-finite"),
    ("NaN", "not-finite"),
    ("-nan", "not-finite"),
    ("inf", "not-finite"),
    ("-Inf", "not-finite"),
    ("+INFINITY", "not-finite"),
    ("∞", "not-finite"),
    ("\u2212∞", "not-finite"),
    ("1.#INF", "not-finite"),
    ("1e999", "not-finite"),
    ("-1e400", "not-finite"),
    ("1e-400", "not-finite"),
    ("1e-101", "not-finite"),
    ("1.0000001e15", "not-finite"),
    # groups of digits, whatever joins them
    ("1,234", "cell-number"),
    ("1,234.5", "cell-number"),
    ("1 234", "cell-number"),
    ("1\u00a0234", "cell-number"),
    ("1\u202f234", "cell-number"),
    ("1'234", "cell-number"),
    ("1’234", "cell-number"),
    ("1.234.567", "cell-number"),
    ("12,5", "cell-number"),
    ("1.234,5", "cell-number"),
    # other notations
    ("0x10", "cell-number"),
    ("0b1", "cell-number"),
    ("1e5000", "cell-number"),
    ("1d3", "cell-number"),
    ("1e", "cell-number"),
    ("e5", "cell-number"),
    ("1e1.5", "cell-number"),
    ("1.2.3", "cell-number"),
    ("--1", "cell-number"),
    ("+-1", "cell-number"),
    ("- 1", "cell-number"),
    ("1-", "cell-number"),
    ("–1", "cell-number"),
    ("(1)", "cell-number"),
    ("5%", "cell-number"),
    ("5 %", "cell-number"),
    ("5‰", "cell-number"),
    ("$5", "cell-number"),
    ("5 €", "cell-number"),
    ("5k", "cell-number"),
    ("~5", "cell-number"),
    ("5-6", "cell-number"),
    ("1/2", "cell-number"),
    ("1+1", "cell-number"),
    ("=1", "cell-number"),
    ("1j", "cell-number"),
    ("True", "cell-number"),
    ("#DIV/0!", "cell-number"),
    ("twelve", "cell-number"),
    ("1" * 101, "cell-number"),
    ("1\u200b2", "cell-number"),
    # the spellings of nothing
    ("", "cell-missing"),
    ("   ", "cell-missing"),
    ("NA", "cell-missing"),
    ("n/a", "cell-missing"),
    ("#N/A", "cell-missing"),
    ("None", "cell-missing"),
    ("NULL", "cell-missing"),
    ("-", "cell-missing"),
    ("—", "cell-missing"),
    ("...", "cell-missing"),
]


@pytest.mark.parametrize(("text", "rule"), NO_FIGURES)
def test_what_is_no_plain_figure_is_refused_with_a_hint(text: str, rule: str) -> None:
    """Every other spelling is refused under the rule's name, alone and in a column, with something to do about it."""
    alone = exact(text)
    assert isinstance(alone, Misread)
    assert alone.rule == rule
    assert alone.hint
    column = read_column(["1", text, "2"])
    assert [(index, misread.rule) for index, misread in column.misread] == [(1, rule)]


@pytest.mark.parametrize(
    ("text", "likely"),
    [("1,234", "1234"), ("-1,234.5", "-1234.5"), ("1_000", "1000"), ("1\u202f234", "1234"), ("12,5", "12.5"), ("5%", "0.05")],
)
def test_the_hint_names_the_likely_figure(text: str, likely: str) -> None:
    """Where the intended figure is plain to see, the hint spells it, and still nobody reads it as that."""
    misread = exact(text)
    assert isinstance(misread, Misread)
    assert likely in misread.hint


@pytest.mark.parametrize(
    ("text", "half"), [("100", 0.5), ("100.", 0.5), ("1.50", 0.005), (".5", 0.05), ("1e3", 500.0), ("2.5e-3", 5e-5), ("0", 0.5)]
)
def test_half_a_unit_of_the_last_printed_digit_is_kept(text: str, half: float) -> None:
    """What rounding before printing may have moved: half a unit in the last digit, exponent counted."""
    assert read_column([text]).half_units[0] == pytest.approx(half, rel=1e-15)


@given(st.text(max_size=30))
def test_any_text_is_a_figure_or_a_reason(text: str) -> None:
    """No text makes the reader of figures fail, and alone and in a column it is judged alike."""
    alone = exact(text)
    column = read_column([text])
    assert bool(column.misread) == isinstance(alone, Misread)
    if isinstance(alone, Fraction):
        assert column.values[0] == float(alone)


@given(st.decimals(min_value=-(10**15), max_value=10**15, allow_nan=False, places=4))
def test_a_printed_decimal_reads_back(figure: object) -> None:
    """A decimal printed in plain digits is read as that decimal."""
    text = f"{figure:f}"
    assert exact(text) == Fraction(text)


@pytest.mark.parametrize("text", ["0e308", "0e999", "0.0e999", "0e-999", "1e-300"])
def test_an_extreme_exponent_overflows_nothing(text: str, tmp_path: Path) -> None:
    """A zero with a large exponent is a zero or is refused: what its last digit might hide is never an infinite figure."""
    body = PLAN.replace("2032,101,91", f"2032,{text},91")
    try:
        rounding = assessed(tmp_path, body).error.input_rounding
    except InputRefused as refusal:
        rounding, places = 0.0, [(finding.row, finding.column) for finding in refusal.findings]
    else:
        places = [(3, "wage")]
    assert places == [(3, "wage")]
    assert rounding is not None
    assert np.isfinite(rounding)


# --------------------------------------------------------------------------------------------------------------- structure


def test_a_sound_table_is_read(tmp_path: Path) -> None:
    """Three rows of wage and consumption: the plan runs from the first year to the end of the last."""
    result = assessed(tmp_path, PLAN)
    assert (result.span.rows, result.span.first, result.span.last) == (3, "2031", "2033")
    assert result.verdict == "PASS"


@pytest.mark.parametrize(
    "content",
    [
        PLAN.replace("\n", "\r\n"),
        PLAN.rstrip("\n"),
        "\ufeff" + PLAN,
        PLAN.replace("year", '"year"').replace("101", '"101"'),
        "\ufeff" + PLAN.replace("year", '"year"'),
        PLAN.replace("year,wage", "Year, WAGE "),
        PLAN.replace("\n", "\n\n"),
        PLAN + "   \n\n",
    ],
    ids=["crlf", "no last newline", "BOM", "quotes", "BOM and quotes", "case and blanks", "blank lines", "blank end"],
)
def test_harmless_differences_do_not_change_the_verdict(content: str, tmp_path: Path) -> None:
    """Line ends, a byte order mark, quotes, the case of headers and blank lines are no part of what a table says."""
    expected = assessed(tmp_path, PLAN).slack
    assert assessed(tmp_path, content).slack == expected


def test_line_numbers_are_physical(tmp_path: Path) -> None:
    """Blank lines and line ends within quotes count: a finding's row is the line an editor would jump to."""
    body = 'year,wage,consumption,remark\n\n2031,100,90,"two\nlines"\n\n2032,x1,91,\n2033,102,,\n'
    settings = {**SETTINGS, "columns": {"remark": "ignore"}}
    found = refused(tmp_path, body, settings)
    assert [(finding.row, finding.column, finding.raw) for finding in found] == [
        (6, "wage", "x1"),
        (7, "consumption", ""),
    ]


def test_a_record_over_several_lines_is_named_by_its_first(tmp_path: Path) -> None:
    """A row that begins on line 2 and ends on line 3 is row 2."""
    body = 'remark,year,wage,consumption\n"a\nb",2031,bad,90\nc,2032,100,90\n'
    found = only(refused(tmp_path, body, {**SETTINGS, "columns": {"remark": "ignore"}}))
    assert (found.row, found.raw) == (2, "bad")


@pytest.mark.parametrize(("row", "cells"), [("2032,101", 2), ("2032,101,91,", 4), ("2032,12,5,91,5", 5), ("2032", 1)])
def test_a_ragged_row_is_refused(row: str, cells: int, tmp_path: Path) -> None:
    """A row with more or fewer cells than the header is named by line, with both counts and the row itself."""
    found = only(refused(tmp_path, PLAN.replace("2032,101,91", row)))
    assert (found.rule, found.row) == ("structure", 3)
    assert f"{cells} cells where the header has 3" in found.message
    assert found.raw is not None
    assert row.startswith(found.raw.rstrip(",")) or found.raw.startswith("2032")
    assert found.hint


def test_every_ragged_row_is_named(tmp_path: Path) -> None:
    """All of them in one run."""
    body = PLAN.replace("2032,101,91", "2032,101").replace("2033,102,92", "2033,102,92,1")
    assert [finding.row for finding in refused(tmp_path, body)] == [3, 4]


@pytest.mark.parametrize("body", ['year,wage,consumption\n2031,"100,90\n2032,101,91\n', 'year,wage,consumption\n2031,"1"0,9\n'])
def test_a_quote_that_is_not_closed_is_refused_on_its_line(body: str, tmp_path: Path) -> None:
    """The line on which the quote opens is named, not the end of the file that it swallowed."""
    found = only(refused(tmp_path, body))
    assert (found.rule, found.row) == ("structure", 2)
    assert "quote" in found.message


def test_utf_16_is_refused_by_its_mark(tmp_path: Path) -> None:
    """'Unicode text' exports are named for what they are, with the format to save instead."""
    for encoding in ("utf-16", "utf-16-be"):
        mark = b"\xfe\xff" if encoding == "utf-16-be" else b""
        found = only(refused(tmp_path, mark + PLAN.encode(encoding)))
        assert "UTF-16" in found.message
        assert "CSV UTF-8" in found.message


def test_utf_16_without_its_mark_is_refused(tmp_path: Path) -> None:
    """NUL bytes betray it, and are no text in any case."""
    found = only(refused(tmp_path, PLAN.encode("utf-16-le")))
    assert (found.rule, found.row) == ("structure", 1)
    assert "NUL" in found.message


def test_a_nul_is_refused_on_its_line(tmp_path: Path) -> None:
    """A NUL would pass through most readers into a cell."""
    found = only(refused(tmp_path, PLAN.replace("101", "10\x001")))
    assert (found.rule, found.row) == ("structure", 3)
    assert "NUL" in found.message


def test_windows_1252_is_refused_with_the_byte_and_its_line(tmp_path: Path) -> None:
    """Bytes that are not UTF-8 are not guessed at."""
    body = (
        PLAN.replace("wage", "wage,Gehalt in €").replace("100,", "100,1,").replace("101,", "101,1,").replace("102,", "102,1,")
    )
    found = only(refused(tmp_path, body.encode("cp1252")))
    assert (found.rule, found.row) == ("structure", 1)
    assert "0x80" in found.message
    assert "UTF-8" in found.message


@pytest.mark.parametrize("content", ["", "\n\n", "  \n", "\ufeff", '""\n'])
def test_an_empty_file_is_refused(content: str, tmp_path: Path) -> None:
    """A file without a header says so."""
    found = only(refused(tmp_path, content))
    assert found.rule == "structure"
    assert "empty" in found.message


@pytest.mark.parametrize(("content", "rows"), [("year,wage,consumption\n", 0), ("year,wage,consumption\n2031,100,90\n", 1)])
def test_fewer_than_two_rows_are_refused(content: str, rows: int, tmp_path: Path) -> None:
    """One row has no length and no spacing; the message counts what is there."""
    found = only(refused(tmp_path, content))
    assert found.rule == "structure"
    assert f"{rows} row" in found.message
    assert "two" in found.message


def test_two_rows_are_enough_for_totals(tmp_path: Path) -> None:
    """The least plan of yearly totals."""
    assert assessed(tmp_path, "year,wage,consumption\n2031,100,90\n2032,100,90\n").verdict == "PASS"


@pytest.mark.parametrize("second", ["wage", "WAGE", " Wage "])
def test_a_header_that_stands_twice_is_refused(second: str, tmp_path: Path) -> None:
    """The same header, in any case and with any blanks around it, cannot be two columns."""
    body = f"year,wage,consumption,{second}\n2031,100,90,1\n2032,100,90,1\n"
    found = only(refused(tmp_path, body))
    assert (found.rule, found.row) == ("header-role", 1)
    assert "twice" in found.message


@pytest.mark.parametrize("header", ["year,wage,consumption,", "year,wage,consumption,  ", "year,,wage,consumption"])
def test_a_column_without_a_name_is_refused(header: str, tmp_path: Path) -> None:
    """A trailing comma makes a column; its position is named."""
    found = refused(tmp_path, f"{header}\n2031,100,90,1\n2032,100,90,1\n")
    assert any(f.rule == "header-role" and "no name" in f.message for f in found)


@pytest.mark.parametrize("separator", [";", "\t", "|"])
def test_other_separators_are_refused_with_the_comma_as_hint(separator: str, tmp_path: Path) -> None:
    """Only commas separate; a table with another separator is not read as one wide column."""
    found = only(refused(tmp_path, PLAN.replace(",", separator)))
    assert found.rule == "structure"
    assert "comma" in found.sentence


@pytest.mark.parametrize("header", ["con\u017fumption", "c\u043ensumption", "\uff43onsumption", "consumpt\u0131on"])
def test_a_look_alike_header_is_no_known_header(header: str, tmp_path: Path) -> None:
    """Letters that only look like, or fold to, those of a known header do not make it one."""
    found = refused(tmp_path, PLAN.replace("consumption", header))
    assert all(finding.rule == "header-role" for finding in found)
    assert header in {finding.raw for finding in found}


def test_an_invisible_letter_in_a_header_is_shown(tmp_path: Path) -> None:
    """A zero-width space does not vanish: the refusal makes it visible."""
    with pytest.raises(InputRefused, match=r"wage\\u200b"):
        assessed(tmp_path, PLAN.replace("wage", "wage\u200b"))


def test_too_many_columns_are_refused(tmp_path: Path) -> None:
    """A table of more than a thousand columns is no plan of a household."""
    headers = ",".join(["year", "wage", "consumption", *(f"c{i}" for i in range(998))])
    found = only(refused(tmp_path, f"{headers}\n"))
    assert found.rule == "too-large"
    assert "1001" in found.message


def test_a_huge_cell_is_refused_and_not_repeated(tmp_path: Path) -> None:
    """A cell of two hundred thousand characters is refused in a message of readable length."""
    with pytest.raises(InputRefused, match=r"line 3") as caught:
        assessed(tmp_path, PLAN.replace("101", "9" * 200_000))
    assert len(str(caught.value)) < 500


def test_a_cell_too_long_for_a_figure_is_refused_by_its_length(tmp_path: Path) -> None:
    """Digits beyond a hundred are no figure that anybody printed."""
    found = only(refused(tmp_path, PLAN.replace("101", "9" * 2000)))
    assert (found.rule, found.row, found.column) == ("cell-number", 3, "wage")
    assert "2000 characters" in found.message


def test_a_file_beyond_the_limit_is_refused_unread(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Size is looked at before anything is read."""
    monkeypatch.setattr(table_module, "MOST_BYTES", 20)
    assert "larger than" in only(refused(tmp_path, PLAN)).message


# ----------------------------------------------------------------------------------------------------------------- sources


def test_a_missing_file_is_refused(tmp_path: Path) -> None:
    """The name is given back, and what to look at."""
    with pytest.raises(InputRefused, match=r"nowhere\.csv: there is no such file; check"):
        assess(tmp_path / "nowhere.csv", SETTINGS)


def test_a_directory_is_refused(tmp_path: Path) -> None:
    """A folder is not a table."""
    with pytest.raises(InputRefused, match=r"is a directory; name the CSV file"):
        assess(tmp_path, SETTINGS)


@pytest.mark.parametrize("name", ["", ".", "..", "/", "a\0b.csv", "x" * 5000 + ".csv"])
def test_an_impossible_name_is_refused(name: str) -> None:
    """Whatever string stands for a plan, it is refused as an input, not failed upon."""
    with pytest.raises(InputRefused, match=r"directory|no such file|cannot be opened"):
        assess(name)


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="the system has no named pipes")
def test_a_named_pipe_is_refused_without_waiting(tmp_path: Path) -> None:
    """Reading one could wait for ever."""
    pipe = tmp_path / "pipe.csv"
    os.mkfifo(pipe)
    with pytest.raises(InputRefused, match=r"not a regular file; copy"):
        assess(pipe, SETTINGS)


@pytest.mark.skipif(not Path("/dev/zero").exists(), reason="the system has no such device")
def test_a_device_is_refused() -> None:
    """Reading one could never end."""
    with pytest.raises(InputRefused, match=r"not a regular file"):
        assess("/dev/zero", SETTINGS)


def test_a_file_that_cannot_be_opened_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The system's own reason is passed on."""

    def forbidden(self: Path) -> bytes:
        raise PermissionError(13, "Permission denied")

    path = saved(tmp_path, PLAN)
    monkeypatch.setattr(Path, "read_bytes", forbidden)
    with pytest.raises(InputRefused, match=r"cannot be read: Permission denied"):
        assess(path, SETTINGS)


def given_on_standard_input(monkeypatch: pytest.MonkeyPatch, content: bytes) -> None:
    """Let these bytes stand on standard input."""
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(content)))


def test_a_dash_reads_standard_input(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """The same bytes give the same slack and the same fingerprint from either source."""
    given_on_standard_input(monkeypatch, PLAN.encode())
    piped, filed = assess("-", SETTINGS), assessed(tmp_path, PLAN)
    assert (piped.slack, piped.input_sha256) == (filed.slack, filed.input_sha256)
    assert piped.span.file == "standard input"


@pytest.mark.parametrize(
    ("content", "reason"), [(b"", "empty"), (b"\xff\xfea\0", "UTF-16"), (PLAN[:30].encode() + b"\xe9", "0xe9")]
)
def test_standard_input_is_judged_like_a_file(content: bytes, reason: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Its refusals say 'standard input' where a file's would say its name."""
    given_on_standard_input(monkeypatch, content)
    with pytest.raises(InputRefused, match=rf"standard input.*{reason}"):
        assess("-", SETTINGS)


def test_standard_input_beyond_the_limit_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """No more is taken than a file may hold."""
    monkeypatch.setattr(table_module, "MOST_BYTES", 20)
    given_on_standard_input(monkeypatch, PLAN.encode())
    with pytest.raises(InputRefused, match=r"standard input: is larger than"):
        assess("-", SETTINGS)


def test_a_workbook_is_refused_as_no_csv(tmp_path: Path) -> None:
    """Spreadsheets are not read in this version, and their bytes are not taken for text."""
    with pytest.raises(InputRefused, match=r"plan\.xlsx.*CSV"):
        assess(saved(tmp_path, b"PK\x03\x04\x14\x00\x06\x00" + bytes(40), "plan.xlsx"), SETTINGS)


# -------------------------------------------------------------------------------------------------------------------- time


def test_a_time_that_repeats_is_refused(tmp_path: Path) -> None:
    """The second row with the same time is named, with the line of the first."""
    found = only(refused(tmp_path, PLAN.replace("2032", "2031")))
    assert (found.rule, found.row, found.column, found.raw) == ("time-order", 3, "year", "2031")
    assert "same time as line 2" in found.message


def test_a_time_that_goes_back_is_refused(tmp_path: Path) -> None:
    """The row that is too early is named, and rows are never sorted behind the reader's back."""
    found = only(refused(tmp_path, PLAN.replace("2033", "2030")))
    assert (found.rule, found.row, found.raw) == ("time-order", 4, "2030")
    assert "earlier than line 3" in found.message


def test_times_apart_by_rounding_only_are_one_time(tmp_path: Path) -> None:
    """Two rows nearer than any date can mean are one date written twice."""
    body = "t,wage,consumption\n0,1,1\n1,1,1\n1.000000000000001,1,1\n40,1,1\n"
    found = only(refused(tmp_path, body))
    assert (found.rule, found.row) == ("time-order", 4)


@pytest.mark.parametrize("cell", ["31", "2031.5", "20310", "-2031", "0", "999", "1e5"])
def test_a_year_that_is_none_is_refused(cell: str, tmp_path: Path) -> None:
    """A calendar year has four digits; spreadsheet day numbers, ages and parts of years do not pass for one."""
    found = refused(tmp_path, PLAN.replace("2031", cell))
    first = next(finding for finding in found if finding.rule == "time-cell")
    assert (first.row, first.column, first.raw) == (2, "year", cell)
    assert "four digits" in first.message


@pytest.mark.parametrize("cell", ["2031-04", "01/02/2031", "2031Q2", "FY2031", "Total", ""])
def test_a_time_cell_that_is_no_number_is_refused(cell: str, tmp_path: Path) -> None:
    """Dates, quarters and total rows under 'year' are refused by cell."""
    found = only(refused(tmp_path, PLAN.replace("2032", cell)))
    assert (found.row, found.column, found.raw) == (3, "year", cell)


def test_unequal_steps_are_read_as_they_stand(tmp_path: Path) -> None:
    """A period runs to the next row; the last is as long as the one before it."""
    result = assessed(tmp_path, "year,wage,consumption\n2031,100,90\n2032,100,90\n2037,500,450\n")
    assert result.span.end == "ends at 2042"


def test_t_counts_from_the_first_row(tmp_path: Path) -> None:
    """Only differences of t enter: shifting all of it changes nothing."""
    rows = [(0, 100, 90), (1, 101, 91), (2, 103, 95), (4, 101, 93), (5, 99, 90)]
    slacks = []
    for shift in (0, 25):
        body = "t,wage,consumption\n" + "".join(f"{t + shift},{w},{c}\n" for t, w, c in rows)
        slacks.append(assessed(tmp_path, body).slack)
    assert slacks[0] == slacks[1]


def test_two_time_columns_are_refused(tmp_path: Path) -> None:
    """There is one time axis."""
    body = "t,year,wage,consumption\n0,2031,100,90\n1,2032,100,90\n"
    found = only(refused(tmp_path, body))
    assert (found.rule, found.row) == ("header-role", 1)
    assert "'t', 'year'" in found.message


def test_a_table_without_time_is_refused(tmp_path: Path) -> None:
    """Row numbers are no dates."""
    found = only(refused(tmp_path, "wage,consumption\n100,90\n100,90\n"))
    assert found.rule == "header-role"
    assert "no time column" in found.message
