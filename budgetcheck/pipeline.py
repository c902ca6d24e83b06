"""The pipeline from a table to an assessment, as one function."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from . import assumptions as assumptions_module
from .assessment import Assessment
from .budget import Budget, budget
from .carrying import carrying
from .conditions import Evidence, conditions
from .conventions import Conventions
from .estimates import Fitted, TailEstimate, converging_tail, fitted, open_between_rows, reconstruction, tail
from .findings import Finding, InputRefused, note, stop, worst_first
from .intake import Intake, take_in
from .ledger import Ledger
from .notices import flow_findings, notices
from .paths import overshoots
from .plan import NoPath, OutOfRange, Plan, build
from .rows import rows_of
from .summary import agreement, slack, span
from .summary import tail as tail_of
from .verdict import Decision, Errors, breached, decide
from .version import VERSION
from .wealth import WealthPath, wealth_path
from .weights import RowWeights, row_weights

if TYPE_CHECKING:
    import pandas as pd

    from .flow import Flow
    from .preferences import Preferences


def assess(
    plan: pd.DataFrame | str | Path,
    assumptions: assumptions_module.Source = None,
    *,
    options: dict[str, str] | None = None,
) -> Assessment:
    """Decide whether a plan is affordable over its whole life.

    plan: a DataFrame, or the path of a CSV file ("-": standard input). assumptions: the path of a TOML file or a mapping in its
    shape; by default the file beside the plan with the ending .toml, if there is one. options: figures by option name that
    override it. Raises InputRefused, with every fault found, where the input cannot be assessed.
    """
    taken = take_in(plan, assumptions, options)
    built, found = _built(taken.ledger, taken.conventions)
    try:
        return _assessed(taken, _Tailed(built), [*taken.findings, *found])
    except NoPath as error:
        raise InputRefused([stop("assumption", f"{error}.", file=taken.stated.file, column="tail")]) from error
    except OutOfRange as error:
        raise InputRefused([*taken.findings, *found, stop("out-of-range", f"{error}.", file=taken.ledger.file)]) from error


def _built(ledger: Ledger, conventions: Conventions) -> tuple[Plan, list[Finding]]:
    """The plan; a smooth path that nobody declared gives way to a linear one where it leaves the range of the rows."""
    rows = rows_of(ledger, conventions)
    plan = build(rows, conventions, conventions.path)
    found: list[Finding] = []
    if plan.path == "smooth" and not conventions.path_declared:
        columns = [column for column in ledger.columns if column.role in _ON_PATH]
        values = np.stack([column.values for column in columns])
        wild = overshoots(values, plan.amounts_path.coefficients(values, 0.0).p)
        for column, where in zip(columns, wild, strict=True):
            if where.any():
                row = ledger.lines[int(np.argmax(where))]
                message = (
                    "a smooth path through the rows would leave their range after this row, so that straight lines are used; "
                    'declare path = "smooth", "linear" or "step" under [amounts].'
                )
                found.append(note("path", message, file=ledger.file, row=row, column=column.header))
        if found:
            plan = build(rows, conventions, "linear")
    if plan.path == "step":
        message = "under a step path the last row has no width: its amounts only say what follows it."
        if not conventions.perpetual:
            message = "under a step path the last row has no width: its amounts do not enter the plan."
        found.append(note("path", message, file=ledger.file, row=ledger.lines[-1]))
    return plan, found


_ON_PATH = frozenset({"income", "deduction", "consumption", "r", "g", "n", "inflation", "hazard"})
"""Roles of columns that follow the path between rows."""


class _Tailed:
    """A plan with the tail it is to have: as it was built, or extended by a converging one."""

    def __init__(self, balanced: Plan) -> None:
        self.balanced = self.plan = balanced
        self.fitted: Fitted | None = None
        self.extend: Callable[[Plan], Plan] | None = None
        self._thinned = [balanced]
        c = balanced.conventions
        if not c.perpetual or c.tail != "converging":
            return
        from .extension import extended
        from .longrun import declared_curves

        if c.long_run is None:
            self.fitted = fitted(balanced)
            curves = self.fitted.settled
        else:
            curves = declared_curves(balanced)
        if curves is not None:
            self.plan = extended(balanced, curves)
            self.extend = lambda plan: extended(plan, curves)

    def thinned(self, times: int) -> Plan:
        """The same plan from every second row, so many times over."""
        while len(self._thinned) <= times:
            plan = build(self._thinned[-1].rows.thinned(), self.balanced.conventions, self.balanced.path)
            self._thinned.append(plan if self.extend is None else self.extend(plan))
        return self._thinned[times]

    def estimate(self, computed: Budget) -> TailEstimate:
        """What is not known of the tail."""
        if self.balanced.conventions.perpetual and self.balanced.conventions.tail == "converging":
            return converging_tail(self.balanced, self.fitted)
        return tail(computed)


def _assessed(taken: Intake, tailed: _Tailed, found: list[Finding]) -> Assessment:
    ledger = taken.ledger
    computed = budget(tailed.plan)
    plan, unit = computed.plan, computed.unit.account
    open_path, open_tail = reconstruction(computed, tailed.thinned), tailed.estimate(computed)
    path = wealth_path(computed, open_path)
    weights = row_weights(computed, path)
    errors = Errors(
        numerical=unit.slack.bound,
        reconstruction=open_path,
        tail=open_tail.error,
        input_rounding=weights.input_rounding,
    )
    by_slack = decide(plan, unit, errors, open_tail)
    decision = breached(by_slack, plan, path)
    reported = _reported(computed, tailed, path, weights, by_slack)
    preferred = _preferred(computed)
    found = [*found, *notices(ledger, taken.stated, plan, weights, by_slack), *flow_findings(ledger, plan, reported)]
    evidence = Evidence(plan=plan, account=unit, decision=by_slack, path=path, flow=reported, preferences=preferred)
    return Assessment(
        version=VERSION,
        input_sha256=ledger.sha256,
        span=span(ledger, plan, taken.stated.file),
        verdict=decision.verdict,
        reason=decision.reason,
        would_decide=decision.would_decide,
        slack=slack(computed, decision),
        present_values=unit,
        present_values_per_household=computed.household.account,
        routes_differ=agreement(computed),
        error=errors,
        decision=decision,
        conditions=conditions(evidence),
        wealth_path=path,
        weights=weights,
        carrying=carrying(plan, weights),
        flow=reported,
        preferences=preferred,
        tail=tail_of(plan, unit, open_tail),
        assumptions=plan.conventions.entries,
        findings=worst_first(ledger.table.addressed(found)),
        lines=ledger.lines,
        times=plan.rows.timeline.times,
        date=plan.rows.timeline.date,
        report=_in_words,
    )


def _reported(computed: Budget, tailed: _Tailed, path: WealthPath, weights: RowWeights, by_slack: Decision) -> Flow | None:
    """Reported wealth against the flows, where there is any."""
    if "wealth" not in computed.plan.rows.measures:
        return None
    from .flow import flow

    plan = computed.plan
    thinned = tailed.thinned(1) if open_between_rows(plan) else None
    return flow(computed, path, weights, thinned, by_slack.threshold)


def _preferred(computed: Budget) -> Preferences | None:
    """What preferences say of the plan, where they are declared."""
    if computed.plan.conventions.theta is None:
        return None
    from .preferences import preferences

    return preferences(computed)


def _in_words(assessment: Assessment) -> str:
    """The terminal's report, rendered only when asked for."""
    from .report.terminal import render

    return render(assessment, width=100)
