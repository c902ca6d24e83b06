"""How a figure is written: a grammar of its own, since float() also reads '1_000', 'nan', '１２' and '1e999'.

A figure is ASCII: a sign (+, - or U+2212), digits with at most one decimal point, and an exponent of up to three digits. What
is read keeps half a unit of its last printed digit, the most that rounding before printing can have moved it.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

import numpy as np

from .quadrature import Floats

LARGEST = 1e15
"""Largest absolute value accepted; with 16 digits a unit of it is still seen."""

SMALLEST_EXPONENT = -100
SMALLEST = 1e-100
"""Smallest absolute value accepted other than zero; products of a few such figures stay inside floating point."""

LONGEST = 100
"""Characters in one figure."""

MOST_EXPONENT = 15
"""Power of ten of a last digit: 0e15 says no more than that the amount is below what can be handled anyway."""

MOST_MISREAD = 1000
"""Cells of a column that are explained one by one; the rest is counted."""

_FIGURE = re.compile(r"([+\-\u2212]?)([0-9]+(?:\.([0-9]*))?|\.([0-9]+))(?:[eE]([+-]?[0-9]{1,3}))?")
_MISSING = frozenset({"", "-", "–", "—", "na", "n/a", "#n/a", "null", "none", "nil", ".", "..", "...", "?", "x"})
_NOT_FINITE = re.compile(r"[+\-\u2212]?(?:nan|inf(?:inity)?|1\.#(?:inf|qnan|ind)|∞)", re.IGNORECASE)
_GROUPED = re.compile(r"[+\-\u2212]?[0-9]{1,3}(?:([,'’ \u00a0\u202f\u2009_])[0-9]{3})+(?:\.[0-9]+)?")


@dataclass(frozen=True)
class Misread:
    """Why a text is no figure: a rule's name, what is wrong and what to do."""

    rule: str
    message: str
    hint: str


@dataclass(frozen=True, eq=False)
class FigureColumn:
    """values (n,), NaN where there is no figure, and half_units (n,), half a unit in the last printed digit; misread: index
    in the column and reason, of the first MOST_MISREAD; misread_count: of all."""

    values: Floats
    half_units: Floats
    misread: tuple[tuple[int, Misread], ...]
    misread_count: int


def exact(text: str) -> Fraction | Misread:
    """The figure that a text states, exactly, or why it states none."""
    stripped = text.strip(" \t")
    if len(stripped) > LONGEST or _FIGURE.fullmatch(stripped) is None:
        return explain(stripped)
    figure = Decimal(stripped.replace("\u2212", "-"))
    problem = out_of_range(figure)
    return problem if problem is not None else Fraction(figure)


def out_of_range(figure: Decimal) -> Misread | None:
    """Why a decimal figure cannot be used: not finite, too large, or so small that floating point loses it."""
    if not figure.is_finite():
        return Misread("not-finite", "is not a finite number;", "write a figure.")
    # by its exponent first: comparing would expand a huge one
    if figure and (figure.adjusted() > 15 or abs(figure) > Decimal(LARGEST)):
        return Misread("not-finite", f"is larger than {LARGEST:.0e} can be handled;", "use `unit` to scale the amounts.")
    if figure and figure.adjusted() < SMALLEST_EXPONENT:
        return Misread("not-finite", "is not zero, but too small to be told from it;", "write 0 if zero is meant.")
    return None


def read_column(cells: Sequence[str]) -> FigureColumn:
    """Read every cell of a column; nothing is guessed and nothing left out: what is no figure is counted, and explained."""
    values, halves = np.full(len(cells), np.nan), np.zeros(len(cells))
    misread: list[tuple[int, Misread]] = []
    count = 0
    match = _FIGURE.fullmatch
    for index, cell in enumerate(cells):
        text = cell.strip(" \t")
        found = match(text) if len(text) <= LONGEST else None
        if found is None:
            count += 1
            if count <= MOST_MISREAD:
                misread.append((index, explain(text)))
            continue
        sign, mantissa, after, only, power = found.groups()
        value = float(f"{mantissa}e{power}" if power else mantissa)
        last_digit = int(power or 0) - len(after or only or "")
        problem = None
        if not value <= LARGEST or value < SMALLEST or last_digit > MOST_EXPONENT:
            problem = out_of_range(Decimal(text.replace("\u2212", "-")))
        if problem is not None:
            count += 1
            if count <= MOST_MISREAD:
                misread.append((index, problem))
            continue
        values[index] = value if sign in ("", "+") else -value
        halves[index] = min(last_digit, MOST_EXPONENT)
    return FigureColumn(values=values, half_units=0.5 * 10.0**halves, misread=tuple(misread), misread_count=count)


def explain(text: str) -> Misread:
    """Why a text is no figure, with the likely figure in the hint."""
    if text.lower() in _MISSING:
        return Misread("cell-missing", "the cell is empty or says 'missing';", "write 0 where nothing flows, or the figure.")
    if _NOT_FINITE.fullmatch(text):
        return Misread("not-finite", "is not a finite number;", "write a figure.")
    if len(text) > LONGEST:
        return Misread("cell-number", f"has {len(text)} characters, too many for a number;", "write a plain number.")
    if _GROUPED.fullmatch(text):
        plain = re.sub("[^0-9.+-]", "", text)
        return Misread("cell-number", "has digits in groups;", f"write {plain} if that is meant.")
    if text.endswith("%"):
        return Misread("cell-number", "has a percent sign;", "write a fraction: 0.05 for 5 %.")
    if re.fullmatch(r"[+-]?[0-9]+,[0-9]+", text):
        return Misread("cell-number", "has a comma as its decimal mark;", f"write {text.replace(',', '.')} if that is meant.")
    return Misread("cell-number", "is not a number;", "write plain digits with a decimal point, such as 1234.5.")
