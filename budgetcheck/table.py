"""A file's bytes, or a DataFrame, as columns of cells with their lines; nothing is interpreted.

CSV is read after RFC 4180 with physical line numbers kept. Other dialects and spreadsheets have their place here: each is one
more function that returns a Table.
"""

from __future__ import annotations

import csv
import hashlib
import io
import sys
from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import datetime, time
from decimal import Decimal
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from .findings import Finding, InputRefused, rest, stop
from .quadrature import Floats
from .text import folded, visible

if TYPE_CHECKING:
    import pandas as pd

MOST_BYTES = 1 << 30
MOST_COLUMNS = 1000
LONGEST_HEADER = 1000
MOST_RAGGED = 1000
"""Ragged rows that are named one by one."""

STANDARD_INPUT = "-"


@dataclass(frozen=True, eq=False)
class Column:
    """One column: its header as it stands, and either text cells or numbers (from a DataFrame, exact as they are); letter: of
    the column in a workbook."""

    header: str
    cells: tuple[str, ...] | None
    numbers: Floats | None = None
    letter: str | None = None


@dataclass(frozen=True, eq=False)
class Table:
    """file: the name to show; columns; lines (n,): the physical line of each row; sha256 of the input; ragged: rows of
    another width than the header, which are left out; findings: faults of structure, with which the rows that are sound can
    still be read for more; separator: between the cells of a text file; decided: what was decided in reading it, in words."""

    file: str
    columns: tuple[Column, ...]
    lines: tuple[int, ...]
    sha256: str
    ragged: int = 0
    findings: tuple[Finding, ...] = ()
    separator: str | None = None
    decided: tuple[str, ...] = ()

    def addressed(self, findings: Iterable[Finding]) -> tuple[Finding, ...]:
        """The findings with the address of their cell, for a workbook."""
        letters = {column.header: column.letter for column in self.columns if column.letter is not None}
        return tuple(
            replace(found, cell=f"{letters[found.column]}{found.row}")
            if found.cell is None and found.row is not None and found.column in letters and found.file == self.file
            else found
            for found in findings
        )


def read_csv(source: str | Path) -> Table:
    """Read a CSV file, or standard input for '-'. Raises InputRefused where no table can be made out at all."""
    data, name = _bytes_of(source)
    text = _decoded(data, name)
    rows = _rows_of(text, name)
    return _table_of(rows, name, hashlib.sha256(data).hexdigest())


def _bytes_of(source: str | Path) -> tuple[bytes, str]:
    if str(source) == STANDARD_INPUT:
        if sys.stdin is None:
            raise InputRefused([stop("structure", "is closed; send the table to it, or name a file.", file="standard input")])
        return sys.stdin.buffer.read(MOST_BYTES + 1), "standard input"
    path = Path(source)
    name = visible(str(source))
    problem = _unreadable(path)
    if problem is not None:
        raise InputRefused([stop("structure", problem, file=name)])
    try:
        return path.read_bytes(), name
    except OSError as error:
        raise InputRefused([stop("structure", f"cannot be read: {error.strerror or error}.", file=name)]) from error


def _unreadable(path: Path) -> str | None:
    try:
        if path.is_dir():
            return "is a directory; name the CSV file in it."
        if not path.exists():
            return "there is no such file; check the name and the folder."
        if not path.is_file():
            return "is not a regular file; copy the table into one, or send it to standard input as '-'."
        if path.stat().st_size > MOST_BYTES:
            return f"is larger than {MOST_BYTES >> 20} MiB."
    except (OSError, ValueError) as error:
        return f"cannot be opened: {getattr(error, 'strerror', None) or 'the name is not usable'}."
    return None


def _decoded(data: bytes, name: str) -> str:
    if len(data) > MOST_BYTES:
        raise InputRefused([stop("too-large", f"is larger than {MOST_BYTES >> 20} MiB.", file=name)])
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputRefused([stop("structure", "is UTF-16 text; save it as 'CSV UTF-8'.", file=name)])
    data = data.removeprefix(b"\xef\xbb\xbf")
    if b"\x00" in data:
        line = data[: data.index(b"\x00")].count(b"\n") + 1
        raise InputRefused([stop("structure", "holds a NUL byte: no CSV text; save it as 'CSV UTF-8'.", file=name, row=line)])
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        message = f"byte 0x{data[error.start]:02x} is not UTF-8 text; save the table as 'CSV UTF-8'."
        raise InputRefused([stop("structure", message, file=name, row=line)]) from error
    if not text.strip():
        raise InputRefused([stop("structure", "is empty; it needs a header and at least two rows.", file=name)])
    return text


