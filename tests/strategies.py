"""Random plans over what the package reads: printed decimal text and a mapping of assumptions, from one seed each.

Calendar dates other than years and fitted tails are left to tests of their own.
"""

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
_PERIODS = ("spread", "in advance", "in arrears", "at mid-period")
_PATHS = ("step", "linear", "geometric", "smooth")
_BASES = ("per person", "per household", "economy", "per effective unit")
_UNITS = (1000, Decimal("0.01"), Decimal("1e6"), 7)
_SCALES = ("OECD", "OECD-modified", "square root")

_SHARES = {"r": 0.5, "g": 0.11, "n": 0.11, "hazard": 0.09, "inflation": 0.09}
"""Of the room for exponents; all together stay within it."""


@dataclass(frozen=True, kw_only=True)
class Sample:
    """text: the table as CSV; assumptions: a mapping in the shape of the assumptions file."""

    text: str
    assumptions: dict[str, Any]


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
        sections = ("market", "growth", "household", "amounts", "horizon", "columns")
        self.tree: dict[str, dict[str, Any]] = {section: {} for section in sections}
        self.columns: list[list[str]] = []
        self.beyond = 0.0
        """What is taken off r beyond the last row: growth and, from a nominal r, inflation, less the hazard."""

    def sample(self) -> Sample:
        rng = self.rng
        self.timing = rng.choice(("continuous", rng.choice(_PERIODS)))
        self.path = rng.choice(_PATHS)
        self.rows = rng.choice((2, 3, 4, rng.randint(4, 25), rng.randint(5, 12)))
        self._time()
        self._amounts()
        self._exponents()
        self._horizon()
        self._compounding()
        self._growth()
        self._heads()
        self._prices()
        self._mortality()
        self._household()
        self._flows()
        self._interest()
        self._converging()
        lump_sums = self._lump_sums()
        columns = [self.dates, *self.columns]
        rng.shuffle(columns)
        text = "\n".join(",".join(record) for record in zip(*columns, strict=True)) + "\n"
        tree: dict[str, Any] = {section: body for section, body in self.tree.items() if body}
        return Sample(text=text, assumptions=tree | ({"lump_sum": lump_sums} if lump_sums else {}))

    @property
    def perpetual(self) -> bool:
        return bool(self.tree["horizon"]["kind"] == "perpetual")

    @property
    def geometric(self) -> bool:
        return self.timing == "continuous" and self.path == "geometric"

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
        self.marks, self.last_gap = dates, gaps[-1]
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
        self.basis = rng.choice(_BASES)
        if self.basis != "per person" or rng.random() < 0.5:
            amounts["basis"] = self.basis
        if rng.random() < 0.3:
            amounts["unit"] = rng.choice(_UNITS)

    def _exponents(self) -> None:
        """How large R and the growth exponents become over the rows: a few units mostly, up to all that is supported."""
        rng = self.rng
        self.magnitude = rng.uniform(-12.0, 14.9) if rng.random() < 0.5 else rng.uniform(0.0, 6.0)
        room = LARGEST_EXPONENT - 30.0 - max(0.0, (self.magnitude + 6.0) * math.log(10.0) + math.log(max(self.end, 1.0)))
        reach = rng.choice((rng.uniform(0.0, 4.0), rng.uniform(0.0, 4.0), rng.uniform(4.0, 60.0), room * rng.uniform(0.3, 1.1)))
        self.room = min(reach, room) / self.end

    def _largest(self, name: str) -> float:
        """The largest rate of that name that leaves room for the others."""
        return min(_SHARES[name] * self.room, 30.0 if name == "r" else 0.3)

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

    def _compounding(self) -> None:
        """Of r, which growth shares or not."""
        rng = self.rng
        self.market = rng.choice(("continuous", *_CONVERSIONS))
        if self.market != "continuous" or rng.random() < 0.5:
            self.tree["market"]["compounding"] = self.market
        if rng.random() < 0.3:
            self.tree["growth"]["compounding"] = rng.choice(_CONVERSIONS)

    def _growth(self) -> None:
        """g and n, declared or as columns of rates or of levels."""
        rng, self.levels = self.rng, {"productivity": False, "members": False}
        for name, level in (("g", "productivity"), ("n", "members")):
            kind = rng.random()
            if kind < 0.15:
                self._column_of_rates(name)
            elif kind < 0.3:
                self.levels[level] = True
                start = 10.0 ** rng.uniform(-2.0, 3.0) if level == "productivity" else rng.uniform(1.0, 6.0)
                self.beyond += self._column_of_levels(level, start, self._largest(name))
            elif kind < 0.8:
                self.tree["growth"][name] = self._rate(self._largest(name))
                self.beyond += float(self.tree["growth"][name])

    def _column_of_rates(self, name: str, *, positive: bool = False) -> None:
        rate = self._rate(self._largest(name))
        cells = self._rate_cells(float(abs(rate) if positive else rate), tie=False)
        self.columns.append([name, *cells])
        if name != "inflation":
            self.beyond += float(cells[-1]) * (-1.0 if name == "hazard" else 1.0)

    def _column_of_levels(self, name: str, start: float, largest: float, *, falling: bool = False) -> float:
        """Adds a column of levels; returns its growth beyond the last row."""
        rng = self.rng
        largest = min(largest, 25.0 / self.end)
        rate = -abs(float(self._rate(largest))) if falling else float(self._rate(largest))
        swing = 0.0 if falling or self.wild or self.perpetual else min(0.3, largest * self.end * 0.3)
        digits = PRECISE if self.wild or self.perpetual else rng.randint(3, PRECISE)
        sizes = [start * math.exp(rate * t + swing * rng.uniform(-1.0, 1.0)) for t in self.times]
        cells = [printed(size, digits, rng) for size in sizes]
        if rng.random() < 0.15:
            cells = [cells[0]] * len(cells)
        self.columns.append([name, *cells])
        return math.log(float(cells[-1]) / float(cells[-2])) / self.gaps[-1]

    def _heads(self) -> None:
        """Adults and children, as members of the household or for a scale of equivalent adults."""
        rng, household = self.rng, self.tree["household"]
        # few heads over long times leave r room; many changes within a short one would make growth beyond any r
        if rng.random() > 0.2 or self.wild or self.levels["members"] or min(self.gaps) < 0.2:
            return
        adults = [rng.choice((1, 2, 2, 3)) for _ in self.times]
        children = [rng.choice((0, 0, 1, 2, Decimal("0.5"))) for _ in self.times]
        if self.perpetual and rng.random() < 0.9:
            adults[-1], children[-1] = adults[-2], children[-2]
        counted = "n" not in self.tree["growth"] and all(column[0] != "n" for column in self.columns) and rng.random() < 0.6
        if not counted:
            household["members"] = rng.choice((2, Decimal("2.37")))
        else:
            heads = [float(a + c) for a, c in zip(adults, children, strict=True)]
            self.beyond += math.log(heads[-1] / heads[-2]) / self.gaps[-1]
            self.levels["members"] = True
        self.columns += [["adults", *map(str, adults)], ["children", *map(str, children)]]
        if rng.random() < 0.8:
            household["scale"] = rng.choice(_SCALES)
            self.tree["amounts"]["basis"] = self.basis = "per equivalent adult"

    def _prices(self) -> None:
        """Nominal and real r and amounts, with inflation where they need it."""
        rng, market, amounts = self.rng, self.tree["market"], self.tree["amounts"]
        for section in (market, amounts):
            if rng.random() < 0.3:
                section["prices"] = rng.choice(("nominal", "nominal", "real"))
        words = {market.get("prices", "real"), amounts.get("prices", "real")}
        self.inflated = len(words) == 2 or rng.random() < 0.1
        self.inflated |= "nominal" in words and (self.perpetual or rng.random() < 0.5)
        if not self.inflated:
            return
        if rng.random() < 0.5:
            self._column_of_rates("inflation")
            last = float(self.columns[-1][-1])
        else:
            market["inflation"] = self._rate(self._largest("inflation"))
            last = float(market["inflation"])
        self.beyond += last if market.get("prices") == "nominal" else 0.0

    def _mortality(self) -> None:
        rng = self.rng
        kind = rng.random()
        if kind < 0.1:
            hazard = abs(self._rate(self._largest("hazard")))
            self.tree["household"]["hazard"] = hazard
            self.beyond -= float(hazard)
        elif kind < 0.2:
            self._column_of_rates("hazard", positive=True)
        elif kind < 0.3:
            self.beyond += self._column_of_levels("survival", rng.choice((1.0, 0.98)), self._largest("hazard"), falling=True)

    def _interest(self) -> None:
        """r, declared or as a column, ordinary or next to what is taken off it; a few perpetual plans diverge."""
        rng, market = self.rng, self.tree["market"]
        declared = [self.tree["growth"].get(name, Decimal(0)) for name in ("g", "n")]
        declared += [market.get("inflation", Decimal(0))] if market.get("prices") == "nominal" else []
        tie = rng.random() < 0.2
        if tie:
            offset = Decimal(f"{rng.choice((-1, 1, 1, 1)) * 10.0 ** rng.uniform(-16, -13):.2e}")
            base = Context(prec=40).add(sum(declared, Decimal(0)), offset)
        else:
            base = self._rate(self._largest("r"))
            if self.perpetual and rng.random() < 0.9:
                tails = (float(self.tree["horizon"].get(name, 0)) for name in ("income_growth", "consumption_growth"))
                wanted = 1.3 * max(self.beyond + max(*tails, 0.0), 0.0) + abs(float(base))
                base = Decimal(f"{wanted:.{rng.randint(2, 15)}e}")
        if rng.random() < 0.5:
            market["r"] = base
            return
        if rng.random() < 0.3:
            market["curve"] = "zero"
        self.columns.append(["r", *self._rate_cells(float(base), tie=tie)])

    def _rate_cells(self, base: float, *, tie: bool) -> list[str]:
        rng = self.rng
        digits = PRECISE if self.wild or tie else rng.randint(3, PRECISE)
        # a forward rate between zero rates moves with them times t over the gap
        zero = self.tree["market"].get("curve") == "zero"
        swing = 1e-15 if tie else abs(base) * rng.uniform(0.0, 0.05 if zero and self.perpetual else 0.6)
        waves, phase = rng.uniform(0.0, 3.0), rng.uniform(0.0, 6.0)
        wave = [math.sin(waves * t / self.end + phase) for t in self.times]
        noise = 0.0 if self.wild or zero else 0.2
        return [printed(base + swing * (w + noise * rng.uniform(-1.0, 1.0)), digits, rng) for w in wave]

    def _flows(self) -> None:
        """One to three columns of income, one or two of consumption, and taxes, each with a reading of its own or not."""
        rng = self.rng
        heads = [("wage", "income")] if rng.random() < 0.7 else [("Gross pay", "income"), ("Pension", "income")]
        heads.append(("consumption", "consumption"))
        if rng.random() < 0.2:
            heads.append(("Rent, net", "consumption"))
        if rng.random() < 0.25:
            heads.append(("Tax", "deduction"))
        if rng.random() < 0.1:
            heads.append(("Note", "ignore"))
        for head, role in heads:
            own = self._own() if role != "ignore" and rng.random() < 0.35 else {}
            if own:
                self.tree["columns"][head] = {"role": role, **own}
            elif head not in ("wage", "consumption"):
                self.tree["columns"][head] = role
            smaller = 1.0 if role == "deduction" else 0.0
            figures = self._figures(smaller, allow_negative=role in ("income", "deduction"))
            self.columns.append([f'"{head}"' if "," in head else head, *figures])
        entries = [self.tree["columns"].get(head) for head, role in heads if role != "ignore"]
        bases = {entry.get("basis", self.basis) if isinstance(entry, dict) else self.basis for entry in entries}
        if "scale" in self.tree["household"] and "per equivalent adult" not in bases:
            del self.tree["household"]["scale"]

    def _own(self) -> dict[str, Any]:
        """What a column says of itself."""
        rng = self.rng
        own: dict[str, Any] = {}
        if self.timing != "continuous":
            if rng.random() < 0.6:
                own["timing"] = rng.choice(_PERIODS)
            if rng.random() < 0.3:
                own["quoted"] = rng.choice(("per period", "per year"))
        if rng.random() < 0.5:
            scaled = ("per equivalent adult",) if "scale" in self.tree["household"] else ()
            own["basis"] = rng.choice((*_BASES, *scaled))
        if rng.random() < 0.3:
            own["unit"] = rng.choice((1, *_UNITS))
        if self.inflated and rng.random() < 0.5:
            own["prices"] = rng.choice(("real", "nominal"))
        return own

    def _figures(self, smaller: float, *, allow_negative: bool) -> list[str]:
        """Figures of the plan's magnitude, or smaller by so many powers of ten."""
        rng = self.rng
        digits = rng.choice((1, 3, 6, 12, 15, 17))
        kind = rng.choice(("level", "trend", "noise", "wide"))
        if self.tree["horizon"].get("tail") == "converging":
            # shares of a side that is zero in the last row could not go on
            kind = rng.choice(("level", "trend"))
        slope = rng.uniform(-2.0, 2.0)
        cells = []
        for t in self.times:
            size = self.magnitude - smaller
            if kind == "trend":
                size += slope * t / self.end
            elif kind == "noise":
                size += rng.uniform(-0.3, 0.3)
            elif kind == "wide":
                size = rng.uniform(-12.0, max(self.magnitude, -11.0))
            value = 10.0 ** min(size, 14.9)
            if not self.geometric and kind in ("noise", "wide"):
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
            if rng.random() < 0.5 and not self.levels.get(name, False) and name not in household:
                household[name] = rng.choice(choices)
        if rng.random() < 0.1:
            self.columns.append(["wealth", *self._figures(-1.0, allow_negative=True)])
        elif rng.random() < 0.7:
            size = rng.choice((-1, 1, 1)) * 10.0 ** min(self.magnitude + rng.uniform(-1.0, 3.0), 14.9)
            household["wealth"] = Decimal(f"{size:.{rng.randint(1, 15)}e}")
        if rng.random() < 0.5:
            household["wealth_basis"] = rng.choice(_BASES)

    def _horizon(self) -> None:
        """Finite, or perpetual with balanced growth, a growing or a converging tail; a few of these diverge."""
        rng, horizon = self.rng, self.tree["horizon"]
        if rng.random() < 0.5:
            horizon["kind"] = "finite"
            if rng.random() < 0.6:
                size = rng.choice((-1, 1, 1)) * 10.0 ** min(self.magnitude + rng.uniform(-1.0, 3.0), 14.9)
                horizon["terminal_wealth"] = Decimal(f"{size:.{rng.randint(1, 15)}e}")
            return
        horizon["kind"] = "perpetual"
        kind = rng.choice(("undeclared", "balanced growth", "growing", "converging"))
        if kind == "converging" and self.timing != "continuous" and self.gaps[-1] < 0.01:
            # no speed in range would settle within the further periods that are taken
            kind = "balanced growth"
        if kind != "undeclared":
            horizon["tail"] = kind
        if kind == "growing":
            for name in ("income_growth", "consumption_growth"):
                horizon[name] = self._rate(0.02) if rng.random() < 0.5 else -abs(self._rate(0.5))

    def _converging(self) -> None:
        """Long-run values and the speed towards them: time constants of a few to a few dozen periods, or of any length."""
        rng, horizon = self.rng, self.tree["horizon"]
        if horizon.get("tail") != "converging":
            return
        for name in ("income", "consumption"):
            size = 10.0 ** min(self.magnitude + rng.uniform(-2.0, 2.0), 14.9)
            horizon[name] = Decimal(f"{size:.{rng.randint(1, 15)}e}") if rng.random() < 0.85 else 0
        speed = 10.0 ** rng.uniform(-2.0, 0.5) / (1.0 if self.timing == "continuous" else self.gaps[-1])
        cells = next((column[1:] for column in self.columns if column[0] == "r"), None)
        # where r is large, a slow movement would leave the range of exponents before it has faded
        r = abs(float(self.tree["market"]["r"] if cells is None else cells[-1]))
        horizon["speed"] = Decimal(f"{min(max(speed, 0.12 * r, 1e-4), 900.0):.{rng.randint(1, 6)}e}")
        if cells is not None and "curve" not in self.tree["market"] and rng.random() < 0.6:
            horizon["interest"] = Decimal(f"{max(float(cells[-1]) * rng.uniform(0.7, 1.5), -0.5):.{rng.randint(2, 12)}e}")

    def _lump_sums(self) -> list[dict[str, Any]]:
        """Single amounts, at the rows' own dates, at both ends, between them, and next to each other."""
        rng, context = self.rng, Context(prec=60)
        entries: list[dict[str, Any]] = []
        if rng.random() > 0.25:
            return entries
        end = self.marks[-1] if self.timing == "continuous" else context.add(self.marks[-1], self.last_gap)
        for number in range(rng.choice((1, 2, 4))):
            share = Decimal(f"{rng.random():.{rng.randint(1, 12)}f}")
            between = context.add(self.marks[0], context.multiply(share, context.subtract(end, self.marks[0])))
            date = rng.choice((self.marks[0], end, rng.choice(self.marks), between, between))
            size = Decimal(f"{10.0 ** min(self.magnitude + rng.uniform(-1.0, 1.0), 14.9):.{rng.randint(0, 15)}e}")
            entry: dict[str, Any] = {"role": rng.choice(("income", "consumption", "deduction")), "amount": size}
            if self.dates[0] == "year" and rng.random() < 0.5:
                entry["year"] = date
            else:
                entry["t"] = context.subtract(date, self.marks[0])
            if rng.random() < 0.5:
                entry["label"] = f"single amount {number}"
            if rng.random() < 0.5:
                entry["basis"] = rng.choice(_BASES)
            entries.append(entry)
        return entries
