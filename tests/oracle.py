"""An exact second opinion: present values and slack of a plan as rigorous balls, from the printed figures alone.

Nothing of the package is used. Figures are read as rationals, the spline is solved in rationals by its second derivatives, and
every integral is a closed form (Kummer's function) or a ball from adaptive rigorous quadrature, all at 200 bits. By definition:

    discounted stream per unit of human capital = factor·y(t)·exp(−(R(t) − νt))

        basis of y            factor              ν
        per person            1/A(0)              n
        per household         1/(A(0)·L(0)/H)     0
        economy               1/(A(0)·L(0))       0
        per effective unit    1                   g + n
"""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from itertools import pairwise
from typing import Any

from flint import acb, arb, ctx, fmpq, fmpq_mat

PRECISION = 200
"""Bits of every ball."""

ROLES = {"wage": "income", "income": "income", "consumption": "consumption", "r": "r", "t": "time", "year": "time"}
CONVERSIONS = {"annual": 1, "semiannual": 2, "quarterly": 4, "monthly": 12, "daily": 365}


@dataclass(frozen=True, kw_only=True)
class Exact:
    """Balls, money per unit of human capital at t = 0; None: the present value is infinite, or slack has no finite value.

    scale: A(0)·L(0)/H, which turns them into household money; lines: by column of amounts; decays: by role, the discount rate
    less growth beyond the last row; size: the largest exponent of discounting met in the rows,
    with the logarithm of the largest amount times the longest interval.
    """

    slack: arb | None
    income: arb | None
    consumption: arb | None
    wealth: arb
    terminal: arb
    scale: arb
    lines: dict[str, arb | None]
    decays: dict[str, arb]
    size: float


def figure(value: object) -> fmpq:
    """A decimal figure, exactly."""
    exact = value if isinstance(value, Fraction) else Fraction(Decimal(str(value)))
    return fmpq(exact.numerator, exact.denominator)


def continuous(rate: fmpq, compounding: str) -> arb:
    """The continuous rate m·ln(1 + i/m)."""
    if compounding == "continuous":
        return arb(rate)
    conversions = CONVERSIONS[compounding]
    return conversions * arb(1 + rate / conversions).log()


class Assumed:
    """Assumptions with their defaults."""

    def __init__(self, tree: Mapping[str, Mapping[str, Any]], time: str) -> None:
        self.tree = tree
        self.timing = self.word("amounts", "timing", "continuous" if time == "t" else "spread")
        self.path = self.word("amounts", "path", "smooth")
        self.per_year = self.word("amounts", "quoted", "per period") == "per year"
        self.basis = self.word("amounts", "basis", "per person")
        own = self.basis if self.basis in ("per effective unit", "economy") else "per household"
        self.wealth_basis = self.word("household", "wealth_basis", own)
        self.market = self.word("market", "compounding", "continuous")
        self.growth = self.word("growth", "compounding", self.market)
        self.perpetual = self.word("horizon", "kind", "finite") == "perpetual"
        self.g = continuous(self.figure("growth", "g"), self.growth)
        self.n = continuous(self.figure("growth", "n"), self.growth)
        self.tail = {
            "income": continuous(self.figure("horizon", "income_growth"), self.growth),
            "consumption": continuous(self.figure("horizon", "consumption_growth"), self.growth),
        }
        self.members = self.figure("household", "members", "1")
        self.productivity = self.figure("household", "productivity", "1")
        self.households = self.figure("household", "households", "1")

    def word(self, section: str, key: str, default: str) -> str:
        return str(self.tree.get(section, {}).get(key, default))

    def figure(self, section: str, key: str, default: str = "0") -> fmpq:
        return figure(self.tree.get(section, {}).get(key, default))

    def to_unit(self, basis: str) -> tuple[fmpq, arb]:
        """factor and ν of a basis."""
        per_household = self.productivity * self.members
        return {
            "per person": (1 / self.productivity, self.n),
            "per household": (1 / per_household, arb(0)),
            "economy": (1 / (per_household * self.households), arb(0)),
            "per effective unit": (fmpq(1), self.g + self.n),
        }[basis]


@dataclass(frozen=True)
class Table:
    """times from the start, and cells by header, all rational."""

    kind: str
    times: list[fmpq]
    cells: dict[str, list[fmpq]]
    roles: dict[str, str]


def read(text: str, tree: Mapping[str, Mapping[str, Any]]) -> Table:
    """A printed table with the roles of its columns."""
    header, *records = list(csv.reader(io.StringIO(text)))
    declared = tree.get("columns", {})
    roles = {head: str(declared.get(head, ROLES.get(head, ""))) for head in header}
    cells = {
        head: [figure(record[i]) for record in records]
        for i, head in enumerate(header)
        if roles[head] not in ("ignore", "time")
    }
    (kind,) = (head for head in header if roles[head] == "time")
    dates = [figure(record[header.index(kind)]) for record in records]
    return Table(kind=kind, times=[date - dates[0] for date in dates], cells=cells, roles=roles)


