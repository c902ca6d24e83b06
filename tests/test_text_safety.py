"""Text that came from outside never steers a terminal, forges a line or breaks a report, and no input ends in a traceback."""

from __future__ import annotations

import json
import os
import re
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from typer.testing import CliRunner

from budgetcheck import Assessment, Finding, InputRefused, assess
from budgetcheck.cli import app
from budgetcheck.report import json as json_report
from budgetcheck.report import terminal as terminal_report
from budgetcheck.text import quoted, visible

UNSAFE = re.compile(
    "[\x00-\x09\x0b-\x1f\x7f-\x9f"  # C0 except the line end, DEL, C1
    "\u00ad\u061c\u180e\u200b-\u200f\u2028-\u202e\u2060-\u206f\ufeff\ufff9-\ufffb"  # hidden, bidirectional, separators
    "\ud800-\udfff\ue000-\uf8ff\U000e0000-\U000e007f\U000f0000-\U0010ffff]"  # surrogates, private use, tags
)

HOSTILE = {
    "colour": "\x1b[31mred\x1b[0m",
    "clear screen": "\x1b[2J\x1b[H",
    "title": "\x1b]0;owned\x07",
    "link": "\x1b]8;;http://example.org\x1b\\here\x1b]8;;\x1b\\",
    "one byte CSI": "\x9b31m",
    "bell": "be\x07ll",
    "backspace": "PASS\b\b\b\bFAIL",
    "delete": "a\x7fb",
    "carriage return": "safe\rPASS",
    "line end": "wage\nPASS  The plan is affordable",
    "tab": "a\tb",
    "form feed": "a\x0cb",
    "file separator": "a\x1cb",
    "next line": "a\x85b",
    "right to left": "\u202egnp.exe",
    "isolate": "\u2066abc\u2069",
    "arabic mark": "a\u061cb",
    "zero width": "wa\u200bge",
    "joiner": "wa\u200dge",
    "mark in the middle": "wa\ufeffge",
    "soft hyphen": "wa\u00adge",
    "line separator": "a\u2028PASS",
    "paragraph separator": "a\u2029PASS",
    "private use": "a\ue000b",
    "tag letters": "a\U000e0041b",
    "unassigned": "a\u0378b",
    "combining": "a" + "\u0301" * 60,
    "markup that closes": "[/wage]",
    "markup": "[red]pay[/red]",
    "markup link": "[link=http://example.org]pay[/link]",
    "emoji": ":smile:",
    "open bracket": "[",
    "backslash": "\\[bold]\\x1b",
    "format": "{0}{wage}%s%d%(x)s",
    "formula": '=HYPERLINK("http://example.org")',
    "quotes": 'it\'s "so"',
    "html": "<script>alert(1)</script>",
    "wide": "賃金" * 30,
    "long": "x" * 900,
    "surrogate pair": "\U0001f4b0",
}

TEXTS = pytest.mark.parametrize("text", HOSTILE.values(), ids=HOSTILE.keys())


def toml_string(text: str) -> str:
    """A TOML basic string, every character that may not stand in one escaped."""
    escaped = "".join(
        f"\\U{ord(c):08x}" if c in '"\\' or (not c.isprintable() and not 0xD800 <= ord(c) <= 0xDFFF) else c for c in text
    )
    return f'"{escaped}"'


def csv_cell(text: str) -> str:
    """A quoted CSV cell."""
    return '"' + text.replace('"', '""') + '"'


def plan_with(header: str, cell: str = "5") -> str:
    """Three years with one more column."""
    head = f"year,wage,consumption,{csv_cell(header)}\n"
    return head + "".join(f"{year},100,90,{csv_cell(cell)}\n" for year in (2031, 2032, 2033))


def settings_with(header: str, role: str = '"consumption"') -> str:
    """Sound assumptions with a role for that column."""
    sound = '[market]\nr = 0.03\n[horizon]\nkind = "finite"\nterminal_wealth = 0\n'
    return f"{sound}[columns]\n{toml_string(header)} = {role}\n"


def strictly(text: str) -> Any:
    """JSON, with no constants that JSON does not have."""

    def no_constant(name: str) -> None:
        raise AssertionError(f"{name} is not JSON")

    return json.loads(text, parse_constant=no_constant)


def words_of(value: Any) -> Iterator[str]:
    """Every text in a JSON value, keys included."""
    if isinstance(value, dict):
        for key, inner in value.items():
            yield key
            yield from words_of(inner)
    elif isinstance(value, list):
        for inner in value:
            yield from words_of(inner)
    elif isinstance(value, str):
        yield value


