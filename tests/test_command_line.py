"""The command line: exit codes, options, what goes to which stream, and terminals of every kind."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest
import typer
from typer.testing import CliRunner, Result

import budgetcheck
from budgetcheck import cli
from budgetcheck.cli import app, main

ROWS = [(2031, 100), (2032, 100), (2033, 100)]

SOUND = '[market]\nr = 0.03\n[horizon]\nkind = "finite"\nterminal_wealth = 0\n'


def table(consumption: float = 90.0, axis: str = "year") -> str:
    """Three rows with a wage of 100."""
    return f"{axis},wage,consumption\n" + "".join(f"{year},{wage},{consumption}\n" for year, wage in ROWS)


def plan(folder: Path, content: str = table(), toml: str | None = SOUND) -> str:
    """A plan's file, with its assumptions beside it."""
    path = folder / "plan.csv"
    path.write_text(content, encoding="utf-8")
    if toml is not None:
        path.with_suffix(".toml").write_text(toml, encoding="utf-8")
    return str(path)


UNDECIDED_PLAN = "t,wage,consumption\n0,100,99.5\n1,100,99.9\n2,100,100.6\n"
"""Below four rows a path between them is not known, and slack is near zero."""


def run(*arguments: str, stdin: str | None = None) -> Result:
    """The command in this process."""
    return CliRunner().invoke(app, list(arguments), input=stdin)


def process(*arguments: str, **options: object) -> subprocess.CompletedProcess[bytes]:
    """The command as a process of its own, with both streams as bytes."""
    command = [sys.executable, "-m", "budgetcheck", *arguments]
    return subprocess.run(command, capture_output=True, timeout=60, check=False, **options)  # type: ignore[call-overload]


# -------------------------------------------------------------------------------------------------------------- exit codes


@pytest.mark.parametrize("report", ["terminal", "json"])
@pytest.mark.parametrize(
    ("content", "code", "verdict"),
    [
        (table(90), 0, "PASS"),
        (table(100), 0, "PASS"),
        (table(110), 3, "FAIL"),
        (UNDECIDED_PLAN, 4, "UNDECIDED"),
        (table().replace("90", "x"), 5, "REFUSED"),
    ],
    ids=["pass", "exactly", "fail", "undecided", "refused"],
)
def test_the_exit_code_says_the_verdict(content: str, code: int, verdict: str, report: str, tmp_path: Path) -> None:
    """0 PASS, 3 FAIL, 4 UNDECIDED, 5 refused, whatever the format."""
    result = run("assess", plan(tmp_path, content), "--report", report)
    assert result.exit_code == code
    if report == "json":
        assert json.loads(result.stdout)["verdict"] == verdict
        assert result.stderr == ""
    else:
        assert (result.stderr if verdict == "REFUSED" else result.stdout).startswith(verdict)


def test_results_go_to_standard_output_and_refusals_to_standard_error(tmp_path: Path) -> None:
    """A script that reads standard output never reads a refusal for a report."""
    assert run("assess", plan(tmp_path)).stderr == ""
    refused = run("assess", plan(tmp_path, table().replace("90", "x")))
    assert refused.stdout == ""
    assert "line 2, column 'consumption'" in " ".join(refused.stderr.split())


def test_a_missing_plan_is_a_refused_input(tmp_path: Path) -> None:
    """5, not wrong usage: the command was spelled correctly."""
    result = run("assess", str(tmp_path / "absent.csv"))
    assert result.exit_code == 5
    assert "no such file" in " ".join(result.stderr.split())


def test_missing_assumptions_are_a_refused_input(tmp_path: Path) -> None:
    """A named file that is absent is not the same as none."""
    result = run("assess", plan(tmp_path), "--assumptions", str(tmp_path / "absent.toml"))
    assert result.exit_code == 5
    assert "absent.toml" in "".join(result.stderr.split())


@pytest.mark.parametrize(
    "arguments",
    [
        [],
        ["assess"],
        ["asses", "plan.csv"],
        ["assess", "plan.csv", "--rate", "0.03"],
        ["assess", "plan.csv", "--r"],
        ["assess", "plan.csv", "other.csv"],
        ["assess", "plan.csv", "--report", "html"],
        ["assess", "plan.csv", "--report", "markdown"],
        ["assess", "plan.csv", "--report", "junit"],
        ["assess", "plan.csv", "--report", "JSON "],
        ["breakeven", "plan.csv", "--on", "r"],
        ["stress", "plan.csv"],
    ],
    ids=" ".join,
)
def test_wrong_usage_exits_2(arguments: list[str]) -> None:
    """And says so on standard error, with nothing on standard output."""
    result = run(*arguments)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert "Usage" in result.stderr or "requires an argument" in result.stderr