def spline(lengths: list[fmpq]) -> fmpq_mat:
    """The matrix that takes values at n ≥ 4 rows to the second derivatives there, of the cubic spline with not-a-knot ends."""
    n = len(lengths) + 1
    left, right = fmpq_mat(n, n), fmpq_mat(n, n)
    for i in range(1, n - 1):
        before, after = lengths[i - 1], lengths[i]
        left[i, i - 1], left[i, i], left[i, i + 1] = before, 2 * (before + after), after
        right[i, i - 1], right[i, i], right[i, i + 1] = 6 / before, -6 / before - 6 / after, 6 / after
    for row, first in ((0, 0), (n - 1, n - 3)):
        # the third derivative is the same on both sides of the last inner row
        before, after = lengths[first], lengths[first + 1]
        left[row, first], left[row, first + 1], left[row, first + 2] = after, -before - after, before
    return left.solve(right)


def pieces(values: list[Any], lengths: list[Any], path: str, second: fmpq_mat | None) -> list[list[Any]]:
    """Coefficients in x ∈ [0, 1] on every interval between rows, of values that are rationals or balls."""
    if path == "step":
        return [[value] for value in values[: len(lengths)]]
    lines = [[left, right - left] for left, right in pairwise(values)]
    if path == "linear" or len(values) == 2:
        return lines
    if len(values) == 3:
        bend = ((values[2] - values[1]) / lengths[1] - (values[1] - values[0]) / lengths[0]) / (lengths[0] + lengths[1])
        return [[a, b - bend * h * h, bend * h * h] for (a, b), h in zip(lines, lengths, strict=True)]
    assert second is not None
    rows = range(len(values))
    curvature = [sum((second[i, j] * values[j] for j in rows), 0 * values[0]) for i in rows]
    cubics = []
    for (a, b), h, (m, m_next) in zip(lines, lengths, pairwise(curvature), strict=True):
        sixth = h * h / 6
        cubics.append([a, b - sixth * (2 * m + m_next), 3 * sixth * m, sixth * (m_next - m)])
    return cubics


def integral(p: list[Any], q: list[arb]) -> arb:
    """∫_0^1 Σ p_j x^j · exp(Σ q_j x^j) dx."""
    if len(q) <= 2:
        slope = q[1] if len(q) == 2 else arb(0)
        # ∫_0^1 x^j e^{ax} dx = e^a · 1F1(1; j + 2; −a)/(j + 1), taken at whichever sign of a keeps all terms positive
        total = arb(0)
        for j, c in enumerate(p):
            if slope > 0:
                moment = slope.exp() * (-slope).hypgeom_1f1(1, j + 2) / (j + 1)
            else:
                moment = slope.hypgeom_1f1(j + 1, j + 2) / (j + 1)
            total += arb(c) * moment
        return total * q[0].exp()
    powers, exponents = [acb(c) for c in reversed(p)], [acb(c) for c in reversed(q)]

    def integrand(x: acb, _: bool) -> acb:
        value, exponent = acb(0), acb(0)
        for c in powers:
            value = value * x + c
        for c in exponents:
            exponent = exponent * x + c
        return value * exponent.exp()

    return acb.integral(integrand, 0, 1, rel_tol=arb(2) ** -110, abs_tol=arb(2) ** -4000).real


def discounting(rates: list[list[Any]], lengths: list[fmpq]) -> list[list[arb]]:
    """R on every interval as coefficients in x ∈ [0, 1], and one more entry with R at the end."""
    running = arb(0)
    result = []
    for coefficients, h in zip(rates, lengths, strict=True):
        terms = [arb(c) * arb(h) / (j + 1) for j, c in enumerate(coefficients)]
        result.append([running, *terms])
        running = running + sum(terms, arb(0))
    return [*result, [running]]


def exponents(discount: list[list[arb]], growth: arb, times: list[fmpq], lengths: list[fmpq]) -> list[list[arb]]:
    """−(R − νt) on every interval, and at the end."""
    result = []
    for coefficients, t, h in zip(discount, times, [*lengths, fmpq(0)], strict=True):
        q = [-c for c in coefficients]
        q[0] = q[0] + growth * arb(t)
        if len(q) > 1:
            q[1] = q[1] + growth * arb(h)
        result.append(q)
    return result


