"""The rates of a plan as drifts: interest, growth of productivity and of people, inflation, survival, equivalent adults.

Columns of rates follow the plan's path ("geometric" becomes "linear" for them) or hold over their row's period. Levels A and L
are linear in logarithms between the rows of continuous data, and steps in period data, where amounts per unit of human capital
then jump by dilution at a row's boundary. A curve of zero rates z gives R(t) = z(t)·t; in period data R is linear between
row times and the last forward rate goes on, in continuous data z follows the path and beyond the last row r = z(T).
With fair annuities income and consumption are discounted at r + hazard (M. Yaari 1965, Uncertain lifetime, life insurance, and
the theory of the consumer, Review of Economic Studies 32).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from fractions import Fraction
from functools import cached_property

import numpy as np

from .conventions import Conventions
from .exponents import NO_DRIFT, Cut, Drift, Exponent
from .paths import Coefficients
from .quadrature import EXP_ERROR, UNIT, Floats, summed
from .rates import ZERO, Rate
from .rows import Measure, Rows

LOG_ERROR = EXP_ERROR
"""Relative error assumed of numpy.log: several times what its kernels show."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Drifts:
    """interest: r; hazard; productivity: g; people: n; equivalents: growth of equivalent adults; inflation: what nominal
    amounts lose. In real terms wherever inflation is known, at current prices throughout where it is neither known nor
    needed."""

    interest: Drift
    hazard: Drift
    productivity: Drift
    people: Drift
    equivalents: Drift
    inflation: Drift

    @cached_property
    def growth(self) -> Drift:
        """g + n: growth of human capital per household."""
        return self.productivity + self.people

    @cached_property
    def discounting(self) -> Drift:
        """r + hazard: the rate at which household money is discounted."""
        return self.interest + self.hazard

    @cached_property
    def net(self) -> Drift:
        """r + hazard − g − n: the rate at which amounts per unit of human capital are discounted."""
        return self.discounting - self.growth

    def of_basis(self, basis: str, *, nominal: bool) -> Drift:
        """The rate at which one unit of money in that basis and those prices grows in household money at prices of t = 0."""
        drift = {
            "per person": self.people,
            "per effective unit": self.growth,
            "per equivalent adult": self.equivalents,
        }.get(basis, NO_DRIFT)
        return drift - self.inflation if nominal else drift

    def split(self, cut: Cut) -> Drifts:
        """The same drifts on the finer mesh; a column that enters several of them stays one and the same."""
        known: dict[int, Exponent] = {}

        def finer(exponent: Exponent) -> Exponent:
            if id(exponent) not in known:
                known[id(exponent)] = exponent.split(cut)
            return known[id(exponent)]

        return self.mapped(finer)

    def mapped(self, change: Callable[[Exponent], Exponent]) -> Drifts:
        """The drifts with every measured part changed."""

        def changed(drift: Drift) -> Drift:
            parts = tuple((sign, change(exponent)) for sign, exponent in drift.parts)
            return Drift(constant=drift.constant, parts=parts) if parts else drift

        return Drifts(**{field.name: changed(getattr(self, field.name)) for field in fields(self)})


def drifts_of(rows: Rows, conventions: Conventions, lengths: Floats, paths: Mapping[str, Coefficients]) -> Drifts:
    """The drifts of a plan on the mesh of its rows, intervals of those lengths, (m,); paths: each column of rates between the
    rows, by its name."""
    c = conventions
    made = _Made(rows, c, lengths, paths)
    interest = made.interest()
    inflation = made.rate("inflation", c.inflation or ZERO)
    if c.market_nominal:
        interest = interest - inflation
    return Drifts(
        interest=interest,
        hazard=made.level("survival", sign=-1) or made.rate("hazard", c.hazard),
        productivity=made.level("productivity") or made.rate("g", c.g),
        people=made.level("members") or made.rate("n", c.n),
        equivalents=made.level("equivalents") or NO_DRIFT,
        inflation=inflation,
    )


