"""An exact second opinion: present values and slack of a plan as rigorous balls, from the printed figures alone.

Nothing of the package is used. Figures are read as rationals, the spline is solved in rationals by its second derivatives, and
every integral is a closed form (Kummer's function) or a ball from adaptive rigorous quadrature, all at 200 bits. By definition:

    discounted stream per unit of human capital = factor·y(t)·exp(B(t) − Π(t) − D(t))

        basis of y            factor               B(t)
        per person            1/A(0)               ln L(t)/L(0)
        per household         1/(A(0)·L(0)/H)      0
        economy               1/(A(0)·L(0))        0
        per effective unit    1                    ln A(t)L(t)/(A(0)L(0))
        per equivalent adult  E(0)/(A(0)·L(0)/H)   ln E(t)/E(0)

    Π = ∫ inflation for a nominal y, else 0;   D = ∫ (r + hazard), less ∫ inflation for a nominal r.
"""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from itertools import pairwise
from typing import Any

from flint import acb, arb, ctx, fmpq, fmpq_mat

PRECISION = 200
"""Bits of every ball."""

MEASURES = ("r", "g", "n", "inflation", "hazard", "survival", "members", "productivity", "adults", "children", "wealth")
ROLES = {
    "wage": "income",
    "income": "income",
    "consumption": "consumption",
    "t": "time",
    "year": "time",
    **{name: name for name in MEASURES},
}
FLOWS = ("income", "deduction", "consumption")
CONVERSIONS = {"annual": 1, "semiannual": 2, "quarterly": 4, "monthly": 12, "daily": 365}
HEADS = {"OECD": ("0.7", "0.5"), "OECD-modified": ("0.5", "0.3")}
"""Weight of each further adult and of each child."""

Tree = Mapping[str, Any]


@dataclass(frozen=True, kw_only=True)
class Exact:
    """Balls, money per unit of human capital at t = 0; None: the present value is infinite, or slack has no finite value.

    scale: A(0)·L(0)/H, which turns them into household money; lines: by column of amounts or label of a single amount; decays:
    by side, the discount rate less growth beyond the last row; fading: sides of a converging tail that lead to zero; blur: a
    decay nearer to zero than this may be called unknown, zero where all rates are declared; size: the largest exponent of
    discounting met in the rows, with the logarithm of the largest amount times the longest interval.
    """

    slack: arb | None
    income: arb | None
    consumption: arb | None
    wealth: arb
    terminal: arb
    scale: arb
    lines: dict[str, arb | None]
    decays: dict[str, arb]
    fading: frozenset[str]
    blur: float
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


@dataclass(frozen=True)
class Reading:
    """What the figures of one column mean."""

    timing: str
    per_year: bool
    basis: str
    unit: fmpq
    nominal: bool


class Assumed:
    """Assumptions with their defaults."""

    def __init__(self, tree: Tree, time: str) -> None:
        self.tree = tree
        self.timing = self.word("amounts", "timing", "continuous" if time == "t" else "spread")
        self.periods = self.timing != "continuous"
        self.path = self.word("amounts", "path", "smooth")
        self.rate_path = "step" if self.periods else "linear" if self.path == "geometric" else self.path
        basis = self.word("amounts", "basis", "per person")
        own = basis if basis in ("per effective unit", "economy") else "per household"
        self.wealth_basis = self.word("household", "wealth_basis", own)
        self.nominal = self.word("amounts", "prices", "real") == "nominal"
        self.market_nominal = self.word("market", "prices", "real") == "nominal"
        self.market = self.word("market", "compounding", "continuous")
        self.growth = self.word("growth", "compounding", self.market)
        self.perpetual = self.word("horizon", "kind", "finite") == "perpetual"
        self.converging = self.word("horizon", "tail", "balanced growth") == "converging"
        self.zero_curve = self.word("market", "curve", "forward") == "zero"

    def word(self, section: str, key: str, default: str) -> str:
        return str(self.tree.get(section, {}).get(key, default))

    def figure(self, section: str, key: str, default: str = "0") -> fmpq:
        return figure(self.tree.get(section, {}).get(key, default))

    def states(self, section: str, key: str) -> bool:
        return key in self.tree.get(section, {})

    def reading(self, header: str) -> Reading:
        """What a column says of itself, or else what is said of all of them."""
        entry = self.tree.get("columns", {}).get(header, {})
        said = {**self.tree.get("amounts", {}), **(entry if isinstance(entry, Mapping) else {})}
        return Reading(
            timing=str(said.get("timing", self.timing)),
            per_year=said.get("quoted") == "per year",
            basis=str(said.get("basis", "per person")),
            unit=figure(said.get("unit", 1)),
            nominal=said.get("prices") == "nominal",
        )


