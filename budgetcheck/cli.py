"""The command line: options in, one call, a report out, an exit code. It knows no arithmetic."""

from __future__ import annotations

import io
import os
import shutil
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from enum import StrEnum
from pathlib import Path
from typing import IO, TYPE_CHECKING, Annotated, Any

# plugins of a library that typer uses are not looked for: that takes longer than a small check, and no other code should run
os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "__all__")

import typer
from typer.core import TyperGroup

from .text import visible
from .version import VERSION

if TYPE_CHECKING:
    from .assessment import Assessment
    from .findings import InputRefused

PASS, FAULT, USAGE, FAIL, UNDECIDED, REFUSED = 0, 1, 2, 3, 4, 5
EXIT_CODES = {"PASS": PASS, "FAIL": FAIL, "UNDECIDED": UNDECIDED}


class _Group(TyperGroup):
    """A group whose complaints about wrong usage show arguments with their hidden characters made visible."""

    def make_context(self, *arguments: Any, **options: Any) -> Any:
        """As inherited, for options of the group itself."""
        with _made_visible():
            return super().make_context(*arguments, **options)

    def invoke(self, ctx: Any) -> Any:
        """As inherited, for commands and their options."""
        with _made_visible():
            return super().invoke(ctx)


@contextmanager
def _made_visible() -> Iterator[None]:
    try:
        yield
    except Exception as error:
        message = getattr(error, "message", None)
        if isinstance(message, str):
            error.message = visible(message, 400)  # type: ignore[attr-defined]
        raise


app = typer.Typer(
    name="budgetcheck",
    cls=_Group,
    help="Decide whether a household's planned consumption is affordable over its whole life.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["--help", "-h"]},
)


class Report(StrEnum):
    """Formats of a report."""

    TERMINAL = "terminal"
    JSON = "json"


def _version(asked: bool) -> None:
    if asked:
        typer.echo(f"budgetcheck {VERSION}")
        raise typer.Exit()


@app.callback(epilog="Example: budgetcheck assess samples/keeper_years.csv")
def _budgetcheck(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Show the version and exit.")
    ] = False,
) -> None:
    """Decide whether a household's planned consumption is affordable over its whole life."""


def _figure(text: str | None) -> str | None:
    """A figure on the command line is checked at once: what is no number is wrong usage."""
    if text is not None:
        from .numerals import Misread, exact

        read = exact(text)
        if isinstance(read, Misread):
            raise typer.BadParameter(f"{text!a} is no figure; write digits with a decimal point, such as 0.04.")
    return text


@app.command(
    epilog=(
        "Example: budgetcheck assess samples/keeper_years.csv --r 0.03 --report json. "
        "Exit codes: 0 PASS, 2 wrong usage, 3 FAIL, 4 UNDECIDED, 5 input refused or missing."
    )
)
def assess(
    plan: Annotated[str, typer.Argument(help="The plan, a CSV file; - for standard input.")],
    assumptions: Annotated[
        Path | None, typer.Option(help="Assumptions, a TOML file [default: the plan's own name with .toml, if there].")
    ] = None,
    r: Annotated[str | None, typer.Option(help="Market interest rate, a fraction a year.", callback=_figure)] = None,
    g: Annotated[str | None, typer.Option(help="Productivity growth, a fraction a year.", callback=_figure)] = None,
    n: Annotated[str | None, typer.Option(help="Population growth, a fraction a year.", callback=_figure)] = None,
    wealth: Annotated[str | None, typer.Option(help="Initial wealth, in its declared basis.", callback=_figure)] = None,
    tolerance: Annotated[
        str | None, typer.Option(help="Tolerance, as a share of lifetime resources.", callback=_figure)
    ] = None,
    report: Annotated[Report, typer.Option(help="Format of the report.")] = Report.TERMINAL,
    full: Annotated[bool, typer.Option("--full", help="Everything, not only what is decisive.")] = False,
    save: Annotated[Path | None, typer.Option(help="Write the report to this file too.")] = None,
) -> None:
    """Verdict, lifetime account and conditions of a plan: is it affordable over the whole life?"""
    given = {"r": r, "g": g, "n": n, "wealth": wealth, "tolerance": tolerance}
    options = {name: text for name, text in given.items() if text is not None}
    _check_target(save, plan, assumptions)
    from . import pipeline
    from .findings import InputRefused

    try:
        result = pipeline.assess(plan, assumptions, options=options)
    except InputRefused as refused:
        _publish(refused, report, full=full, save=save)
        raise typer.Exit(REFUSED) from None
    _publish(result, report, full=full, save=save)
    raise typer.Exit(EXIT_CODES[result.verdict])