def reports(plan: Any, assumptions: Any = None) -> list[str]:
    """Every report on the plan, whether assessed or refused: on a terminal wide, narrow and full, and as JSON."""
    try:
        result: Assessment | InputRefused = assess(plan, assumptions)
    except InputRefused as refusal:
        result = refusal
    if isinstance(result, InputRefused):
        shown = [terminal_report.render_refused(result.findings, width=width) for width in (80, 40)]
        shown.append(f"{result}\n")
        as_json = json_report.render_refused(result.findings)
    else:
        shown = [terminal_report.render(result, width=width, full=full) for width in (80, 40) for full in (False, True)]
        as_json = json_report.render(result)
    assert as_json.isascii()
    inside = [word for word in words_of(strictly(as_json)) if UNSAFE.search(word) or "\n" in word]
    assert inside == []
    return [*shown, as_json]


def safe(text: str) -> bool:
    """Whether nothing in the text steers or hides."""
    return UNSAFE.search(text) is None


def files(folder: Path, plan: str, toml: str, name: str = "plan") -> Path:
    """A plan and its assumptions beside it."""
    path = folder / f"{name}.csv"
    path.write_text(plan, encoding="utf-8", newline="")
    path.with_suffix(".toml").write_text(toml, encoding="utf-8", newline="")
    return path


# -------------------------------------------------------------------------------------------------------- the one function


@given(st.text(max_size=300), st.integers(min_value=10, max_value=120))
@example("\U000e0041", 80)
@example("\udc80", 80)
def test_visible_text_is_one_safe_line_of_bounded_length(text: str, limit: int) -> None:
    """Nothing unsafe is left, no line end, and the length is bounded."""
    shown = visible(text, limit)
    assert safe(shown)
    assert "\n" not in shown
    assert len(shown) <= limit
    shown.encode("utf-8")


@TEXTS
def test_hostile_texts_become_visible(text: str) -> None:
    """Every text of the table, alone and in quotes."""
    assert safe(visible(text))
    assert safe(quoted(text))
    assert "\n" not in visible(text)


@pytest.mark.parametrize("text", ["wage", "Lohn für Juli", "賃金", "pay [gross]", "naïve", "½", ""])
def test_innocent_text_is_not_changed(text: str) -> None:
    """Letters of any script, accents and brackets stay as they are."""
    assert visible(text) == text


@pytest.mark.parametrize(
    ("text", "shown"),
    [("\x1b", r"\x1b"), ("\x9b", r"\x9b"), ("\u202e", r"\u202e"), ("\n", r"\x0a"), ("\U000e0041", r"\U000e0041")],
)
def test_hidden_characters_are_written_as_escapes(text: str, shown: str) -> None:
    """A reader sees which character stood there."""
    assert visible(f"a{text}b") == f"a{shown}b"


def test_a_long_text_keeps_both_its_ends() -> None:
    """It is cut in the middle."""
    shown = visible("start" + "x" * 500 + "end", 40)
    assert shown.startswith("start")
    assert shown.endswith("end")
    assert "…" in shown


def test_a_pile_of_combining_marks_is_cut() -> None:
    """Marks beyond a few would smear over neighbouring lines."""
    assert visible("a" + "\u0301" * 60).count("\u0301") <= 3


# --------------------------------------------------------------------------------------------------- headers, cells, files


@TEXTS
def test_a_hostile_header_with_a_role_is_reported_safely(text: str, tmp_path: Path) -> None:
    """The column is used, and its name reaches every report in a safe form."""
    header = text.strip()
    path = files(tmp_path, plan_with(header), settings_with(header))
    assert assess(path).verdict == "PASS"
    assert all(safe(report) for report in reports(path))


@TEXTS
def test_a_hostile_header_without_a_role_is_refused_safely(text: str, tmp_path: Path) -> None:
    """The refusal quotes it in a safe form, and forges no line of its own."""
    path = files(tmp_path, plan_with(text), settings_with("wage", '"income"'))
    with pytest.raises(InputRefused, match=r"has no role") as caught:
        assess(path)
    assert len(str(caught.value).splitlines()) == 1
    assert all(safe(report) for report in reports(path))


@TEXTS
@pytest.mark.parametrize("column", ["wage", "year"])
def test_a_hostile_cell_is_refused_safely(text: str, column: str, tmp_path: Path) -> None:
    """The raw text is shown, made visible."""
    plan = "year,wage,consumption\n2031,100,90\n2032,101,91\n".replace("101" if column == "wage" else "2032", csv_cell(text))
    path = files(tmp_path, plan, settings_with("wage", '"income"'))
    with pytest.raises(InputRefused, match=rf"line 3, column '{column}'") as caught:
        assess(path)
    assert len(str(caught.value).splitlines()) == len(caught.value.findings)
    assert all(safe(report) for report in reports(path))