@dataclass(frozen=True)
class Table:
    """times from the start, and cells by header, all rational; roles by header."""

    kind: str
    start: fmpq
    times: list[fmpq]
    cells: dict[str, list[fmpq]]
    roles: dict[str, str]

    def of_role(self, role: str) -> list[fmpq] | None:
        """The one column of a measure."""
        return next((cells for head, cells in self.cells.items() if self.roles[head] == role), None)

    @property
    def amounts(self) -> dict[str, list[fmpq]]:
        return {head: cells for head, cells in self.cells.items() if self.roles[head] in FLOWS}


def read(text: str, tree: Tree) -> Table:
    """A printed table with the roles of its columns."""
    header, *records = list(csv.reader(io.StringIO(text)))
    declared = {head: entry["role"] if isinstance(entry, Mapping) else entry for head, entry in tree.get("columns", {}).items()}
    roles = {head: str(declared.get(head, ROLES.get(head, ""))) for head in header}
    cells = {
        head: [figure(record[i]) for record in records]
        for i, head in enumerate(header)
        if roles[head] not in ("ignore", "time")
    }
    (kind,) = (head for head in header if roles[head] == "time")
    dates = [figure(record[header.index(kind)]) for record in records]
    return Table(kind=kind, start=dates[0], times=[date - dates[0] for date in dates], cells=cells, roles=roles)


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


@dataclass(frozen=True)
class Running:
    """A running integral from t = 0, or the logarithm of a level.

    pieces: on every interval, coefficients in x ∈ [0, 1]; before, after: at the dates between them, where a level may jump;
    beyond: its rate after the last date.
    """

    pieces: list[list[arb]]
    before: list[arb]
    after: list[arb]
    beyond: arb

    def plus(self, other: Running, sign: int = 1) -> Running:
        """self + sign·other."""
        return Running(
            pieces=[_added(p, q, sign) for p, q in zip(self.pieces, other.pieces, strict=True)],
            before=_added(self.before, other.before, sign),
            after=_added(self.after, other.after, sign),
            beyond=self.beyond + sign * other.beyond,
        )


def _added(p: list[arb], q: list[arb], sign: int) -> list[arb]:
    size, none = max(len(p), len(q)), arb(0)
    return [(p[i] if i < len(p) else none) + sign * (q[i] if i < len(q) else none) for i in range(size)]


def integrated(rates: list[list[Any]], lengths: list[fmpq], beyond: arb) -> Running:
    """The running integral of a rate with those coefficients on the intervals."""
    at, result = [arb(0)], []
    for coefficients, h in zip(rates, lengths, strict=True):
        terms = [arb(c) * arb(h) / (j + 1) for j, c in enumerate(coefficients)]
        result.append([at[-1], *terms])
        at.append(at[-1] + sum(terms, arb(0)))
    return Running(result, at, at, beyond)


def joined_up(at: list[arb], beyond: arb) -> Running:
    """Straight lines between values at the dates."""
    return Running([[left, right - left] for left, right in pairwise(at)], at, at, beyond)


