"""Columns of amounts as streams in money of their own basis, by timing, and single amounts at their dates.

A figure is a rate at its date (continuous), a total spread over its row's period, or a lump sum at the start, in the middle or
at the end of that period. The mesh is cut where money changes hands inside a row's interval.
"""

from __future__ import annotations

from bisect import bisect_left
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from .conventions import Conventions
from .drifts import Drifts, drifts_of
from .exponents import Cut, Mesh
from .paths import Coefficients, Geometric, Path, Smooth, path_named
from .quadrature import UNIT, Floats
from .rows import RATES, Rows
from .streams import Lumps, Streams, Tail

TOTALS = ("continuous", "spread")
"""Timings under which money flows all the time."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Flows:
    """Streams in money of their own basis on a mesh, single amounts last, with the drifts on the same mesh. per_cell: from a
    cell to a yearly rate or a lump sum, (k, n) or 1."""

    mesh: Mesh
    streams: Streams
    drifts: Drifts
    per_cell: Floats | float


def flows_of(rows: Rows, conventions: Conventions, path: Path) -> Flows:
    """The rows' amounts along the path, and the drifts of the plan."""
    made = _Made(rows, conventions, path)
    mesh = _row_mesh(rows, path.lengths)
    streams, paths = made.interpolated()
    places = _Places(rows, conventions, mesh, streams, drifts_of(rows, conventions, path.lengths, paths))
    places.cut()
    lumps = made.lumps(places)
    streams = replace(places.streams, lumps=lumps, tail=made.tail())
    return Flows(mesh=places.mesh, streams=streams, drifts=places.drifts, per_cell=made.per_cell)


def _row_mesh(rows: Rows, lengths: Floats) -> Mesh:
    breaks = rows.timeline.times
    if len(lengths) == len(breaks):
        breaks = np.append(breaks, breaks[-1] + lengths[-1])
    return Mesh(breaks=breaks, lengths=lengths, interval=np.arange(len(lengths)))


class _Made:
    """Figures made into flows."""

    def __init__(self, rows: Rows, conventions: Conventions, path: Path) -> None:
        self.rows = rows
        self.path = path
        self.conventions = conventions
        self.singles = len(conventions.lump_sums)
        values = np.stack([amounts.values for amounts in rows.amounts])
        self.error = rows.reading_error
        units = [float(amounts.reading.unit) for amounts in rows.amounts]
        if any(unit != 1.0 for unit in units):
            values = values * np.array(units)[:, None]
            self.error += 2.0 * UNIT
        self.levels = values[:, -1]
        self.per_cell = self._per_cell()
        self.values, self.cell_error = values, self.error
        if not isinstance(self.per_cell, float):
            self.values, self.cell_error = values * self.per_cell, self.error + 3.0 * UNIT

    def _per_cell(self) -> Floats | float:
        """A total is spread over its period; a yearly figure paid as a lump sum covers the period."""
        if not self.conventions.periods:
            return 1.0
        factors = []
        for amounts in self.rows.amounts:
            spread, per_year = amounts.reading.timing == "spread", amounts.reading.quoted == "per year"
            factors.append(0 if spread == per_year else -1 if spread else 1)
        if not any(factors):
            return 1.0
        powers = {0: np.ones_like(self.path.lengths), -1: 1.0 / self.path.lengths, 1: self.path.lengths}
        if len(set(factors)) == 1:
            return powers[factors[0]][None]
        return np.stack([powers[factor] for factor in factors])

    def interpolated(self) -> tuple[Streams, dict[str, Coefficients]]:
        """Streams without lump sums, and the columns of rates along the path, in one go where both follow the same; where
        amounts are geometric, rates are linear, since they may be zero or negative."""
        names = [name for name in RATES if name in self.rows.measures]
        rates = [self.rows.measures[name] for name in names]
        count = len(self.values)
        if not names or isinstance(self.path, Geometric):
            found = self.path.coefficients(self.values, self.cell_error)
            paths = {}
            if names:
                linear = path_named("linear", self.path.lengths)
                errors = np.array([[rate.error] for rate in rates])
                followed = linear.coefficients(np.stack([rate.values for rate in rates]), errors)
                paths = {name: _column(followed, k) for k, name in enumerate(names)}
            return self._streams(found), paths
        both = np.concatenate([self.values, *(rate.values[None] for rate in rates)])
        if isinstance(self.path, Smooth) and not self.rows.proved:
            found = self.path.coefficients(both, None)
        else:
            errors = np.array([[self.cell_error]] * count + [[rate.error] for rate in rates])
            found = self.path.coefficients(both, errors)
        found = replace(found, p_error=np.broadcast_to(found.p_error, found.p.shape[:2]))
        amounts = replace(found, p=found.p[:count], p_error=found.p_error[:count])
        return self._streams(amounts), {name: _column(found, count + k) for k, name in enumerate(names)}

    def _streams(self, found: Coefficients) -> Streams:
        """Along the path what flows all the time; nothing yet of what is paid at a date, nor of single amounts."""
        paid = [amounts.reading.timing not in TOTALS for amounts in self.rows.amounts]
        p, q, p_error, q_error = found.p, found.q, found.p_error, found.q_error
        if any(paid):
            p, p_error = p.copy(), np.broadcast_to(p_error, p.shape[:2]).copy()
            p[paid], p_error[paid] = 0.0, 0.0
        if self.singles:
            p = np.concatenate([p, np.zeros((self.singles, *p.shape[1:]))])
            p_error = np.concatenate(
                [np.broadcast_to(p_error, (len(self.values), p.shape[1])), np.zeros((self.singles, p.shape[1]))]
            )
            if len(q) > 1:
                q = np.concatenate([q, np.zeros((self.singles, *q.shape[1:]))])
                q_error = np.concatenate([q_error, np.zeros((self.singles, q.shape[1]))])
        return Streams(p=p, q=q, p_error=p_error, q_error=q_error)

    def tail(self) -> Tail | None:
        """The last values go on in continuous data, the last period in totals; single amounts do not come again."""
        if not self.conventions.perpetual:
            return None
        levels = np.concatenate([self.levels, np.zeros(self.singles)])
        flows = np.array([amounts.last != 0 for amounts in self.rows.amounts] + [False] * self.singles)
        none = np.zeros(1)
        period = float(self.path.lengths[-1]) if self.conventions.periods else None
        return Tail(
            levels=levels, errors=np.abs(levels) * self.error, flows=flows, exponent=none, exponent_error=none, period=period
        )

    def lumps(self, places: _Places) -> Lumps | None:
        """Amounts at the start, the end or the middle of each row's period, and single amounts at their dates."""
        paid = [k for k, amounts in enumerate(self.rows.amounts) if amounts.reading.timing not in TOTALS]
        if not paid and not self.singles:
            return None
        streams, breaks = len(self.values) + self.singles, len(places.mesh.breaks)
        placed, errors = np.zeros((streams, breaks)), np.zeros((streams, breaks))
        after = np.zeros((streams, 1), dtype=bool)
        at = np.zeros((streams, self.values.shape[1]), dtype=np.intp)
        for k in paid:
            timing = self.rows.amounts[k].reading.timing
            at[k] = places.of_rows(timing)
            placed[k, at[k]] = self.values[k]
            errors[k, at[k]] = np.abs(self.values[k]) * self.cell_error
            after[k] = timing != "in arrears"
        for k, (lump, place) in enumerate(zip(self.conventions.lump_sums, places.of_singles(), strict=True), len(self.values)):
            at[k], placed[k, place], after[k] = place, float(lump.amount), place < breaks - 1
            errors[k, place] = UNIT * abs(placed[k, place])
        nothing = np.zeros((1, breaks))
        return Lumps(
            amounts=placed, errors=errors, exponent=nothing, exponent_error=nothing, after=after, at=at, last=at[:, -1]
        )


