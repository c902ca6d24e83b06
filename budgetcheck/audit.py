"""Rules that turn a ledger into findings. A rule is a function from (ledger, assumptions) to findings; RULES lists them.

Severity goes by consequence: stop where the figure cannot be meant or cannot be used, warn where a likely slip would change the
verdict, note otherwise.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

from .assumptions import Assumptions
from .findings import Finding, note, rest, stop, warn
from .ledger import Ledger, LedgerColumn
from .rates import CONVERSIONS
from .text import quoted

LIKELY_PERCENT = 0.25
"""Real rates beyond 25 % a year are crises, not plans, while 1 % written as 1 is 100 % (common practice)."""

LIKELY_PERCENT_GROWTH = 0.2

MOST_PER_RULE = 1000

Rule = Callable[[Ledger, Assumptions], Iterator[Finding]]


def audit(ledger: Ledger, assumptions: Assumptions) -> tuple[Finding, ...]:
    """Every finding of every rule."""
    return tuple(finding for rule in RULES for finding in rule(ledger, assumptions))


def _cells(ledger: Ledger, column: LedgerColumn, wrong: np.ndarray, rule: str, message: str, hint: str) -> Iterator[Finding]:
    found = np.flatnonzero(wrong)
    for index in found[:MOST_PER_RULE]:
        yield stop(
            rule,
            message,
            file=ledger.file,
            row=ledger.lines[index],
            column=column.header,
            raw=f"{column.values[index]:.17g}",
            hint=hint,
        )
    yield from rest(rule, len(found), MOST_PER_RULE, "cells of this column likewise", file=ledger.file, column=column.header)


def _sign(ledger: Ledger, _: Assumptions) -> Iterator[Finding]:
    """Negative consumption is a sign convention (outflows as negatives), never a plan; negative income is unusual."""
    for column in ledger.of_role("consumption"):
        wrong = column.values < 0
        hint = "write consumption as positive amounts." if wrong.all() else "write the amount consumed, 0 or more."
        yield from _cells(ledger, column, wrong, "sign", "consumption is negative;", hint)
    for column in ledger.of_role("income"):
        negative = np.flatnonzero(column.values < 0)
        if len(negative):
            first = ledger.lines[negative[0]]
            message = f"income is negative in {len(negative)} rows, first in line {first}; is an outflow meant?"
            yield warn("sign", message, file=ledger.file, row=first, column=column.header)


def _geometric(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A path that is linear in logarithms has no zero."""
    if assumptions.word("amounts.path") == "geometric":
        for column in (*ledger.of_role("income"), *ledger.of_role("consumption")):
            message = "a geometric path needs amounts above zero;"
            wrong = column.values <= 0
            yield from _cells(ledger, column, wrong, "assumption", message, 'declare another path, such as "linear".')


def _rate_cells(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A rate that loses everything, or a hundredfold gain in a year, is no rate."""
    conversions = CONVERSIONS.get(assumptions.word("market.compounding") or "", 1)
    for column in ledger.of_role("r"):
        wrong = (column.values <= -conversions) | (column.values < -1) | (column.values > 100)
        yield from _cells(ledger, column, wrong, "rate-scale", "is no interest rate;", "write a fraction: 0.05 for 5 %.")


def _percent(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A rate that looks like a percentage."""
    for column in ledger.of_role("r"):
        large = np.flatnonzero(np.abs(column.values) >= LIKELY_PERCENT)
        if len(large):
            value, row = column.values[large[0]], ledger.lines[large[0]]
            message = f"r is {value:g} in {len(large)} rows, first here: {100 * value:g} % a year. {_FRACTION}"
            yield warn("rate-scale", message, file=ledger.file, row=row, column=column.header)
    for path, limit in (
        ("market.r", LIKELY_PERCENT),
        ("growth.g", LIKELY_PERCENT_GROWTH),
        ("growth.n", LIKELY_PERCENT_GROWTH),
    ):
        figure = assumptions.figure(path)
        if figure is not None and abs(figure) >= limit:
            message = f"{path} is {float(figure):g}, that is {100 * float(figure):g} % a year. {_FRACTION}"
            yield warn("rate-scale", message, file=assumptions.file, column=path)


_FRACTION = "If a percentage was meant, write a fraction: 0.05 for 5 %."


def _horizon(_: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A finite table is never silently taken for a whole life."""
    keys = ("horizon.kind", "horizon.terminal_wealth")
    perpetual = assumptions.word("horizon.kind") == "perpetual"
    missing = [key for key in keys if assumptions.stated(key) is None]
    required = assumptions.stated("horizon.terminal_wealth")
    if perpetual and required is not None:
        message = "a perpetual plan has no end at which terminal_wealth could be required; remove the key."
        yield stop("assumption", message, file=assumptions.file, row=required.row, column="terminal_wealth")
    elif missing and not perpetual:
        message = (
            "the plan is taken to end with its table, with nothing required at the end: "
            f"{' and '.join(quoted(key) for key in missing)} not declared. Is the table the whole life?"
        )
        yield warn("horizon-cut", message, file=assumptions.file)


def _keys_without_effect(_: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A declaration that another one makes void is a contradiction to be settled by its author."""
    growing = assumptions.word("horizon.tail") == "growing"
    perpetual = assumptions.word("horizon.kind") == "perpetual"
    for key in ("horizon.income_growth", "horizon.consumption_growth"):
        stated = assumptions.stated(key)
        if stated is not None and not growing:
            yield stop("assumption", f'{key} needs tail = "growing".', file=assumptions.file, row=stated.row, column=key)
        elif stated is None and growing and key not in assumptions.attempted:
            yield stop("assumption", f'tail = "growing" needs {key}.', file=assumptions.file, column=key)
    tail = assumptions.stated("horizon.tail")
    if tail is not None and not perpetual:
        yield stop("assumption", 'a tail needs kind = "perpetual".', file=assumptions.file, row=tail.row, column="tail")
    for key in ("preferences.rho", "preferences.theta"):
        stated = assumptions.stated(key)
        if stated is not None:
            message = f"{key} does not enter the verdict: the plan is discounted with the market interest rate."
            yield note("preferences", message, file=assumptions.file, row=stated.row, column=key)


RULES: tuple[Rule, ...] = (_sign, _geometric, _rate_cells, _percent, _horizon, _keys_without_effect)
