"""How fast an assessment is in process, and against adaptive quadrature of the same discounted interpolant.

python tests/bench/speed.py [--repetitions 21]
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Callable
from decimal import Decimal
from itertools import pairwise
from pathlib import Path
from statistics import median
from typing import Any

import numpy as np
import pandas as pd
from scipy.integrate import quad
from scipy.interpolate import CubicSpline

sys.path.insert(0, str(Path(__file__).parents[1]))

from oracle import exact

import budgetcheck
from budgetcheck import assumptions as declared
from budgetcheck.budget import Budget, budget
from budgetcheck.conventions import settle
from budgetcheck.ledger import keep
from budgetcheck.plan import build
from budgetcheck.rows import rows_of
from budgetcheck.table import from_frame

LIMIT_SMALL = 5e-3
LIMIT_LARGE = 1.0
LIMIT_EVERYTHING = 15e-3
LIMIT_RATIO = 50.0
ROWS_AGAINST_QUAD = 200


def totals(rows: int) -> tuple[pd.DataFrame, dict[str, Any]]:
    """Annual totals of a finite plan."""
    t = np.arange(float(rows))
    table = pd.DataFrame({"t": t, "wage": 1.0 + 0.5 * np.sin(t / 9.0), "consumption": 0.9 + 0.1 * np.cos(t / 5.0)})
    horizon = {"kind": "finite", "terminal_wealth": 0}
    market = {"r": Decimal("0.03"), "compounding": "annual"} if rows <= 1000 else {"r": Decimal("0.003")}
    return table, {"market": market, "amounts": {"timing": "spread"}, "horizon": horizon}


def path(rows: int) -> tuple[pd.DataFrame, dict[str, Any]]:
    """A smooth perpetual plan over 150 years with r as a column and an undeclared tail."""
    t = np.linspace(0.0, 150.0, rows)
    fading = np.exp(-0.06 * t)
    columns = {"t": t, "wage": 1.3 - 0.3 * fading, "consumption": 1.35 - 0.2 * fading, "r": 0.05 + 0.03 * fading}
    amounts = {"basis": "per effective unit", "timing": "continuous", "path": "smooth"}
    growth = {"g": Decimal("0.015"), "n": Decimal("0.005")}
    return pd.DataFrame(columns), {"growth": growth, "amounts": amounts, "horizon": {"kind": "perpetual"}}


def typical(function: Callable[[], object], repetitions: int) -> float:
    """Median seconds, after a first call."""
    function()
    taken = []
    for _ in range(repetitions):
        start = time.perf_counter()
        function()
        taken.append(time.perf_counter() - start)
    return median(taken)


def in_process(repetitions: int) -> None:
    """Print the time of a whole assessment on few and on many rows."""
    for rows, limit, times in ((100, LIMIT_SMALL, repetitions), (100_000, LIMIT_LARGE, 3)):
        for name, (table, assumptions) in {"annual totals": totals(rows), "smooth, r a column": path(rows)}.items():
            taken = typical(lambda table=table, assumptions=assumptions: budgetcheck.assess(table, assumptions), times)
            print(f"assess(), {rows:6d} rows, {name:18}  {1e3 * taken:8.2f} ms (limit {1e3 * limit:g} ms)")
    table, assumptions = everything(100)
    taken = typical(lambda: budgetcheck.assess(table, assumptions), repetitions)
    print(f"assess(), {100:6d} rows, {'every option':18}  {1e3 * taken:8.2f} ms (limit {1e3 * LIMIT_EVERYTHING:g} ms)")


def everything(rows: int) -> tuple[pd.DataFrame, dict[str, Any]]:
    """The smooth plan with every option at once: nominal figures and inflation as a column, reported wealth, preferences, a
    hazard, a borrowing limit, a single amount and a fitted converging tail."""
    table, assumptions = path(rows)
    table = table.assign(wealth=3.0, inflation=0.02)
    household = {"wealth": 3, "hazard": Decimal("0.01"), "wealth_basis": "per effective unit"}
    return table, assumptions | {
        "market": {"prices": "nominal"},
        "household": household,
        "horizon": {"kind": "perpetual", "tail": "converging"},
        "preferences": {"rho": Decimal("0.02"), "theta": 2},
        "limits": {"borrowing": 50},
        "lump_sum": [{"t": Decimal("12.5"), "role": "income", "amount": 1}],
    }


def account_only(table: pd.DataFrame, assumptions: dict[str, Any]) -> Callable[[], Budget]:
    """Streams, both routes to slack and their bounds, without what else an assessment computes."""
    stated = declared.read(assumptions)
    ledger = keep(from_frame(table), stated)
    conventions = settle(ledger, stated)
    rows = rows_of(ledger, conventions)
    return lambda: budget(build(rows, conventions, conventions.path))


def by_quad(table: pd.DataFrame, growth: float) -> float:
    """Present value of income less that of consumption over the rows, interval by interval by adaptive quadrature."""
    t = table["t"].to_numpy()
    cumulative = CubicSpline(t, table["r"].to_numpy(), bc_type="not-a-knot").antiderivative()
    total = 0.0
    for name, sign in (("wage", 1.0), ("consumption", -1.0)):
        flow = CubicSpline(t, table[name].to_numpy(), bc_type="not-a-knot")

        def discounted(s: float, flow: CubicSpline = flow) -> float:
            return float(flow(s) * np.exp(growth * s - cumulative(s)))

        for left, right in pairwise(t):
            total += sign * quad(discounted, left, right, epsabs=0.0, epsrel=1e-13)[0]
    return total


def against_quad(repetitions: int) -> None:
    """Print both times and both true errors, against exact arithmetic on the same floating-point figures."""
    table, assumptions = path(ROWS_AGAINST_QUAD)
    assumptions["horizon"] = {"kind": "finite", "terminal_wealth": 0}
    header = ",".join(table.columns)
    text = "\n".join([header, *(",".join(str(Decimal(float(x))) for x in row) for row in table.to_numpy())])
    truth = exact(text, assumptions).slack
    assert truth is not None
    ours = typical(lambda: budgetcheck.assess(table, assumptions), repetitions)
    theirs = typical(lambda: by_quad(table, 0.02), 3)
    slack = budgetcheck.assess(table, assumptions).slack.per_effective_unit
    assert slack is not None
    print(f"whole assessment, {ROWS_AGAINST_QUAD} rows  {1e3 * ours:.2f} ms, slack {slack.value:.6g}, bound {slack.bound:.1e}")
    account = typical(account_only(table, assumptions), repetitions)
    print(f"account by both routes      {1e3 * account:.2f} ms")
    print(f"scipy.integrate.quad        {1e3 * theirs:.1f} ms")
    print(
        f"ratio to quad               {theirs / ours:.0f} of the whole assessment, {theirs / account:.0f} of the account alone"
    )
    print(f"                            (limit at least {LIMIT_RATIO:g})")
    error, other = abs(float(truth - slack.value)), abs(float(truth - by_quad(table, 0.02)))
    print(f"true error                  {error:.1e}, of quad {other:.1e} (ours must be no larger)")


def on_many_rows(rows: int) -> None:
    """Print the ratio of times where the fixed costs of an assessment weigh less."""
    table, assumptions = path(rows)
    assumptions["horizon"] = {"kind": "finite", "terminal_wealth": 0}
    ours = typical(lambda: budgetcheck.assess(table, assumptions), 5)
    theirs = typical(lambda: by_quad(table, 0.02), 1)
    print(f"whole assessment, {rows} rows {1e3 * ours:.1f} ms, quad {1e3 * theirs:.0f} ms, ratio {theirs / ours:.0f}")


def main() -> None:
    """Parse, run."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repetitions", type=int, default=21)
    repetitions = parser.parse_args().repetitions
    in_process(repetitions)
    against_quad(repetitions)
    on_many_rows(2_000)


if __name__ == "__main__":
    main()