class Rates:
    """Every rate of a plan as a running integral on the plan's intervals."""

    def __init__(self, table: Table, assumed: Assumed) -> None:
        self.table, self.assumed = table, assumed
        self.lengths = [later - earlier for earlier, later in pairwise(table.times)]
        self.gap = self.lengths[-1]
        if assumed.periods:
            self.lengths.append(self.gap)
        self.dates = [fmpq(0)]
        for h in self.lengths:
            self.dates.append(self.dates[-1] + h)
        smooth = not assumed.periods and assumed.path == "smooth" and len(self.lengths) >= 3
        self.second = spline(self.lengths) if smooth else None
        self.blur = 0.0
        self.heads = self._members()
        self.productivity_level = table.of_role("productivity")
        inflation = self._rate("inflation", "market", assumed.market)
        interest = self._interest()
        self.interest = interest.plus(inflation, -1) if assumed.market_nominal else interest
        self.hazard = self._survival() or self._rate("hazard", "household", "continuous")
        self.people = self._level(self.heads) or self._rate("n", "growth", assumed.growth)
        self.productivity = self._level(self.productivity_level) or self._rate("g", "growth", assumed.growth)
        self.inflation = inflation
        self.equivalents = self._equivalents()
        self.nothing = self._constant(arb(0))
        self.discount = self.interest.plus(self.hazard)
        self.human_capital = self.people.plus(self.productivity)

    def _constant(self, rate: arb) -> Running:
        return integrated([[rate]] * len(self.lengths), self.lengths, rate)

    def _rate(self, name: str, section: str, compounding: str) -> Running:
        """A column along the plan's path, in period data held over the row's period; or the declared rate."""
        cells = self.table.of_role(name)
        if cells is None:
            return self._constant(continuous(self.assumed.figure(section, name), compounding))
        self._measured(1.0)
        rates = [continuous(cell, compounding) for cell in cells]
        return integrated(self._along(rates), self.lengths, rates[-1])

    def _along(self, rates: list[arb]) -> list[list[Any]]:
        return pieces(rates, [arb(h) for h in self.lengths], self.assumed.rate_path, self.second)

    def _measured(self, size: float) -> None:
        """A rate known from a column moves the decay by rounding in proportion to the figures it is read off."""
        self.blur += 1e-12 * size

    def _interest(self) -> Running:
        cells = self.table.of_role("r")
        if cells is None or not self.assumed.zero_curve:
            return self._rate("r", "market", self.assumed.market)
        zeros = [continuous(cell, self.assumed.market) for cell in cells]
        at = [z * arb(t) for z, t in zip(zeros, self.table.times, strict=True)]
        if self.assumed.periods:
            forward = (at[-1] - at[-2]) / arb(self.gap)
            self._measured(1.0 + float(abs(at[-1]).mid()) / float(self.gap))
            return joined_up([*at, at[-1] + forward * arb(self.gap)], forward)
        self._measured(1.0)
        # R = z·t with t = t_i + h·x
        parts = []
        for z, start, h in zip(self._along(zeros), self.dates, self.lengths, strict=False):
            parts.append(_added([arb(c) * arb(start) for c in z], [arb(0), *(arb(c) * arb(h) for c in z)], 1))
        return Running(parts, at, at, zeros[-1])

    def _level(self, values: list[fmpq] | list[arb] | None) -> Running | None:
        """ln(level/first level): a straight line between the rows of continuous data, a step at the row of period data."""
        if values is None:
            return None
        logs = [arb(value / values[0]).log() for value in values]
        growth = arb(values[-1] / values[-2]).log() / arb(self.gap)
        self._measured(1.0 + 1.0 / float(self.gap))
        if not self.assumed.periods:
            return joined_up(logs, growth)
        return Running([[log] for log in logs], [logs[0], *logs], [*logs, logs[-1]], growth)

    def _survival(self) -> Running | None:
        """−ln S, a straight line between rows; over the last period the last rate goes on."""
        shares = self.table.of_role("survival")
        if shares is None:
            return None
        logs = [-arb(share / shares[0]).log() for share in shares]
        rate = (logs[-1] - logs[-2]) / arb(self.gap)
        self._measured(1.0 + 1.0 / float(self.gap))
        if self.assumed.periods:
            logs.append(logs[-1] + rate * arb(self.gap))
        return joined_up(logs, rate)

    def _members(self) -> list[fmpq] | None:
        """The column of members, or all heads where neither a column nor a key counts them."""
        adults, children = self.table.of_role("adults"), self.table.of_role("children")
        column = self.table.of_role("members")
        if column is not None or adults is None or children is None or self.assumed.states("household", "members"):
            return column
        return [a + c for a, c in zip(adults, children, strict=True)]

    def _equivalents(self) -> tuple[arb, Running] | None:
        """E(0) and ln E/E(0)."""
        adults, children = self.table.of_role("adults"), self.table.of_role("children")
        if adults is None or children is None or not self.assumed.states("household", "scale"):
            return None
        scale = self.assumed.word("household", "scale", "")
        heads = list(zip(adults, children, strict=True))
        if scale == "square root":
            values = [arb(a + c).sqrt() for a, c in heads]
        else:
            adult, child = (figure(weight) for weight in HEADS[scale])
            values = [arb(1 + adult * (a - 1) + child * c) for a, c in heads]
        running = self._level(values)
        assert running is not None
        return values[0], running

    def at(self, running: Running, date: fmpq) -> arb:
        """A running integral at a date; what happens there happens after a jump, but at the very end before it."""
        if date == self.dates[-1]:
            return running.before[-1]
        i = max(k for k, start in enumerate(self.dates) if start <= date)
        if date == self.dates[i]:
            return running.after[i]
        x = arb((date - self.dates[i]) / self.lengths[i])
        return sum((c * x**j for j, c in enumerate(running.pieces[i])), arb(0))


