"""Declarations that contradict each other or the table, that lack what they need, or that nothing would come of.

Each is refused: a declaration without effect is a misunderstanding that its author has to settle, not the program.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from .assumptions import Assumptions
from .findings import Finding, stop
from .keys import FLOW_ROLES
from .ledger import Ledger
from .text import folded, quoted


@dataclass(frozen=True, eq=False)
class _Case:
    """What the rules look at; timing: of the table's amounts, default included."""

    ledger: Ledger
    assumptions: Assumptions
    timing: str

    def stop(self, message: str, key: str | None = None) -> Finding:
        """A stop at the line of the key."""
        stated = None if key is None else self.assumptions.stated(key)
        row = None if stated is None else stated.row
        return stop("assumption", message, file=self.assumptions.file, row=row, column=key)

    def stated(self, key: str) -> bool:
        """Whether it was declared, or at least attempted."""
        return self.assumptions.stated(key) is not None or key in self.assumptions.attempted

    def has(self, role: str) -> bool:
        """Whether the table has a column of that role."""
        return bool(self.ledger.of_role(role))

    def own(self, name: str) -> Iterator[tuple[str, str, int | None]]:
        """Header, value and line of a reading that columns of amounts have for themselves."""
        for entry in self.assumptions.columns:
            stated = entry.stated(name)
            if stated is not None:
                yield entry.header, str(stated.value), stated.row if stated.row is not None else entry.row

    def values(self, name: str) -> set[str]:
        """The words in force for a reading, over all columns of amounts."""
        own = {folded(header): value for header, value, _ in self.own(name)}
        common = self.timing if name == "timing" else str(self.assumptions.word(f"amounts.{name}"))
        amounts = [c for role in FLOW_ROLES for c in self.ledger.of_role(role)]
        return {own.get(folded(column.header), common) for column in amounts}


def contradictions(ledger: Ledger, assumptions: Assumptions, timing: str) -> list[Finding]:
    """Every contradiction of every rule."""
    case = _Case(ledger, assumptions, timing)
    return [finding for rule in _RULES for finding in rule(case)]


def _timings(case: _Case) -> Iterator[Finding]:
    """Keys that only one kind of timing gives a meaning."""
    periods = case.timing != "continuous"
    if case.assumptions.stated("amounts.path") is not None and periods:
        message = f'a path between rows needs timing = "continuous"; with timing "{case.timing}" every row is a total.'
        yield case.stop(message, "amounts.path")
    if case.assumptions.stated("amounts.quoted") is not None and not periods:
        message = 'quoted needs a timing of totals, such as "spread"; with "continuous" every amount is a yearly rate at t.'
        yield case.stop(message, "amounts.quoted")
    for header, value, row in case.own("timing"):
        if (value != "continuous") != periods:
            message = (
                f'has timing "{value}" in a table of timing "{case.timing}": rows that speak of periods and rows that speak of '
                "dates do not end at the same time; give all columns totals, or all continuous rates."
            )
            yield stop("assumption", message, file=case.assumptions.file, row=row, column=header)
    if not periods:
        for header, _, row in case.own("quoted"):
            message = 'quoted needs a timing of totals, such as "spread".'
            yield stop("assumption", message, file=case.assumptions.file, row=row, column=header)


def _sources(case: _Case) -> Iterator[Finding]:
    """Whatever enters the plan has one source."""
    for key, roles in (
        ("growth.g", ("g",)),
        ("growth.n", ("n",)),
        ("market.inflation", ("inflation",)),
        ("household.members", ("members",)),
        ("household.productivity", ("productivity",)),
        ("household.hazard", ("hazard", "survival")),
    ):
        for role in roles:
            if case.has(role) and case.assumptions.stated(key) is not None:
                message = f"{key} has two sources, this key and the column {quoted(role)}; keep one."
                yield case.stop(message, key)
    heads = case.has("adults") and case.has("children") and not case.stated("household.members")
    for one, other in (("g", "productivity"), ("n", "members"), ("hazard", "survival")):
        if case.has(one) and case.has(other):
            message = f"has columns {quoted(one)} and {quoted(other)}, which say the same thing twice; keep one, or ignore one."
            yield stop("header-role", message, file=case.ledger.file, row=1)
    if heads and case.has("n"):
        message = (
            "has a column 'n' beside 'adults' and 'children', whose sum says how people grow; keep one, or declare members."
        )
        yield stop("header-role", message, file=case.ledger.file, row=1)


def _prices(case: _Case) -> Iterator[Finding]:
    """Nominal and real: inflation joins them, and a perpetual nominal plan has no end without it."""
    words = case.values("prices")
    market = str(case.assumptions.word("market.prices"))
    given = case.stated("market.inflation") or case.has("inflation")
    if given:
        return
    way = "declare [market] inflation, or give the table a column 'inflation'."
    if words | {market} == {"real", "nominal"}:
        amounts = "real and nominal" if len(words) == 2 else next(iter(words))
        message = f"r is {market} and the amounts are {amounts}, but there is no inflation to turn one into the other; {way}"
        yield case.stop(message, "market.prices" if case.stated("market.prices") else "amounts.prices")
    elif market == "nominal" and case.assumptions.word("horizon.kind") == "perpetual":
        message = f"a perpetual plan in nominal terms needs inflation, since its tail is real; {way}"
        yield case.stop(message, "market.prices")


