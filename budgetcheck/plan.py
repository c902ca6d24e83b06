"""A plan: rows under their conventions, as streams in household money on one mesh.

Amounts are interpolated as printed, in the table's own basis, and then restated in household money at prices of t = 0:

    per person         C·L/H          factor L(0)/H        exponent ∫n
    per household      as it stands   factor 1             exponent 0
    economy            over H         factor 1/H           exponent 0
    per effective unit c·A·L/H        factor A(0)L(0)/H    exponent ∫(g + n)

Rate cells become continuous rates first and are interpolated then.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from .bounded import Bounded
from .conventions import Conventions
from .findings import BudgetcheckError
from .ledger import Ledger
from .paths import Coefficients, Geometric, Linear, Path, Step, path_named
from .quadrature import UNIT, Floats, Mask
from .rates import CONVERSIONS, ZERO, Rate
from .streams import Exponent, Lumps, Mesh, RatePath, Streams, Tail
from .timeline import Timeline, every_second

LARGEST_EXPONENT = 690.0
"""Supported range of |Λ| + ln(value·length): e^690 and e^−690 are still normal binary64 numbers with room for the amounts."""


class OutOfRange(BudgetcheckError):
    """The plan leaves the supported range of exponents; the message says by how much."""


@dataclass(frozen=True, eq=False)
class Amounts:
    """One column of amounts: values (n,) as printed, half_units (n,) or None, last: the last figure exactly."""

    name: str
    role: str
    values: Floats
    half_units: Floats | None
    last: Fraction


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of a plan as numbers. rates (n,), continuous, within a relative rate_error, with the derivative of each by its
    printed figure, rate_slopes (n,); reading_error: relative error of every figure against the decimal one."""

    timeline: Timeline
    amounts: tuple[Amounts, ...]
    rates: Floats | None
    rate_error: float
    rate_slopes: Floats | None
    rate_half_units: Floats | None
    reading_error: float

    def thinned(self) -> Rows:
        """Every second row, the first and the last kept."""
        kept = every_second(len(self.timeline.times))
        amounts = tuple(replace(a, values=a.values[kept], half_units=None) for a in self.amounts)
        rates = None if self.rates is None else self.rates[kept]
        return replace(self, timeline=self.timeline.thinned(), amounts=amounts, rates=rates)


@dataclass(frozen=True, eq=False)
class Plan:
    """Streams in household money on one mesh, with the rates that discount and restate them.

    streams : one for each column of amounts, in their order; kernel : what one unit of a figure in the table stands for, by
    power of z, from which row weights are taken (for a geometric path: two streams a column); interest : r; growth : the
    constant g + n; decays : for each column, r − g − n beyond the last row less the growth of its tail; scale : A(0)·L(0)/H;
    wealth : household money at t = 0; terminal, terminal_growth : the requirement at the end T of a finite plan is
    terminal·exp(terminal_growth·T) in household money; path : the name of the interpolation, or "totals".
    """

    rows: Rows
    conventions: Conventions
    mesh: Mesh
    streams: Streams
    kernel: Streams
    interest: RatePath
    growth: Rate
    decays: tuple[Rate, ...]
    scale: Bounded
    wealth: Bounded
    terminal: Bounded
    terminal_growth: Rate
    amounts_path: Path
    path: str

    @property
    def incomes(self) -> Mask:
        """Which columns are income, (k,); the others are consumption."""
        return np.array([amounts.role == "income" for amounts in self.rows.amounts])

    def split(self, mask: Mask) -> Plan:
        """The same plan on the halved mesh."""
        return replace(
            self,
            mesh=self.mesh.split(mask),
            streams=self.streams.split(mask),
            kernel=self.kernel.split(mask),
            interest=self.interest.split(mask),
        )


def rows_of(ledger: Ledger, conventions: Conventions) -> Rows:
    """The ledger's columns of amounts and its rates, made continuous."""
    amounts = tuple(
        Amounts(column.header, column.role, column.values, column.half_units, column.last)
        for column in ledger.columns
        if column.role in ("income", "consumption")
    )
    printed = any(column.half_units is not None for column in ledger.columns)
    rates = ledger.of_role("r")
    values, error, slopes = _continuous(rates[0].values, conventions.compounding) if rates else (None, 0.0, None)
    return Rows(
        timeline=ledger.timeline,
        amounts=amounts,
        rates=values,
        rate_error=error,
        rate_slopes=slopes,
        rate_half_units=rates[0].half_units if rates else None,
        reading_error=UNIT if printed else 0.0,
    )


