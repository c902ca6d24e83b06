"""Random plans over everything the package reads: printed decimal text and a mapping of assumptions, from one seed each."""

from __future__ import annotations

import math
from dataclasses import dataclass
from decimal import Context, Decimal
from random import Random
from typing import Any

LARGEST_EXPONENT = 690.0
"""Supported range of the discount exponent and the logarithm of the amounts together."""

PRECISE = 16
"""Significant digits of figures where rounding before printing would itself make a wild path."""

_CONVERSIONS = ("annual", "semiannual", "quarterly", "monthly", "daily")
_WORDS = {
    "timing": ("continuous", "spread", "in advance", "in arrears", "at mid-period"),
    "path": ("step", "linear", "geometric", "smooth"),
    "basis": ("per person", "per household", "economy", "per effective unit"),
}


@dataclass(frozen=True, kw_only=True)
class Sample:
    """text: the table as CSV; assumptions: a mapping in the shape of the assumptions file."""

    text: str
    assumptions: dict[str, dict[str, Any]]


def printed(value: float, digits: int, rng: Random) -> str:
    """A figure with that many significant digits, plain or with an exponent."""
    text = f"{value:.{digits - 1}e}"
    plain = f"{Decimal(text):f}"
    return plain if len(plain) <= 60 and rng.random() < 0.8 else text


def draw(seed: int) -> Sample:
    """One plan; the same seed gives the same plan."""
    return _Draw(Random(seed)).sample()


