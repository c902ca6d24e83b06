"""Time: the rows' dates as years since the start, and the period that each row speaks of.

Figures (`t`, `year`, `age`) count years themselves; a `quarter` and a `month` are exact fractions of a year; the years between
two dates are counted by a day count convention. All of them are rational numbers, rounded once.
"""

from __future__ import annotations

import calendar
import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import date
from decimal import Context, Decimal
from fractions import Fraction
from itertools import pairwise

import numpy as np

from .numerals import Misread
from .quadrature import Floats

KINDS = ("t", "year", "date", "quarter", "month", "age")
"""Time columns that are read."""

FIGURES = ("t", "year", "age")
"""Those whose cells are plain figures."""

DAY_COUNTS = ("ACT/365F", "ACT/ACT ISDA", "30/360", "30E/360")
DEFAULT_DAY_COUNT = "ACT/ACT ISDA"

Mark = date | int
"""Where a row stands in the calendar: a date, or the quarters or months since the year 0."""

_PER_YEAR = {"quarter": 4, "month": 12}
_DAYS_A_YEAR = 365.25
_DIGITS = Context(prec=50)

_WRITTEN = {"date": "2031-04-15", "quarter": "2031Q2", "month": "2031-04"}
_DATE = re.compile(r"([0-9]{4})-([0-9]{2})-([0-9]{2})")
_QUARTER = re.compile(r"([0-9]{4})Q([1-4])")
_MONTH = re.compile(r"([0-9]{4})-(0[1-9]|1[0-2])")


def year_fraction(first: date, last: date, day_count: str) -> Fraction:
    """Years from one date to another, exactly.

    ACT/365F: days/365. ACT/ACT ISDA: days in leap years/366 + days in other years/365. 30/360 (bond basis) and 30E/360:
    (360(Y2 − Y1) + 30(M2 − M1) + D2 − D1)/360, where a first day of 31 counts as 30, and a last day of 31 as 30 too: under
    30E/360 always, under 30/360 only after a first day of 30 or 31.
    Source: 2006 ISDA Definitions, section 4.16 (d), (b), (f), (g).
    """
    if day_count == "ACT/365F":
        return Fraction((last - first).days, 365)
    if day_count == "ACT/ACT ISDA":
        return _calendar_years(last) - _calendar_years(first)
    start, end = min(first.day, 30), last.day
    if day_count == "30E/360" or start == 30:
        end = min(end, 30)
    return Fraction(360 * (last.year - first.year) + 30 * (last.month - first.month) + end - start, 360)


def _calendar_years(day: date) -> Fraction:
    """The date as a calendar year and the part of it that has gone by."""
    return day.year + Fraction(day.timetuple().tm_yday - 1, 366 if calendar.isleap(day.year) else 365)