def _continuous(cells: Floats, compounding: str) -> tuple[Floats, float, Floats]:
    """Cells under a compounding convention as continuous rates, m·ln(1 + i/m), their relative error, and d rate / d cell."""
    if compounding == "continuous":
        return cells, UNIT, np.ones_like(cells)
    conversions = CONVERSIONS[compounding]
    x = cells / conversions
    rates = conversions * np.log1p(x)
    # reading x to one rounding moves ln(1 + x) by the condition number x / ((1 + x) ln(1 + x))
    with np.errstate(invalid="ignore", divide="ignore"):
        condition = np.where(x == 0.0, 1.0, np.abs(x / ((1.0 + x) * np.log1p(x))))
    return rates, float((10.0 + 4.0 * condition.max()) * UNIT), 1.0 / (1.0 + x)


def build(rows: Rows, conventions: Conventions, path: str) -> Plan:
    """Rows under conventions as a plan; `path` names the interpolation of continuous data."""
    c = conventions
    lengths = rows.timeline.period_lengths() if c.periods else rows.timeline.lengths
    mesh = _mesh(rows.timeline, lengths, halves=c.timing == "at mid-period")
    amounts_path: Path = Step(lengths) if c.periods else path_named(path, lengths)
    flows = _Flows(c, rows, amounts_path, mesh)
    streams, rates = flows.streams()
    interest = _interest(rows, c, rates, mesh)
    growth = c.g + c.n
    net = interest.beyond - growth
    decay = {"income": net - c.income_growth, "consumption": net - c.consumption_growth}
    exponent, factor = Exponent.constant(_basis_rate(c, c.basis), mesh), float(_basis_factor(c, c.basis))
    return Plan(
        rows=rows,
        conventions=c,
        mesh=mesh,
        streams=streams.restated(exponent, factor=factor, factor_error=UNIT),
        kernel=flows.kernel(streams).restated(exponent, factor=factor, factor_error=UNIT),
        interest=interest,
        growth=growth,
        decays=tuple(decay[amounts.role] for amounts in rows.amounts),
        scale=_read(c.productivity * c.members),
        wealth=_read(c.wealth * _basis_factor(c, c.wealth_basis)),
        terminal=_read(c.terminal_wealth * _basis_factor(c, c.wealth_basis)),
        terminal_growth=_basis_rate(c, c.wealth_basis),
        amounts_path=amounts_path,
        path="totals" if c.periods else path,
    )


def _read(figure: Fraction) -> Bounded:
    """A declared figure as a floating-point number, right to one rounding."""
    value = float(figure)
    return Bounded(value, UNIT * abs(value))


def _basis_factor(c: Conventions, basis: str) -> Fraction:
    """What one unit of money in that basis is per household at t = 0."""
    return {
        "per person": c.members,
        "per household": Fraction(1),
        "economy": 1 / c.households,
        "per effective unit": c.productivity * c.members,
    }[basis]


def _basis_rate(c: Conventions, basis: str) -> Rate:
    """The rate at which that factor grows."""
    return {"per person": c.n, "per effective unit": c.g + c.n}.get(basis, ZERO)


def _mesh(timeline: Timeline, lengths: Floats, *, halves: bool) -> Mesh:
    breaks = timeline.times
    if len(lengths) == len(breaks):
        breaks = np.append(breaks, breaks[-1] + lengths[-1])
    mesh = Mesh(breaks=breaks, lengths=lengths, interval=np.arange(len(lengths)))
    return mesh.split(np.ones(len(lengths), dtype=bool)) if halves else mesh


def _interest(rows: Rows, conventions: Conventions, rates: Coefficients | None, mesh: Mesh) -> RatePath:
    """r as a path on the mesh, from the coefficients of its column between the rows."""
    if rows.rates is None or rates is None:
        assert conventions.interest is not None, "a plan has a constant r or a column of it"
        return RatePath.constant(conventions.interest, len(mesh.lengths))
    last = float(rows.rates[-1])
    beyond = Rate.along_path(last, abs(last) * rows.rate_error)
    # a mesh of half periods is finer than the rows, and a held rate has no variation in them
    return RatePath(coefficients=rates.p[0][mesh.interval], error=rates.p_error[0][mesh.interval], beyond=beyond)