class _Draw:
    def __init__(self, rng: Random) -> None:
        self.rng = rng
        self.tree: dict[str, dict[str, Any]] = {
            s: {} for s in ("market", "growth", "household", "amounts", "horizon", "columns")
        }

    def sample(self) -> Sample:
        rng = self.rng
        self.timing = rng.choice(("continuous", rng.choice(_WORDS["timing"])))
        self.path = rng.choice(_WORDS["path"])
        self.rows = rng.choice((2, 3, 4, rng.randint(4, 25), rng.randint(5, 12)))
        self._time()
        self._amounts()
        self._exponents()
        self._growth()
        self._horizon()
        columns = [self.dates, *self._flows(), *self._interest()]
        self._household()
        rng.shuffle(columns)
        text = "\n".join(",".join(record) for record in zip(*columns, strict=True)) + "\n"
        return Sample(text=text, assumptions={k: v for k, v in self.tree.items() if v})

    def _time(self) -> None:
        """Calendar years, or times with intervals from 1e-6 to 1e3 years, regular or not."""
        rng = self.rng
        self.wild = False
        kind = rng.choice(("year", "year gaps", "regular", "mild", "mild", "wild"))
        if kind.startswith("year"):
            gaps = [Decimal(1 if kind == "year" else rng.randint(1, 20)) for _ in range(self.rows - 1)]
            start, header = Decimal(rng.randint(1900, 2060)), "year"
        else:
            low, high = {"regular": (-2.0, 2.5), "mild": (-1.0, 1.0), "wild": (-6.0, 3.0)}[kind]
            self.wild = kind == "wild"
            lengths = [10.0 ** rng.uniform(low, high) for _ in range(self.rows - 1)]
            lengths = [lengths[0]] * len(lengths) if kind == "regular" else lengths
            digits = rng.randint(3, 15)
            gaps = [Decimal(f"{length:.{digits}e}") for length in lengths]
            start, header = Decimal(rng.choice(("0", "0", "2.5", "-3", "0.1"))), "t"
        context = Context(prec=60)
        dates = [start]
        for gap in gaps:
            dates.append(context.add(dates[-1], gap))
        self.dates = [header, *(f"{date:f}" for date in dates)]
        self.gaps = [float(gap) for gap in gaps]
        self.times = [float(context.subtract(date, start)) for date in dates]
        self.default_timing = "spread" if header == "year" else "continuous"
        self.end = self.times[-1] + (0.0 if self.timing == "continuous" else self.gaps[-1])

    def _amounts(self) -> None:
        rng, amounts = self.rng, self.tree["amounts"]
        if self.timing != self.default_timing or rng.random() < 0.5:
            amounts["timing"] = self.timing
        if self.timing == "continuous":
            amounts["path"] = self.path
        elif rng.random() < 0.5:
            amounts["quoted"] = rng.choice(("per period", "per year"))
        self.basis = rng.choice(_WORDS["basis"])
        if self.basis != "per person" or rng.random() < 0.5:
            amounts["basis"] = self.basis
        if rng.random() < 0.3:
            amounts["unit"] = rng.choice((1000, 0.01, Decimal("1e6"), 7))

    def _exponents(self) -> None:
        """How large R and the growth exponents become over the rows: a few units mostly, up to all that is supported."""
        rng = self.rng
        self.magnitude = rng.uniform(-12.0, 14.9) if rng.random() < 0.5 else rng.uniform(0.0, 6.0)
        room = LARGEST_EXPONENT - 30.0 - max(0.0, (self.magnitude + 6.0) * math.log(10.0) + math.log(max(self.end, 1.0)))
        reach = rng.choice((rng.uniform(0.0, 4.0), rng.uniform(0.0, 4.0), rng.uniform(4.0, 60.0), room * rng.uniform(0.3, 1.1)))
        self.largest_rate = min(0.7 * min(reach, room) / self.end, 30.0)
        self.growth_room = min(0.15 * min(reach, room) / self.end, 0.3)

    def _rate(self, largest: float) -> Decimal:
        """A rate with few digits or many, of either sign, within 1e-13 of zero now and then."""
        rng = self.rng
        kind = rng.random()
        if kind < 0.08:
            return Decimal(0)
        if kind < 0.16:
            return Decimal(f"{rng.choice((-1, 1)) * min(10.0 ** rng.uniform(-16, -13), largest):.3e}")
        size = largest * rng.uniform(0.4, 1.0) * (1 if rng.random() < 0.7 else -0.9)
        return Decimal(f"{max(size, -0.5):.{rng.choice((1, 2, 4, 14))}e}")

    def _growth(self) -> None:
        """g and n, under the compounding of r or their own."""
        rng = self.rng
        compounding = rng.choice(("continuous", *_CONVERSIONS))
        if compounding != "continuous" or rng.random() < 0.5:
            self.tree["market"]["compounding"] = compounding
        if rng.random() < 0.3:
            self.tree["growth"]["compounding"] = rng.choice(_CONVERSIONS)
        for name in ("g", "n"):
            if rng.random() < 0.7:
                self.tree["growth"][name] = self._rate(self.growth_room)

    def _interest(self) -> list[list[str]]:
        """r, declared or as a column, ordinary or next to g + n; a few perpetual plans diverge."""
        rng = self.rng
        growth = sum((self.tree["growth"].get(name, Decimal(0)) for name in ("g", "n")), Decimal(0))
        tie = rng.random() < 0.2
        if tie:
            offset = Decimal(f"{rng.choice((-1, 1, 1, 1)) * 10.0 ** rng.uniform(-16, -13):.2e}")
            base = Context(prec=40).add(growth, offset)
        else:
            base = self._rate(self.largest_rate)
            if self.tree["horizon"]["kind"] == "perpetual" and rng.random() < 0.9:
                tails = (self.tree["horizon"].get(name, Decimal(0)) for name in ("income_growth", "consumption_growth"))
                base = Decimal(f"{1.3 * float(growth + max(*tails, Decimal(0))) + abs(float(base)):.{rng.randint(2, 15)}e}")
        if rng.random() < 0.5:
            self.tree["market"]["r"] = base
            return []
        return [["r", *self._rate_cells(float(base), tie=tie)]]

    def _rate_cells(self, base: float, *, tie: bool) -> list[str]:
        rng = self.rng
        digits = PRECISE if self.wild or tie else rng.randint(3, PRECISE)
        swing = 1e-15 if tie else abs(base) * rng.uniform(0.0, 0.6)
        waves, phase = rng.uniform(0.0, 3.0), rng.uniform(0.0, 6.0)
        wave = [math.sin(waves * t / self.end + phase) for t in self.times]
        noise = 0.0 if self.wild else 0.2
        return [printed(base + swing * (w + noise * rng.uniform(-1.0, 1.0)), digits, rng) for w in wave]

    def _flows(self) -> list[list[str]]:
        """One to three columns of income, one or two of consumption."""
        rng = self.rng
        heads = [("wage", "income")] if rng.random() < 0.7 else [("Gross pay", "income"), ("Pension", "income")]
        heads.append(("consumption", "consumption"))
        if rng.random() < 0.2:
            heads.append(("Rent, net", "consumption"))
        if rng.random() < 0.1:
            heads.append(("Note", "ignore"))
        columns = []
        for head, role in heads:
            if head not in ("wage", "consumption"):
                self.tree["columns"][head] = role
            columns.append([f'"{head}"' if "," in head else head, *self._figures(allow_negative=role == "income")])
        return columns

    def _figures(self, *, allow_negative: bool) -> list[str]:
        rng = self.rng
        digits = rng.choice((1, 3, 6, 12, 15, 17))
        kind = rng.choice(("level", "trend", "noise", "wide"))
        geometric = self.timing == "continuous" and self.path == "geometric"
        slope = rng.uniform(-2.0, 2.0)
        cells = []
        for t in self.times:
            size = self.magnitude
            if kind == "trend":
                size += slope * t / self.end
            elif kind == "noise":
                size += rng.uniform(-0.3, 0.3)
            elif kind == "wide":
                size = rng.uniform(-12.0, max(self.magnitude, -11.0))
            value = 10.0 ** min(size, 14.9)
            if not geometric and kind in ("noise", "wide"):
                value = rng.choice((value, value, value, 0.0, -value if allow_negative else value))
            cells.append(printed(value, digits, rng))
        return cells

    def _household(self) -> None:
        rng, household = self.rng, self.tree["household"]
        for name, choices in (
            ("members", (1, 2, Decimal("2.37"), 7)),
            ("productivity", (1, 3, Decimal("0.013"), Decimal("1.7e4"))),
            ("households", (1, 1000, 38000000, Decimal("0.5"))),
        ):
            if rng.random() < 0.5:
                household[name] = rng.choice(choices)
        if rng.random() < 0.7:
            size = rng.choice((-1, 1, 1)) * 10.0 ** min(self.magnitude + rng.uniform(-1.0, 3.0), 14.9)
            household["wealth"] = Decimal(f"{size:.{rng.randint(1, 15)}e}")
        if rng.random() < 0.5:
            household["wealth_basis"] = rng.choice(_WORDS["basis"])

    def _horizon(self) -> None:
        """Finite, or perpetual with balanced growth or a growing tail; a few of these diverge."""
        rng, horizon = self.rng, self.tree["horizon"]
        if rng.random() < 0.5:
            horizon["kind"] = "finite"
            if rng.random() < 0.6:
                size = rng.choice((-1, 1, 1)) * 10.0 ** min(self.magnitude + rng.uniform(-1.0, 3.0), 14.9)
                horizon["terminal_wealth"] = Decimal(f"{size:.{rng.randint(1, 15)}e}")
            return
        horizon["kind"] = "perpetual"
        kind = rng.choice(("undeclared", "balanced growth", "growing"))
        if kind != "undeclared":
            horizon["tail"] = kind
        if kind == "growing":
            for name in ("income_growth", "consumption_growth"):
                horizon[name] = self._rate(0.02) if rng.random() < 0.5 else -abs(self._rate(0.5))
