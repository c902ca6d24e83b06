"""The report on a terminal: the verdict first, then the lifetime account, the conditions, what the verdict rests on, the
assumptions with their origin, and the findings."""

from __future__ import annotations

import io
import math
from collections.abc import Iterable, Iterator, Sequence

from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from ..assessment import Assessment
from ..assumptions import Assumption, shown
from ..bounded import Bounded
from ..budget import Account, PresentValue, Reach
from ..carrying import RowShare
from ..figures import amount, error, percent, significant
from ..findings import Finding, Severity
from ..text import visible

NARROW = 72
"""Below this many columns figures stand on lines of their own, since a table would have to shorten them."""

MOST_PER_RULE = 20

CAUTION = (
    "A check of arithmetic on the stated assumptions, not financial advice; local rules and a licensed adviser come first."
)

_STYLES = {"PASS": "bold green", "FAIL": "bold red", "UNDECIDED": "bold yellow", "REFUSED": "bold red"}

Row = tuple[str, str, str]


def render(assessment: Assessment, *, width: int = 80, color: bool = False, full: bool = False) -> str:
    """The report as text, at most `width` columns wide; color: with escape sequences for a terminal that shows colours;
    full: everything, not only what is decisive."""
    page = _Page(width, color)
    a = assessment
    page.verdict(a.verdict, a.reason)
    if a.would_decide is not None:
        page.text(f"What would decide it: {a.would_decide}")
    for finding in a.findings:
        if finding.severity is Severity.WARN:
            page.text(f"Warning: {finding.sentence}", style="yellow")
    span = f"{visible(a.span.file)}: {a.span.rows} rows, {a.span.first} to {a.span.last}; {a.span.end}; {a.span.reading}."
    page.text(span)
    page.heading("Lifetime account (money, present value at the start)")
    page.figures(("", "per unit of human capital", "per household"), tuple(_account(a, full)))
    page.heading("Conditions")
    page.pairs(tuple(_conditions(a)))
    page.heading("What the verdict rests on")
    page.pairs(tuple(_basis(a, full)))
    source = f" from {visible(a.span.assumptions)}" if a.span.assumptions else ""
    page.heading(f"Assumptions{source} (and where each comes from)")
    page.pairs(tuple(_assumptions(a.assumptions) if full else _by_origin(a.assumptions)))
    rest = [finding for finding in a.findings if full or finding.severity is not Severity.WARN]
    if rest:
        page.heading("Findings")
        page.findings(rest, full=full)
    page.text(CAUTION, style="dim")
    return page.text_so_far()


def render_refused(findings: Sequence[Finding], *, width: int = 80, color: bool = False) -> str:
    """A refused input: what is wrong, where, and what to do."""
    page = _Page(width, color)
    stops = sum(finding.places for finding in findings if finding.severity is Severity.STOP)
    page.verdict("REFUSED", f"No verdict: {stops} {'fault' if stops == 1 else 'faults'} in the input.")
    page.findings(findings, full=False)
    return page.text_so_far()


class _Page:
    """Text under construction, on a console that writes to memory."""

    def __init__(self, width: int, color: bool) -> None:
        self.width = width
        self.console = Console(
            file=io.StringIO(),
            width=max(width, 20),
            force_terminal=color,
            color_system="standard" if color else None,
            no_color=not color,
            markup=False,
            emoji=False,
            highlight=False,
            legacy_windows=False,
        )

    def text_so_far(self) -> str:
        written = self.console.file
        assert isinstance(written, io.StringIO), "the console writes to memory"
        return "\n".join(line.rstrip() for line in written.getvalue().splitlines()) + "\n"

    def text(self, words: str, style: str = "") -> None:
        self.console.print(Text(words, style=style))

    def verdict(self, verdict: str, reason: str) -> None:
        self.console.print(Text.assemble((verdict, _STYLES[verdict]), "  ", reason))

    def heading(self, words: str) -> None:
        self.console.print()
        self.console.print(Text(words, style="bold"))

    def pairs(self, rows: Sequence[tuple[str, str]]) -> None:
        """A name and what is said of it, one below the other where there is no room beside."""
        if self.width < NARROW:
            for name, said in rows:
                self.console.print(Text(f"{name}: {said}"))
            return
        table = Table(box=None, show_header=False, padding=(0, 2, 0, 0))
        table.add_column(no_wrap=True, max_width=32, overflow="fold")
        table.add_column(overflow="fold")
        for name, said in rows:
            table.add_row(Text(name, overflow="fold"), Text(said))
        self.console.print(Padding(table, (0, 0, 0, 2)))

    def figures(self, header: Row, rows: Sequence[Row]) -> None:
        """Two columns of figures, never shortened."""
        if self.width < NARROW:
            for name, *numbers in rows:
                for unit, number in zip(header[1:], numbers, strict=True):
                    if number:
                        self.console.print(Text(f"{name.strip()}, {unit}: {number}"))
            return
        table = Table(box=None, padding=(0, 2, 0, 0), header_style="")
        widest = max(len(name) for name, *_ in rows)
        table.add_column(header[0], no_wrap=widest <= 30, overflow="fold")
        for position, unit in enumerate(header[1:], start=1):
            least = max(len(unit), *(len(row[position]) for row in rows))
            table.add_column(Text(unit), justify="right", no_wrap=True, min_width=least)
        for name, *numbers in rows:
            table.add_row(Text(name), *(Text(number) for number in numbers))
        self.console.print(Padding(table, (0, 0, 0, 2)))

    def findings(self, findings: Iterable[Finding], *, full: bool) -> None:
        """By severity, at most a screenful of places for each rule."""
        counts: dict[str, int] = {}
        for finding in findings:
            before = counts.get(finding.rule, 0)
            counts[finding.rule] = before + finding.places
            if full or before < MOST_PER_RULE:
                self.console.print(Padding(Text(f"{finding.severity} [{finding.rule}] {finding.sentence}"), (0, 0, 0, 2)))
        for rule, count in counts.items():
            if not full and count > MOST_PER_RULE:
                self.console.print(Text(f"  … and {count - MOST_PER_RULE} more of {rule}, {count} in all."))


