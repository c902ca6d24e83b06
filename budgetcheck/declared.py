"""What was declared: assumptions, roles of columns and lump sums, each with its origin and its place in the file."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from decimal import Decimal
from enum import StrEnum
from fractions import Fraction
from functools import cached_property

from .findings import Finding
from .keys import BY_PATH

KeyPath = tuple[str | int, ...]
"""Section, key and, inside a table or an array, further keys and indices from 0."""

DEEPEST = 8
"""Parts of a path by which places are told apart; no key of the format has more than three."""


class Origin(StrEnum):
    """Where a value comes from."""

    FILE = "file"
    OPTION = "option"
    TABLE = "table"
    DEFAULT = "default"


@dataclass(frozen=True, kw_only=True)
class Assumption:
    """One value in force: the key's path, the value (a word or an exact figure), its unit, its origin and, from a file, its
    line."""

    key: str
    value: str | Fraction
    unit: str
    origin: Origin
    row: int | None = None


@dataclass(frozen=True, kw_only=True)
class ColumnEntry:
    """What [columns] says of one header: its role and, where the entry is a table, what its figures mean in place of [amounts];
    own: by key path, such as "columns.Gross pay.timing"; row: line of the entry."""

    header: str
    role: str
    own: tuple[Assumption, ...] = ()
    row: int | None = None

    def stated(self, name: str) -> Assumption | None:
        """What the entry says under that name, such as "timing", or None."""
        path = f"columns.{self.header}.{name}"
        return next((entry for entry in self.own if entry.key == path), None)


@dataclass(frozen=True, kw_only=True)
class LumpSum:
    """One [[lump_sum]], due at exactly one of t (years since the plan's start), year (calendar) and date (YYYY-MM-DD).

    amount: money in `basis`, None where that is not said; label: "lump sum 1" and so on where none is given, not necessarily
    unique; row: line of its header.
    """

    role: str
    amount: Fraction
    label: str
    t: Fraction | None = None
    year: Fraction | None = None
    date: str | None = None
    basis: str | None = None
    row: int | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class Assumptions:
    """What was declared, by key path; columns: the entries of [columns]; findings hold the notes and the stops of reading;
    attempted: what was given but could not be read: key paths, "columns." with the folded header, "lump_sum." with an index."""

    declared: tuple[Assumption, ...]
    columns: tuple[ColumnEntry, ...]
    lump_sums: tuple[LumpSum, ...]
    findings: tuple[Finding, ...]
    attempted: frozenset[str]
    file: str | None

    def stated(self, key: str) -> Assumption | None:
        """What was declared under the key, or None."""
        return self._by_key.get(key)

    @cached_property
    def _by_key(self) -> dict[str, Assumption]:
        return {entry.key: entry for entry in self.declared}

    def entry(self, key: str) -> Assumption | None:
        """What was declared under the key, or its default with that origin, or None where neither exists."""
        stated = self.stated(key)
        if stated is not None:
            return stated
        default = BY_PATH[key].default
        if default is None:
            return None
        return Assumption(key=key, value=default, unit=BY_PATH[key].unit, origin=Origin.DEFAULT)

    def word(self, key: str) -> str | None:
        """The word in force under the key, default included."""
        entry = self.entry(key)
        return None if entry is None else str(entry.value)

    def figure(self, key: str) -> Fraction | None:
        """The figure in force under the key, default included."""
        entry = self.entry(key)
        return None if entry is None else Fraction(entry.value)


NONE = Assumptions(declared=(), columns=(), lump_sums=(), findings=(), attempted=frozenset(), file=None)
"""Nothing declared: every assumption at its default."""


def shown(value: str | Fraction) -> str:
    """A value as it would be written: a word, or a decimal figure."""
    if isinstance(value, str):
        return value
    if value.denominator == 1:
        return str(value.numerator)
    decimal = Decimal(value.numerator) / Decimal(value.denominator)
    return f"{decimal.normalize():f}" if abs(value) >= Fraction(1, 10**5) else f"{decimal.normalize():e}"


class Places:
    """On which line each key stands in a TOML text that the parser has accepted: under a header, dotted or in an inline table.

    The parser keeps no places, so the text is walked once more, token by token.
    """

    def __init__(self, text: str) -> None:
        self._lines: dict[KeyPath, int] = {}
        # of every [[name]] so far, the index of its last element
        self._last: dict[KeyPath, int] = {}
        self._table: KeyPath = ()
        # of each bracket still open: which, the path of what it holds, and the index of an array's element
        self._open: list[tuple[str, KeyPath, int]] = []
        self._here: KeyPath = ()
        self._key: list[str] = []
        self._naming, self._brackets = True, 0
        number = 1
        for found in _TOKEN.finditer(f"{text}\n"):
            token = found.group()
            if found["name"] and self._naming:
                self._key.append(_unquoted(token))
            elif not token.startswith("#"):
                self._take(token, number)
            number += token.count("\n")

    def line(self, path: KeyPath) -> int | None:
        """The line of the key, or else of the innermost table around it."""
        return next((self._lines[path[:end]] for end in range(len(path), 0, -1) if path[:end] in self._lines), None)

    def _take(self, token: str, number: int) -> None:
        """One mark, or one piece of a value."""
        if token == "\n":
            if not self._open:
                if self._brackets:
                    self._table = self._header(number)
                self._key, self._naming, self._brackets = [], True, 0
        elif token == "=":
            self._here = self._put(self._open[-1][1] if self._open else self._table, self._key, number)
            self._key, self._naming = [], False
        elif self._naming and not self._open:
            self._brackets += token == "["
        elif token in ("]", "}"):
            del self._open[-1:]
            self._naming = False
        elif token == "," and self._open:
            bracket, path, index = self._open.pop()
            self._open.append((bracket, path, index + 1))
            self._here = (*path, index + 1)[:DEEPEST]
            self._naming = bracket == "{"
        else:
            self._lines.setdefault(self._here, number)
            if token in ("[", "{"):
                self._open.append((token, self._here, 0))
                self._here = (*self._here, 0)[:DEEPEST]
                self._naming = token == "{"

    def _put(self, path: KeyPath, names: list[str], number: int) -> KeyPath:
        """Note the path that the names lead to, and every table on the way."""
        for name in names:
            path = (*path, name)[:DEEPEST]
            self._lines.setdefault(path, number)
        return path

    def _header(self, number: int) -> KeyPath:
        """Note a header; below an array's name it speaks of the last element, and [[name]] begins the next."""
        path: KeyPath = ()
        for left, name in enumerate(self._key, start=1 - len(self._key)):
            path = self._put(path, [name], number)
            if not left and self._brackets == 2:
                self._last[path] = self._last.get(path, -1) + 1
            if path in self._last:
                path = (*path, self._last[path])[:DEEPEST]
                self._lines.setdefault(path, number)
        return path


_TOKEN = re.compile(
    r"""\#[^\n]*|\n|[\[\]{}=,]|(?P<name>"{3}(?:\\.|[^\\])*?"{3,5}(?!")|'{3}.*?'{3,5}(?!')
    |"(?:\\.|[^"\\\n])*"|'[^'\n]*'|[^\s\#"'\[\]{}=,.]+)""",
    re.DOTALL | re.VERBOSE,
)
"""A comment, an end of line, a mark, or a name, text or piece of a figure; blanks and points between them are passed over."""


def _unquoted(name: str) -> str:
    if name.startswith('"'):
        return str(tomllib.loads(f"name = {name}")["name"]) if "\\" in name else name[1:-1]
    return name.strip("'")