@dataclass(frozen=True, eq=False)
class Timeline:
    """kind: one of KINDS; start: the first row's figure, 0 for calendar dates; times (n,): years since the first row; lengths
    (n − 1,): years between neighbouring rows, each right to one rounding; last_length: years of the last row's period, which is
    as long as the one before it, by calendar unit; marks (n,): where the rows stand, from which everything exact is worked
    out."""

    kind: str
    start: float
    times: Floats
    lengths: Floats
    last_length: float
    marks: Sequence[Mark] | Sequence[str] | Floats = field(repr=False)
    day_count: str = DEFAULT_DAY_COUNT

    def period_lengths(self) -> Floats:
        """The lengths of the n periods that period data speak of: to the next row, and the last one."""
        return np.append(self.lengths, self.last_length)

    def thinned(self) -> Timeline:
        """Every second row, the first and the last kept."""
        kept = every_second(len(self.times))
        return Timeline(
            kind=self.kind,
            start=self.start,
            times=self.times[kept],
            lengths=np.add.reduceat(self.lengths, kept[:-1]),
            last_length=self.last_length,
            marks=[self.marks[i] for i in kept],
            day_count=self.day_count,
        )

    def exact(self, index: int) -> Fraction:
        """Years since the start of one row."""
        return between(self.kind, self.marks[0], self.marks[index], self.day_count)

    def exact_end(self) -> Fraction:
        """Years since the start of the end of the last row's period."""
        last = len(self.times) - 1
        if self.kind == "date":
            before, day = self.marks[last - 1], self.marks[last]
            assert isinstance(before, date), "dates have dates for marks"
            assert isinstance(day, date), "dates have dates for marks"
            return between(self.kind, self.marks[0], following(before, day), self.day_count)
        return 2 * self.exact(last) - self.exact(last - 1)

    def date(self, t: float) -> str:
        """How a practitioner would name the time t: "t = 12.5", the calendar year, quarter, month or day it lies in, an age."""
        if self.kind == "year":
            return f"{self.start + t:.2f}".rstrip("0").rstrip(".")
        if self.kind in ("t", "age"):
            return f"t = {t:.6g}" if self.kind == "t" else f"age {self.start + t:.6g}"
        if self.kind == "date":
            days = [mark.toordinal() for mark in self.marks if isinstance(mark, date)]
            ordinal = float(np.interp(t, self.times, days)) + max(t - float(self.times[-1]), 0.0) * _DAYS_A_YEAR
            return date.fromordinal(min(max(round(ordinal), 1), date.max.toordinal())).isoformat()
        per_year, first = _PER_YEAR[self.kind], self.marks[0]
        # a date at the very end of a unit is not pushed into the next by rounding, nor out of it
        unit = int(np.floor(_ordinal(first) + t * per_year + 1e-9))
        year, part = divmod(unit, per_year)
        return f"{year:04d}Q{part + 1}" if self.kind == "quarter" else f"{year:04d}-{part + 1:02d}"

    def position(self, *, t: Fraction | None = None, year: Fraction | None = None, date: str | None = None) -> Fraction:
        """Years since the start of an amount dated in one of three ways. Raises ValueError, with a sentence, where the table's
        time column does not know a calendar, or there is no such date.

        In a table of years a date lies at its day's share of the year, in one of months and quarters at its day's share of the
        month; a year begins on its 1 January.
        """
        if t is not None:
            return t
        if self.kind in ("t", "age"):
            raise ValueError(f"a table with a column '{self.kind}' has no calendar; give `t`, in years since the first row.")
        if date is None:
            assert year is not None, "one of the three is given"
            if self.kind != "date":
                return year - self._start_year
            if year.denominator != 1:
                raise ValueError("a year is a whole number here; give `date` or `t` for other times.")
            date = f"{int(year):04d}-01-01"
        day = _as_date(date)
        if day is None:
            raise ValueError(f"there is no date {date}.")
        if self.kind == "date":
            return between(self.kind, self.marks[0], day, self.day_count)
        if self.kind == "year":
            return _calendar_years(day) - self._start_year
        month = 12 * day.year + day.month - 1 + Fraction(day.day - 1, calendar.monthrange(day.year, day.month)[1])
        return month / 12 - self._start_year

    @property
    def _start_year(self) -> Fraction:
        """The first row as a calendar year."""
        if self.kind == "year":
            return _figure(self.marks[0])
        return Fraction(_ordinal(self.marks[0]), _PER_YEAR[self.kind])


def between(kind: str, first: object, last: object, day_count: str) -> Fraction:
    """Years from one mark to another, exactly."""
    if isinstance(first, date) and isinstance(last, date):
        return year_fraction(first, last, day_count)
    if kind in _PER_YEAR:
        return Fraction(_ordinal(last) - _ordinal(first), _PER_YEAR[kind])
    return _figure(last) - _figure(first)


def _ordinal(mark: object) -> int:
    assert isinstance(mark, int), "quarters and months are counted"
    return mark


def _figure(mark: object) -> Fraction:
    """A printed figure of time, or a number exact as it is."""
    if isinstance(mark, str):
        return Fraction(_DIGITS.create_decimal(_plain(mark)))
    assert isinstance(mark, (int, float)), "times are figures"
    return Fraction(mark)


def _plain(figure: str) -> Decimal:
    return Decimal(figure.strip(" \t").replace("\u2212", "-"))


def following(before: date, day: date) -> date:
    """The end of the period that begins on a day, as long as that from the day before it by calendar unit: whole months where
    the two are so many months apart (the same day, both ends of month, or a day cut by a shorter month), otherwise so many
    days."""
    months = 12 * (day.year - before.year) + day.month - before.month
    ends = _is_month_end(before), _is_month_end(day)
    whole = before.day == day.day or all(ends) or (ends[1] and before.day > day.day)
    try:
        if not (whole and months > 0):
            return day + (day - before)
        year, month = divmod(12 * day.year + day.month - 1 + months, 12)
        last = calendar.monthrange(year, month + 1)[1]
        return date(year, month + 1, last if all(ends) else min(max(before.day, day.day), last))
    except (OverflowError, ValueError):
        return date.max


