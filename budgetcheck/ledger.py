"""The table's columns with their roles, as numbers: what a row says before any convention is applied."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

import numpy as np

from .assumptions import Assumptions
from .findings import Finding, rest, stop
from .numerals import LARGEST, MOST_MISREAD, SMALLEST, Misread, explain, out_of_range, read_column
from .quadrature import Floats
from .roles import roles_of
from .table import Column, Table
from .text import folded
from .timeline import DEFAULT_DAY_COUNT, FIGURES, Timeline, disorder, from_figures, from_marks, read_marks

CLOSEST_ROWS = 1e-11
"""Rows nearer to each other than this share of the whole span are one date written twice."""


@dataclass(frozen=True, eq=False)
class LedgerColumn:
    """values (n,); half_units (n,): half a unit of the last printed digit, None for numbers that were never printed;
    first, last: the figures of the outer rows, exactly."""

    header: str
    role: str
    values: Floats
    half_units: Floats | None
    first: Fraction
    last: Fraction


@dataclass(frozen=True, eq=False)
class Ledger:
    """timeline and columns of one table, which is kept as it was read; lines (n,) are line numbers in the file. With a stop
    among its findings the ledger only serves to find more: cells without a figure are NaN, and timeline, or even time_kind
    ("t", "date" and so on), may be None."""

    file: str
    sha256: str
    time_kind: str | None
    timeline: Timeline | None
    columns: tuple[LedgerColumn, ...]
    lines: tuple[int, ...]
    findings: tuple[Finding, ...]
    table: Table

    def of_role(self, role: str) -> tuple[LedgerColumn, ...]:
        """The columns of that role, in the table's order."""
        return tuple(column for column in self.columns if column.role == role)


def keep(table: Table, assumptions: Assumptions) -> Ledger:
    """Turn text cells into numbers; what is wrong with roles, cells, the order of time and the number of rows is among
    its findings."""
    roles, findings = roles_of(table, assumptions)
    used = [column for column in table.columns if roles.get(column.header, "ignore") != "ignore"]
    columns: list[LedgerColumn] = []
    for column in used:
        if roles[column.header] != "time":
            read, problems = _numbers(column, roles[column.header], table)
            columns.append(read)
            findings.extend(problems)
    if len(table.lines) + table.ragged < 2:
        message = f"has {len(table.lines) + table.ragged} rows below its header; a plan needs at least two."
        findings.append(stop("structure", message, file=table.file))
    time = [column for column in used if roles[column.header] == "time"]
    timeline = None
    if len(time) == 1:
        timeline, problems = _timeline(time[0], table, assumptions.word("amounts.day_count") or DEFAULT_DAY_COUNT)
        findings.extend(problems)
    return Ledger(
        file=table.file,
        sha256=table.sha256,
        time_kind=folded(time[0].header) if len(time) == 1 else None,
        timeline=timeline,
        columns=tuple(columns),
        lines=table.lines,
        findings=(*table.findings, *findings),
        table=table,
    )


def _timeline(time: Column, table: Table, day_count: str) -> tuple[Timeline | None, list[Finding]]:
    """The rows' dates, or what is wrong with them."""
    kind = folded(time.header)
    if kind in FIGURES:
        read, findings = _numbers(time, "time", table)
        if findings or len(table.lines) < 2:
            return None, findings
        findings = _time_findings(read, table, kind)
        return (None if findings else from_figures(kind, time.cells, read.values)), findings
    cells = (
        time.cells
        if time.cells is not None
        else tuple(f"{value:g}" for value in (time.numbers if time.numbers is not None else ()))
    )
    marks, misread = read_marks(kind, cells)
    findings = [_cell_finding(fault, time.header, cells[i], table, i) for i, fault in misread[:MOST_MISREAD]]
    what = "cells of this column are no dates"
    findings.extend(rest("time-cell", len(misread), MOST_MISREAD, what, file=table.file, column=time.header))
    known = [mark for mark in marks if mark is not None]
    if findings or len(table.lines) < 2 or len(known) < len(marks):
        return None, findings
    late = disorder(kind, known, day_count)
    for i in late[:MOST_MISREAD]:
        again = known[i] == known[i - 1]
        what = "is the same time as" if again else "is not later than"
        todo = "keep one row for each time" if again else "sort the rows by time"
        if kind == "date" and known[i] > known[i - 1]:  # type: ignore[operator]
            what, todo = f"is, by {day_count}, the same time as", "use another day_count, or leave out one of the rows"
        message = f"{what} line {table.lines[i - 1]}; {todo}."
        where = {"file": table.file, "row": table.lines[i], "column": time.header, "raw": cells[i]}
        findings.append(stop("time-order", message, **where))
    findings.extend(rest("time-order", len(late), MOST_MISREAD, "rows repeat a time or go back", file=table.file))
    return (None if findings else from_marks(kind, known, day_count)), findings