class Column:
    """The present value of one column of amounts."""

    def __init__(self, assumed: Assumed, lengths: list[fmpq], q: list[list[arb]], factor: arb, decay: arb) -> None:
        self.assumed, self.lengths, self.q, self.factor, self.decay = assumed, lengths, q, factor, decay

    def value(self, values: list[fmpq], second: fmpq_mat | None) -> arb | None:
        """Rows and tail; None where infinite."""
        rows, last = self._continuous(values, second) if self.assumed.timing == "continuous" else self._periods(values)
        if not self.assumed.perpetual or values[-1] == 0:
            return sum(rows, arb(0)) * self.factor
        if not self.decay > 0:
            return None
        return (sum(rows, arb(0)) + last) * self.factor

    def _continuous(self, values: list[fmpq], second: fmpq_mat | None) -> tuple[list[arb], arb]:
        path, rows = self.assumed.path, []
        if path == "geometric":
            for (left, right), q, h in zip(pairwise(values), self.q, self.lengths, strict=False):
                rows.append(arb(h) * integral([left], [q[0], q[1] + arb(right / left).log(), *q[2:]]))
        else:
            for p, q, h in zip(pieces(values, self.lengths, path, second), self.q, self.lengths, strict=False):
                rows.append(arb(h) * integral(p, q))
        return rows, arb(values[-1]) * self.q[-1][0].exp() / self.decay

    def _periods(self, values: list[fmpq]) -> tuple[list[arb], arb]:
        rows = []
        for i, (value, h) in enumerate(zip(values, self.lengths, strict=True)):
            paid = value * h if self.assumed.per_year else value
            q = self.q[i]
            if self.assumed.timing == "spread":
                rows.append(arb(paid) * integral([1], q))
            else:
                at = {"in advance": q[0], "in arrears": self.q[i + 1][0], "at mid-period": q[0] + q[1] / 2}[self.assumed.timing]
                rows.append(arb(paid) * at.exp())
        return rows, rows[-1] / (self.decay * arb(self.lengths[-1])).expm1()


def exact(text: str, tree: Mapping[str, Mapping[str, Any]]) -> Exact:
    """The lifetime account of a printed table under assumptions (a mapping in the shape of the assumptions file)."""
    with ctx.workprec(PRECISION):
        return _exact(text, tree)


def _exact(text: str, tree: Mapping[str, Mapping[str, Any]]) -> Exact:
    table = read(text, tree)
    assumed = Assumed(tree, table.kind)
    lengths = [later - earlier for earlier, later in pairwise(table.times)]
    if assumed.timing != "continuous":
        lengths.append(lengths[-1])
    times = [fmpq(0)]
    for h in lengths:
        times.append(times[-1] + h)
    smooth = assumed.timing == "continuous" and assumed.path == "smooth" and len(lengths) >= 3
    second = spline(lengths) if smooth else None
    discount, beyond = _discount(table, assumed, lengths, second)
    factor, growth = assumed.to_unit(assumed.basis)
    q = exponents(discount, growth, times, lengths)
    unit = assumed.figure("amounts", "unit", "1")
    decays = {role: beyond - assumed.g - assumed.n - assumed.tail[role] for role in ("income", "consumption")}
    lines: dict[str, arb | None] = {}
    by_role: dict[str, arb | None] = {"income": arb(0), "consumption": arb(0)}
    for head, values in table.cells.items():
        role = table.roles[head]
        if role == "r":
            continue
        line = Column(assumed, lengths, q, arb(unit * factor), decays[role]).value(values, second)
        so_far = by_role[role]
        lines[head] = line
        by_role[role] = None if line is None or so_far is None else so_far + line
    wealth, terminal = _stocks(assumed, discount, times)
    scale = assumed.productivity * assumed.members
    income, consumption = by_role["income"], by_role["consumption"]
    exponent = max(sum(float(abs(c).upper()) for c in piece) for piece in q + discount)
    peak = max(abs(cell) for head in lines for cell in table.cells[head])
    largest = float(arb(peak * unit * factor * max(lengths) * max(scale, fmpq(1))).mid())
    slack = None if income is None or consumption is None else wealth + income - consumption - terminal
    return Exact(
        slack=slack,
        income=income,
        consumption=consumption,
        wealth=wealth,
        terminal=terminal,
        scale=arb(scale),
        lines=lines,
        decays=decays,
        size=exponent + max(0.0, math.log(largest) if largest > 0.0 else 0.0),
    )


def _discount(table: Table, assumed: Assumed, lengths: list[fmpq], second: fmpq_mat | None) -> tuple[list[list[arb]], arb]:
    """R on every interval, and the rate beyond the last row."""
    columns = [head for head in table.cells if table.roles[head] == "r"]
    if not columns:
        rate = continuous(assumed.figure("market", "r"), assumed.market)
        return discounting([[rate]] * len(lengths), lengths), rate
    rates = [continuous(cell, assumed.market) for cell in table.cells[columns[0]]]
    path = "step" if assumed.timing != "continuous" else "linear" if assumed.path == "geometric" else assumed.path
    balls = [arb(h) for h in lengths]
    between = pieces(rates, balls, path, second)
    return discounting(between, lengths), rates[-1]


def _stocks(assumed: Assumed, discount: list[list[arb]], times: list[fmpq]) -> tuple[arb, arb]:
    """Initial wealth and the discounted terminal requirement, per unit of human capital."""
    factor, growth = assumed.to_unit(assumed.wealth_basis)
    wealth = arb(factor * assumed.figure("household", "wealth"))
    if assumed.perpetual:
        return wealth, arb(0)
    required = arb(factor * assumed.figure("horizon", "terminal_wealth"))
    return wealth, required * (growth * arb(times[-1]) - discount[-1][0]).exp()