def _column(found: Coefficients, k: int) -> Coefficients:
    return replace(found, p=found.p[k : k + 1], p_error=np.broadcast_to(found.p_error, found.p.shape[:2])[k : k + 1])


class _Places:
    """Where money changes hands: breakpoints of the mesh, cut into the rows' intervals where they are not there yet."""

    def __init__(self, rows: Rows, conventions: Conventions, mesh: Mesh, streams: Streams, drifts: Drifts) -> None:
        self.timeline = rows.timeline
        self.mesh, self.streams, self.drifts = mesh, streams, drifts
        self.middles = any(amounts.reading.timing == "at mid-period" for amounts in rows.amounts)
        self.singles = [self.timeline.position(t=s.t, year=s.year, date=s.date) for s in conventions.lump_sums]
        # exact dates of the breakpoints in each row's interval that is cut, by the row
        self.known: dict[int, list[Fraction]] = {}

    def cut(self) -> None:
        """Cut at the middles of periods and at the dates of single amounts."""
        if self.middles:
            every = np.ones(len(self.mesh.lengths), dtype=bool)
            half = self.mesh.lengths / 2.0
            self._apply(Cut.halves(every), half, half)
        for date in self.singles:
            self._cut_at(date)

    def _apply(self, cut: Cut, left: Floats, right: Floats) -> None:
        self.mesh = self.mesh.cut(cut, left, right)
        self.streams, self.drifts = self.streams.split(cut), self.drifts.split(cut)

    def _interval(self, date: Fraction) -> int:
        """The row whose interval the date lies in; the last one for the very end."""
        last = int(self.mesh.interval[-1])
        guess = min(int(np.searchsorted(self.timeline.times, float(date), side="right")) - 1, last)
        exact = self.timeline.exact
        while guess > 0 and exact(guess) > date:
            guess -= 1
        while guess < last and exact(guess + 1) <= date:
            guess += 1
        return guess

    def _dates(self, row: int) -> list[Fraction]:
        if row not in self.known:
            start = self.timeline.exact(row)
            rows = len(self.timeline.times)
            end = self.timeline.exact(row + 1) if row + 1 < rows else self.timeline.exact_end()
            self.known[row] = [start, (start + end) / 2, end] if self.middles else [start, end]
        return self.known[row]

    def _cut_at(self, date: Fraction) -> None:
        row = self._interval(date)
        dates = self._dates(row)
        if date in dates:
            return
        place = bisect_left(dates, date)
        left, right = date - dates[place - 1], dates[place] - date
        mask = np.zeros(len(self.mesh.lengths), dtype=bool)
        mask[int(self.mesh.row_starts[row]) + place - 1] = True
        share = np.array([float(left / (left + right))])
        self._apply(Cut(mask, share, exact=False), np.array([float(left)]), np.array([float(right)]))
        dates.insert(place, date)

    def of_rows(self, timing: str) -> NDArray[np.intp]:
        """The breakpoint at which each row's sum is paid, (n,)."""
        starts, end = self.mesh.row_starts, len(self.mesh.lengths)
        if timing == "in advance":
            return starts
        if timing == "in arrears":
            return np.append(starts[1:], end)
        middles = starts + 1
        for row, dates in self.known.items():
            middles[row] = starts[row] + dates.index((dates[0] + dates[-1]) / 2)
        return middles

    def of_singles(self) -> list[int]:
        """The breakpoint of each single amount."""
        starts = self.mesh.row_starts
        return [int(starts[row := self._interval(date)]) + self._dates(row).index(date) for date in self.singles]
