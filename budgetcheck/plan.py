"""A plan: rows under their conventions, as streams in household money on one mesh.

Amounts are interpolated as printed, in the table's own basis, and then restated in household money at prices of t = 0:

    per person         C·L/H          factor L(0)/H        exponent ∫n
    per household      as it stands   factor 1             exponent 0
    economy            over H         factor 1/H           exponent 0
    per effective unit c·A·L/H        factor A(0)L(0)/H    exponent ∫(g + n)

"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from .bounded import Bounded
from .conventions import Conventions
from .findings import BudgetcheckError
from .paths import Coefficients, Geometric, Path, Smooth, Step, path_named
from .quadrature import UNIT, Floats, Mask
from .rates import ZERO, Rate
from .rows import Rows
from .streams import Exponent, Lumps, Mesh, RatePath, Streams, Tail
from .timeline import Timeline

LARGEST_EXPONENT = 690.0
"""Supported range of |Λ| + ln(value·length): e^690 and e^−690 are still normal binary64 numbers with room for the amounts."""


class OutOfRange(BudgetcheckError):
    """The plan leaves the supported range of exponents; the message says by how much."""


@dataclass(frozen=True, eq=False)
class Plan:
    """Streams in household money on one mesh, with the rates that discount and restate them.

    streams : one for each column of amounts, in their order; interest : r; growth : the constant g + n, growth_exponent : its
    integral; decays : for each column, r − g − n beyond the last row less the growth of its tail; scale : A(0)·L(0)/H;
    wealth : household money at t = 0; terminal, terminal_growth : the requirement at the end T of a finite plan is
    terminal·exp(terminal_growth·T) in household money; path : the name of the interpolation, or "totals"; per_cell : from a
    cell to a yearly rate or a lump sum, (m,) or 1.
    """

    rows: Rows
    conventions: Conventions
    mesh: Mesh
    streams: Streams
    interest: RatePath
    growth: Rate
    growth_exponent: Exponent | None
    decays: tuple[Rate, ...]
    scale: Bounded
    wealth: Bounded
    terminal: Bounded
    terminal_growth: Rate
    amounts_path: Path
    path: str
    per_cell: Floats | float

    @property
    def incomes(self) -> Mask:
        """Which columns are income, (k,); the others are consumption."""
        return np.array([amounts.role == "income" for amounts in self.rows.amounts])

    def split(self, mask: Mask) -> Plan:
        """The same plan on the halved mesh."""
        mesh = self.mesh.split(mask)
        return replace(
            self,
            mesh=mesh,
            growth_exponent=Exponent.constant(self.growth, mesh),
            streams=self.streams.split(mask),
            interest=self.interest.split(mask),
        )


def build(rows: Rows, conventions: Conventions, path: str) -> Plan:
    """Rows under conventions as a plan; `path` names the interpolation of continuous data."""
    c = conventions
    lengths = rows.timeline.period_lengths() if c.periods else rows.timeline.lengths
    mesh = _mesh(rows.timeline, lengths, halves=c.timing == "at mid-period")
    amounts_path: Path = Step(lengths) if c.periods else path_named(path, lengths)
    flows = _Flows(c, rows, amounts_path, mesh)
    streams, rates = flows.streams()
    interest = _interest(rows, c, rates, mesh)
    growth = c.growth
    net = interest.beyond - growth
    decay = {"income": net - c.income_growth, "consumption": net - c.consumption_growth}
    growth_exponent = Exponent.constant(growth, mesh)
    own = c.basis == "per effective unit"
    exponent = growth_exponent if own else Exponent.constant(basis_rate(c, c.basis), mesh)
    factor = _read(basis_factor(c, c.basis))
    return Plan(
        rows=rows,
        conventions=c,
        mesh=mesh,
        streams=streams.restated(exponent, factor=factor),
        interest=interest,
        growth=growth,
        growth_exponent=growth_exponent,
        decays=tuple(decay[amounts.role] for amounts in rows.amounts),
        scale=_read(c.productivity * c.members),
        wealth=_read(c.wealth * basis_factor(c, c.wealth_basis)),
        terminal=_read(c.terminal_wealth * basis_factor(c, c.wealth_basis)),
        terminal_growth=basis_rate(c, c.wealth_basis),
        amounts_path=amounts_path,
        path="totals" if c.periods else path,
        per_cell=flows.per_cell,
    )


def _read(figure: Fraction) -> Bounded:
    """A declared figure as a floating-point number, right to one rounding, or exactly where it is a small whole number."""
    value = float(figure)
    exact = figure.denominator == 1 and abs(figure.numerator) <= 2**53
    return Bounded(value, 0.0 if exact else UNIT * abs(value))


def basis_factor(c: Conventions, basis: str) -> Fraction:
    """What one unit of money in that basis is per household at t = 0."""
    if basis == "per household":
        return Fraction(1)
    if basis == "economy":
        return 1 / c.households
    return c.members if basis == "per person" else c.productivity * c.members


def basis_rate(c: Conventions, basis: str) -> Rate:
    """The rate at which that factor grows."""
    if basis == "per person":
        return c.n
    return c.growth if basis == "per effective unit" else ZERO


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
        self.proved = rows.proved
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
        both = np.concatenate([values, self.rates[None]])
        if isinstance(self.path, Smooth) and not self.proved:
            found = self.path.coefficients(both, None)
        else:
            errors = np.full((len(values) + 1, 1), error)
            errors[-1] = self.rate_error
            found = self.path.coefficients(both, errors)
        p_error = np.broadcast_to(found.p_error, found.p.shape[:2])
        amounts = replace(found, p=found.p[:-1], p_error=p_error[:-1])
        return amounts, replace(found, p=found.p[-1:], p_error=p_error[-1:])

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
        lumps = Lumps(amounts=placed, errors=errors, exponent=nothing, exponent_error=nothing, at=at)
        empty = np.zeros((len(amounts), pieces, 1))
        none = np.zeros((1, pieces))
        return Streams(p=empty, q=empty[:1], p_error=none, q_error=none, lumps=lumps, tail=self._tail())
