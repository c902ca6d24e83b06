"""Assumptions and a ledger settled into conventions: every choice made, each with its origin."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction

from .assumptions import Assumption, Assumptions, LumpSum, Origin
from .contradictions import contradictions
from .findings import Finding, InputRefused, stop
from .keys import BY_PATH
from .ledger import Ledger
from .rates import ZERO, Rate
from .text import folded


@dataclass(frozen=True, kw_only=True, eq=False)
class Reading:
    """What the figures of one column mean, in the words of the assumptions file; unit: money per 1 in the column."""

    timing: str
    quoted: str
    basis: str
    unit: Fraction
    nominal: bool


@dataclass(frozen=True, kw_only=True, eq=False)
class LongRun:
    """Where a declared converging tail leads: income and consumption per unit of human capital and year, at a speed (1/year);
    interest: r there, None where it stays."""

    income: Fraction
    consumption: Fraction
    speed: Fraction
    interest: Rate | None


@dataclass(frozen=True, kw_only=True, eq=False)
class Conventions:
    """What the figures of a plan mean. Rates are continuous, 1/year; amounts are exact figures as declared.

    reading: of the table's columns, own_readings: of those that differ, by folded header; periods: whether rows speak of
    periods; path: what is declared or "smooth"; path_declared, tail_declared: whether the author said so, which decides whether
    an estimate of error is needed; interest, inflation: None where the table has the column, or nothing is needed; members,
    productivity, wealth: None where a column says it; long_run: None unless declared; entries: every assumption in force.
    """

    reading: Reading
    own_readings: Mapping[str, Reading]
    path: str
    path_declared: bool
    wealth_basis: str
    wealth_at: str
    compounding: str
    growth_compounding: str
    curve: str
    market_nominal: bool
    interest: Rate | None
    inflation: Rate | None
    hazard: Rate
    g: Rate
    n: Rate
    members: Fraction | None
    productivity: Fraction | None
    scale: str | None
    households: Fraction
    wealth: Fraction | None
    perpetual: bool
    terminal_wealth: Fraction
    tail: str
    tail_declared: bool
    income_growth: Rate
    consumption_growth: Rate
    long_run: LongRun | None
    borrowing: Fraction | None
    rho: Rate | None
    theta: Fraction | None
    tolerance: float
    lump_sums: tuple[LumpSum, ...]
    entries: tuple[Assumption, ...]

    @property
    def periods(self) -> bool:
        """Whether each row speaks of a period (spread and lump timings) rather than of a date."""
        return self.reading.timing != "continuous"

    def reading_of(self, header: str) -> Reading:
        """What the figures of that column mean."""
        return self.own_readings.get(folded(header), self.reading)


def settle(ledger: Ledger, assumptions: Assumptions) -> Conventions:
    """Fill in the defaults that depend on the table. Raises InputRefused where two declarations contradict each other."""
    timing = assumptions.word("amounts.timing") or ("continuous" if ledger.time_kind == "t" else "spread")
    basis = assumptions.word("amounts.basis") or "per person"
    own = basis if basis in ("per effective unit", "economy") else "per household"
    compounding = assumptions.word("market.compounding") or "continuous"
    growth_compounding = assumptions.word("growth.compounding") or compounding
    rates, faults = _rates(assumptions, compounding, growth_compounding)
    faults.extend(contradictions(ledger, assumptions, timing))
    if faults:
        raise InputRefused(faults)
    resolved = {
        "amounts.timing": timing,
        "amounts.path": assumptions.word("amounts.path") or "smooth",
        "amounts.day_count": assumptions.word("amounts.day_count") or "ACT/ACT ISDA",
        "household.wealth_basis": assumptions.word("household.wealth_basis") or own,
        "growth.compounding": growth_compounding,
    }
    reading, own_readings = _readings(assumptions, timing, basis)

    def figure(key: str) -> Fraction:
        value = assumptions.figure(key)
        assert value is not None, f"{key} has a default"
        return value

    def unless_column(key: str, role: str) -> Fraction | None:
        # a figure that was not written gives way to the table's column
        return figure(key) if assumptions.stated(key) is not None or not _has(ledger, role) else None

    return Conventions(
        reading=reading,
        own_readings=own_readings,
        path=resolved["amounts.path"],
        path_declared=assumptions.stated("amounts.path") is not None,
        wealth_basis=resolved["household.wealth_basis"],
        wealth_at=assumptions.word("household.wealth_at") or "start",
        compounding=compounding,
        growth_compounding=growth_compounding,
        curve=assumptions.word("market.curve") or "forward",
        market_nominal=assumptions.word("market.prices") == "nominal",
        interest=rates.get("market.r"),
        inflation=rates.get("market.inflation"),
        hazard=rates.get("household.hazard", ZERO),
        g=rates["growth.g"],
        n=rates["growth.n"],
        members=unless_column("household.members", "members"),
        productivity=unless_column("household.productivity", "productivity"),
        scale=assumptions.word("household.scale"),
        households=figure("household.households"),
        wealth=unless_column("household.wealth", "wealth" if assumptions.word("household.wealth_at") != "end" else ""),
        perpetual=assumptions.word("horizon.kind") == "perpetual",
        terminal_wealth=figure("horizon.terminal_wealth"),
        tail=assumptions.word("horizon.tail") or "balanced growth",
        tail_declared=assumptions.stated("horizon.tail") is not None,
        income_growth=rates["horizon.income_growth"],
        consumption_growth=rates["horizon.consumption_growth"],
        long_run=_long_run(assumptions, rates),
        borrowing=assumptions.figure("limits.borrowing"),
        rho=rates.get("preferences.rho"),
        theta=assumptions.figure("preferences.theta"),
        tolerance=float(figure("limits.tolerance")),
        lump_sums=assumptions.lump_sums,
        entries=tuple(_entries(ledger, assumptions, resolved)),
    )


def _has(ledger: Ledger, role: str) -> bool:
    """Whether the table says it, members also through columns of adults and children."""
    heads = bool(ledger.of_role("adults")) and bool(ledger.of_role("children"))
    return bool(ledger.of_role(role)) or (role == "members" and heads)


def _readings(assumptions: Assumptions, timing: str, basis: str) -> tuple[Reading, dict[str, Reading]]:
    unit = assumptions.figure("amounts.unit")
    assert unit is not None, "amounts.unit has a default"
    common = Reading(
        timing=timing,
        quoted=assumptions.word("amounts.quoted") or "per period",
        basis=basis,
        unit=unit,
        nominal=assumptions.word("amounts.prices") == "nominal",
    )
    own = {}
    for entry in assumptions.columns:
        if not entry.own:
            continue
        word = {name: str(stated.value) for name in ("timing", "quoted", "basis", "prices") if (stated := entry.stated(name))}
        scale = entry.stated("unit")
        own[folded(entry.header)] = Reading(
            timing=word.get("timing", common.timing),
            quoted=word.get("quoted", common.quoted),
            basis=word.get("basis", common.basis),
            unit=common.unit if scale is None else Fraction(scale.value),
            nominal=word["prices"] == "nominal" if "prices" in word else common.nominal,
        )
    return common, own


def _long_run(assumptions: Assumptions, rates: dict[str, Rate]) -> LongRun | None:
    income, consumption, speed = (assumptions.figure(f"horizon.{name}") for name in ("income", "consumption", "speed"))
    if income is None or consumption is None or speed is None:
        return None
    return LongRun(income=income, consumption=consumption, speed=speed, interest=rates.get("horizon.interest"))


def _rates(assumptions: Assumptions, market: str, growth: str) -> tuple[dict[str, Rate], list[Finding]]:
    """The declared rates as continuous ones; [growth] and the tail share a compounding, [market] has its own, and a force of
    mortality and the subjective discount rate are continuous by nature."""
    rates: dict[str, Rate] = {}
    faults: list[Finding] = []
    compoundings = {
        "market.r": market,
        "market.inflation": market,
        "horizon.interest": market,
        "growth.g": growth,
        "growth.n": growth,
        "horizon.income_growth": growth,
        "horizon.consumption_growth": growth,
        "household.hazard": "continuous",
        "preferences.rho": "continuous",
    }
    for key, compounding in compoundings.items():
        figure = assumptions.figure(key)
        if figure is not None:
            try:
                rates[key] = Rate.declared(figure, compounding) if figure else ZERO
            except ValueError as error:
                row = stated.row if (stated := assumptions.stated(key)) else None
                faults.append(stop("assumption", f"{key}: {error}.", file=assumptions.file, row=row, column=key))
    return rates, faults


def _entries(ledger: Ledger, assumptions: Assumptions, resolved: dict[str, str]) -> Iterator[Assumption]:
    """Every assumption that has an effect, with its origin."""
    from_table = {
        "market.r": "r",
        "market.inflation": "inflation",
        "growth.g": "productivity" if ledger.of_role("productivity") else "g",
        "growth.n": "members" if _has(ledger, "members") else "n",
        "household.members": "members",
        "household.productivity": "productivity",
        "household.wealth": "wealth" if assumptions.word("household.wealth_at") != "end" else "",
        "household.hazard": "survival" if ledger.of_role("survival") else "hazard",
    }
    without_effect = _without_effect(ledger, assumptions, resolved)
    for path, key in BY_PATH.items():
        if without_effect.get(path, False):
            continue
        entry = assumptions.stated(path)
        if entry is None and path in resolved:
            entry = Assumption(key=path, value=resolved[path], unit="", origin=Origin.DEFAULT)
        if entry is None and path in from_table and _has(ledger, from_table[path]):
            entry = Assumption(key=path, value=f"column {from_table[path]}", unit=key.unit, origin=Origin.TABLE)
        entry = entry or assumptions.entry(path)
        if entry is not None:
            yield entry
    for column in assumptions.columns:
        if folded(column.header) in {folded(known.header) for known in ledger.columns}:
            yield Assumption(key=f"columns.{column.header}", value=column.role, unit="", origin=Origin.FILE, row=column.row)
            yield from column.own
    for number, lump in enumerate(assumptions.lump_sums, start=1):
        name = f"lump_sum {number}.{lump.label}"
        yield Assumption(key=name, value=lump.amount, unit=f"money, {lump.role}", origin=Origin.FILE, row=lump.row)


def _without_effect(ledger: Ledger, assumptions: Assumptions, resolved: dict[str, str]) -> dict[str, bool]:
    """Keys that say nothing in this plan, and so are not listed among its assumptions."""
    periods = resolved["amounts.timing"] != "continuous"
    perpetual = assumptions.word("horizon.kind") == "perpetual"
    growing = assumptions.word("horizon.tail") == "growing"
    bases = {assumptions.word("amounts.basis"), resolved["household.wealth_basis"]}
    bases |= {str(stated.value) for entry in assumptions.columns if (stated := entry.stated("basis"))}
    return {
        "amounts.path": periods,
        "amounts.quoted": not periods,
        "amounts.day_count": ledger.time_kind != "date",
        "household.wealth_at": not ledger.of_role("wealth"),
        "horizon.terminal_wealth": perpetual,
        "horizon.tail": not perpetual,
        "horizon.income_growth": not growing,
        "horizon.consumption_growth": not growing,
        "household.households": "economy" not in bases,
    }