def _numbers(column: Column, role: str, table: Table) -> tuple[LedgerColumn, list[Finding]]:
    if column.numbers is None:
        cells = column.cells or ()
        read = read_column(cells)
        problems = [_cell_finding(misread, column.header, cells[i], table, i) for i, misread in read.misread]
        problems.extend(_others(read.misread_count, column, table))
        values, halves = read.values, read.half_units
        usable = bool(cells) and read.misread_count == 0
        first, last = (_exactly(cells[0]), _exactly(cells[-1])) if usable else (Fraction(0), Fraction(0))
        return LedgerColumn(column.header, role, values, halves, first, last), problems
    values = column.numbers
    with np.errstate(invalid="ignore"):
        bad = np.flatnonzero(~((np.abs(values) <= LARGEST) & ((values == 0) | (np.abs(values) >= SMALLEST))))
    problems = []
    for i in bad[:MOST_MISREAD]:
        misread = out_of_range(Decimal(repr(float(values[i])))) or explain(str(values[i]))
        problems.append(_cell_finding(misread, column.header, repr(float(values[i])), table, int(i)))
    problems.extend(_others(len(bad), column, table))
    usable = len(values) > 0 and not len(bad)
    first, last = (Fraction(float(values[0])), Fraction(float(values[-1]))) if usable else (Fraction(0), Fraction(0))
    if len(bad):
        values = values.copy()
        values[bad] = np.nan
    return LedgerColumn(column.header, role, values, None, first, last), problems


def _exactly(cell: str) -> Fraction:
    """The figure of a readable cell."""
    return Fraction(Decimal(cell.strip(" \t").replace("\u2212", "-")))


def _cell_finding(misread: Misread, header: str, raw: str, table: Table, index: int) -> Finding:
    return stop(
        misread.rule, misread.message, file=table.file, row=table.lines[index], column=header, raw=raw, hint=misread.hint
    )


def _others(count: int, column: Column, table: Table) -> tuple[Finding, ...]:
    """The rest of a column's unreadable cells, as a number."""
    what = "cells of this column are no figures"
    return rest("cell-number", count, MOST_MISREAD, what, file=table.file, column=column.header)


def _time_findings(time: LedgerColumn, table: Table, kind: str) -> list[Finding]:
    """Times that are no years, repeat or go back."""
    findings: list[Finding] = []
    values = time.values
    cells = next(c.cells for c in table.columns if c.header == time.header)

    def found(index: int, rule: str, message: str) -> None:
        raw = repr(float(values[index])) if cells is None else cells[index]
        where = {"file": table.file, "row": table.lines[index], "column": time.header, "raw": raw}
        findings.append(stop(rule, message, **where))

    if kind == "year":
        odd = (values != np.floor(values)) | (values < 1000) | (values > 9999)
        for i in np.flatnonzero(odd)[:MOST_MISREAD]:
            found(int(i), "time-cell", "is not a calendar year of four digits; use a column 't' for other times.")
    closest = CLOSEST_ROWS * (values.max() - values.min())
    disorder = np.flatnonzero(~(np.diff(values) > closest)) + 1
    for i in disorder[:MOST_MISREAD]:
        before = f"line {table.lines[i - 1]}"
        if values[i] < values[i - 1]:
            found(int(i), "time-order", f"is earlier than {before}; sort the rows by time.")
        else:
            found(int(i), "time-order", f"is the same time as {before}; keep one row for each time.")
    findings.extend(rest("time-order", len(disorder), MOST_MISREAD, "rows repeat a time or go back", file=table.file))
    return findings