@TEXTS
@pytest.mark.parametrize("place", ["section", "key", "word", "header", "role", "comment", "broken"])
def test_a_hostile_text_in_the_assumptions_is_refused_safely(text: str, place: str, tmp_path: Path) -> None:
    """Names of sections, keys and columns, words, roles, and lines that are no TOML."""
    string = toml_string(text)
    toml = {
        "section": f"[{string}]\nx = 1\n",
        "key": f"[market]\n{string} = 1\n",
        "word": f"[market]\ncompounding = {string}\n",
        "header": f'[columns]\n{string} = "income"\n',
        "role": f"[columns]\nwage = {string}\n",
        "comment": f"[market] # {text}\nr = 5 %\n",
        "broken": f"[market]\nr = {text}\n",
    }[place]
    path = files(tmp_path, plan_with("rent"), toml)
    with pytest.raises(InputRefused, match=r"plan\.toml"):
        assess(path)
    assert all(safe(report) for report in reports(path))


@TEXTS
def test_a_hostile_file_name_is_shown_safely(text: str, tmp_path: Path) -> None:
    """Of a plan that is assessed, of one that is refused, and of assumptions that are absent."""
    name = text.replace("/", "_").replace("\0", "_")[:60]
    path = files(tmp_path, plan_with("rent"), settings_with("rent"), name)
    assert assess(path).verdict == "PASS"
    assert all(safe(report) for report in reports(path))
    path.write_text("year\n", encoding="utf-8")
    assert all(safe(report) for report in reports(path))
    assert all(safe(report) for report in reports(path, tmp_path / f"{name}.absent"))
    assert all(safe(report) for report in reports(tmp_path / f"{name}.absent"))


@pytest.mark.skipif(sys.platform == "win32" or sys.platform == "darwin", reason="names of files are text there")
def test_a_file_name_that_is_no_text_is_shown_safely(tmp_path: Path) -> None:
    """Bytes that are not UTF-8 in a name are written as escapes."""
    path = Path(os.fsdecode(os.fsencode(tmp_path) + b"/pl\xe4n.csv"))
    path.write_text(plan_with("rent"))
    assert all(safe(report) for report in reports(path, {"market": {"r": 0.03}, "columns": {"rent": "ignore"}}))


@TEXTS
def test_a_hostile_name_in_a_frame_is_shown_safely(text: str) -> None:
    """Names of columns and cells of a DataFrame are foreign text too."""
    table = pd.DataFrame({"year": [2031, 2032], "wage": [100, 100], "consumption": [90, 90], text: [1, 1]})
    sound = {"market": {"r": 0.03}, "columns": {text: "income"}}
    assert all(safe(report) for report in reports(table, sound))
    assert all(safe(report) for report in reports(table, {"market": {"r": 0.03}}))
    assert all(safe(report) for report in reports(table.assign(wage=[text, "1"]), sound))


@pytest.mark.parametrize("text", ["[/wage]", "[red]", "[bold]pay[/]", ":smile:", "[link=a]b[/link]", "[@click=f]", "\\[x]"])
def test_markup_is_printed_literally(text: str, tmp_path: Path) -> None:
    """What a rendering library would take for styles, links or pictures is text like any other."""
    assessed = files(tmp_path, plan_with(text), settings_with(text))
    for report in reports(assessed)[:-1]:
        assert text in report
    refused = files(tmp_path, plan_with(text), settings_with("wage", '"income"'), "other")
    assert all(text in report for report in reports(refused)[:-1])


@pytest.mark.parametrize("report", ["terminal", "json"])
@TEXTS
def test_the_command_prints_safely(text: str, report: str, tmp_path: Path) -> None:
    """Standard output and standard error, assessed and refused."""
    header = text.strip()
    path = files(tmp_path, plan_with(header), settings_with(header), text.replace("/", "_")[:60])
    for arguments in ([str(path)], [str(path), "--full"], [f"{path}.absent"], [str(path), "--assumptions", f"{path}.absent"]):
        result = CliRunner().invoke(app, ["assess", *arguments, "--report", report])
        assert result.exit_code in (0, 5), result.output
        assert safe(result.stdout)
        assert safe(result.stderr)