def _account(a: Assessment, full: bool) -> Iterator[Row]:
    unit, household = a.present_values, a.present_values_per_household
    scales = (_scale(unit), _scale(household))

    def row(name: str, values: tuple[Bounded | None, Bounded | None], sign: float = 1.0) -> Row:
        first, second = (
            "infinite" if value is None else amount(sign * value.value, scale)
            for value, scale in zip(values, scales, strict=True)
        )
        return name, first, second

    yield row("Initial wealth", (unit.initial_wealth, household.initial_wealth))
    for name, sign, sides in (
        ("Income", 1.0, (unit.income, household.income)),
        ("Consumption", -1.0, (unit.consumption, household.consumption)),
    ):
        yield row(name, (_whole(sides[0]), _whole(sides[1])), sign)
        lines = [pair for pair in zip(unit.lines, household.lines, strict=True) if pair[0].side == sides[0].role]
        for one, other in lines if len(lines) > 1 or full else ():
            taken_off = -1.0 if one.role == "deduction" else 1.0
            yield row(f"  {visible(one.name, 28)}", (_whole(one), _whole(other)), sign * taken_off)
    yield row("Terminal requirement", (unit.terminal_wealth, household.terminal_wealth), -1.0)
    if a.slack.per_effective_unit is None or a.slack.per_household is None:
        yield "Slack", "not finite", "not finite"
        return
    factor = household.slack.value / unit.slack.value if unit.slack.value else 0.0
    factor = abs(factor) or 1.0
    yield (
        "Slack",
        significant(a.slack.per_effective_unit.value),
        significant(a.slack.per_household.value),
    )
    yield "  counted in the verdict", error(a.error.in_verdict), error(a.error.in_verdict * factor)
    yield "  of this proved", error(a.slack.per_effective_unit.bound), error(a.slack.per_household.bound)


def _scale(account: Account) -> float:
    sides = (account.income, account.consumption)
    finite = [abs(side.whole.value) for side in sides if side.reach is Reach.FINITE]
    return max([abs(account.initial_wealth.value), *finite, 1e-300])


def _whole(side: PresentValue) -> Bounded | None:
    return side.whole if side.reach is Reach.FINITE else None


def _conditions(a: Assessment) -> Iterator[tuple[str, str]]:
    names = {
        "convergence": "Convergence",
        "no_ponzi": "No-Ponzi",
        "transversality": "Transversality",
        "solvency": "Solvency",
        "borrowing": "Borrowing limit",
        "flow_of_wealth": "Flow of wealth",
        "euler": "Euler equation",
        "utility": "Utility integral",
        "marginal_utility": "Marginal utility",
    }
    answers = {True: "holds", False: "does not hold", None: "not known"}
    for field, name in names.items():
        condition = getattr(a.conditions, field)
        if condition is not None:
            yield name, f"{answers[condition.holds]}. {condition.sentence}"
    low = a.wealth_path.per_household.minimum
    lowest = f"lowest {significant(low.value)} per household at {a.date(low.t)}"
    if not math.isfinite(low.error):
        yield "Wealth", f"{lowest}, as far as the path between rows can be taken for known."
    elif a.wealth_path.per_household.largest_debt is None:
        yield "Wealth", f"{lowest}; no debt before the end of the table's rows."
    else:
        first = a.wealth_path.first_negative
        since = "" if first is None else f"; below zero from {a.date(first)} on"
        yield "Wealth", f"{lowest}: debt occurs{since}."