def _is_month_end(day: date) -> bool:
    return day.day == calendar.monthrange(day.year, day.month)[1]


def every_second(rows: int) -> np.ndarray[tuple[int, ...], np.dtype[np.intp]]:
    """Indices 0, 2, 4, … and the last one."""
    kept = np.arange(0, rows, 2)
    return kept if kept[-1] == rows - 1 else np.append(kept, rows - 1)


def from_figures(kind: str, figures: Sequence[str] | None, values: Floats) -> Timeline:
    """The timeline of a column of figures: printed ones (differences are taken in decimals), or numbers exact as they are.

    values (n,), n ≥ 2, are the figures as floating-point numbers, in increasing order.
    """
    start = float(values[0])
    if figures is None:
        gaps = np.diff(values)
        return Timeline(kind, start, values - values[0], gaps, float(gaps[-1]), values)
    exact = [_plain(figure) for figure in figures]
    subtract = _DIGITS.subtract
    times = np.array([float(subtract(later, exact[0])) for later in exact])
    gaps = np.array([float(subtract(later, earlier)) for earlier, later in pairwise(exact)])
    return Timeline(kind, start, times, gaps, float(gaps[-1]), figures)


def from_marks(kind: str, marks: Sequence[Mark], day_count: str) -> Timeline:
    """The timeline of dates, quarters or months, n ≥ 2, in increasing order."""
    exact = [between(kind, marks[0], mark, day_count) for mark in marks]
    times = np.array([float(years) for years in exact])
    gaps = np.array([float(later - earlier) for earlier, later in pairwise(exact)])
    timeline = Timeline(kind, 0.0, times, gaps, float(gaps[-1]), marks, day_count)
    last_length = float(timeline.exact_end() - exact[-1])
    return Timeline(kind, 0.0, times, gaps, last_length, marks, day_count)


def disorder(kind: str, marks: Sequence[Mark], day_count: str) -> list[int]:
    """Indices of the rows that are not later than the row before, by the day count too."""
    exact = [between(kind, marks[0], mark, day_count) for mark in marks]
    return [i for i in range(1, len(marks)) if exact[i] <= exact[i - 1]]


def read_marks(kind: str, cells: Sequence[str]) -> tuple[list[Mark | None], list[tuple[int, Misread]]]:
    """Cells of dates, quarters or months; None where a cell is none, with its index and the reason."""
    marks: list[Mark | None] = []
    misread: list[tuple[int, Misread]] = []
    for index, cell in enumerate(cells):
        text = cell.strip(" \t")
        mark = _as_date(text) if kind == "date" else _as_unit(kind, text)
        marks.append(mark)
        if mark is None:
            misread.append((index, _explained(kind, text)))
    return marks, misread


def _as_date(text: str) -> date | None:
    """An ISO date of the years 1000 to 9999, or None."""
    found = _DATE.fullmatch(text)
    try:
        return date(*map(int, found.groups())) if found and found[1] >= "1000" else None
    except ValueError:
        return None


def _as_unit(kind: str, text: str) -> int | None:
    found = (_QUARTER if kind == "quarter" else _MONTH).fullmatch(text)
    if found is None or found[1] < "1000":
        return None
    return int(found[1]) * _PER_YEAR[kind] + int(found[2]) - 1


def _explained(kind: str, text: str) -> Misread:
    """Why a text is no date, quarter or month."""
    hint = f"write it as {_WRITTEN[kind]}."
    if not text:
        return Misread("cell-missing", f"the cell is empty; every row has a {kind};", hint)
    if kind == "date" and _DATE.fullmatch(text):
        return Misread("time-cell", "there is no such day;", "write a day of the calendar.")
    if kind == "date" and re.fullmatch(r"[0-9]{1,2}[/.][0-9]{1,2}[/.][0-9]{2,4}", text):
        return Misread("time-cell", "may be day and month or month and day;", hint)
    if kind == "date" and re.match(r"[0-9]{4}-[0-9]{2}-[0-9]{2}[T ]", text):
        return Misread("time-cell", "has a time of day, which a plan does not know;", hint)
    if re.fullmatch(r"[0-9]{5}(\.[0-9]*)?", text):
        return Misread("time-cell", "looks like the day number of a spreadsheet;", f"format the cells as dates and {hint}")
    return Misread("time-cell", f"is no {kind};", hint)
