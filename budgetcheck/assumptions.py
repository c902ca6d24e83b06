"""The assumptions of a plan: read from a TOML file, from options or from a mapping, each value with its origin."""

from __future__ import annotations

import datetime
import re
import tomllib
from collections.abc import Mapping
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

from .declared import NONE, Assumption, Assumptions, ColumnEntry, KeyPath, LumpSum, Origin, Places, shown
from .findings import Finding, InputRefused, note, stop
from .keys import (
    BY_PATH,
    COLUMN_KEYS,
    KEYS,
    LUMP_SUM_DATES,
    LUMP_SUM_KEYS,
    MOST_LUMP_SUMS,
    OPTIONS,
    ROLES,
    SECTIONS,
    Key,
    listed,
    nearest,
    read_value,
)
from .numerals import Misread
from .text import folded, visible

__all__ = ["NONE", "Assumption", "Assumptions", "ColumnEntry", "LumpSum", "Origin", "Source", "read", "shown"]

MOST_BYTES = 1 << 20

MOST_POINTS = 1000
"""Points on one line; the parser's time grows with the square of the parts of a dotted key."""

Source = Mapping[str, Any] | str | Path | None


def read(source: Source, options: Mapping[str, str] | None = None) -> Assumptions:
    """Read assumptions from a TOML file (a path) or a mapping in its shape, and lay options over them.

    options: by name ("r", "g", "n", "wealth", "tolerance"), the text of each figure. Faults are among the findings, so that
    those of the table can be reported in the same run; a file that is no TOML at all raises InputRefused.
    """
    tree: dict[str, Any] = {}
    text, name = "", None
    if isinstance(source, Mapping):
        tree = dict(source)
    elif source is not None:
        tree, text = _parsed(Path(source))
        name = visible(str(source))
    reading = _Reading(text, name)
    declared = reading.sections(tree)
    columns = reading.columns(tree.get("columns", {}))
    lump_sums = reading.lump_sums(tree.get("lump_sum", []))
    overridden = reading.options(declared, options or {})
    return Assumptions(
        declared=tuple(overridden[key.path] for key in KEYS if key.path in overridden),
        columns=columns,
        lump_sums=lump_sums,
        findings=(*reading.stops, *reading.notes),
        attempted=frozenset(reading.attempted),
        file=name,
    )


def _parsed(path: Path) -> tuple[dict[str, Any], str]:
    name = visible(str(path))

    def refuse(message: str, row: int | None = None) -> InputRefused:
        return InputRefused([stop("assumption", message, file=name, row=row)])

    try:
        if not path.is_file():
            raise refuse("there is no such assumptions file, or it is not a regular file.")
        data = path.read_bytes() if path.stat().st_size <= MOST_BYTES else None
    except (OSError, ValueError) as error:
        raise refuse("the assumptions file cannot be read.") from error
    if data is None:
        raise refuse(f"is larger than {MOST_BYTES >> 20} MiB; that is no assumptions file.")
    try:
        text = data.removeprefix(b"\xef\xbb\xbf").decode("utf-8")
    except UnicodeDecodeError as error:
        raise refuse("is not UTF-8 text; save it as UTF-8.", data[: error.start].count(b"\n") + 1) from error
    crowded = next((row for row, line in enumerate(text.split("\n"), 1) if line.count(".") > MOST_POINTS), None)
    if crowded is not None:
        raise refuse(f"has a line with more than {MOST_POINTS} points; no key is nested as deep.", crowded)
    try:
        return tomllib.loads(text, parse_float=Decimal), text
    except tomllib.TOMLDecodeError as error:
        line = re.search(r"line (\d+)", str(error))
        row = int(line.group(1)) if line else text.count("\n") + 1
        raw = (text.splitlines() or [""])[min(row, text.count("\n") + 1) - 1 :][:1]
        reason = re.sub(r" \(at .*\)$", "", visible(str(error)))
        hint = "Words need quotes, numbers a decimal point and no percent sign."
        found = stop("assumption", f"is not TOML: {reason}.", file=name, row=row, raw="".join(raw), hint=hint)
        raise InputRefused([found]) from error
    except (ValueError, RecursionError) as error:
        raise refuse("cannot be read: a number has thousands of digits, or the nesting is too deep.") from error