def _rates(case: _Case) -> Iterator[Finding]:
    """A curve of zero rates is a column."""
    if case.assumptions.word("market.curve") == "zero" and not case.has("r"):
        yield case.stop('curve = "zero" needs a column r of zero rates.', "market.curve")


def _heads(case: _Case) -> Iterator[Finding]:
    """Equivalence scales need heads to count, and amounts to scale."""
    scaled = "per equivalent adult" in case.values("basis")
    scale = case.stated("household.scale")
    if scaled and not scale:
        yield case.stop('amounts "per equivalent adult" need [household] scale, such as "OECD-modified".', "amounts.basis")
    if scale and not scaled:
        yield case.stop('an equivalence scale needs amounts of basis "per equivalent adult".', "household.scale")
    if (scale or scaled) and not (case.has("adults") and case.has("children")):
        message = "an equivalence scale needs columns 'adults' and 'children' in the table."
        yield case.stop(message, "household.scale")
    elif case.has("adults") != case.has("children"):
        message = "has only one of the columns 'adults' and 'children'; give both (zeros where there are none), or ignore it."
        yield stop("header-role", message, file=case.ledger.file, row=1)


def _columns_needed(case: _Case) -> Iterator[Finding]:
    """Keys that speak of a column that is not there."""
    if case.assumptions.stated("household.wealth_at") is not None and not case.has("wealth"):
        yield case.stop("wealth_at speaks of a column 'wealth', which the table does not have.", "household.wealth_at")
    if case.assumptions.stated("amounts.day_count") is not None and case.ledger.time_kind not in ("date", None):
        message = f"day_count needs a column 'date'; the table's time column is {quoted(case.ledger.time_kind or '')}."
        yield case.stop(message, "amounts.day_count")


def _tails(case: _Case) -> Iterator[Finding]:
    """Keys of a tail belong to its kind."""
    tail = case.assumptions.word("horizon.tail")
    for key in ("horizon.income_growth", "horizon.consumption_growth"):
        if case.assumptions.stated(key) is not None and tail != "growing":
            yield case.stop(f'{key} needs tail = "growing".', key)
        elif tail == "growing" and not case.stated(key):
            yield stop("assumption", f'tail = "growing" needs {key}.', file=case.assumptions.file, column=key)
    declared = ("horizon.income", "horizon.consumption", "horizon.speed")
    given = [key for key in declared if case.stated(key)]
    for key in (*given, *(["horizon.interest"] if case.stated("horizon.interest") else [])):
        if tail != "converging":
            yield case.stop(f'{key} needs tail = "converging".', key)
    if tail == "converging" and given and len(given) < len(declared):
        missing = ", ".join(key for key in declared if key not in given)
        message = f"a declared converging tail also needs {missing} (or none of them, and the tail is fitted to the last rows)."
        yield case.stop(message, given[0])
    if tail == "converging" and case.stated("horizon.interest"):
        if not given:
            message = "a long-run r needs horizon.income, horizon.consumption and horizon.speed beside it."
            yield case.stop(message, "horizon.interest")
        if not case.has("r") or case.assumptions.word("market.curve") == "zero":
            yield case.stop("a long-run r needs a column r of forward rates that converges to it.", "horizon.interest")
    if case.assumptions.stated("horizon.tail") is not None and case.assumptions.word("horizon.kind") != "perpetual":
        yield case.stop('a tail needs kind = "perpetual".', "horizon.tail")


def _lump_sums(case: _Case) -> Iterator[Finding]:
    """Single amounts lie within the plan."""
    timeline, file = case.ledger.timeline, case.assumptions.file
    for lump in case.assumptions.lump_sums if timeline is not None else ():
        assert timeline is not None, "checked before"
        try:
            date = timeline.position(t=lump.t, year=lump.year, date=lump.date)
        except ValueError as error:
            yield stop("assumption", f"{error}", file=file, row=lump.row, column=lump.label)
            continue
        end = timeline.exact_end() if case.timing != "continuous" else timeline.exact(len(timeline.times) - 1)
        if not 0 <= date <= end:
            when = "before the first row" if date < 0 else "after the end of the rows"
            first, last = timeline.date(0.0), timeline.date(float(end))
            message = f"is due {when} ({first} to {last}); add rows, or remove it."
            yield stop("assumption", message, file=file, row=lump.row, column=lump.label)


_RULES: tuple[Callable[[_Case], Iterator[Finding]], ...] = (
    _timings,
    _sources,
    _prices,
    _rates,
    _heads,
    _columns_needed,
    _tails,
    _lump_sums,
)
