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
from .timeline import Timeline, from_figures

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
    """timeline and columns of one table; lines (n,) are line numbers in the file. With a stop among its findings the ledger
    only serves to find more: cells without a figure are NaN, and timeline, or even time_kind ("t" or "year"), may be None."""

    file: str
    sha256: str
    time_kind: str | None
    timeline: Timeline | None
    columns: tuple[LedgerColumn, ...]
    lines: tuple[int, ...]
    findings: tuple[Finding, ...]

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
        read, problems = _numbers(column, roles[column.header], table)
        columns.append(read)
        findings.extend(problems)
    if len(table.lines) + table.ragged < 2:
        message = f"has {len(table.lines) + table.ragged} rows below its header; a plan needs at least two."
        findings.append(stop("structure", message, file=table.file))
    timeline = None
    time = [column for column in columns if column.role == "time"]
    if len(time) == 1 and len(table.lines) >= 2 and not np.isnan(time[0].values).any():
        disorder = _time_findings(time[0], table)
        findings.extend(disorder)
        if not disorder:
            source = next(column for column in used if column.header == time[0].header)
            timeline = from_figures(folded(time[0].header), source.cells, time[0].values)
    return Ledger(
        file=table.file,
        sha256=table.sha256,
        time_kind=folded(time[0].header) if len(time) == 1 else None,
        timeline=timeline,
        columns=tuple(column for column in columns if column.role != "time"),
        lines=table.lines,
        findings=(*table.findings, *findings),
    )


def _numbers(column: Column, role: str, table: Table) -> tuple[LedgerColumn, list[Finding]]:
    if column.numbers is None:
        cells = column.cells or ()
        read = read_column(cells)
        problems = [_cell_finding(misread, column.header, cells[i], table, i) for i, misread in read.misread]
        problems.extend(_others(read.misread_count, column, table))
        values, halves = read.values, read.half_units
        usable = bool(cells) and read.misread_count == 0
        last = Fraction(Decimal(cells[-1].strip(" \t").replace("\u2212", "-"))) if usable else Fraction(0)
        return LedgerColumn(column.header, role, values, halves, last), problems
    values = column.numbers
    with np.errstate(invalid="ignore"):
        bad = np.flatnonzero(~((np.abs(values) <= LARGEST) & ((values == 0) | (np.abs(values) >= SMALLEST))))
    problems = []
    for i in bad[:MOST_MISREAD]:
        misread = out_of_range(Decimal(repr(float(values[i])))) or explain(str(values[i]))
        problems.append(_cell_finding(misread, column.header, repr(float(values[i])), table, int(i)))
    problems.extend(_others(len(bad), column, table))
    last = Fraction(0) if len(bad) or not len(values) else Fraction(float(values[-1]))
    if len(bad):
        values = values.copy()
        values[bad] = np.nan
    return LedgerColumn(column.header, role, values, None, last), problems


def _cell_finding(misread: Misread, header: str, raw: str, table: Table, index: int) -> Finding:
    return stop(
        misread.rule, misread.message, file=table.file, row=table.lines[index], column=header, raw=raw, hint=misread.hint
    )


def _others(count: int, column: Column, table: Table) -> tuple[Finding, ...]:
    """The rest of a column's unreadable cells, as a number."""
    what = "cells of this column are no figures"
    return rest("cell-number", count, MOST_MISREAD, what, file=table.file, column=column.header)


def _time_findings(time: LedgerColumn, table: Table) -> list[Finding]:
    """Times that are no years, repeat or go back."""
    findings: list[Finding] = []
    values = time.values
    cells = next(c.cells for c in table.columns if c.header == time.header)

    def found(index: int, rule: str, message: str) -> None:
        raw = repr(float(values[index])) if cells is None else cells[index]
        where = {"file": table.file, "row": table.lines[index], "column": time.header, "raw": raw}
        findings.append(stop(rule, message, **where))

    if folded(time.header) == "year":
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
