"""The assumptions of a plan: read from a TOML file, from options or from a mapping, each value with its origin."""

from __future__ import annotations

import difflib
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from enum import StrEnum
from fractions import Fraction
from functools import cached_property
from numbers import Rational, Real
from pathlib import Path
from typing import Any

from .findings import Finding, InputRefused, note, stop
from .keys import BY_PATH, KEYS, LATER, LATER_KEYS, OPTIONS, ROLES, SECTIONS, Key
from .numerals import LARGEST, LONGEST, Misread, exact, out_of_range
from .text import folded, quoted, visible

MOST_BYTES = 1 << 20
DEEPEST = 8

Source = Mapping[str, Any] | str | Path | None


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
class Assumptions:
    """What was declared, by key path; `columns` maps headers to roles; findings hold the notes and the stops of
    reading; attempted: key paths (and headers of [columns]) that were given but could not be read."""

    declared: tuple[Assumption, ...]
    columns: tuple[tuple[str, str], ...]
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


NONE = Assumptions(declared=(), columns=(), findings=(), attempted=frozenset(), file=None)
"""Nothing declared: every assumption at its default."""


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
    overridden = reading.options(declared, options or {})
    return Assumptions(
        declared=tuple(overridden[key.path] for key in KEYS if key.path in overridden),
        columns=columns,
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
        self.lines = text.splitlines()
        self.stops: list[Finding] = []
        self.notes: list[Finding] = []
        self.attempted: set[str] = set()

    def _line(self, section: str, key: str | None = None) -> int | None:
        """The line on which a key stands; a search in the text, since the parser does not keep places.

        A key stands under its [section], or at the top as section.key = … or section = {key = …}.
        """
        current = ""
        for number, line in enumerate(self.lines, start=1):
            header = re.match(r"\s*\[\s*[\"']?(.*?)[\"']?\s*\]", line)
            if header:
                current = header.group(1)
                if current == section and key is None:
                    return number
            elif _states(line, section, key, current):
                return number
        return None

    def _stop(self, message: str, section: str, key: str | None = None, raw: object = None, hint: str | None = None) -> None:
        self.attempted.add(f"{section}.{folded(key or '')}")
        shown = None if raw is None else _shown(raw)
        row = self._line(section, key)
        self.stops.append(stop("assumption", message, file=self.name, row=row, column=key or section, raw=shown, hint=hint))

    def sections(self, tree: dict[str, Any]) -> dict[str, Assumption]:
        """The declared values by key path."""
        found: dict[str, Assumption] = {}
        for section, body in tree.items():
            section = str(section)
            if section not in SECTIONS:
                self._stop("is no section of the assumptions;", section, hint=_nearest(section, SECTIONS, "section"))
            elif not isinstance(body, Mapping):
                self._stop("is a section;", section, raw=body, hint=f"write [{section}] on a line of its own.")
            elif section != "columns":
                for name, value in body.items():
                    entry = self._value(section, str(name), value)
                    if entry is not None:
                        found[entry.key] = entry
        return found

    def _value(self, section: str, name: str, value: object) -> Assumption | None:
        path = f"{section}.{name}"
        key = BY_PATH.get(path)
        if key is None and path in LATER_KEYS:
            self._stop(f"{LATER}; remove the key, and settle what it says in the table.", section, name)
        elif key is None:
            names = tuple(k.name for k in KEYS if k.section == section)
            self._stop(f"is no key of [{section}];", section, name, hint=_nearest(name, names, "key"))
        elif key.choices:
            return self._word(key, value)
        else:
            return self._figure(key, value, Origin.FILE)
        return None

    def _word(self, key: Key, value: object) -> Assumption | None:
        if isinstance(value, str) and value in key.choices:
            row = self._line(key.section, key.name)
            return Assumption(key=key.path, value=value, unit="", origin=Origin.FILE, row=row)
        if isinstance(value, str) and value in key.later:
            self._stop(f"{LATER}; it takes {_listed(key.choices)}.", key.section, key.name, raw=value)
        else:
            hint = _nearest(value, key.choices, "word") if isinstance(value, str) else f"Write {_listed(key.choices)}."
            self._stop("is not one of the words this key takes;", key.section, key.name, raw=value, hint=hint)
        return None

    def _figure(self, key: Key, value: object, origin: Origin) -> Assumption | None:
        # a figure in quotes is a wrong type in a file; an option has no other way to be written
        figure = _NO_NUMBER if isinstance(value, str) and origin is Origin.FILE else _exact(value)
        if isinstance(figure, Misread):
            self._stop(figure.message, key.section, key.name, raw=value, hint=figure.hint)
            return None
        low, high = key.low, key.high
        below = low is not None and (figure <= low if key.above else figure < low)
        if below or (high is not None and figure > high):
            least = "more than" if key.above else "at least"
            allowed = f"a figure of {least} {float(low or 0):g} and at most {float(high or LARGEST):g}"
            percent = " A rate is a fraction: 0.05 for 5 %." if key.unit == "1/year" else ""
            self._stop(f"is out of range; this key takes {allowed}.{percent}", key.section, key.name, raw=value)
            return None
        row = self._line(key.section, key.name) if origin is Origin.FILE else None
        return Assumption(key=key.path, value=figure, unit=key.unit, origin=origin, row=row)

    def columns(self, body: object) -> tuple[tuple[str, str], ...]:
        """Headers and their roles."""
        if not isinstance(body, Mapping):
            return ()
        roles: list[tuple[str, str]] = []
        seen: set[str] = set()
        for header, role in body.items():
            header = str(header).strip()
            if folded(header) in seen:
                hint = "keep one of the entries; headers are compared without case and blanks."
                self._stop("is given a role twice;", "columns", header, raw=role, hint=hint)
            elif isinstance(role, str) and role in ROLES:
                roles.append((header, role))
            elif role == "deduction" or isinstance(role, Mapping):
                self._stop(f"{LATER}; it takes {_listed(ROLES)}.", "columns", header, raw=role)
            else:
                hint = _nearest(role, ROLES, "role") if isinstance(role, str) else f"Write {_listed(ROLES)}."
                self._stop("is no role of a column;", "columns", header, raw=role, hint=hint)
            seen.add(folded(header))
        return tuple(roles)

    def options(self, declared: dict[str, Assumption], options: Mapping[str, str]) -> dict[str, Assumption]:
        """Lay the options over what the file declares, with a note for each value they replace."""
        result = dict(declared)
        for option, text in options.items():
            key = BY_PATH[OPTIONS[option]]
            before = len(self.stops)
            entry = self._figure(key, text, Origin.OPTION)
            if entry is None:
                self.stops[before:] = [
                    stop("assumption", f.message, column=f"--{option}", raw=f.raw, hint=f.hint) for f in self.stops[before:]
                ]
                continue
            if key.path in declared:
                message = f"option --{option} {visible(text)} replaces {key.path} = {shown(declared[key.path].value)}."
                self.notes.append(note("assumption", message, file=self.name))
            result[key.path] = entry
        return result


_SMALLEST = Fraction(1, 10**100)
_NO_NUMBER = Misread("assumption", "is not a number;", "write a plain number, without quotes.")


def _states(line: str, section: str, key: str | None, current: str) -> bool:
    """Whether a line of TOML under the section `current` states the key, or for None anything of the section."""
    outer, inner = (rf"[\"']?{re.escape(name)}[\"']?" for name in (section, key or ""))
    if key is not None and current == section:
        return re.match(rf"\s*{inner}\s*=", line) is not None
    if current:
        return False
    within = rf"\s*(\.\s*|=\s*\{{(.*,)?\s*){inner}\s*=" if key is not None else r"\s*[.=]"
    return re.match(rf"\s*{outer}{within}", line) is not None


def _exact(value: object) -> Fraction | Misread:
    """The exact figure behind a TOML value, an option's text or a Python number."""
    if isinstance(value, bool):
        return _NO_NUMBER
    if isinstance(value, str):
        return exact(value)
    if isinstance(value, Decimal):
        if len(value.as_tuple().digits) > LONGEST:
            return Misread("assumption", f"has more than {LONGEST} digits;", "write the figure.")
        return out_of_range(value) or Fraction(value)
    if isinstance(value, Rational):
        figure = Fraction(int(value.numerator), int(value.denominator))
        beyond = abs(figure) > Fraction(10**15) or (figure != 0 and abs(figure) < _SMALLEST)
        # the same words as for a printed figure beyond the range on that side
        example = Decimal("1e16") if abs(figure) > 1 else Decimal("1e-101")
        return (out_of_range(example) or _NO_NUMBER) if beyond else figure
    if isinstance(value, Real):
        # the decimal figure that Python prints is what was meant: 0.05 is five hundredths
        decimal = Decimal(repr(float(value)))
        return out_of_range(decimal) or Fraction(decimal)
    return _NO_NUMBER


def shown(value: str | Fraction) -> str:
    """A value as it would be written: a word, or a decimal figure."""
    if isinstance(value, str):
        return value
    if value.denominator == 1:
        return str(value.numerator)
    decimal = Decimal(value.numerator) / Decimal(value.denominator)
    return f"{decimal.normalize():f}" if abs(value) >= Fraction(1, 10**5) else f"{decimal.normalize():e}"


def _shown(raw: object) -> str:
    """A raw value in a message; numbers of thousands of digits and nested values by their kind."""
    if isinstance(raw, (int, Fraction)) and not -(10**30) <= raw <= 10**30:
        return "a number of more than 30 digits"
    return str(raw)[:200] if isinstance(raw, (str, int, float, Decimal, Fraction)) else type(raw).__name__


def _listed(words: tuple[str, ...]) -> str:
    return " or ".join(f'"{word}"' for word in words)


def _nearest(word: str, words: tuple[str, ...], kind: str) -> str:
    near = difflib.get_close_matches(word, words, n=1, cutoff=0.5)
    if near:
        return f"the nearest {kind} is {quoted(near[0])}."
    return f"the {kind}s are {', '.join(words)}."
