"""A plan: rows under their conventions, as streams in household money on one mesh.

Amounts are interpolated as printed, in the table's own basis and prices, and then restated in household money at prices of t =
0:

    per person            C·L/H          factor L(0)/H        exponent ∫n
    per household         as it stands   factor 1             exponent 0
    economy               over H         factor 1/H           exponent 0
    per effective unit    c·A·L/H        factor A(0)L(0)/H    exponent ∫(g + n)
    per equivalent adult  times E        factor E(0)          exponent ln(E/E(0))

and less cumulative inflation where they are nominal.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property

import numpy as np

from .bounded import Bounded
from .conventions import Conventions
from .drifts import Drifts
from .exponents import Cut, Drift, Exponent, Mesh
from .findings import BudgetcheckError
from .flows import flows_of
from .paths import Path, Step, path_named
from .quadrature import UNIT, Floats, Mask
from .rates import Rate
from .rows import Rows
from .streams import Streams

LARGEST_EXPONENT = 690.0
"""Supported range of |Λ| + ln(value·length): e^690 and e^−690 are still normal binary64 numbers with room for the amounts."""


class OutOfRange(BudgetcheckError):
    """The plan leaves the supported range of exponents; the message says by how much."""


class NoPath(OutOfRange):
    """There is no converging tail of the declared kind from the last row on; the message says why."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Item:
    """One stream of a plan: a column of amounts, or a single amount. last: what flows in its last row, exactly, in money of its
    own basis (0 for a single amount); basis, timing, quoted, nominal: how that is to be read; index: of its column among the
    rows' amounts, None for a single amount."""

    name: str
    role: str
    basis: str
    last: Fraction
    timing: str
    quoted: str
    nominal: bool
    index: int | None

    @property
    def sign(self) -> float:
        """1 for what comes in, −1 for what goes out."""
        return 1.0 if self.role == "income" else -1.0

    @property
    def meaning(self) -> tuple[object, ...]:
        """What its figures mean; those of the same meaning can be added up."""
        return self.basis, self.timing, self.quoted, self.nominal

    @property
    def side(self) -> str:
        """The side of the account it belongs to: deductions are taken off income."""
        return "consumption" if self.role == "consumption" else "income"


@dataclass(frozen=True, eq=False)
class Plan:
    """Streams in household money on one mesh, with the rates that discount and restate them.

    items, streams : one for each column of amounts, then one for each single amount; drifts : the rates over time; decays : for
    each stream, the net discount rate beyond the last row less the growth of its tail; scale : A(0)·L(0)/H; wealth : household
    money at t = 0; terminal, requirement : the wealth required at the end T of a finite plan is terminal·exp(∫requirement) in
    household money; borrowing : what may be owed, in the same terms, None without a limit; path : the name of the
    interpolation, or "totals"; per_cell : from a cell to a yearly rate or a lump sum, (k, n) or 1; row_intervals : how many
    intervals between rows there are, those of an extended tail not counted; long_run : income and consumption per unit of human
    capital that a converging tail leads to.
    """

    rows: Rows
    conventions: Conventions
    mesh: Mesh
    items: tuple[Item, ...]
    streams: Streams
    drifts: Drifts
    decays: tuple[Rate, ...]
    scale: Bounded
    wealth: Bounded
    terminal: Bounded
    borrowing: Bounded | None
    amounts_path: Path
    path: str
    per_cell: Floats | float
    row_intervals: int
    long_run: tuple[Fraction, Fraction] | None = None

    @cached_property
    def signs(self) -> Floats:
        """1 for income, −1 for deductions and consumption, (k,)."""
        return np.array([item.sign for item in self.items])

    @property
    def consumption(self) -> Mask:
        """Which streams are consumption, (k,)."""
        return np.array([item.role == "consumption" for item in self.items])

    @cached_property
    def discount_exponent(self) -> Exponent | None:
        """R, with the hazard where there is one: what household money is discounted with."""
        return self.drifts.discounting.exponent(self.mesh)

    @cached_property
    def growth_exponent(self) -> Exponent | None:
        """∫(g + n)."""
        return self.drifts.growth.exponent(self.mesh)

    @cached_property
    def net_exponent(self) -> Exponent | None:
        """Λ = R − ∫(g + n): what amounts per unit of human capital are discounted with."""
        return self.drifts.net.exponent(self.mesh)

    @cached_property
    def requirement(self) -> Drift:
        """The rate at which money in the basis of wealth, of its own date, grows in household money at prices of t = 0."""
        return self.drifts.of_basis(self.conventions.wealth_basis, nominal=self.conventions.reading.nominal)

    @property
    def extended(self) -> bool:
        """Whether intervals of a converging tail follow those between the rows."""
        return int(self.mesh.interval[-1]) >= self.row_intervals

    @property
    def net_beyond(self) -> Rate:
        """r − g − n beyond the last row, with the hazard."""
        return self.drifts.net.beyond

    def split(self, mask: Mask) -> Plan:
        """The same plan on the halved mesh."""
        cut = Cut.halves(mask)
        return replace(
            self,
            mesh=self.mesh.split(mask),
            streams=self.streams.split(cut),
            drifts=self.drifts.split(cut),
        )