@pytest.mark.parametrize("option", ["--r", "--g", "--n", "--wealth", "--tolerance"])
@pytest.mark.parametrize("value", ["five", "nan", "inf", "1e999", "1,5", "5%", "", "x", "1_000", "٣"])
def test_an_option_that_is_no_figure_is_wrong_usage(option: str, value: str, tmp_path: Path) -> None:
    """It was typed on the command line, and the message speaks of the option, not of a cell."""
    result = run("assess", plan(tmp_path), option, value)
    assert result.exit_code == 2
    assert option in result.stderr
    assert "cell" not in result.stderr


def test_a_fault_of_the_program_exits_1_in_one_line(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """A crash is never taken for a verdict, and shows no traceback."""

    def broken(*_: object, **__: object) -> None:
        raise RuntimeError("a bug")

    monkeypatch.setattr("budgetcheck.pipeline.assess", broken)
    monkeypatch.setattr(sys, "argv", ["budgetcheck", "assess", "plan.csv"])
    with pytest.raises(SystemExit, match="1"):
        main()
    captured = capsys.readouterr()
    assert captured.out == ""
    assert len(captured.err.splitlines()) == 1
    assert "a fault of the program" in captured.err


@pytest.mark.parametrize("name", [".", "/", "", "\0", "x" * 5000])
@pytest.mark.parametrize("save", [[], ["--save", "report.txt"]], ids=["", "save"])
def test_an_impossible_plan_is_refused_with_any_options(
    name: str, save: list[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The name of a plan is an input: what is no file is refused, not failed upon."""
    monkeypatch.chdir(tmp_path)
    assert run("assess", name, *save).exit_code == 5


# -------------------------------------------------------------------------------------------------------- version and help


def test_the_version_is_told() -> None:
    """Name and number, on standard output."""
    result = run("--version")
    assert (result.exit_code, result.stdout) == (0, f"budgetcheck {budgetcheck.__version__}\n")


def test_help_lists_the_commands_and_completion() -> None:
    """With a line on each, and an example."""
    result = run("--help")
    assert result.exit_code == 0
    assert "assess" in result.stdout
    assert "Example: budgetcheck" in result.stdout
    assert "--install-completion" in result.stdout
    assert "--show-completion" in result.stdout


@pytest.mark.parametrize("command", [command.callback.__name__ for command in app.registered_commands if command.callback])
def test_every_command_explains_itself_with_an_example(command: str) -> None:
    """The example is a command that could be typed, and every option has its help."""
    result = run(command, "--help")
    assert result.exit_code == 0
    assert f"Example: budgetcheck {command} " in result.stdout
    parameters = typer.main.get_command(app).commands[command].params  # type: ignore[attr-defined]
    assert all(getattr(parameter, "help", None) for parameter in parameters)


def test_help_names_the_exit_codes() -> None:
    """A script's author finds them where the options are."""
    words = " ".join(run("assess", "--help").stdout.split())
    for meaning in ("0 PASS", "2 wrong usage", "3 FAIL", "4 UNDECIDED", "5 input refused"):
        assert meaning in words


def test_the_module_is_the_same_program(tmp_path: Path) -> None:
    """`python -m budgetcheck` prints what the command prints, and exits alike."""
    path = plan(tmp_path, table(110))
    done = process("assess", path)
    here = run("assess", path)
    assert (done.returncode, done.stdout.decode("utf-8"), done.stderr) == (3, here.stdout, b"")


# ----------------------------------------------------------------------------------------------------------------- options


@pytest.mark.parametrize(
    ("option", "value", "key"),
    [
        ("--r", "0.05", "market.r"),
        ("--g", "0.01", "growth.g"),
        ("--n", "-0.01", "growth.n"),
        ("--wealth", "-25", "household.wealth"),
        ("--tolerance", "1e-4", "limits.tolerance"),
    ],
)
def test_an_option_overrides_the_file_with_a_note(option: str, value: str, key: str, tmp_path: Path) -> None:
    """The value is listed with its origin, and a note names what it replaced."""
    toml = (
        SOUND.replace("0.03", "0.03") + "[growth]\ng = 0.002\nn = 0.003\n[household]\nwealth = 7\n[limits]\ntolerance = 1e-5\n"
    )
    report = json.loads(run("assess", plan(tmp_path, toml=toml), option, value, "--report", "json").stdout)
    assert report["assumptions"][key]["value"] == float(value)
    assert report["assumptions"][key]["origin"] == "option"
    notes = [finding for finding in report["findings"] if finding["severity"] == "note"]
    assert [f"option {option} {value} replaces {key} = " in finding["message"] for finding in notes] == [True]


def test_an_option_means_what_the_key_means(tmp_path: Path) -> None:
    """--r 0.05 gives the slack of r = 0.05."""
    by_option = json.loads(run("assess", plan(tmp_path), "--r", "0.05", "--report", "json").stdout)
    by_file = json.loads(run("assess", plan(tmp_path, toml=SOUND.replace("0.03", "0.05")), "--report", "json").stdout)
    assert by_option["slack"] == by_file["slack"]


def test_an_option_alone_is_no_override(tmp_path: Path) -> None:
    """Where the file says nothing there is nothing to note."""
    result = run("assess", plan(tmp_path, toml=None), "--r", "0.03", "--report", "json")
    assert result.exit_code == 0
    assert "replaces" not in result.stdout


def test_an_option_out_of_range_is_refused_by_its_name(tmp_path: Path) -> None:
    """It is a figure, but none that the key takes."""
    result = run("assess", plan(tmp_path), "--tolerance", "5")
    assert result.exit_code == 5
    assert "--tolerance" in result.stderr


def test_assumptions_are_found_beside_the_plan(tmp_path: Path) -> None:
    """The plan's own name with .toml; a named file takes its place."""
    path = plan(tmp_path, toml=SOUND)
    assert json.loads(run("assess", path, "--report", "json").stdout)["assumptions"]["market.r"]["value"] == 0.03
    other = tmp_path / "other.toml"
    other.write_text(SOUND.replace("0.03", "0.07"))
    named = run("assess", path, "--assumptions", str(other), "--report", "json")
    assert json.loads(named.stdout)["assumptions"]["market.r"]["value"] == 0.07


def test_full_shows_more(tmp_path: Path) -> None:
    """Everything that the short report shows, and the agreement of the two routes."""
    path = plan(tmp_path)
    short, full = run("assess", path).stdout, run("assess", path, "--full").stdout
    assert len(full) > len(short)
    assert "Two routes" in full


def test_a_plan_from_standard_input(tmp_path: Path) -> None:
    """A dash; nothing lies beside it, so that r comes from an option or a named file."""
    assert run("assess", "-", "--r", "0.03", stdin=table()).exit_code == 0
    refused = run("assess", "-", stdin=table())
    assert refused.exit_code == 5
    assert "standard input" in refused.stderr
    plan(tmp_path)
    named = run("assess", "-", "--assumptions", str(tmp_path / "plan.toml"), "--report", "json", stdin=table(110))
    assert named.exit_code == 3
    assert json.loads(named.stdout)["plan"]["file"] == "standard input"


# -------------------------------------------------------------------------------------------------------------------- save


@pytest.mark.parametrize(("content", "code"), [(table(), 0), (table(110), 3), (table().replace("90", "x"), 5)])
@pytest.mark.parametrize("report", ["terminal", "json"])
def test_save_writes_the_report_too(content: str, code: int, report: str, tmp_path: Path) -> None:
    """The same verdict in the file as on the screen, without escape sequences, and the same exit code."""
    target = tmp_path / "report.out"
    result = run("assess", plan(tmp_path, content), "--report", report, "--save", str(target))
    assert result.exit_code == code
    saved = target.read_text(encoding="utf-8")
    shown = result.stdout or result.stderr
    assert "".join(saved.split()) == "".join(shown.split())
    assert "\x1b" not in saved
    assert {path.name for path in tmp_path.iterdir()} == {"plan.csv", "plan.toml", "report.out"}


def test_save_replaces_an_older_report(tmp_path: Path) -> None:
    """Its own kind of file may be written over."""
    target = tmp_path / "report.txt"
    target.write_text("old")
    assert run("assess", plan(tmp_path), "--save", str(target)).exit_code == 0
    assert target.read_text(encoding="utf-8").startswith("PASS")


@pytest.mark.parametrize("target", ["plan.csv", "plan.toml", "other.toml", "./folder/../plan.csv", "link.csv"])
def test_save_never_writes_over_an_input(target: str, tmp_path: Path) -> None:
    """The plan, its assumptions, those that were named, under any name they go by."""
    path = plan(tmp_path)
    (tmp_path / "folder").mkdir()
    (tmp_path / "other.toml").write_text(SOUND)
    (tmp_path / "link.csv").symlink_to(path)
    before = {file.name: file.read_bytes() for file in tmp_path.iterdir() if file.is_file()}
    named = ["--assumptions", str(tmp_path / "other.toml")] if target == "other.toml" else []
    result = run("assess", path, *named, "--save", f"{tmp_path}/{target}")
    assert result.exit_code == 2
    assert "--save" in result.stderr
    assert {file.name: file.read_bytes() for file in tmp_path.iterdir() if file.is_file()} == before


@pytest.mark.parametrize("target", ["absent/report.txt", "folder", "plan.csv/report.txt"])
def test_save_needs_a_folder_that_is_there(target: str, tmp_path: Path) -> None:
    """Wrong usage, found before anything is computed."""
    path = plan(tmp_path)
    (tmp_path / "folder").mkdir()
    result = run("assess", path, "--save", str(tmp_path / target))
    assert result.exit_code == 2
    assert result.stdout == ""


@pytest.mark.parametrize("name", ["\0", "x" * 300, ""])
def test_save_to_an_impossible_name_is_wrong_usage(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A name that no file can have."""
    path = plan(tmp_path)
    monkeypatch.chdir(tmp_path)
    assert run("assess", path, "--save", name).exit_code == 2


@pytest.mark.parametrize("failing", ["tempfile.mkstemp", "os.replace"])
def test_a_report_that_cannot_be_written_leaves_nothing_behind(
    failing: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """It is written beside the target and renamed: an older report stays whole, and no remains lie about."""

    def refuse(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied")

    path, target = plan(tmp_path), tmp_path / "report.txt"
    target.write_text("old")
    monkeypatch.setattr(f"budgetcheck.cli.{failing}", refuse)
    result = run("assess", path, "--save", str(target))
    assert result.exit_code == 2
    assert "cannot be written: Permission denied" in " ".join(result.stderr.split())
    assert target.read_text() == "old"
    assert {file.name for file in tmp_path.iterdir()} == {"plan.csv", "plan.toml", "report.txt"}


def test_save_keeps_the_permissions_of_ordinary_files(tmp_path: Path) -> None:
    """A report is as readable as any new file of its owner."""
    ordinary = tmp_path / "ordinary.txt"
    ordinary.write_text("")
    assert run("assess", plan(tmp_path), "--save", str(tmp_path / "report.txt")).exit_code == 0
    assert (tmp_path / "report.txt").stat().st_mode == ordinary.stat().st_mode


# --------------------------------------------------------------------------------------------------------------- terminals

FIGURE = re.compile(r"[−-]?\d[\d,]*\.?\d*(?:e[+-]\d+)?")


def environment(**changes: str) -> dict[str, str]:
    """This process's environment without what speaks of terminals."""
    plain = {name: value for name, value in os.environ.items() if name not in ("NO_COLOR", "FORCE_COLOR", "COLUMNS", "TERM")}
    return {**plain, **changes}


def on_terminal(*arguments: str, **changes: str) -> tuple[int, str]:
    """Exit code and what a terminal would receive, both streams together."""
    pty = pytest.importorskip("pty")
    master, slave = pty.openpty()
    command = [sys.executable, "-m", "budgetcheck", *arguments]
    with subprocess.Popen(command, stdin=slave, stdout=slave, stderr=slave, env=environment(**changes)) as running:
        os.close(slave)
        received = b""
        while True:
            try:
                chunk = os.read(master, 65536)
            except OSError:
                break
            if not chunk:
                break
            received += chunk
        code = running.wait(timeout=60)
    os.close(master)
    return code, received.decode("utf-8").replace("\r\n", "\n")


def test_piped_output_is_plain_text(tmp_path: Path) -> None:
    """No escape sequence, whatever the environment says of colours."""
    done = process("assess", plan(tmp_path), env=environment(TERM="xterm-256color", COLUMNS="300"))
    assert b"\x1b" not in done.stdout
    assert max(len(line) for line in done.stdout.decode("utf-8").splitlines()) <= 80


def test_a_terminal_shows_colours_and_respects_no_color(tmp_path: Path) -> None:
    """Colours on a terminal, none with NO_COLOR or on a dumb one, and the same words."""
    path = plan(tmp_path, table(110))
    coloured = on_terminal("assess", path, TERM="xterm-256color")
    plain = on_terminal("assess", path, TERM="xterm-256color", NO_COLOR="1")
    dumb = on_terminal("assess", path, TERM="dumb")
    assert "\x1b[" in coloured[1]
    assert "\x1b" not in plain[1] + dumb[1]
    assert re.sub(r"\x1b\[[0-9;]*m", "", coloured[1]).split() == plain[1].split() == dumb[1].split()
    assert (coloured[0], plain[0], dumb[0]) == (3, 3, 3)


def test_a_narrow_terminal_shortens_no_number(tmp_path: Path) -> None:
    """Forty columns: figures stand on lines of their own, whole, and no line is wider than the terminal."""
    path = plan(tmp_path, table().replace(",100,", ",123456789012.34,").replace("90.0", "98765432109.87"))
    _, wide = on_terminal("assess", path, COLUMNS="80", NO_COLOR="1")
    code, narrow = on_terminal("assess", path, COLUMNS="40", NO_COLOR="1")
    assert code == 0
    assert "…" not in narrow
    assert max(len(line) for line in narrow.splitlines()) <= 40
    account = wide[wide.index("Lifetime account") : wide.index("Conditions")]
    figures = [figure for figure in FIGURE.findall(account) if len(figure) > 8]
    assert len(figures) >= 6
    assert [figure for figure in figures if figure not in narrow] == []


def test_an_ascii_terminal_keeps_every_sign(tmp_path: Path) -> None:
    """Where the encoding has no minus sign of its own, a hyphen stands for it: a sign is never lost."""
    path = plan(tmp_path, table(110))
    done = process("assess", path, env=environment(LC_ALL="C", LANG="C", PYTHONUTF8="0", PYTHONIOENCODING="ascii:strict"))
    assert (done.returncode, done.stderr) == (3, b"")
    assert done.stdout.startswith(b"FAIL")
    assert re.search(rb"Slack +-28\.6896", done.stdout)


def test_a_refusal_on_an_ascii_terminal(tmp_path: Path) -> None:
    """Letters that the terminal lacks do not make a refusal a crash."""
    path = plan(tmp_path, table().replace("90.0", "Ωμέγα"))
    done = process("assess", path, env=environment(LC_ALL="C", PYTHONUTF8="0", PYTHONIOENCODING="ascii:strict"))
    assert done.returncode == 5
    assert b"line 2, column 'consumption'" in b" ".join(done.stderr.split())


@pytest.mark.parametrize(("content", "code"), [(table(90), 0), (table(110), 3)])
@pytest.mark.parametrize("report", ["terminal", "json"])
def test_a_reader_that_has_gone_does_not_change_the_verdict(content: str, code: int, report: str, tmp_path: Path) -> None:
    """A closed pipe is no fault of the program, no traceback, and never turns FAIL into PASS."""
    command = [sys.executable, "-m", "budgetcheck", "assess", plan(tmp_path, content), "--full", "--report", report]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as running:
        assert running.stdout is not None
        assert running.stderr is not None
        running.stdout.close()
        said = running.stderr.read()
        assert running.wait(timeout=60) == code
    assert said == b""


@pytest.mark.skipif(sys.platform == "win32", reason="a shell's redirection")
@pytest.mark.parametrize(("closed", "code"), [("<&-", 5), (">&-", 3), ("2>&-", 3)])
def test_a_closed_stream_is_no_fault_of_the_program(closed: str, code: int, tmp_path: Path) -> None:
    """Without standard output the exit code still says the verdict; without standard input there is no plan in it."""
    name = "-" if closed == "<&-" else plan(tmp_path, table(110))
    done = subprocess.run(
        ["sh", "-c", f'exec "$0" -m budgetcheck assess "$1" --r 0.03 {closed}', sys.executable, name],
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert done.returncode == code


def test_codes_are_those_of_the_contract() -> None:
    """1 is left to faults of the program."""
    assert (cli.PASS, cli.FAULT, cli.USAGE, cli.FAIL, cli.UNDECIDED, cli.REFUSED) == (0, 1, 2, 3, 4, 5)
    assert cli.EXIT_CODES == {"PASS": 0, "FAIL": 3, "UNDECIDED": 4}
