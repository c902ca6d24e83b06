"""Rules that turn a ledger into findings. A rule is a function from (ledger, assumptions) to findings; RULES lists them.

Severity goes by consequence: stop where the figure cannot be meant or cannot be used, warn where a likely slip would change the
verdict, note otherwise.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

from .assumptions import Assumptions
from .findings import Finding, note, rest, stop, warn
from .keys import FLOW_ROLES
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
    for column in (*ledger.of_role("income"), *ledger.of_role("deduction")):
        negative = np.flatnonzero(column.values < 0)
        if len(negative):
            first = ledger.lines[negative[0]]
            meant = "an outflow" if column.role == "income" else "a refund, or a sign that says 'taken off' twice,"
            message = f"{column.role} is negative in {len(negative)} rows, first in line {first}; is {meant} meant?"
            yield warn("sign", message, file=ledger.file, row=first, column=column.header)


def _geometric(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A path that is linear in logarithms has no zero."""
    if assumptions.word("amounts.path") == "geometric":
        for column in (column for role in FLOW_ROLES for column in ledger.of_role(role)):
            message = "a geometric path needs amounts above zero;"
            wrong = column.values <= 0
            yield from _cells(ledger, column, wrong, "assumption", message, 'declare another path, such as "linear".')


def _rate_cells(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A rate that loses everything, or a hundredfold gain in a year, is no rate."""
    market = assumptions.word("market.compounding") or ""
    growth = assumptions.word("growth.compounding") or market
    columns = [(column, market) for role in ("r", "inflation") for column in ledger.of_role(role)]
    columns += [(column, growth) for role in ("g", "n") for column in ledger.of_role(role)]
    for column, compounding in columns:
        wrong = (column.values <= -CONVERSIONS.get(compounding, 1)) | (column.values < -1) | (column.values > 100)
        what = "is no interest rate;" if column.role == "r" else "is no rate a year;"
        yield from _cells(ledger, column, wrong, "rate-scale", what, "write a fraction: 0.05 for 5 %.")


def _percent(ledger: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """A rate that looks like a percentage."""
    for role, limit in (
        ("r", LIKELY_PERCENT),
        ("inflation", LIKELY_PERCENT),
        ("g", LIKELY_PERCENT_GROWTH),
        ("n", LIKELY_PERCENT_GROWTH),
    ):
        for column in ledger.of_role(role):
            large = np.flatnonzero(np.abs(column.values) >= limit)
            if len(large):
                value, row = column.values[large[0]], ledger.lines[large[0]]
                message = f"{role} is {value:g} in {len(large)} rows, first here: {100 * value:g} % a year. {_FRACTION}"
                yield warn("rate-scale", message, file=ledger.file, row=row, column=column.header)
    for path, limit in (
        ("market.r", LIKELY_PERCENT),
        ("market.inflation", LIKELY_PERCENT),
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


def _preferences(_: Ledger, assumptions: Assumptions) -> Iterator[Finding]:
    """The subjective discount rate is no interest rate, and conditions on preferences take both of their figures."""
    stated = [assumptions.stated(key) for key in ("preferences.rho", "preferences.theta")]
    if stated[0] is not None and stated[1] is not None:
        return
    for entry in stated:
        if entry is not None:
            other = "theta" if entry.key.endswith("rho") else "rho"
            message = (
                f"{entry.key} does not enter the verdict: the plan is discounted with the market interest rate; conditions on "
                f"preferences need preferences.{other} too."
            )
            yield note("preferences", message, file=assumptions.file, row=entry.row, column=entry.key)


def _heads(ledger: Ledger, _: Assumptions) -> Iterator[Finding]:
    """People cannot be fewer than none, nor a household without an adult, nor a level of productivity or survival zero."""
    for role, low, inclusive, message, hint in (
        ("members", 0.0, False, "a household has no members;", "write how many persons it has, more than 0."),
        ("productivity", 0.0, False, "an index of productivity is zero or negative;", "write a positive index."),
        ("adults", 1.0, True, "a household has no adult;", "equivalence scales count from one adult."),
        ("children", 0.0, True, "a number of children is negative;", "write 0 or more."),
        ("survival", 0.0, False, "nobody is left alive;", "end the plan before survival is zero."),
        ("hazard", 0.0, True, "a force of mortality is negative;", "write deaths per person and year, 0 or more."),
    ):
        for column in ledger.of_role(role):
            wrong = column.values < low if inclusive else column.values <= low
            yield from _cells(ledger, column, wrong, "head-count", message, hint)
    for column in ledger.of_role("survival"):
        rises = np.concatenate([[False], np.diff(column.values) > 0.0])
        yield from _cells(ledger, column, rises, "head-count", "survival rises;", "write the share still alive at each date.")


RULES: tuple[Rule, ...] = (_sign, _geometric, _rate_cells, _percent, _heads, _horizon, _preferences)
