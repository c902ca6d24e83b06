"""The table's columns with their roles, as numbers: what a row says before any convention is applied."""

from __future__ import annotations

import difflib
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

import numpy as np

from .assumptions import Assumptions
from .findings import Finding, InputRefused, stop
from .keys import LATER
from .numerals import MOST_MISREAD, Misread, explain, out_of_range, read_column
from .quadrature import Floats
from .table import Column, Table
from .text import quoted
from .timeline import KINDS, LATER_KINDS, Timeline, from_figures

KNOWN_ROLES = {"wage": "income", "income": "income", "consumption": "consumption", "r": "r", "t": "time", "year": "time"}
LATER_HEADERS = frozenset({*LATER_KINDS, "g", "n", "members", "productivity", "wealth", "household"})

CLOSEST_ROWS = 1e-11
"""Rows nearer to each other than this share of the whole span are one date written twice."""


@dataclass(frozen=True, eq=False)
class LedgerColumn:
    """values (n,); half_units (n,): half a unit of the last printed digit, None for numbers that were never printed;
    last: the last row's figure, exactly."""

    header: str
    role: str
    values: Floats
    half_units: Floats | None
    last: Fraction


@dataclass(frozen=True, eq=False)
class Ledger:
    """timeline and columns of one table; lines (n,) are line numbers in the file."""

    file: str
    sha256: str
    timeline: Timeline
    columns: tuple[LedgerColumn, ...]
    lines: tuple[int, ...]

    def of_role(self, role: str) -> tuple[LedgerColumn, ...]:
        """The columns of that role, in the table's order."""
        return tuple(column for column in self.columns if column.role == role)


def keep(table: Table, assumptions: Assumptions) -> Ledger:
    """Turn text cells into numbers. Raises InputRefused with every stop: roles, cells, order of time, number of rows."""
    roles, findings = _roles(table, assumptions)
    used = [column for column in table.columns if roles.get(column.header, "ignore") != "ignore"]
    columns: list[LedgerColumn] = []
    for column in used:
        read, problems = _numbers(column, roles[column.header], table)
        columns.append(read)
        findings.extend(problems)
    if len(table.lines) < 2:
        message = f"has {len(table.lines)} rows below its header; a plan needs at least two."
        findings.append(stop("structure", message, file=table.file))
    time = [c for c in columns if c.role == "time"]
    unreadable = {f.column for f in findings}
    if len(time) == 1 and len(table.lines) >= 2 and time[0].header not in unreadable:
        findings.extend(_time_findings(time[0], table))
    if findings:
        raise InputRefused(findings)
    source = next(c for c in used if c.header == time[0].header)
    timeline = from_figures(time[0].header.casefold(), source.cells, time[0].values)
    kept = tuple(c for c in columns if c.role != "time")
    return Ledger(file=table.file, sha256=table.sha256, timeline=timeline, columns=kept, lines=table.lines)


def _roles(table: Table, assumptions: Assumptions) -> tuple[dict[str, str], list[Finding]]:
    """The role of every header, and what is wrong with headers and roles."""
    declared = {header.casefold(): role for header, role in assumptions.columns}
    headers = [column.header for column in table.columns]
    findings = [
        stop(
            "header-role",
            "the assumptions give this column a role, but the table does not have it;",
            file=assumptions.file,
            column=header,
            hint=_nearest(header, headers),
        )
        for header, _ in assumptions.columns
        if header.casefold() not in {h.casefold() for h in headers}
    ]
    roles: dict[str, str] = {}
    for header in headers:
        key = header.casefold()
        role = declared.get(key) or KNOWN_ROLES.get(key)
        if role is None and f"columns.{header}" not in assumptions.attempted:
            findings.append(_without_role(header, table))
        elif role is None:
            roles[header] = "ignore"
        else:
            roles[header] = role
    findings.extend(_role_findings(roles, declared, table))
    findings.extend(_rate_findings(roles, assumptions, table))
    return roles, findings


def _without_role(header: str, table: Table) -> Finding:
    if header.casefold() in LATER_HEADERS:
        hint = f'Say [columns] "{header}" = "ignore" to leave the column out of account.'
        message = f"a column '{header.casefold()}' {LATER}."
    else:
        likely = difflib.get_close_matches(header.casefold(), KNOWN_ROLES, n=1, cutoff=0.6)
        near = f" or rename it to {quoted(likely[0])}" if likely else ""
        message = "has no role;"
        hint = f"give it one under [columns] in the assumptions (income, consumption or ignore){near}."
    return stop("header-role", message, file=table.file, row=1, column=header, raw=header, hint=hint)