@dataclass(frozen=True, eq=False)
class _Made:
    """Columns made into drifts."""

    rows: Rows
    conventions: Conventions
    lengths: Floats
    paths: Mapping[str, Coefficients]

    def rate(self, name: str, declared: Rate) -> Drift:
        """A column of rates, or the declared rate where there is none."""
        if name not in self.paths:
            return Drift(constant=declared)
        found, measure = self.paths[name], self.rows.measures[name]
        beyond = _read_off(float(measure.values[-1]), measure.error, measure.last)
        return _only(Exponent.of(found.p[0], found.p_error[0], self.lengths, beyond))

    def interest(self) -> Drift:
        """r: declared, or a column of forward or of zero rates."""
        if "r" not in self.paths or self.conventions.curve == "forward":
            return self.rate("r", self.conventions.interest or ZERO)
        measure = self.rows.measures["r"]
        return _only(self._zero_by_period(measure) if self.conventions.periods else self._zero_path(measure))

    def _zero_by_period(self, measure: Measure) -> Exponent:
        """R is linear between z_i·t_i; the last forward rate goes on."""
        times = self.rows.timeline.times
        at = measure.values * times
        at_error = (measure.error + 2.0 * UNIT) * np.abs(at)
        last, gap = len(times) - 1, float(self.rows.timeline.lengths[-1])
        forward = float(at[last] - at[last - 1]) / gap
        error = (float(at_error[last] + at_error[last - 1]) + UNIT * float(np.abs(at[last - 1 :]).sum())) / gap
        error += 4.0 * UNIT * abs(forward)
        end = at[last] + forward * self.lengths[-1]
        end_error = at_error[last] + error * self.lengths[-1] + 3.0 * UNIT * (abs(end) + abs(at[last]))
        beyond = Rate.along_path(forward, error)
        return Exponent.linear(np.append(at, end), np.append(at_error, end_error), beyond)

    def _zero_path(self, measure: Measure) -> Exponent:
        """R = z(t)·t, z along the path: one degree more than z."""
        found, times, lengths = self.paths["r"], self.rows.timeline.times, self.lengths
        z, half = found.p[0], lengths / 2.0
        middle = (times[:-1] + times[1:]) / 2.0
        coefficients = np.zeros((len(lengths), z.shape[1] + 1))
        coefficients[:, :-1] = middle[:, None] * z
        coefficients[:, 1:] += half[:, None] * z
        size = summed(np.abs(z)) * times[1:]
        at = measure.values * times
        return Exponent(
            coefficients=coefficients,
            error=found.p_error[0] * times[1:] + 6.0 * UNIT * size,
            before=at,
            after=at,
            at_error=(measure.error + 2.0 * UNIT) * np.abs(at),
            beyond=_read_off(float(measure.values[-1]), measure.error, measure.last),
        )

    def level(self, name: str, sign: int = 1) -> Drift | None:
        """sign·ln(level / first level) of a column, or None where there is none."""
        measure = self.rows.measures.get(name)
        if measure is None:
            return None
        if measure.first == measure.last and bool((measure.values == measure.values[0]).all()):
            return NO_DRIFT
        logs = sign * _log_ratio(measure.values, measure.values[:1])
        error = 4.0 * measure.error + LOG_ERROR * np.abs(logs) + 4.0 * UNIT
        # a force of mortality acts all the time, heads and productivity of period data change with the row
        gap = float(self.rows.timeline.lengths[-1])
        growth = sign * float(_log_ratio(measure.values[-1:], measure.values[-2:-1])[0]) / gap
        rounding = (4.0 * measure.error + 4.0 * UNIT) / gap + 2.0 * LOG_ERROR * abs(growth)
        beyond = ZERO if measure.values[-1] == measure.values[-2] else Rate.along_path(growth, rounding)
        if not self.conventions.periods:
            return _only(Exponent.linear(logs, error, beyond))
        if name != "survival":
            return _only(Exponent.stepwise(logs, error, beyond))
        end = logs[-1] + growth * self.lengths[-1]
        end_error = error[-1] + rounding * self.lengths[-1] + 2.0 * UNIT * abs(end)
        return _only(Exponent.linear(np.append(logs, end), np.append(error, end_error), beyond))


def _log_ratio(values: Floats, base: Floats) -> Floats:
    """ln(values/base), accurate where they are nearly equal."""
    relative = (values - base) / base
    near = np.abs(relative) < 0.5
    return np.where(near, np.log1p(np.where(near, relative, 0.0)), np.log(values / base))


def _only(exponent: Exponent) -> Drift:
    return Drift(parts=((1, exponent),))


def _read_off(value: float, error: float, printed: Fraction) -> Rate:
    """The last figure of a column of rates, which is exactly zero where that is printed."""
    return ZERO if printed == 0 else Rate.along_path(value, abs(value) * error)