class _Flows:
    """Streams in the table's own basis, by timing, in money."""

    def __init__(self, conventions: Conventions, rows: Rows, path: Path, mesh: Mesh) -> None:
        self.timing = conventions.timing
        self.perpetual = conventions.perpetual
        self.path = path
        self.mesh = mesh
        self.amounts = rows.amounts
        self.rates = rows.rates
        self.rate_error = rows.rate_error
        self.unit = float(conventions.unit)
        self.values = np.stack([amounts.values for amounts in rows.amounts])
        self.error = rows.reading_error
        if self.unit != 1.0:
            self.values = self.values * self.unit
            self.error += 2.0 * UNIT
        # a total is spread over its period; a yearly figure paid as a lump sum covers the period
        spread, per_year = self.timing == "spread", conventions.quoted == "per year"
        self.per_cell: Floats | float = 1.0
        if spread and not per_year:
            self.per_cell = 1.0 / path.lengths
        elif conventions.periods and not spread and per_year:
            self.per_cell = path.lengths

    def streams(self) -> tuple[Streams, Coefficients | None]:
        """One stream for each column of amounts, and the path of r between the rows where it is a column."""
        values, error = self.values, self.error
        if not isinstance(self.per_cell, float):
            values, error = values * self.per_cell, error + 3.0 * UNIT
        if self.timing in ("continuous", "spread"):
            found, rates = self._interpolated(values, error)
            streams = Streams(p=found.p, q=found.q, p_error=found.p_error, q_error=found.q_error, tail=self._tail())
            return streams, rates
        rates = None if self.rates is None else self.path.coefficients(self.rates[None], self.rate_error)
        return self._lumps(values, error), rates

    def _interpolated(self, values: Floats, error: float) -> tuple[Coefficients, Coefficients | None]:
        """Amounts and r along the path, in one go where both follow the same; where amounts are geometric, r is linear, since
        it may be zero or negative."""
        if self.rates is None:
            return self.path.coefficients(values, error), None
        if isinstance(self.path, Geometric):
            rates = path_named("linear", self.path.lengths).coefficients(self.rates[None], self.rate_error)
            return self.path.coefficients(values, error), rates
        errors = np.full((len(values) + 1, 1), error)
        errors[-1] = self.rate_error
        found = self.path.coefficients(np.concatenate([values, self.rates[None]]), errors)
        amounts = replace(found, p=found.p[:-1], p_error=found.p_error[:-1])
        return amounts, replace(found, p=found.p[-1:], p_error=found.p_error[-1:])

    def _tail(self) -> Tail | None:
        """The last values go on in continuous data, the last period in totals."""
        if not self.perpetual:
            return None
        period = None
        if self.timing != "continuous":
            period = float(self.path.lengths[-1])
        levels = self.values[:, -1]
        flows = np.array([amounts.last != 0 for amounts in self.amounts])
        return Tail(levels=levels, errors=np.abs(levels) * self.error, period=period, flows=flows)

    def _lumps(self, amounts: Floats, error: float) -> Streams:
        """Amounts (k, n) at the start, the end or the middle of each row's period."""
        pieces = len(self.mesh.lengths)
        at = {
            "in advance": np.arange(0, pieces),
            "in arrears": np.arange(1, pieces + 1),
            "at mid-period": np.arange(1, pieces, 2),
        }[self.timing]
        placed, errors = np.zeros((len(amounts), pieces + 1)), np.zeros((len(amounts), pieces + 1))
        placed[:, at], errors[:, at] = amounts, np.abs(amounts) * error
        nothing = np.zeros(pieces + 1)
        lumps = Lumps(amounts=placed, errors=errors, exponent=nothing, exponent_error=nothing, last=int(at[-1]))
        empty = np.zeros((len(amounts), pieces, 1))
        none = np.zeros((1, pieces))
        return Streams(p=empty, q=empty[:1], p_error=none, q_error=none, lumps=lumps, tail=self._tail())

    def kernel(self, streams: Streams) -> Streams:
        """What one unit of a figure stands for: powers of z for continuous data, a rate or a lump sum for totals."""
        pieces = len(self.mesh.lengths)
        none = np.zeros((1, pieces))
        if self.timing not in ("continuous", "spread"):
            factor = np.broadcast_to(np.asarray(self.per_cell) * self.unit, (1, len(self.path.lengths)))
            return replace(self._lumps(factor, 0.0), tail=None)
        if isinstance(self.path, Geometric):
            p = np.zeros((2 * len(self.amounts), pieces, 2))
            p[0::2, :, 0] = p[1::2, :, 1] = streams.p[:, :, 0]
            doubled = np.repeat(streams.q, 2, axis=0)
            return Streams(p=p, q=doubled, p_error=none, q_error=none, tail=self._unit_tail(len(p)))
        powers = 1 if isinstance(self.path, Step) else 2 if isinstance(self.path, Linear) else 4
        p = np.broadcast_to(np.eye(powers)[:, None, :] * self.unit, (powers, pieces, powers))
        if not isinstance(self.per_cell, float):
            p = p * self.per_cell[None, :, None]
        return Streams(p=p, q=none[:, :, None], p_error=none, q_error=none, tail=self._unit_tail(powers))

    def _unit_tail(self, terms: int) -> Tail | None:
        """A tail of one unit a year after the last row."""
        if not self.perpetual or self.timing != "continuous":
            return None
        levels = np.full(terms, self.unit)
        return Tail(levels=levels, errors=np.zeros(terms), period=None, flows=np.ones(terms, dtype=bool))
