"""The pipeline from a table to an assessment, as one function."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from . import assumptions as assumptions_module
from .assessment import Assessment, Slack, Span, Tail
from .assumptions import Assumptions
from .audit import audit
from .bounded import Bounded
from .budget import Account, Budget, PresentValue, Reach, budget
from .conditions import conditions
from .conventions import Conventions, settle
from .estimates import TailEstimate, reconstruction, tail
from .findings import Finding, InputRefused, Severity, note, stop, warn, worst_first
from .ledger import Ledger, keep
from .paths import overshoots
from .plan import OutOfRange, Plan, build
from .quadrature import WEIGHTS, at_nodes
from .rows import rows_of
from .table import Table, from_frame, read_csv
from .verdict import Decision, Errors, decide
from .version import VERSION
from .wealth import wealth_path
from .weights import RowWeights, row_weights

if TYPE_CHECKING:
    import pandas as pd


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
    ledger, stated, conventions, found = _read(plan, assumptions, options)
    built, more = _built(ledger, conventions)
    found = [*found, *more]
    try:
        return _assessed(ledger, budget(built), found, stated.file)
    except OutOfRange as error:
        raise InputRefused([*found, stop("out-of-range", f"{error}.", file=ledger.file)]) from error


def _read(
    plan: pd.DataFrame | str | Path, source: assumptions_module.Source, options: dict[str, str] | None
) -> tuple[Ledger, Assumptions, Conventions, list[Finding]]:
    """Table, assumptions and the conventions they settle; the faults of all are reported together."""
    found: list[Finding] = []
    table: Table | None = None
    stated: Assumptions | None = None
    try:
        table = read_csv(plan) if isinstance(plan, (str, Path)) else from_frame(plan)
    except InputRefused as refused:
        found.extend(refused.findings)
    try:
        stated = assumptions_module.read(_beside(plan) if source is None else source, options)
        found.extend(stated.findings)
    except InputRefused as refused:
        found.extend(refused.findings)
    if table is None:
        raise InputRefused(found)
    ledger = keep(table, stated or assumptions_module.NONE)
    # what an unreadable assumptions file might have said of roles and rates is not held against the table
    excused = ("header-role", "rate-missing") if stated is None else ()
    found.extend(finding for finding in ledger.findings if finding.rule not in excused)
    if stated is None:
        raise InputRefused(found)
    found.extend(audit(ledger, stated))
    try:
        conventions = settle(ledger, stated)
    except InputRefused as refused:
        found.extend(refused.findings)
    if any(finding.severity is Severity.STOP for finding in found):
        raise InputRefused(found)
    return ledger, stated, conventions, found


def _beside(plan: object) -> Path | None:
    """The assumptions file with the plan's own name, if there is one."""
    if not isinstance(plan, (str, Path)) or str(plan) == "-":
        return None
    try:
        beside = Path(plan).with_suffix(".toml")
        return beside if beside.is_file() else None
    except (OSError, ValueError):
        return None


def _built(ledger: Ledger, conventions: Conventions) -> tuple[Plan, list[Finding]]:
    """The plan; a smooth path that nobody declared gives way to a linear one where it leaves the range of the rows."""
    rows = rows_of(ledger, conventions.compounding)
    plan = build(rows, conventions, conventions.path)
    found: list[Finding] = []
    if plan.path == "smooth" and not conventions.path_declared:
        columns = [column for column in ledger.columns if column.role != "ignore"]
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


def _assessed(ledger: Ledger, computed: Budget, found: list[Finding], source: str | None) -> Assessment:
    plan, unit = computed.plan, computed.unit.account
    open_path, open_tail = reconstruction(computed), tail(computed)
    path = wealth_path(computed, open_path)
    weights = row_weights(computed, path)
    errors = Errors(
        numerical=unit.slack.bound,
        reconstruction=open_path,
        tail=open_tail.error,
        input_rounding=weights.input_rounding,
    )
    decision = decide(plan, unit, errors, open_tail)
    found = [*found, *_computed_findings(ledger, plan, weights, decision)]
    return Assessment(
        version=VERSION,
        input_sha256=ledger.sha256,
        span=_span(ledger, plan, source),
        verdict=decision.verdict,
        reason=decision.reason,
        would_decide=decision.would_decide,
        slack=_slack(computed, decision),
        present_values=unit,
        present_values_per_household=computed.household.account,
        routes_differ=_agreement(computed),
        error=errors,
        decision=decision,
        conditions=conditions(plan, unit, decision, path),
        wealth_path=path,
        weights=weights,
        tail=_tail(plan, unit, open_tail),
        assumptions=plan.conventions.entries,
        findings=worst_first(found),
        date=plan.rows.timeline.date,
        report=_in_words,
    )


def _in_words(assessment: Assessment) -> str:
    """The terminal's report, rendered only when asked for."""
    from .report.terminal import render

    return render(assessment, width=100)