class Restated:
    """From money in some basis and prices to money per unit of human capital at prices of t = 0."""

    def __init__(self, rates: Rates, assumed: Assumed) -> None:
        self.rates = rates
        heads, productivity = rates.heads, rates.productivity_level
        self.members = assumed.figure("household", "members", "1") if heads is None else heads[0]
        self.productivity = assumed.figure("household", "productivity", "1") if productivity is None else productivity[0]
        self.households = assumed.figure("household", "households", "1")
        self.scale = arb(self.members * self.productivity)

    def factor(self, basis: str) -> arb:
        if basis == "per equivalent adult":
            assert self.rates.equivalents is not None
            return self.rates.equivalents[0] / self.scale
        return {
            "per person": arb(1 / self.productivity),
            "per household": 1 / self.scale,
            "economy": 1 / (self.scale * arb(self.households)),
            "per effective unit": arb(1),
        }[basis]

    def growth(self, basis: str, nominal: bool) -> Running:
        """B − Π."""
        r = self.rates
        grown = {"per person": r.people, "per effective unit": r.human_capital}.get(basis, r.nothing)
        if basis == "per equivalent adult":
            assert r.equivalents is not None
            grown = r.equivalents[1]
        return grown.plus(r.inflation, -1) if nominal else grown


@dataclass(frozen=True)
class Side:
    """Income or consumption beyond the last row. decay: the discount rate less growth there; a declared converging tail has a
    long-run value and what is left of the departure from it, as multiples of the value in the last row (else 1 and 0)."""

    decay: arb
    lasting: arb
    fading: arb
    speed: arb
    excess: arb
    """The discount rate of the last row less the long-run one."""

    @property
    def finite(self) -> bool:
        return bool(self.decay > 0) if self.lasting != 0 else bool(self.decay + self.speed > 0)


