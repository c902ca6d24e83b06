"""Time columns: how dates are read, how years between them are counted, how long the last period is."""

from __future__ import annotations

from datetime import date, timedelta
from fractions import Fraction

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from budgetcheck import InputRefused, assess
from budgetcheck.timeline import DAY_COUNTS, disorder, following, from_figures, from_marks, read_marks, year_fraction

DAYS_30_360 = (
    ("2006-08-20", "2007-02-20", "180"),
    ("2006-08-31", "2007-02-28", "178"),
    ("2007-02-28", "2007-08-31", "183"),
    ("2007-08-31", "2008-02-29", "179"),
    ("2008-02-29", "2008-08-31", "182"),
    ("2006-01-31", "2006-02-28", "28"),
    ("2006-01-30", "2006-02-28", "28"),
    ("2006-02-28", "2006-03-03", "5"),
    ("2006-02-14", "2006-02-28", "14"),
    ("2006-09-30", "2006-10-31", "30"),
    ("2006-10-31", "2006-11-28", "28"),
    ("2007-08-31", "2008-02-28", "178"),
    ("2008-02-28", "2008-08-31", "183"),
    ("2007-02-26", "2008-02-29", "363"),
    ("2008-02-29", "2009-02-28", "359"),
    ("2008-02-28", "2008-03-31", "33"),
)
"""Days under 30/360 (bond basis): ISDA's example sheet for 30/360 day counts (2008)."""

DAYS_30E_360 = (
    ("2006-08-20", "2007-02-20", "180"),
    ("2006-08-31", "2007-02-28", "178"),
    ("2007-02-28", "2007-08-31", "182"),
    ("2007-08-31", "2008-02-29", "179"),
    ("2008-02-29", "2008-08-31", "181"),
    ("2006-01-31", "2006-02-28", "28"),
    ("2006-01-30", "2006-02-28", "28"),
    ("2006-02-28", "2006-03-03", "5"),
    ("2006-02-14", "2006-02-28", "14"),
    ("2006-09-30", "2006-10-31", "30"),
    ("2006-10-31", "2006-11-28", "28"),
    ("2007-08-31", "2008-02-28", "178"),
    ("2008-02-28", "2008-08-31", "182"),
    ("2007-02-26", "2008-02-29", "363"),
    ("2008-02-29", "2009-02-28", "359"),
    ("2008-02-28", "2008-03-31", "32"),
)
"""Days under 30E/360: the same sheet."""

YEARS_ACT_ACT = (
    ("2003-11-01", "2004-05-01", "0.497724380567"),
    ("1999-02-01", "1999-07-01", "0.410958904110"),
    ("1999-07-01", "2000-07-01", "1.0013773486"),
    ("2002-08-15", "2003-07-15", "0.915068493151"),
    ("2003-07-15", "2004-01-15", "0.504004790778"),
    ("1999-07-30", "2000-01-30", "0.503892506924"),
    ("2000-01-30", "2000-06-30", "0.415300546448"),
    ("2003-11-01", "2004-05-01", "0.497724380567407740100306909200"),
    ("1999-07-01", "2000-07-01", "1.00137734860393742046560371285"),
    ("2024-02-29", "2025-02-28", "0.997701923796691369114454674751"),
)
"""Years under ACT/ACT ISDA: worked examples of ISDA's memorandum on actual/actual day counts (1998), and the definition itself
(2006 ISDA Definitions, 4.16 (b)) to 30 digits."""

YEARS_ACT_365 = (
    ("2003-11-01", "2004-05-01", "0.498630136986301369863013698630"),
    ("1999-07-01", "2000-07-01", "1.00273972602739726027397260274"),
    ("2024-02-29", "2025-02-28", "1.00000000000000000000000000000"),
)
"""days/365: 2006 ISDA Definitions, 4.16 (d)."""

DATES = st.dates(date(1900, 1, 1), date(2200, 1, 1))


