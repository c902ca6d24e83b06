"""Assumptions and a ledger settled into conventions: every choice made, each with its origin."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

from .assumptions import Assumption, Assumptions, Origin
from .findings import Finding, InputRefused, stop
from .keys import BY_PATH
from .ledger import Ledger
from .rates import ZERO, Rate
from .text import folded


@dataclass(frozen=True, kw_only=True)
class Conventions:
    """What the figures of a plan mean. Rates are continuous, 1/year; amounts are exact figures as declared.

    timing, path, quoted, basis, wealth_basis : words of the assumptions file; path is what is declared or "smooth".
    path_declared, tail_declared : whether the author said so, which decides whether an estimate of error is needed.
    interest : the constant r, or None where the table has a column.
    entries : every assumption in force, for the report.
    """

    timing: str
    path: str
    path_declared: bool
    quoted: str
    basis: str
    wealth_basis: str
    unit: Fraction
    compounding: str
    interest: Rate | None
    g: Rate
    n: Rate
    members: Fraction
    productivity: Fraction
    households: Fraction
    wealth: Fraction
    perpetual: bool
    terminal_wealth: Fraction
    tail_declared: bool
    income_growth: Rate
    consumption_growth: Rate
    tolerance: float
    entries: tuple[Assumption, ...]

    @cached_property
    def growth(self) -> Rate:
        """g + n: growth of human capital per household."""
        return self.g + self.n

    @property
    def periods(self) -> bool:
        """Whether each row speaks of a period (spread and lump timings) rather than of a date."""
        return self.timing != "continuous"


def settle(ledger: Ledger, assumptions: Assumptions) -> Conventions:
    """Fill in the defaults that depend on the table. Raises InputRefused where two declarations contradict each other."""
    timing = assumptions.word("amounts.timing") or ("continuous" if ledger.time_kind == "t" else "spread")
    basis = assumptions.word("amounts.basis") or "per person"
    own = basis if basis in ("per effective unit", "economy") else "per household"
    compounding = assumptions.word("market.compounding") or "continuous"
    growth_compounding = assumptions.word("growth.compounding") or compounding
    rates, faults = _rates(assumptions, compounding, growth_compounding)
    faults.extend(_contradictions(assumptions, timing))
    if faults:
        raise InputRefused(faults)
    resolved = {
        "amounts.timing": timing,
        "amounts.path": assumptions.word("amounts.path") or "smooth",
        "household.wealth_basis": assumptions.word("household.wealth_basis") or own,
        "growth.compounding": growth_compounding,
    }

    def figure(key: str) -> Fraction:
        value = assumptions.figure(key)
        assert value is not None, f"{key} has a default"
        return value

    return Conventions(
        timing=timing,
        path=resolved["amounts.path"],
        path_declared=assumptions.stated("amounts.path") is not None,
        quoted=assumptions.word("amounts.quoted") or "per period",
        basis=basis,
        wealth_basis=resolved["household.wealth_basis"],
        unit=figure("amounts.unit"),
        compounding=compounding,
        interest=rates.get("market.r"),
        g=rates["growth.g"],
        n=rates["growth.n"],
        members=figure("household.members"),
        productivity=figure("household.productivity"),
        households=figure("household.households"),
        wealth=figure("household.wealth"),
        perpetual=assumptions.word("horizon.kind") == "perpetual",
        terminal_wealth=figure("horizon.terminal_wealth"),
        tail_declared=assumptions.stated("horizon.tail") is not None,
        income_growth=rates["horizon.income_growth"],
        consumption_growth=rates["horizon.consumption_growth"],
        tolerance=float(figure("limits.tolerance")),
        entries=tuple(_entries(ledger, assumptions, resolved)),
    )


def _rates(assumptions: Assumptions, market: str, growth: str) -> tuple[dict[str, Rate], list[Finding]]:
    """The declared rates as continuous ones; [growth] and the tail share a compounding, [market] has its own."""
    rates: dict[str, Rate] = {}
    faults: list[Finding] = []
    for key, compounding in (
        ("market.r", market),
        ("growth.g", growth),
        ("growth.n", growth),
        ("horizon.income_growth", growth),
        ("horizon.consumption_growth", growth),
    ):
        figure = assumptions.figure(key)
        if figure is not None:
            try:
                rates[key] = Rate.declared(figure, compounding) if figure else ZERO
            except ValueError as error:
                row = stated.row if (stated := assumptions.stated(key)) else None
                faults.append(stop("assumption", f"{key}: {error}.", file=assumptions.file, row=row, column=key))
    return rates, faults


def _contradictions(assumptions: Assumptions, timing: str) -> Iterator[Finding]:
    """Keys that only one kind of timing gives a meaning."""
    path, quoted = assumptions.stated("amounts.path"), assumptions.stated("amounts.quoted")
    if path is not None and timing != "continuous":
        message = f'a path between rows needs timing = "continuous"; with timing "{timing}" every row is a total.'
        yield stop("assumption", message, file=assumptions.file, row=path.row, column="path")
    if quoted is not None and timing == "continuous":
        message = 'quoted needs a timing of totals, such as "spread"; with "continuous" every amount is a yearly rate at t.'
        yield stop("assumption", message, file=assumptions.file, row=quoted.row, column="quoted")


def _entries(ledger: Ledger, assumptions: Assumptions, resolved: dict[str, str]) -> Iterator[Assumption]:
    """Every assumption that has an effect, with its origin."""
    periods = resolved["amounts.timing"] != "continuous"
    perpetual = assumptions.word("horizon.kind") == "perpetual"
    growing = assumptions.word("horizon.tail") == "growing"
    basis = assumptions.word("amounts.basis")
    without_effect = {
        "amounts.path": periods,
        "amounts.quoted": not periods,
        "horizon.terminal_wealth": perpetual,
        "horizon.tail": not perpetual,
        "horizon.income_growth": not growing,
        "horizon.consumption_growth": not growing,
        "household.households": basis != "economy" and resolved["household.wealth_basis"] != "economy",
        "preferences.rho": True,
        "preferences.theta": True,
    }
    for path, key in BY_PATH.items():
        if without_effect.get(path, False):
            continue
        entry = assumptions.stated(path)
        if entry is None and path in resolved:
            entry = Assumption(key=path, value=resolved[path], unit="", origin=Origin.DEFAULT)
        if path == "market.r" and entry is None:
            entry = Assumption(key=path, value="column", unit=key.unit, origin=Origin.TABLE)
        entry = entry or assumptions.entry(path)
        if entry is not None:
            yield entry
    for header, role in assumptions.columns:
        if folded(header) in {folded(column.header) for column in ledger.columns}:
            yield Assumption(key=f"columns.{header}", value=role, unit="", origin=Origin.FILE)