@pytest.mark.parametrize(
    "arguments",
    [
        ["assess", "plan.csv", "--r", "\x1b[31m"],
        ["assess", "plan.csv", "--r", "\u202e1"],
        ["assess", "plan.csv", "--report", "\x1b[31m"],
        ["assess", "plan.csv", "--report", "\u202ehtml"],
        ["assess", "plan.csv", "other\x1b[31m.csv"],
        ["assess", "plan.csv", "other\u202e.csv"],
        ["\x1b[31m"],
    ],
)
def test_wrong_usage_is_answered_safely(arguments: list[str]) -> None:
    """An argument may be a file name that a shell filled in."""
    result = CliRunner().invoke(app, arguments)
    assert result.exit_code == 2
    assert safe(result.stderr)


@settings(deadline=None, max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    header=st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), min_size=1, max_size=12),
    cell=st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=8) | st.just("5"),
)
def test_no_text_in_header_or_cell_reaches_a_report_unsafely(header: str, cell: str, tmp_path: Path) -> None:
    """Any header with any cell, with and without a role."""
    path = files(tmp_path, plan_with(header, cell), settings_with(header.strip() or "wage"))
    assert all(safe(report) for report in reports(path))
    assert all(safe(report) for report in reports(path, {"market": {"r": 0.03}}))


# --------------------------------------------------------------------------------------------------------- no other outcome

HEADERS = st.sampled_from(["year", "t", "wage", "income", "consumption", "r", "rent", "Wage", "g", ""])
CELLS = st.one_of(
    st.sampled_from(
        [
            "0",
            "1",
            "100",
            "-5",
            "1e15",
            "1e-300",
            "0.03",
            "0e999",
            "9.9",
            "nan",
            "inf",
            "",
            "NA",
            "1,5",
            "x",
            "2031",
            "2032",
            "2033",
        ]
    ),
    st.integers(-3000, 3000).map(str),
    st.floats(-1e6, 1e6).map(repr),
)
KEYS = {
    "market": ["r", "compounding", "curve", "prices"],
    "growth": ["g", "n", "compounding"],
    "household": ["wealth", "wealth_basis", "members", "productivity", "households"],
    "amounts": ["basis", "timing", "quoted", "path", "unit"],
    "horizon": ["kind", "terminal_wealth", "tail", "income_growth", "consumption_growth"],
    "limits": ["tolerance"],
    "preferences": ["rho", "theta"],
    "columns": ["rent", "wage"],
}
VALUES = st.sampled_from(
    [
        "0",
        "1",
        "0.03",
        "-0.02",
        "0.5",
        "100",
        "-0.999999",
        "1e-9",
        "1e15",
        "-1e15",
        "1e-300",
        "nan",
        "inf",
        "true",
        '"x"',
        "[]",
        "0.1",
    ]
    + [f'"{word}"' for word in ("annual", "daily", "spread", "continuous", "in advance", "in arrears", "at mid-period")]
    + [f'"{word}"' for word in ("smooth", "linear", "step", "geometric", "perpetual", "growing", "balanced growth")]
    + [f'"{word}"' for word in ("per year", "economy", "per effective unit", "ignore", "income", "consumption")]
)


@st.composite
def tables(draw: st.DrawFn) -> str:
    """Small tables: mostly sound in shape, with odd cells, and now and then odd in shape."""
    headers = draw(
        st.one_of(st.just(["year", "wage", "consumption"]), st.just(["t", "wage", "consumption", "r"]), st.lists(HEADERS))
    )
    first = draw(st.integers(0, 2100))
    lines = [",".join(headers)]
    for row in range(draw(st.integers(0, 6))):
        cells = [str(first + row), *(draw(CELLS) for _ in headers[1:])]
        lines.append(",".join(cells[: draw(st.sampled_from([len(cells)] * 9 + [2]))]))
    return "\n".join(lines)


@st.composite
def assumption_files(draw: st.DrawFn) -> str:
    """Small TOML files of known keys, with values of any kind."""
    lines = []
    for section in draw(st.lists(st.sampled_from(list(KEYS)), unique=True, max_size=4)):
        lines.append(f"[{section}]")
        lines += [f"{key} = {draw(VALUES)}" for key in draw(st.lists(st.sampled_from(KEYS[section]), unique=True, max_size=3))]
    return "\n".join(lines)