class _Reading:
    """Collects what is wrong while a tree of assumptions is turned into values."""

    def __init__(self, text: str, name: str | None) -> None:
        self.name = name
        self.places = Places(text)
        self.stops: list[Finding] = []
        self.notes: list[Finding] = []
        self.attempted: set[str] = set()

    def _stop(self, path: KeyPath, message: str, hint: str | None = None, raw: object = None) -> None:
        self.attempted.add(f"{path[0]}.{folded(str(path[1])) if len(path) > 1 else ''}")
        shown_raw = None if raw is None else _shown(raw)
        where = {"file": self.name, "row": self.places.line(path), "column": _named(path)}
        self.stops.append(stop("assumption", message, raw=shown_raw, hint=hint, **where))

    def _checked(self, key: Key, path: KeyPath, value: object) -> str | Fraction | None:
        """What the value states, or None after a stop."""
        read = read_value(key, value)
        if isinstance(read, Misread):
            self._stop(path, read.message, read.hint or None, value)
            return None
        return read

    def _assumption(self, key: Key, path: KeyPath, value: object) -> Assumption | None:
        read = self._checked(key, path, value)
        if read is None:
            return None
        written = f"{path[0]}.{_named(path)}"
        return Assumption(key=written, value=read, unit=key.unit, origin=Origin.FILE, row=self.places.line(path))

    def sections(self, tree: dict[str, Any]) -> dict[str, Assumption]:
        """The declared values by key path."""
        found: dict[str, Assumption] = {}
        for section, body in tree.items():
            section = str(section)
            if section not in SECTIONS:
                self._stop((section,), "is no section of the assumptions;", nearest(section, SECTIONS, "section"))
            elif section == "lump_sum":
                continue
            elif not isinstance(body, Mapping):
                self._stop((section,), "is a section;", f"write [{section}] on a line of its own.", body)
            elif section != "columns":
                for name, value in body.items():
                    entry = self._value((section, str(name)), value)
                    if entry is not None:
                        found[entry.key] = entry
        return found

    def _value(self, path: tuple[str, str], value: object) -> Assumption | None:
        section, name = path
        key = BY_PATH.get(f"{section}.{name}")
        if key is not None:
            return self._assumption(key, path, value)
        names = tuple(k.name for k in KEYS if k.section == section)
        self._stop(path, f"is no key of [{section}];", nearest(name, names, "key"))
        return None

    def columns(self, body: object) -> tuple[ColumnEntry, ...]:
        """The entries of [columns]."""
        entries: list[ColumnEntry] = []
        seen: set[str] = set()
        for header, value in body.items() if isinstance(body, Mapping) else ():
            path = ("columns", str(header))
            if folded(path[1]) in seen:
                hint = "keep one of the entries; headers are compared without case and blanks."
                self._stop(path, "is given a role twice;", hint, value)
                continue
            seen.add(folded(path[1]))
            entry = self._column(path, value)
            if entry is not None:
                entries.append(entry)
        return tuple(entries)

    def _column(self, path: tuple[str, str], value: object) -> ColumnEntry | None:
        """A word, or a table of a role and of what the column's figures mean."""
        table: Mapping[Any, Any] = value if isinstance(value, Mapping) else {}
        own = self._own(path, table)
        if not isinstance(value, Mapping):
            role = self._role(path, value)
        elif "role" in table:
            role = self._role((*path, "role"), table["role"])
        else:
            self._stop(path, "needs a role;", f"write role = {listed(ROLES)}.")
            return None
        void = ", ".join(name for name in COLUMN_KEYS if name in table)
        if role == "ignore" and void:
            message = f"has the role ignore, so that {void} would say nothing;"
            self._stop(path, message, f"remove {void}, or give the column another role.")
            own = ()
        if role is None:
            return None
        return ColumnEntry(header=path[1].strip(), role=role, own=own, row=self.places.line(path))

    def _role(self, path: KeyPath, value: object) -> str | None:
        if isinstance(value, str) and value in ROLES:
            return value
        hint = nearest(value, ROLES, "role") if isinstance(value, str) else f"Write {listed(ROLES)}."
        self._stop(path, "is no role of a column;", hint, value)
        return None

    def _own(self, path: tuple[str, str], table: Mapping[Any, Any]) -> tuple[Assumption, ...]:
        """What the table says beside the role."""
        own: list[Assumption] = []
        for name, value in table.items():
            inner = (*path, str(name))
            key = COLUMN_KEYS.get(inner[2])
            if key is not None:
                entry = self._assumption(key, inner, value)
                own += [] if entry is None else [entry]
            elif inner[2] != "role":
                self._stop(inner, "is no key of a column;", nearest(inner[2], ("role", *COLUMN_KEYS), "key"))
        return tuple(own)

    def lump_sums(self, body: object) -> tuple[LumpSum, ...]:
        """The tables of [[lump_sum]]."""
        if not isinstance(body, (list, tuple)):
            hint = "write [[lump_sum]], in double brackets, on a line of its own above each of them."
            self._stop(("lump_sum",), "is a list of tables;", hint, body)
            return ()
        if len(body) > MOST_LUMP_SUMS:
            hint = "give payments that recur a column of the table."
            self._stop(("lump_sum", MOST_LUMP_SUMS), f"is one of {len(body)}, and at most {MOST_LUMP_SUMS} are taken;", hint)
        read = [self._lump_sum(("lump_sum", index), table) for index, table in enumerate(body[:MOST_LUMP_SUMS])]
        return tuple(entry for entry in read if entry is not None)

    def _lump_sum(self, path: tuple[str, int], table: object) -> LumpSum | None:
        before = len(self.stops)
        if not isinstance(table, Mapping):
            self._stop(path, "is no table;", "write [[lump_sum]] above its keys.", table)
            return None
        values: dict[str, Any] = {}
        for name, value in table.items():
            inner = (*path, str(name))
            key = LUMP_SUM_KEYS.get(inner[2])
            if key is None:
                self._stop(inner, "is no key of [[lump_sum]];", nearest(inner[2], tuple(LUMP_SUM_KEYS), "key"))
            else:
                values[key.name] = self._checked(key, inner, value)
        for name in ("role", "amount"):
            if name not in values:
                self._stop(path, f"needs {name};", f"write {name} = {listed(LUMP_SUM_KEYS[name].choices) or 'a figure'}.")
        dates = [name for name in LUMP_SUM_DATES if name in values]
        if len(dates) != 1:
            given = f"has {' and '.join(dates)}" if dates else "has no date"
            self._stop(path, f"{given};", f"give exactly one of {', '.join(LUMP_SUM_DATES)}.")
        if len(self.stops) > before:
            return None
        label = values.pop("label", f"lump sum {path[1] + 1}")
        return LumpSum(label=label, row=self.places.line(path), **values)

    def options(self, declared: dict[str, Assumption], options: Mapping[str, str]) -> dict[str, Assumption]:
        """Lay the options over what the file declares, with a note for each value they replace."""
        result = dict(declared)
        for option, text in options.items():
            key = BY_PATH[OPTIONS[option]]
            read = read_value(key, text, from_text=True)
            if isinstance(read, Misread):
                self.attempted.add(key.path)
                hint = read.hint or None
                self.stops.append(stop("assumption", read.message, column=f"--{option}", raw=_shown(text), hint=hint))
                continue
            if key.path in declared:
                message = f"option --{option} {visible(text)} replaces {key.path} = {shown(declared[key.path].value)}."
                self.notes.append(note("assumption", message, file=self.name))
            result[key.path] = Assumption(key=key.path, value=read, unit=key.unit, origin=Origin.OPTION)
        return result


def _named(path: KeyPath) -> str:
    """A key's name in messages, without its section."""
    section, *inner = (str(part) for part in path)
    if section == "columns" and inner:
        inner[0] = inner[0].strip()
    elif section == "lump_sum" and inner:
        inner[0] = f"lump_sum {int(path[1]) + 1}"
    return ".".join(inner) or section


def _shown(raw: object) -> str:
    """A raw value in a message; numbers of thousands of digits and nested values by their kind."""
    if isinstance(raw, (int, Fraction)) and not -(10**30) <= raw <= 10**30:
        return "a number of more than 30 digits"
    plain = isinstance(raw, (str, int, float, Decimal, Fraction, datetime.date))
    return str(raw)[:200] if plain else type(raw).__name__