def _check_target(save: Path | None, plan: str, assumptions: Path | None) -> None:
    """A report is never written over an input, nor where it cannot be."""
    if save is None:
        return
    try:
        target = save.absolute().resolve()
        usable = not target.is_dir() and target.parent.is_dir()
    except (OSError, ValueError):
        usable = False
    if not usable:
        message = f"{visible(str(save))!r} is a folder, lies in one that does not exist, or is no file name."
        raise typer.BadParameter(message, param_hint="--save")
    inputs = [plan, str(Path(plan).parent / f"{Path(plan).stem}.toml")] if plan != "-" else []
    inputs += [] if assumptions is None else [str(assumptions)]
    if any(_same(target, path) for path in inputs):
        raise typer.BadParameter("the report would replace an input; name another file.", param_hint="--save")


def _same(target: Path, path: str) -> bool:
    try:
        return target == Path(path).absolute().resolve()
    except (OSError, ValueError):
        return False


def _publish(result: Assessment | InputRefused, report: Report, *, full: bool, save: Path | None) -> None:
    """The report to standard output and, if asked for, to a file. A refusal on a terminal goes to standard error."""
    refused = not hasattr(result, "verdict")
    stream = sys.stderr if refused and report is Report.TERMINAL else sys.stdout
    if stream is None:
        # the stream is closed: nobody reads, and the exit code still tells the verdict
        stream = io.StringIO()
    color = stream.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"
    width = shutil.get_terminal_size((80, 24)).columns if stream.isatty() else 80
    _write(stream, _rendered(result, report, width=width, color=color, full=full))
    if save is not None:
        _replace(save, _rendered(result, report, width=100, color=False, full=full))


def _rendered(result: Assessment | InputRefused, report: Report, *, width: int, color: bool, full: bool) -> str:
    from .findings import InputRefused

    if report is Report.JSON:
        from .report import json

        return (json.render_refused(result.findings) if isinstance(result, InputRefused) else json.render(result)) + "\n"
    from .report import terminal

    if isinstance(result, InputRefused):
        return terminal.render_refused(result.findings, width=width, color=color)
    return terminal.render(result, width=width, color=color, full=full)


def _write(stream: IO[str], text: str) -> None:
    """Write, with words in ASCII for signs that the stream's encoding does not have."""
    encoding = getattr(stream, "encoding", None) or "utf-8"
    for sign, plain in (("−", "-"), ("±", "+/-"), ("×", "x"), ("…", "..."), ("–", "-")):
        if not _encodes(sign, encoding):
            text = text.replace(sign, plain)
    reconfigure = getattr(stream, "reconfigure", None)
    if reconfigure is not None:
        reconfigure(errors="backslashreplace")
    try:
        typer.echo(text, file=stream, nl=False)
        stream.flush()
    except BrokenPipeError:
        # the reader has gone; the verdict's exit code is still right, and nothing more may be flushed into the pipe
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


def _encodes(sign: str, encoding: str) -> bool:
    try:
        sign.encode(encoding)
    except UnicodeEncodeError:
        return False
    return True


def _replace(target: Path, text: str) -> None:
    """Write beside the target and rename, so that a report is never half written."""
    try:
        handle, name = tempfile.mkstemp(dir=target.absolute().parent, prefix=f".{target.name[:50]}.")
        try:
            with os.fdopen(handle, "w", encoding="utf-8") as file:
                file.write(text)
            # a temporary file is private; a report has the permissions of any new file
            umask = os.umask(0)
            os.umask(umask)
            Path(name).chmod(0o666 & ~umask)
            os.replace(name, target)
        except BaseException:
            Path(name).unlink(missing_ok=True)
            raise
    except OSError as error:
        message = f"{visible(str(target))!r} cannot be written: {error.strerror}."
        raise typer.BadParameter(message, param_hint="--save") from error


def main() -> None:
    """Entry point: as `app`, but a fault of the program ends in one line and exit code 1, never in a traceback."""
    try:
        app()
    except Exception as fault:
        kind = type(fault).__name__
        sys.stderr.write(f"budgetcheck: a fault of the program, not of your input ({kind}: {fault}). Please report it.\n")
        raise SystemExit(FAULT) from fault