@st.composite
def sound_plans(draw: st.DrawFn, *, extreme: bool) -> tuple[str, str]:
    """Plans that are mostly accepted, in every combination of conventions; extreme: with figures at the edge of the range."""
    amounts = st.sampled_from(
        ["0", "1", "100", "1e15", "1e-300", "1e-12", "99.5", "3e7"] if extreme else ["0", "1", "100", "99.5"]
    )
    axis = draw(st.sampled_from(["t", "year"]))
    first = draw(st.sampled_from([0, 1000, 2031])) if axis == "t" else 2031
    gap = draw(st.sampled_from([1, 7, 900 if extreme else 20] if axis == "year" else [1, 1e-3, 1e6 if extreme else 10]))
    rows = [(first + gap * i, draw(amounts), draw(amounts)) for i in range(draw(st.integers(2, 5)))]
    table = f"{axis},wage,consumption\n" + "".join(f"{t!r},{w},{c}\n" for t, w, c in rows)
    rate = st.sampled_from(["0", "0.03", "-0.03", "1e-12", "0.030000001", *(["-0.9", "0.5", "50"] if extreme else ["0.2"])])
    scales = st.sampled_from(["1", "1e15", "1e-300"] if extreme else ["1", "1000", "2.5"])
    timing = draw(st.sampled_from(["continuous", "spread", "in advance", "in arrears", "at mid-period"]))
    path = draw(st.sampled_from(["smooth", "linear", "step", "geometric"]))
    tail = draw(st.sampled_from(["", 'tail = "balanced growth"\n', 'tail = "growing"\n']))
    growing = f"income_growth = {draw(rate)}\nconsumption_growth = {draw(rate)}\n" if "growing" in tail else ""
    toml = (
        f'[market]\nr = {draw(rate)}\ncompounding = "{draw(st.sampled_from(["continuous", "annual", "monthly"]))}"\n'
        f"[growth]\ng = {draw(rate)}\nn = {draw(rate)}\n"
        f"[household]\nwealth = {draw(st.sampled_from(['0', '5', '-1e15', '1e15']))}\n"
        f"members = {draw(scales)}\n"
        f'[amounts]\nbasis = "{draw(st.sampled_from(["per person", "per household", "economy", "per effective unit"]))}"\n'
        f'timing = "{timing}"\nunit = {draw(scales)}\n'
        + (f'path = "{path}"\n' if timing == "continuous" else "")
        + (f'[horizon]\nkind = "perpetual"\n{tail}{growing}' if draw(st.booleans()) else "[horizon]\nterminal_wealth = 3\n")
    )
    return table, toml


def judged(folder: Path, table: str, toml: str) -> None:
    """Assess; nothing but a verdict or a refusal may come of it, and no report may hold a figure that is none."""
    path = files(folder, table, toml)
    findings: tuple[Finding, ...] = ()
    result = None
    try:
        result = assess(path)
    except InputRefused as refusal:
        findings = refusal.findings
    if result is None:
        assert findings
        assert strictly(json_report.render_refused(findings))["verdict"] == "REFUSED"
        assert terminal_report.render_refused(findings).startswith("REFUSED")
        return
    assert result.verdict in ("PASS", "FAIL", "UNDECIDED")
    as_json = json_report.render(result)
    strictly(as_json)
    # no table of these strategies has a header that reads like a figure that is none
    for text in (terminal_report.render(result, full=True), as_json):
        assert re.search(r"\b(nan|inf|infinity)\b", text, re.IGNORECASE) is None


FUZZ = settings(deadline=None, max_examples=250, derandomize=True, suppress_health_check=[HealthCheck.function_scoped_fixture])


@FUZZ
@given(table=tables(), toml=assumption_files())
def test_odd_tables_and_assumptions_end_in_a_verdict_or_a_refusal(table: str, toml: str, tmp_path: Path) -> None:
    """No other exception, no warning, no NaN and no infinity."""
    judged(tmp_path, table, toml)


@FUZZ
@given(both=sound_plans(extreme=False))
def test_ordinary_plans_end_in_a_verdict_or_a_refusal(both: tuple[str, str], tmp_path: Path) -> None:
    """Every combination of conventions that the assumptions can spell is judged or refused."""
    judged(tmp_path, *both)


@FUZZ
@given(both=sound_plans(extreme=True))
def test_extreme_plans_end_in_a_verdict_or_a_refusal(both: tuple[str, str], tmp_path: Path) -> None:
    """Figures at the edge of what is accepted neither overflow nor cancel into a number that is none."""
    judged(tmp_path, *both)


@FUZZ
@given(table=st.text(max_size=60), toml=st.text(max_size=60))
def test_any_text_ends_in_a_refusal(table: str, toml: str, tmp_path: Path) -> None:
    """Noise is refused, whatever it holds."""
    (tmp_path / "plan.csv").write_bytes(table.encode("utf-8", "surrogatepass"))
    (tmp_path / "plan.toml").write_bytes(toml.encode("utf-8", "surrogatepass"))
    with pytest.raises(InputRefused, match=r"plan\.(csv|toml)"):
        assess(tmp_path / "plan.csv")