def _basis(a: Assessment, full: bool) -> Iterator[tuple[str, str]]:
    if a.slack.share_of_resources is not None:
        yield "Slack / lifetime resources", percent(a.slack.share_of_resources)
    if a.slack.consumption_scale is not None:
        yield "Consumption that fits", f"all consumption × {a.slack.consumption_scale:.7f} exhausts the budget exactly"
    if a.slack.level_per_year is not None:
        yield "Slack as a level amount", f"{significant(a.slack.level_per_year)} per household and year, real"
    if a.tail.kind != "none":
        shares = f"{percent(a.tail.share_of_income)} of income, {percent(a.tail.share_of_consumption)} of consumption"
        yield "From after the last row", f"{shares} ({a.tail.kind})"
    if a.tail.estimate.balanced is not None:
        yield "Under balanced growth", f"slack {significant(a.tail.estimate.balanced)} per unit of human capital"
    yield from _best_path(a)
    yield from _carrying(a, full)
    kinds = (
        ("Estimate: path between rows", a.error.reconstruction, ""),
        ("Estimate: undeclared tail", a.error.tail, f" ({a.tail.estimate.why})" if a.error.tail else ""),
    )
    for name, value, why in kinds:
        if value or full:
            yield name, f"{error(value)} per unit of human capital{why}"
    fit = a.tail.estimate.fit
    if full and fit is not None:
        for name, curve in vars(fit).items():
            settles = f"settles at {significant(curve.long_run)}, at a speed of {significant(curve.speed, 3)} a year"
            yield f"Fitted tail: {name}", settles if curve.departure else f"stays at {significant(curve.long_run)}"
    if a.error.input_rounding is not None:
        yield "Rounding of printed figures", f"{error(a.error.input_rounding)} per unit at the most; not in the verdict"
    if full:
        yield "Proved numerical error", f"{error(a.error.numerical)} per unit of human capital"
        difference = significant(a.routes_differ.value, 2)
        yield "Two routes to slack differ by", f"{difference} per unit; at most {a.routes_differ.bound:.2g} is proved"


def _best_path(a: Assessment) -> Iterator[tuple[str, str]]:
    """The consumption path that exhausts the budget for the declared preferences."""
    best = None if a.preferences is None else a.preferences.best
    if best is None:
        return
    change = "" if best.change is None else f", {percent(best.change)} beside the plan's {significant(best.planned)}"
    yield (
        "Path the preferences ask for",
        f"starts at {significant(best.start.value)} per unit of human capital and year ({significant(best.asked)} in the first "
        f"row{change}); per person it grows at {percent(best.growth_first)} a year at first, "
        f"{percent(best.growth_last)} in the end",
    )


def _carrying(a: Assessment, full: bool) -> Iterator[tuple[str, str]]:
    """The rows that contribute most, and in full those whose rounding matters most and the largest residuals."""

    def named(share: RowShare) -> str:
        when = a.date(float(a.times[share.index]))
        parts = f"income {significant(share.income, 4)}, consumption {significant(share.consumption, 4)}"
        return f"line {a.lines[share.index]} ({when}): {significant(share.net, 4)} net ({parts})"

    if not full:
        yield "Weighs most in slack", f"{named(a.carrying.to_slack[0])}, per unit"
        return
    for name, shares in (("slack", a.carrying.to_slack), ("present values", a.carrying.to_values)):
        for share in shares:
            yield f"Weighs most in {name}", f"{named(share)}, per unit"
    for share in a.carrying.to_rounding:
        yield "Rounding matters most in", f"line {a.lines[share.index]}: {error(share.rounding or 0.0)} per unit"
    for each in () if a.flow is None else a.flow.largest:
        yield "Largest residuals of wealth", f"line {a.lines[each.index]}: {significant(each.value, 3)} per unit, present value"


def _by_origin(entries: Sequence[Assumption]) -> Iterator[tuple[str, str]]:
    """The same in running text, one paragraph for each origin."""
    for origin in dict.fromkeys(entry.origin for entry in entries):
        own = (entry for entry in entries if entry.origin == origin)
        yield str(origin), "; ".join(f"{visible(entry.key, 40)} = {_value(entry)}" for entry in own)


def _value(entry: Assumption) -> str:
    """A value with its unit."""
    return f"{visible(shown(entry.value))}{f' {entry.unit}' if entry.unit else ''}"


def _assumptions(entries: Iterable[Assumption]) -> Iterator[tuple[str, str]]:
    for entry in entries:
        yield visible(entry.key, 32), f"{_value(entry)} ({entry.origin})"