class Column:
    """The present value of one column of amounts."""

    def __init__(self, rates: Rates, assumed: Assumed, reading: Reading, q: Running, side: Side) -> None:
        self.assumed, self.rates, self.reading, self.q, self.side = assumed, rates, reading, q, side

    def value(self, values: list[fmpq]) -> arb | None:
        """Rows and tail in the column's own money; None where infinite."""
        rows = self._periods(values) if self.assumed.periods else self._continuous(values)
        if not self.assumed.perpetual or values[-1] == 0 or (self.side.lasting == 0 and self.side.fading == 0):
            return sum(rows, arb(0))
        if not self.side.finite:
            return None
        beyond = self._further_periods(values[-1], rows[-1]) if self.assumed.periods else self._goes_on(values[-1])
        return sum(rows, arb(0)) + beyond

    def _continuous(self, values: list[fmpq]) -> list[arb]:
        path, rows, r = self.assumed.path, [], self.rates
        if path == "geometric":
            for (left, right), q, h in zip(pairwise(values), self.q.pieces, r.lengths, strict=True):
                rows.append(arb(h) * integral([left], _added(q, [arb(0), arb(right / left).log()], 1)))
        else:
            for p, q, h in zip(pieces(values, r.lengths, path, r.second), self.q.pieces, r.lengths, strict=True):
                rows.append(arb(h) * integral(p, q))
        return rows

    def _paid(self, value: fmpq, start: arb, end: arb, h: fmpq) -> arb:
        """The value of one period over which the exponent leads from start to end in a straight line."""
        spread = self.reading.timing == "spread"
        paid = arb(value * h if self.reading.per_year else value)
        if spread:
            return paid * integral([1], [start, end - start])
        at = {"in advance": start, "in arrears": end, "at mid-period": (start + end) / 2}[self.reading.timing]
        return paid * at.exp()

    def _periods(self, values: list[fmpq]) -> list[arb]:
        q, lengths = self.q, self.rates.lengths
        return [
            self._paid(value, q.after[i], q.before[i + 1], h) for i, (value, h) in enumerate(zip(values, lengths, strict=True))
        ]

    def _goes_on(self, value: fmpq) -> arb:
        """∫_0^∞ (lasting + fading·e^{−μs})·e^{−δs − b(1 − e^{−μs})} ds, b = excess/μ, at the value of the last row.

        With u = e^{−μs} it is ∫_0^1 (lasting + fading·u)·u^{δ/μ − 1}·e^{−b(1 − u)} du/μ, and
        ∫_0^1 u^{a−1} e^{−b(1−u)} du = e^{−b} 1F1(a; a + 1; b)/a = 1F1(1; a + 1; −b)/a.
        """
        s, level = self.side, arb(value) * self.q.before[-1].exp()
        if not self.assumed.converging:
            return level / s.decay
        b, total = s.excess / s.speed, arb(0)
        for weight, a in ((s.lasting, s.decay / s.speed), (s.fading, s.decay / s.speed + 1)):
            if weight != 0:
                whole = (-b).exp() * b.hypgeom_1f1(a, a + 1) if b > 0 else (-b).hypgeom_1f1(1, a + 1)
                total += weight * whole / (a * s.speed)
        return level * total

    def _further_periods(self, value: fmpq, last: arb) -> arb:
        """Σ_{j≥1} of the last period again, j periods on."""
        s, h = self.side, self.rates.lengths[-1]
        if not self.assumed.converging:
            return last / (s.decay * arb(h)).expm1()
        start, end = self.q.after[-2], self.q.before[-1]
        total, faded, step = arb(0), arb(1), (-s.speed * arb(h)).exp()
        for j in range(1, 200_000):
            # growth and discounting over the period before, then what r has moved since the last row within this one
            start, end = start - (s.decay + s.excess * faded) * arb(h), end - (s.decay + s.excess * faded) * arb(h)
            faded *= step
            moved = s.excess * (1 - faded) * arb(h)
            if j % 16 == 0 or j == 1:
                rest = self._rest(value, start, end, faded)
                whole = total + rest
                if rest.is_finite() and whole.rad() <= arb(2) ** -110 * abs(whole):
                    return whole
            total += (s.lasting + s.fading * faded) * self._paid(value, start, end + moved, h)
        raise AssertionError("a converging tail without end")

    def _rest(self, value: fmpq, start: arb, end: arb, faded: arb) -> arb:
        """Enclosure of all further periods from one on, r in each being within what is left of its departure."""
        s, h = self.side, arb(self.rates.lengths[-1])
        around = arb(0, float(1.01 * abs(s.excess * faded).upper())) if s.excess != 0 else arb(0)
        paid = self._paid(value, start, end + s.excess * h - around * h, self.rates.lengths[-1])
        lasting, fading = (-(s.decay + around) * h).exp(), (-(s.decay + s.speed + around) * h).exp()
        rest = arb(0)
        for weight, ratio in ((s.lasting, lasting), (s.fading * faded, fading)):
            if weight != 0:
                if not ratio < 1:
                    return arb("nan")
                rest += weight * paid / (1 - ratio)
        return rest


def exact(text: str, tree: Tree) -> Exact:
    """The lifetime account of a printed table under assumptions (a mapping in the shape of the assumptions file)."""
    with ctx.workprec(PRECISION):
        table = read(text, tree)
        return _Account(table, Assumed(tree, table.kind)).exact()


def by_side(lines: Iterable[tuple[str, arb | None]]) -> dict[str, arb | None]:
    """Sums of lines by side, each with its role; deductions are taken off income; None where one of them is infinite."""
    sums: dict[str, arb | None] = {"income": arb(0), "consumption": arb(0)}
    for role, line in lines:
        side = "consumption" if role == "consumption" else "income"
        so_far = sums[side]
        sums[side] = None if line is None or so_far is None else so_far - line if role == "deduction" else so_far + line
    return sums