def _rows_of(text: str, name: str) -> list[tuple[int, list[str]]]:
    """Every non-blank record with the physical line it starts on."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    rows: list[tuple[int, list[str]]] = []
    line = 1
    try:
        for record in reader:
            if any(cell.strip() for cell in record) or len(record) > 1:
                rows.append((line, record))
            line = reader.line_num + 1
    except csv.Error as error:
        message = f"the record that starts here is not CSV ({error}); look for a quote that is not closed or not doubled."
        raise InputRefused([stop("structure", message, file=name, row=line)]) from error
    return rows


def _table_of(rows: list[tuple[int, list[str]]], name: str, sha256: str) -> Table:
    if not rows:
        raise InputRefused([stop("structure", "is empty; it needs a header and at least two rows.", file=name)])
    line, header = rows[0]
    findings = _header_findings(header, line, name)
    width = len(header)
    ragged = [(line, record) for line, record in rows[1:] if len(record) != width]
    for line, record in ragged[:MOST_RAGGED]:
        message = f"has {len(record)} cells where the header has {width};"
        hint = "give every row one cell for each column (a number with a comma in it needs quotes)."
        shown = ",".join(record[: width + 2])
        findings.append(stop("structure", message, file=name, row=line, raw=shown, hint=hint))
    findings.extend(rest("structure", len(ragged), MOST_RAGGED, "rows have another width than the header", file=name))
    sound = [(line, record) for line, record in rows[1:] if len(record) == width]
    cells = list(zip(*(record for _, record in sound), strict=True)) if sound else [()] * width
    columns = tuple(Column(header=head.strip(), cells=tuple(cell)) for head, cell in zip(header, cells, strict=True))
    lines = tuple(line for line, _ in sound)
    return Table(file=name, columns=columns, lines=lines, sha256=sha256, ragged=len(ragged), findings=tuple(findings))


def _header_findings(header: list[str], line: int, name: str) -> list[Finding]:
    findings: list[Finding] = []
    # nothing that follows would mean anything if these are wrong
    if len(header) > MOST_COLUMNS:
        message = f"the header has {len(header)} columns, more than {MOST_COLUMNS}."
        raise InputRefused([stop("too-large", message, file=name, row=line)])
    if len(header) == 1 and any(mark in header[0] for mark in ";\t|"):
        hint = "separate the columns with commas."
        raise InputRefused([stop("structure", "has no comma in it;", file=name, row=line, raw=header[0], hint=hint)])
    seen: dict[str, str] = {}
    for position, head in enumerate(header, start=1):
        key = folded(head)
        if not key:
            message = f"column {position} has no name; name it, or remove the column."
            findings.append(stop("header-role", message, file=name, row=line))
        elif len(head) > LONGEST_HEADER:
            findings.append(stop("too-large", f"a header of {len(head)} characters.", file=name, row=line, raw=head))
        elif key in seen:
            message = "the header stands here twice; keep one of the columns."
            findings.append(stop("header-role", message, file=name, row=line, column=head.strip(), raw=head))
        seen[key] = head
    return findings


def from_frame(frame: pd.DataFrame) -> Table:
    """The columns of a DataFrame; row i is 'line' i + 2, as if it had been written as CSV. The index is not read."""
    digest = hashlib.sha256()
    columns = []
    for header, series in frame.items():
        column = _frame_column(str(header), series)
        digest.update(str(header).encode("utf-8", "backslashreplace") + b"\0")
        body = column.numbers.tobytes() if column.numbers is not None else repr(column.cells).encode("utf-8", "replace")
        digest.update(body)
        columns.append(column)
    if not columns:
        raise InputRefused([stop("structure", "the DataFrame has no columns.")])
    findings = _header_findings([column.header for column in columns], 1, "DataFrame")
    lines = tuple(range(2, len(frame) + 2))
    return Table(file="DataFrame", columns=tuple(columns), lines=lines, sha256=digest.hexdigest(), findings=tuple(findings))


def _frame_column(header: str, series: pd.Series[Any]) -> Column:
    values = series.to_numpy()
    if values.dtype.kind in "iuf":
        numbers = values.astype(np.float64)
        if not np.isnan(numbers).any():
            return Column(header=header.strip(), cells=None, numbers=numbers)
    cells = series.tolist()
    if all(isinstance(cell, (int, float, Decimal)) and not isinstance(cell, bool) for cell in cells) and not series.hasnans:
        return Column(header=header.strip(), cells=None, numbers=np.array([_as_float(cell) for cell in cells]))
    # everything else is read as text by the grammar of figures, so that True, None and 1_000 are refused by name
    missing = series.isna().tolist()
    texts = ("" if gone else _as_text(cell) for gone, cell in zip(missing, cells, strict=True))
    return Column(header=header.strip(), cells=tuple(texts))


def _as_text(cell: Any) -> str:
    """A cell as it would be printed; a timestamp at midnight is a date."""
    if isinstance(cell, datetime) and cell.tzinfo is None and cell.time() == time():
        return cell.date().isoformat()
    return str(cell)


def _as_float(cell: Any) -> float:
    """A number of any kind; one too large for floating point becomes infinite, and is refused as such."""
    try:
        return float(cell)
    except OverflowError:
        return float("inf")