def _agreement(computed: Budget) -> Bounded:
    """Slack per household divided by A(0)L(0)/H, less slack per unit: zero within its bound, or the program is at fault."""
    scaled = computed.household.account.slack.times(1.0 / computed.plan.scale.value, 3.0 * 2.0**-53)
    difference = scaled - computed.unit.account.slack
    if not abs(difference.value) <= difference.bound:
        raise ArithmeticError(
            f"the two routes to slack differ by {difference.value:g}, more than the proved {difference.bound:g}"
        )
    return difference


def _slack(computed: Budget, decision: Decision) -> Slack:
    if not decision.finite:
        return Slack(
            per_effective_unit=None, per_household=None, share_of_resources=None, consumption_scale=None, level_per_year=None
        )
    unit, household = computed.unit.account, computed.household.account
    consumed = unit.consumption.whole.value
    available = unit.slack.value + consumed
    annuity = _annuity(computed)
    finite = unit.consumption.reach is Reach.FINITE
    return Slack(
        per_effective_unit=unit.slack,
        per_household=household.slack,
        share_of_resources=_ratio(unit.slack.value, decision.scale),
        consumption_scale=_ratio(available, consumed) if finite else None,
        level_per_year=_ratio(household.slack.value, annuity),
    )


def _ratio(part: float, whole: float | None) -> float | None:
    """part/whole, or None where that is no figure."""
    if not whole or abs(part) > 1e290 * abs(whole):
        return None
    return part / whole


def _annuity(computed: Budget) -> float | None:
    """Present value of one unit of money a year, real, over the plan; None where a perpetual one has none."""
    plan = computed.plan
    interest = computed.household.discount
    value = float(plan.mesh.lengths.sum())
    if interest is not None:
        value = float((np.exp(-at_nodes(interest.coefficients)) @ WEIGHTS) @ plan.mesh.lengths / 2.0)
    if not plan.conventions.perpetual:
        return value
    rate = plan.interest.beyond
    if rate.sign != 1:
        return None
    return value + float(np.exp(-interest.at[-1])) / rate.value if interest is not None else None


def _tail(plan: Plan, account: Account, estimate: TailEstimate) -> Tail:
    if not plan.conventions.perpetual:
        return Tail(kind="none", share_of_income=None, share_of_consumption=None, estimate=estimate)
    kind = next(str(entry.value) for entry in plan.conventions.entries if entry.key == "horizon.tail")

    def share(side: PresentValue) -> float | None:
        whole = side.whole.value
        return side.tail.value / whole if side.reach is Reach.FINITE and whole != 0.0 else None

    return Tail(
        kind=kind, share_of_income=share(account.income), share_of_consumption=share(account.consumption), estimate=estimate
    )


def _span(ledger: Ledger, plan: Plan, source: str | None) -> Span:
    c, timeline = plan.conventions, plan.rows.timeline
    date = timeline.date
    reading = f"{c.timing} totals" if c.timing == "spread" else f"lump sums {c.timing}"
    if not c.periods:
        reading = f"yearly rates, {plan.path} path between rows"
    end = float(plan.mesh.breaks[-1])
    return Span(
        file=ledger.file,
        assumptions=source,
        rows=len(ledger.lines),
        first=date(0.0),
        last=date(float(timeline.times[-1])),
        end="perpetual" if c.perpetual else f"ends at {date(end)}",
        reading=reading,
    )


def _rounded_share(amount: float, decision: Decision) -> str:
    return f"{2.0 * amount / decision.scale:.1g}" if decision.scale > 0.0 else "that"


def _computed_findings(ledger: Ledger, plan: Plan, weights: RowWeights, decision: Decision) -> list[Finding]:
    """Findings that only the computation shows."""
    found = []
    if decision.warning is not None:
        found.append(warn("net-discount", decision.warning, file=ledger.file))
    rounding = weights.input_rounding
    if decision.finite and rounding is not None and decision.verdict != "UNDECIDED":
        slack, near = decision.slack, decision.error + rounding
        turned = slack - near < -decision.threshold if decision.verdict == "PASS" else slack + near >= -decision.threshold
        if turned:
            message = (
                f"rounding of the printed figures (± {rounding:.2g} per unit of human capital at the most) could by itself "
                f"turn this verdict; print more digits, or declare a tolerance above {_rounded_share(rounding, decision)}."
            )
            found.append(warn("coarse-rounding", message, file=ledger.file))
    negative = np.argwhere(weights.amounts < 0.0)
    if len(negative):
        column, row = int(negative[0][0]), int(negative[0][1])
        message = (
            f"the smooth path gives {len(negative)} cells a negative weight, first here: "
            "more in the cell lowers its present value."
        )
        name = plan.rows.amounts[column].name
        found.append(note("negative-weight", message, file=ledger.file, row=ledger.lines[row], column=name))
    return found