@pytest.mark.parametrize(
    ("day_count", "first", "last", "days"),
    [("30/360", *row) for row in DAYS_30_360] + [("30E/360", *row) for row in DAYS_30E_360],
)
def test_days_of_months_of_thirty(day_count: str, first: str, last: str, days: str) -> None:
    """Published examples, exactly."""
    assert year_fraction(date.fromisoformat(first), date.fromisoformat(last), day_count) == Fraction(int(days), 360)


@pytest.mark.parametrize(
    ("day_count", "first", "last", "years"),
    [("ACT/ACT ISDA", *row) for row in YEARS_ACT_ACT] + [("ACT/365F", *row) for row in YEARS_ACT_365],
)
def test_actual_days(day_count: str, first: str, last: str, years: str) -> None:
    """Published examples, to their last digit."""
    found = year_fraction(date.fromisoformat(first), date.fromisoformat(last), day_count)
    digits = len(years.partition(".")[2])
    assert abs(found - Fraction(years)) <= Fraction(6, 10 ** (digits + 1))


@given(DATES, DATES, DATES)
def test_counts_of_actual_days_add_up(a: date, b: date, c: date) -> None:
    """Splitting a span changes nothing in it."""
    for day_count in ("ACT/365F", "ACT/ACT ISDA"):
        split = year_fraction(a, b, day_count) + year_fraction(b, c, day_count)
        assert split == year_fraction(a, c, day_count)


@given(st.integers(1900, 2100), st.integers(1, 12), st.integers(1, 28), st.integers(0, 100))
def test_whole_years_are_whole(year: int, month: int, day: int, years: int) -> None:
    """From a day to the same day some years later."""
    first, last = date(year, month, day), date(year + years, month, day)
    for day_count in ("30/360", "30E/360"):
        assert year_fraction(first, last, day_count) == years


@pytest.mark.parametrize(
    ("before", "day", "after"),
    [
        ("2031-01-01", "2031-02-01", "2031-03-01"),
        ("2031-01-31", "2031-02-28", "2031-03-31"),
        ("2031-11-30", "2031-12-31", "2032-01-31"),
        ("2031-01-30", "2031-02-28", "2031-03-30"),
        ("2027-02-28", "2028-02-28", "2029-02-28"),
        ("2030-06-15", "2031-06-15", "2032-06-15"),
        ("2031-01-01", "2031-01-15", "2031-01-29"),
    ],
)
def test_the_last_period_is_as_long_as_the_one_before_by_calendar_unit(before: str, day: str, after: str) -> None:
    """Months for rows that are whole months apart, days otherwise (common practice)."""
    assert following(date.fromisoformat(before), date.fromisoformat(day)) == date.fromisoformat(after)


def test_quarters_and_months_are_exact_fractions_of_a_year() -> None:
    """Whatever days they have."""
    marks, _ = read_marks("quarter", ["2031Q3", "2031Q4", "2032Q1"])
    quarters = from_marks("quarter", [m for m in marks if m is not None], "ACT/ACT ISDA")
    assert (quarters.times == [0, 0.25, 0.5]).all()
    assert quarters.exact_end() == Fraction(3, 4)
    marks, _ = read_marks("month", ["2031-11", "2031-12", "2032-03"])
    months = from_marks("month", [m for m in marks if m is not None], "ACT/ACT ISDA")
    assert [months.exact(i) for i in range(3)] == [0, Fraction(1, 12), Fraction(1, 3)]
    assert months.exact_end() == Fraction(7, 12)
    assert [months.date(t) for t in (0.0, 1 / 12, 0.3)] == ["2031-11", "2031-12", "2032-02"]
    assert quarters.date(0.26) == "2031Q4"


@pytest.mark.parametrize("day_count", DAY_COUNTS)
def test_lengths_are_right_to_one_rounding(day_count: str) -> None:
    """Of exact rational differences, however long ago the first row is."""
    days = [date(1950, 3, 31) + timedelta(days=17 * i + i * i) for i in range(60)]
    timeline = from_marks("date", days, day_count)
    for i in range(59):
        true = year_fraction(days[0], days[i + 1], day_count) - year_fraction(days[0], days[i], day_count)
        assert timeline.lengths[i] == float(true)


