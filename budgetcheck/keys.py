"""The keys an assumptions file may hold: type, choices, range and default of each, in one table."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from .paths import NAMES as PATHS
from .rates import COMPOUNDINGS

BASES = ("per person", "per household", "economy", "per effective unit")
TIMINGS = ("continuous", "spread", "in advance", "in arrears", "at mid-period")
ROLES = ("income", "consumption", "ignore")

LATER = "is part of the format but not of this version"


@dataclass(frozen=True, kw_only=True)
class Key:
    """One key. choices: a word is expected; low, high: a figure is, in that range (low itself excluded if `above`).

    default: what holds where the key is absent; None: depends on the table, or nothing. later: words that the format knows
    and this version refuses.
    """

    section: str
    name: str
    choices: tuple[str, ...] = ()
    low: Fraction | None = None
    high: Fraction | None = None
    above: bool = False
    default: str | Fraction | None = None
    later: tuple[str, ...] = ()
    unit: str = ""

    @property
    def path(self) -> str:
        """The key as it is named in messages and reports."""
        return f"{self.section}.{self.name}"


_LARGEST = Fraction(10**15)
_ZERO, _ONE = Fraction(0), Fraction(1)


def _rate(section: str, name: str, default: Fraction | None) -> Key:
    # below −100 % a year nothing is left to grow; from 100 upward a percentage was meant
    return Key(section=section, name=name, low=Fraction(-1), high=Fraction(100), above=True, default=default, unit="1/year")


def _amount(section: str, name: str, default: Fraction | None, *, unit: str = "money") -> Key:
    return Key(section=section, name=name, low=-_LARGEST, high=_LARGEST, default=default, unit=unit)


def _factor(section: str, name: str, unit: str) -> Key:
    # a factor of amounts: its range keeps products of four of them far inside floating point
    return Key(section=section, name=name, low=1 / _LARGEST, high=_LARGEST, default=_ONE, unit=unit)


def _word(section: str, name: str, choices: tuple[str, ...], default: str | None, later: tuple[str, ...] = ()) -> Key:
    return Key(section=section, name=name, choices=choices, default=default, later=later)


KEYS = (
    _rate("market", "r", None),
    _word("market", "compounding", COMPOUNDINGS, "continuous"),
    _word("market", "curve", ("forward",), "forward", later=("zero",)),
    _word("market", "prices", ("real",), "real", later=("nominal",)),
    _rate("growth", "g", _ZERO),
    _rate("growth", "n", _ZERO),
    _word("growth", "compounding", COMPOUNDINGS, None),
    _amount("household", "wealth", _ZERO),
    _word("household", "wealth_basis", BASES, None),
    _factor("household", "members", "persons per household"),
    _factor("household", "productivity", "index"),
    _factor("household", "households", "households"),
    _word("amounts", "basis", BASES, "per person"),
    _word("amounts", "timing", TIMINGS, None),
    _word("amounts", "quoted", ("per period", "per year"), "per period"),
    _word("amounts", "path", PATHS, None),
    _factor("amounts", "unit", "money per 1 in the table"),
    _word("amounts", "prices", ("real",), "real", later=("nominal",)),
    _word("horizon", "kind", ("finite", "perpetual"), "finite"),
    _amount("horizon", "terminal_wealth", _ZERO),
    _word("horizon", "tail", ("balanced growth", "growing"), "balanced growth", later=("converging",)),
    _rate("horizon", "income_growth", _ZERO),
    _rate("horizon", "consumption_growth", _ZERO),
    _rate("preferences", "rho", None),
    Key(section="preferences", name="theta", low=_ZERO, high=_LARGEST, above=True),
    Key(section="limits", name="tolerance", low=_ZERO, high=Fraction(1, 10), above=True, default=Fraction(1, 10**6)),
)

BY_PATH = {key.path: key for key in KEYS}
SECTIONS = (*dict.fromkeys(key.section for key in KEYS), "columns")

LATER_KEYS = frozenset(
    {
        "market.inflation",
        "horizon.income",
        "horizon.consumption",
        "horizon.speed",
        "limits.borrowing",
        "amounts.day_count",
        "amounts.wealth_at",
        "household.wealth_at",
    }
)
"""Keys of the format that this version refuses by name, since leaving them out of account could make a wrong PASS."""

OPTIONS = {
    "r": "market.r",
    "g": "growth.g",
    "n": "growth.n",
    "wealth": "household.wealth",
    "tolerance": "limits.tolerance",
}
"""Command-line options and the keys they override."""