class _Account:
    def __init__(self, table: Table, assumed: Assumed) -> None:
        self.table, self.assumed = table, assumed
        self.rates = Rates(table, assumed)
        self.restated = Restated(self.rates, assumed)
        self.readings = {head: assumed.reading(head) for head in table.amounts}

    def exact(self) -> Exact:
        sides = {name: self._side(name) for name in ("income", "consumption")}
        lines: dict[str, tuple[str, arb | None]] = {}
        size = self._size(self.rates.discount)
        for head, values in self.table.amounts.items():
            reading, role = self.readings[head], self.table.roles[head]
            factor = self.restated.factor(reading.basis) * arb(reading.unit)
            q = self.restated.growth(reading.basis, reading.nominal).plus(self.rates.discount, -1)
            side = sides["consumption" if role == "consumption" else "income"]
            value = Column(self.rates, self.assumed, reading, q, side).value(values)
            lines[head] = role, None if value is None else value * factor
            largest = factor * max(arb(1), self.restated.scale) * arb(max(map(abs, values)) * max(self.rates.lengths))
            size = max(size, self._size(q) + math.log(max(float(largest.mid()), 1.0)))
        for number, lump in enumerate(self.assumed.tree.get("lump_sum", []), start=1):
            lines[str(lump.get("label", f"lump sum {number}"))] = str(lump["role"]), self._single(lump)
        sums = by_side(lines.values())
        wealth, terminal = self._stocks()
        income, consumption = sums["income"], sums["consumption"]
        return Exact(
            slack=None if income is None or consumption is None else wealth + income - consumption - terminal,
            income=income,
            consumption=consumption,
            wealth=wealth,
            terminal=terminal,
            scale=self.restated.scale,
            lines={name: line for name, (_, line) in lines.items()},
            decays={name: side.decay for name, side in sides.items()},
            fading=frozenset(name for name, side in sides.items() if side.lasting == 0),
            blur=self.rates.blur,
            size=size,
        )

    def _size(self, running: Running) -> float:
        return max(sum(float(abs(c).upper()) for c in piece) for piece in [*running.pieces, *([c] for c in running.before)])

    def _side(self, name: str) -> Side:
        a, r = self.assumed, self.rates
        decay = r.discount.beyond - r.human_capital.beyond - continuous(a.figure("horizon", f"{name}_growth"), a.growth)
        if not a.converging:
            return Side(decay, arb(1), arb(0), arb(0), arb(0))
        excess = arb(0)
        if a.states("horizon", "interest"):
            cells = self.table.of_role("r")
            assert cells is not None
            excess = continuous(cells[-1], a.market) - continuous(a.figure("horizon", "interest"), a.market)
        target, now = a.figure("horizon", name), self._last(name)
        speed = arb(a.figure("horizon", "speed"))
        if target == 0:
            return Side(decay - excess, arb(0), arb(1), speed, excess)
        return Side(decay - excess, arb(target) / now, 1 - arb(target) / now, speed, excess)

    def _last(self, name: str) -> arb:
        """Income less deductions, or consumption, of the last row: per unit of human capital and year, that of a period at its
        middle."""
        total = arb(0)
        for head, values in self.table.amounts.items():
            role, reading = self.table.roles[head], self.readings[head]
            if ("consumption" if role == "consumption" else "income") != name:
                continue
            q = self.restated.growth(reading.basis, reading.nominal).plus(self.rates.human_capital, -1)
            at, level = q.before[-1], values[-1] * reading.unit
            if self.assumed.periods:
                at = (q.after[-2] + q.before[-1]) / 2
                level = level if reading.per_year else level / self.rates.lengths[-1]
            total += self.restated.factor(reading.basis) * arb(level) * at.exp() * (-1 if role == "deduction" else 1)
        return total

    def _single(self, lump: Mapping[str, Any]) -> arb:
        """An amount paid once, in the basis of wealth unless it has its own, in the prices of the amounts."""
        date = figure(lump["t"]) if "t" in lump else figure(lump["year"]) - self.table.start
        return self._at(str(lump.get("basis", self.assumed.wealth_basis)), figure(lump["amount"]), date)

    def _at(self, basis: str, amount: fmpq, date: fmpq) -> arb:
        q = self.restated.growth(basis, self.assumed.nominal).plus(self.rates.discount, -1)
        return self.restated.factor(basis) * arb(amount) * self.rates.at(q, date).exp()

    def _stocks(self) -> tuple[arb, arb]:
        """Initial wealth and the discounted terminal requirement, per unit of human capital."""
        a, opening = self.assumed, self.table.of_role("wealth")
        owned = a.figure("household", "wealth")
        if not a.states("household", "wealth") and opening is not None:
            owned = opening[0] * a.figure("amounts", "unit", "1")
        wealth = self.restated.factor(a.wealth_basis) * arb(owned)
        if a.perpetual:
            return wealth, arb(0)
        return wealth, self._at(a.wealth_basis, a.figure("horizon", "terminal_wealth"), self.rates.dates[-1])