@pytest.mark.parametrize(
    ("kind", "cell", "why"),
    [
        ("date", "01/02/2031", "day and month"),
        ("date", "2031-02-30", "no such day"),
        ("date", "2031-1-5", "no date"),
        ("date", "31-01-05", "no date"),
        ("date", "0999-01-05", "no such day"),
        ("date", "44927", "spreadsheet"),
        ("date", "2031-01-05T00:00", "time of day"),
        ("date", "2031-01-05Z", "no date"),
        ("date", "２０３１-01-05", "no date"),
        ("date", "", "empty"),
        ("quarter", "2031Q5", "no quarter"),
        ("quarter", "Q1 2031", "no quarter"),
        ("month", "2031-13", "no month"),
        ("month", "2031-1", "no month"),
    ],
)
def test_what_is_no_date_is_refused_with_its_cell(kind: str, cell: str, why: str) -> None:
    """Only one way of writing each is read; nothing is guessed."""
    good = {"date": "2031-01-01", "quarter": "2031Q1", "month": "2031-01"}[kind]
    frame = pd.DataFrame({kind: [good, cell], "wage": ["1", "1"], "consumption": ["1", "1"]})
    with pytest.raises(InputRefused, match=why) as caught:
        assess(frame, {"market": {"r": 0.03}})
    assert [(f.row, f.column) for f in caught.value.findings if f.severity == "stop"] == [(3, kind)]


def test_rows_between_which_no_time_passes_are_refused() -> None:
    """The 30th and the 31st are one day under 30E/360, and two under the others."""
    days = [date(2031, 1, 30), date(2031, 1, 31), date(2031, 2, 28)]
    assert disorder("date", days, "30E/360") == [1]
    assert disorder("date", days, "ACT/365F") == []
    frame = pd.DataFrame({"date": [str(day) for day in days], "wage": "1", "consumption": "1"})
    with pytest.raises(InputRefused, match="by 30E/360, the same time as line 2"):
        assess(frame, {"market": {"r": 0.03}, "amounts": {"day_count": "30E/360"}})


def test_the_calendar_dates_of_a_data_frame_are_read() -> None:
    """Timestamps at midnight, and periods, say what their text would say."""
    plan = {"wage": [3.0, 3.0], "consumption": [1.0, 1.0]}
    tree = {"market": {"r": 0.03}, "horizon": {"kind": "finite", "terminal_wealth": 0}}
    stamps = assess(pd.DataFrame({"date": pd.to_datetime(["2031-01-01", "2031-04-01"]), **plan}), tree)
    texts = assess(pd.DataFrame({"date": ["2031-01-01", "2031-04-01"], **plan}), tree)
    assert stamps.slack == texts.slack
    periods = assess(pd.DataFrame({"quarter": pd.period_range("2031Q1", periods=2, freq="Q"), **plan}), tree)
    assert periods.span.end == "ends at 2031Q3"


def test_dates_of_single_amounts() -> None:
    """In a table of years a day is its share of the year, in one of months its share of the month."""
    years = from_figures("year", ["2031", "2032"], np.array([2031.0, 2032.0]))
    assert years.position(date="2032-07-01") == 1 + Fraction(182, 366)
    assert years.position(year=Fraction(2031)) == 0
    months = from_marks("month", [2031 * 12, 2031 * 12 + 1], "ACT/ACT ISDA")
    assert months.position(date="2031-02-15") == Fraction(1, 12) + Fraction(14, 28) / 12
    days = from_marks("date", [date(2031, 1, 1), date(2031, 2, 1)], "ACT/365F")
    assert days.position(date="2031-01-11") == Fraction(10, 365)
    for kind in ("t", "age"):
        with pytest.raises(ValueError, match="no calendar"):
            from_figures(kind, ["20", "21"], np.array([20.0, 21.0])).position(year=Fraction(2031))
