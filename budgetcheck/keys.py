"""The keys an assumptions file may hold: type, choices, range and default of each, in one table, and the check of a value."""

from __future__ import annotations

import datetime
import difflib
import re
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from numbers import Rational, Real

from .numerals import LARGEST, LONGEST, Misread, exact, out_of_range
from .paths import NAMES as PATHS
from .rates import COMPOUNDINGS
from .text import quoted

WEALTH_BASES = ("per person", "per household", "economy", "per effective unit")
BASES = (*WEALTH_BASES, "per equivalent adult")
TIMINGS = ("continuous", "spread", "in advance", "in arrears", "at mid-period")
PRICES = ("real", "nominal")
SCALES = ("OECD", "OECD-modified", "square root")
DAY_COUNTS = ("ACT/365F", "ACT/ACT ISDA", "30/360", "30E/360")
FLOW_ROLES = ("income", "deduction", "consumption")
ROLES = (*FLOW_ROLES, "ignore")

MOST_LUMP_SUMS = 200
LONGEST_LABEL = 80
"""Characters in the label of a lump sum."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Key:
    """One key. choices: a word is expected; low, high: a figure is, in that range (low itself excluded if `above`).

    form: "date" or "label" where neither a word nor a figure is expected. default: what holds where the key is absent; None:
    depends on the table, or nothing.
    """

    section: str
    name: str
    choices: tuple[str, ...] = ()
    low: Fraction | None = None
    high: Fraction | None = None
    above: bool = False
    form: str = ""
    default: str | Fraction | None = None
    unit: str = ""

    @property
    def path(self) -> str:
        """The key as it is named in messages and reports."""
        return f"{self.section}.{self.name}"


_LARGEST = Fraction(10**15)
_SMALLEST = Fraction(1, 10**100)
_ZERO, _ONE = Fraction(0), Fraction(1)


def _rate(section: str, name: str, default: Fraction | None) -> Key:
    # below −100 % a year nothing is left to grow; from 100 upward a percentage was meant
    return Key(section=section, name=name, low=Fraction(-1), high=Fraction(100), above=True, default=default, unit="1/year")


def _amount(section: str, name: str, default: Fraction | None, *, unit: str = "money") -> Key:
    return Key(section=section, name=name, low=-_LARGEST, high=_LARGEST, default=default, unit=unit)


def _factor(section: str, name: str, unit: str) -> Key:
    # a factor of amounts: its range keeps products of four of them far inside floating point
    return Key(section=section, name=name, low=1 / _LARGEST, high=_LARGEST, default=_ONE, unit=unit)


def _word(section: str, name: str, choices: tuple[str, ...], default: str | None) -> Key:
    return Key(section=section, name=name, choices=choices, default=default)


_LONG_RUN = "money per unit of human capital and year"

KEYS = (
    _rate("market", "r", None),
    _word("market", "compounding", COMPOUNDINGS, "continuous"),
    _word("market", "curve", ("forward", "zero"), "forward"),
    _word("market", "prices", PRICES, "real"),
    _rate("market", "inflation", None),
    _rate("growth", "g", _ZERO),
    _rate("growth", "n", _ZERO),
    _word("growth", "compounding", COMPOUNDINGS, None),
    _amount("household", "wealth", _ZERO),
    _word("household", "wealth_basis", WEALTH_BASES, None),
    _word("household", "wealth_at", ("start", "end"), "start"),
    _factor("household", "members", "persons per household"),
    _factor("household", "productivity", "index"),
    _factor("household", "households", "households"),
    Key(section="household", name="hazard", low=_ZERO, high=Fraction(100), unit="1/year"),
    _word("household", "scale", SCALES, None),
    _word("amounts", "basis", BASES, "per person"),
    _word("amounts", "timing", TIMINGS, None),
    _word("amounts", "quoted", ("per period", "per year"), "per period"),
    _word("amounts", "path", PATHS, None),
    _factor("amounts", "unit", "money per 1 in the table"),
    _word("amounts", "prices", PRICES, "real"),
    _word("amounts", "day_count", DAY_COUNTS, None),
    _word("horizon", "kind", ("finite", "perpetual"), "finite"),
    _amount("horizon", "terminal_wealth", _ZERO),
    _word("horizon", "tail", ("balanced growth", "growing", "converging"), "balanced growth"),
    _rate("horizon", "income_growth", _ZERO),
    _rate("horizon", "consumption_growth", _ZERO),
    _amount("horizon", "income", None, unit=_LONG_RUN),
    _amount("horizon", "consumption", None, unit=_LONG_RUN),
    Key(section="horizon", name="speed", low=_ZERO, high=Fraction(1000), above=True, unit="1/year"),
    _rate("horizon", "interest", None),
    _rate("preferences", "rho", None),
    Key(section="preferences", name="theta", low=_ZERO, high=_LARGEST, above=True),
    Key(section="limits", name="borrowing", low=_ZERO, high=_LARGEST, unit="money"),
    Key(section="limits", name="tolerance", low=_ZERO, high=Fraction(1, 10), above=True, default=Fraction(1, 10**6)),
)

BY_PATH = {key.path: key for key in KEYS}
SECTIONS = (*dict.fromkeys(key.section for key in KEYS), "columns", "lump_sum")

COLUMN_KEYS = {name: BY_PATH[f"amounts.{name}"] for name in ("timing", "quoted", "basis", "unit", "prices")}
"""What an entry of [columns] may say beside its role, as [amounts] says it of all columns."""

LUMP_SUM_DATES = ("t", "year", "date")
"""The keys of which a [[lump_sum]] has exactly one."""

LUMP_SUM_KEYS = {
    key.name: key
    for key in (
        Key(section="lump_sum", name="t", low=_ZERO, high=_LARGEST, unit="years"),
        Key(section="lump_sum", name="year", low=-_LARGEST, high=_LARGEST, unit="calendar year"),
        Key(section="lump_sum", name="date", form="date"),
        _word("lump_sum", "role", FLOW_ROLES, None),
        _amount("lump_sum", "amount", None),
        Key(section="lump_sum", name="label", form="label"),
        _word("lump_sum", "basis", WEALTH_BASES, None),
    )
}

OPTIONS = {
    "r": "market.r",
    "g": "growth.g",
    "n": "growth.n",
    "wealth": "household.wealth",
    "tolerance": "limits.tolerance",
}
"""Command-line options and the keys they override."""

_NO_NUMBER = Misread("assumption", "is not a number;", "write a plain number, without quotes.")
_NO_DATE = Misread("assumption", "is not a date;", "write year, month and day, such as 2031-04-01.")


def read_value(key: Key, value: object, *, from_text: bool = False) -> str | Fraction | Misread:
    """The word, date (YYYY-MM-DD), label or exact figure that a TOML value or Python object states, or why the key does not
    take it. from_text: a figure may be a text, which in a file is a wrong type."""
    if key.choices:
        if isinstance(value, str) and value in key.choices:
            return value
        hint = nearest(value, key.choices, "word") if isinstance(value, str) else f"Write {listed(key.choices)}."
        return Misread("assumption", "is not one of the words this key takes;", hint)
    if key.form == "date":
        return _date(value)
    if key.form == "label":
        if isinstance(value, str) and value.strip() and len(value) <= LONGEST_LABEL:
            return value
        return Misread("assumption", "is no label;", f"write a text in quotes, of 1 to {LONGEST_LABEL} characters.")
    figure = _NO_NUMBER if isinstance(value, str) and not from_text else _exact(value)
    return figure if isinstance(figure, Misread) else _in_range(key, figure)


def _in_range(key: Key, figure: Fraction) -> Fraction | Misread:
    low, high = key.low, key.high
    below = low is not None and (figure <= low if key.above else figure < low)
    if not below and (high is None or figure <= high):
        return figure
    least = "more than" if key.above else "at least"
    allowed = f"a figure of {least} {float(low or 0):g} and at most {float(high or LARGEST):g}"
    percent = " A rate is a fraction: 0.05 for 5 %." if key.unit == "1/year" else ""
    return Misread("assumption", f"is out of range; this key takes {allowed}.{percent}", "")


def _date(value: object) -> str | Misread:
    if isinstance(value, datetime.datetime):
        return Misread("assumption", "is a date with a time of day;", "write the date alone, such as 2031-04-01.")
    if isinstance(value, datetime.date):
        return value.isoformat()
    # the parser of dates also reads 20310401 and 2031-W14-2
    if not isinstance(value, str) or re.fullmatch(r"[0-9]{4}-[0-9]{2}-[0-9]{2}", value) is None:
        return _NO_DATE
    try:
        return datetime.date.fromisoformat(value).isoformat()
    except ValueError:
        return Misread("assumption", "is a day that no calendar has;", "write year, month and day, such as 2031-04-01.")


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
        beyond = abs(figure) > _LARGEST or (figure != 0 and abs(figure) < _SMALLEST)
        # the same words as for a printed figure beyond the range on that side
        example = Decimal("1e16") if abs(figure) > 1 else Decimal("1e-101")
        return (out_of_range(example) or _NO_NUMBER) if beyond else figure
    if isinstance(value, Real):
        # the decimal figure that Python prints is what was meant: 0.05 is five hundredths
        decimal = Decimal(repr(float(value)))
        return out_of_range(decimal) or Fraction(decimal)
    return _NO_NUMBER


def listed(words: tuple[str, ...]) -> str:
    """The words in double quotes, as alternatives."""
    return " or ".join(f'"{word}"' for word in words)


def nearest(word: str, words: tuple[str, ...], kind: str) -> str:
    """The hint after a word that is none of these."""
    near = difflib.get_close_matches(word, words, n=1, cutoff=0.5)
    if near:
        return f"the nearest {kind} is {quoted(near[0])}."
    return f"the {kind}s are {', '.join(words)}."