def _role_findings(roles: dict[str, str], declared: dict[str, str], table: Table) -> list[Finding]:
    findings: list[Finding] = []
    present = set(roles.values())
    by_role = {role: [h for h, r in roles.items() if r == role] for role in present}
    if len(by_role.get("time", [])) > 1:
        message = f"has two time columns, {_joined(by_role['time'])}; keep one, or give the other the role ignore."
        findings.append(stop("header-role", message, file=table.file, row=1))
    if "time" not in present:
        message = f"has no time column; name one {' or '.join(quoted(kind) for kind in KINDS)}."
        findings.append(stop("header-role", message, file=table.file, row=1))
    for role, name in (("income", "wage"), ("consumption", "consumption")):
        if role not in present:
            message = f"has no {role} column; name one {quoted(name)}, or give a column the role {role}"
            hint = "(a column of zeros where there is none)." if role == "income" else "under [columns]."
            findings.append(stop("header-role", message, file=table.file, row=1, hint=hint))
    both = {"wage", "income"} & {h.casefold() for h in roles} - declared.keys()
    if len(both) == 2:
        message = "has both 'wage' and 'income', and one may be part of the other; declare the role of each under [columns]."
        findings.append(stop("header-role", message, file=table.file, row=1))
    return findings


def _rate_findings(roles: dict[str, str], assumptions: Assumptions, table: Table) -> list[Finding]:
    """The market interest rate has exactly one source."""
    declared, columns = assumptions.stated("market.r"), [h for h, role in roles.items() if role == "r"]
    if declared is None and not columns and "market.r" not in assumptions.attempted:
        message = "the market interest rate r is missing; declare [market] r, use --r, or give the table a column 'r'."
        if assumptions.stated("preferences.rho") is not None:
            message += " The subjective discount rate rho does not stand in for it."
        return [stop("rate-missing", message, file=assumptions.file or table.file)]
    if declared is not None and columns:
        message = "r has two sources, this column and [market] r (or --r); keep one, or give the column the role ignore."
        return [stop("rate-missing", message, file=table.file, row=1, column=columns[0])]
    return []


def _numbers(column: Column, role: str, table: Table) -> tuple[LedgerColumn, list[Finding]]:
    if column.numbers is None:
        cells = column.cells or ()
        read = read_column(cells)
        problems = [_cell_finding(misread, column.header, cells[i], table, i) for i, misread in read.misread]
        problems.extend(_uncounted(read.misread_count, column.header, table))
        values, halves = read.values, read.half_units
        usable = bool(cells) and read.misread_count == 0
        last = Fraction(Decimal(cells[-1].strip(" \t").replace("\u2212", "-"))) if usable else Fraction(0)
        return LedgerColumn(column.header, role, values, halves, last), problems
    values = column.numbers
    with np.errstate(invalid="ignore"):
        bad = np.flatnonzero(~((np.abs(values) <= 1e15) & ((values == 0) | (np.abs(values) >= 1e-300))))
    problems = []
    for i in bad[:MOST_MISREAD]:
        misread = out_of_range(Decimal(repr(float(values[i])))) or explain(str(values[i]))
        problems.append(_cell_finding(misread, column.header, repr(float(values[i])), table, int(i)))
    problems.extend(_uncounted(len(bad), column.header, table))
    last = Fraction(0) if len(bad) or not len(values) else Fraction(float(values[-1]))
    return LedgerColumn(column.header, role, values, None, last), problems


def _cell_finding(misread: Misread, header: str, raw: str, table: Table, index: int) -> Finding:
    return stop(
        misread.rule, misread.message, file=table.file, row=table.lines[index], column=header, raw=raw, hint=misread.hint
    )


def _uncounted(count: int, header: str, table: Table) -> list[Finding]:
    """The rest of a column's unreadable cells, as a number."""
    if count <= MOST_MISREAD:
        return []
    message = f"{count - MOST_MISREAD} more cells of this column are no figures, {count} in all."
    return [stop("cell-number", message, file=table.file, column=header)]


def _time_findings(time: LedgerColumn, table: Table) -> list[Finding]:
    """Times that are no years, repeat or go back."""
    findings: list[Finding] = []
    values = time.values
    cells = next(c.cells for c in table.columns if c.header == time.header)

    def found(index: int, rule: str, message: str) -> None:
        raw = repr(float(values[index])) if cells is None else cells[index]
        where = {"file": table.file, "row": table.lines[index], "column": time.header, "raw": raw}
        findings.append(stop(rule, message, **where))

    if time.header.casefold() == "year":
        odd = (values != np.floor(values)) | (values < 1000) | (values > 9999)
        for i in np.flatnonzero(odd)[:MOST_MISREAD]:
            found(int(i), "time-cell", "is not a calendar year of four digits; use a column 't' for other times.")
    closest = CLOSEST_ROWS * (values.max() - values.min())
    for i in np.flatnonzero(~(np.diff(values) > closest))[:MOST_MISREAD] + 1:
        before = f"line {table.lines[i - 1]}"
        if values[i] < values[i - 1]:
            found(int(i), "time-order", f"is earlier than {before}; sort the rows by time.")
        else:
            found(int(i), "time-order", f"is the same time as {before}; keep one row for each time.")
    return findings


def _nearest(header: str, headers: list[str]) -> str:
    near = difflib.get_close_matches(header, headers, n=1, cutoff=0.5)
    return f"the nearest header is {quoted(near[0])}." if near else f"it has {_joined(headers)}."


def _joined(words: list[str]) -> str:
    return ", ".join(quoted(word) for word in words[:12])