def build(rows: Rows, conventions: Conventions, path: str) -> Plan:
    """Rows under conventions as a plan; `path` names the interpolation of continuous data."""
    c = conventions
    lengths = rows.timeline.period_lengths() if c.periods else rows.timeline.lengths
    shape: Path = Step(lengths) if c.periods else path_named(path, lengths)
    flows = flows_of(rows, c, shape)
    drifts, factors = flows.drifts, Factors(rows, c)
    items = _items(rows, c)
    restating: dict[tuple[str, bool], Exponent | None] = {}
    for item in items:
        if (item.basis, item.nominal) not in restating:
            restating[item.basis, item.nominal] = drifts.of_basis(item.basis, nominal=item.nominal).exponent(flows.mesh)
    streams = flows.streams.times([factors.of_basis(item.basis) for item in items])
    net = drifts.net.beyond
    growth = {"income": c.income_growth, "consumption": c.consumption_growth}
    return Plan(
        rows=rows,
        conventions=c,
        mesh=flows.mesh,
        items=items,
        streams=streams.restated_each([restating[item.basis, item.nominal] for item in items]),
        drifts=drifts,
        decays=tuple(net - growth[item.side] for item in items),
        scale=factors.of_basis("per effective unit"),
        wealth=factors.wealth(),
        terminal=factors.money(c.terminal_wealth),
        borrowing=None if c.borrowing is None else factors.money(c.borrowing),
        amounts_path=shape,
        path="totals" if c.periods else path,
        per_cell=flows.per_cell,
        row_intervals=len(lengths),
    )


def _items(rows: Rows, c: Conventions) -> tuple[Item, ...]:
    columns = [
        Item(
            name=amounts.name,
            role=amounts.role,
            basis=amounts.reading.basis,
            last=amounts.last * amounts.reading.unit,
            timing=amounts.reading.timing,
            quoted=amounts.reading.quoted,
            nominal=amounts.reading.nominal,
            index=index,
        )
        for index, amounts in enumerate(rows.amounts)
    ]
    singles = [
        Item(
            name=lump.label,
            role=lump.role,
            basis=lump.basis or c.wealth_basis,
            last=Fraction(0),
            timing="at a date",
            quoted="per period",
            nominal=c.reading.nominal,
            index=None,
        )
        for lump in c.lump_sums
    ]
    return (*columns, *singles)


class Factors:
    """What one unit of money in a basis is per household at t = 0."""

    def __init__(self, rows: Rows, conventions: Conventions) -> None:
        self.rows, self.conventions = rows, conventions
        c, measures = conventions, rows.measures
        self.members = c.members if c.members is not None else measures["members"].first
        self.productivity = c.productivity if c.productivity is not None else measures["productivity"].first

    def exact(self, basis: str) -> Fraction:
        """The factor as a rational number; of equivalent adults, the floating-point number."""
        return {
            "per household": lambda: Fraction(1),
            "economy": lambda: 1 / self.conventions.households,
            "per person": lambda: self.members,
            "per effective unit": lambda: self.productivity * self.members,
            "per equivalent adult": lambda: self.rows.measures["equivalents"].first,
        }[basis]()

    def of_basis(self, basis: str) -> Bounded:
        """The factor with the error of its making."""
        factor = read(self.exact(basis))
        if basis != "per equivalent adult":
            return factor
        return Bounded(factor.value, factor.bound + self.rows.measures["equivalents"].error * factor.value)

    def money(self, amount: Fraction) -> Bounded:
        """An amount in the basis of wealth as household money at t = 0."""
        return read(amount * self.exact(self.conventions.wealth_basis))

    def wealth(self) -> Bounded:
        """Initial wealth: declared, or the first figure of the column of wealth."""
        if self.conventions.wealth is not None:
            return self.money(self.conventions.wealth)
        return self.money(self.rows.measures["wealth"].first * self.conventions.reading.unit)


def read(figure: Fraction) -> Bounded:
    """A declared figure as a floating-point number, right to one rounding, or exactly where it is a small whole number."""
    value = float(figure)
    exact = figure.denominator == 1 and abs(figure.numerator) <= 2**53
    return Bounded(value, 0.0 if exact else UNIT * abs(value))
