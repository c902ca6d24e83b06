"""Findings that only the computation shows: what the table and the assumptions say of each other once they are numbers."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from .assumptions import Assumptions
from .figures import percent, significant
from .findings import Finding, note, warn
from .ledger import Ledger
from .plan import Factors, Plan
from .verdict import Decision
from .weights import RowWeights

if TYPE_CHECKING:
    from .flow import Flow

LARGEST_DISAGREEMENT = 1e-4
"""A declared growth that differs from the table's by a hundredth of a percentage point a year is another figure (judgement)."""

WILD_FORWARD = 0.02
"""Forward rates may leave the range of the zero rates by its width, or by two percentage points where that is more; zero curves
in practice do not, while one mistyped zero rate at ten years moves its forward rates by ten times as much (judgement)."""


def notices(ledger: Ledger, assumptions: Assumptions, plan: Plan, weights: RowWeights, decision: Decision) -> list[Finding]:
    """Every finding of a computed plan, but for those of reported wealth."""
    found = []
    if decision.warning is not None:
        found.append(warn("net-discount", decision.warning, file=ledger.file))
    found.extend(_coarse_rounding(ledger, weights, decision))
    found.extend(_negative_weights(ledger, plan, weights))
    found.extend(_growth(assumptions, plan))
    found.extend(_forwards(ledger, plan))
    found.extend(_initial_wealth(ledger, assumptions, plan))
    return found


def _coarse_rounding(ledger: Ledger, weights: RowWeights, decision: Decision) -> Iterator[Finding]:
    """Printed figures too coarse to carry the verdict."""
    rounding = weights.input_rounding
    if not decision.finite or rounding is None or decision.verdict == "UNDECIDED":
        return
    slack, near = decision.slack, decision.error + rounding
    turned = slack - near < -decision.threshold if decision.verdict == "PASS" else slack + near >= -decision.threshold
    if turned:
        share = f"{2.0 * rounding / decision.scale:.1g}" if decision.scale > 0.0 else "that"
        message = (
            f"rounding of the printed figures (± {rounding:.2g} per unit of human capital at the most) could by itself "
            f"turn this verdict; print more digits, or declare a tolerance above {share}."
        )
        yield warn("coarse-rounding", message, file=ledger.file)


def _negative_weights(ledger: Ledger, plan: Plan, weights: RowWeights) -> Iterator[Finding]:
    """A spline can give a row a negative weight."""
    negative = np.argwhere(weights.amounts < 0.0)
    if len(negative):
        column, row = int(negative[0][0]), int(negative[0][1])
        message = (
            f"the smooth path gives {len(negative)} cells a negative weight, first here: "
            "more in the cell lowers its present value."
        )
        name = plan.rows.amounts[column].name
        yield note("negative-weight", message, file=ledger.file, row=ledger.lines[row], column=name)


def _growth(assumptions: Assumptions, plan: Plan) -> Iterator[Finding]:
    """Declared growth beside a column that says it too: the column holds, and a difference is told."""
    c = plan.conventions
    span = float(plan.rows.timeline.times[-1])
    for key, column, declared in (("growth.g", "productivity", c.g), ("growth.n", "members", c.n)):
        stated, measure = assumptions.stated(key), plan.rows.measures.get(column)
        if stated is None or measure is None:
            continue
        observed = float(np.log(measure.values[-1] / measure.values[0])) / span
        if abs(observed - declared.value) > LARGEST_DISAGREEMENT:
            message = (
                f"{key} declares growth of {percent(declared.value)} a year, but the table's {column} grow by "
                f"{percent(observed)} a year on average; the table's figures are used."
            )
            yield warn("growth-inside", message, file=assumptions.file, row=stated.row, column=key.partition(".")[2])


def _forwards(ledger: Ledger, plan: Plan) -> Iterator[Finding]:
    """A curve of zero rates whose implied forward rate turns wild between rows."""
    if plan.conventions.curve != "zero":
        return
    zero, timeline = plan.rows.measures["r"].values, plan.rows.timeline
    forward = np.diff(zero * timeline.times) / timeline.lengths
    room = max(float(zero.max() - zero.min()), WILD_FORWARD)
    wild = np.flatnonzero((forward > zero.max() + room) | (forward < zero.min() - room))
    if len(wild):
        i = int(wild[0])
        message = (
            f"the zero rates imply a forward rate of {percent(float(forward[i]))} a year from this row to the next, far "
            f"outside the curve itself ({percent(float(zero.min()))} to {percent(float(zero.max()))}); is a zero rate "
            'mistyped, or are these forward rates (curve = "forward")?'
        )
        yield warn("rate-scale", message, file=ledger.file, row=ledger.lines[i], column="r")


def _initial_wealth(ledger: Ledger, assumptions: Assumptions, plan: Plan) -> Iterator[Finding]:
    """Declared initial wealth beside a column of opening balances."""
    stated, measure = assumptions.stated("household.wealth"), plan.rows.measures.get("wealth")
    c = plan.conventions
    if stated is None or measure is None or c.wealth_at == "end":
        return
    column = float(Factors(plan.rows, c).exact(c.wealth_basis) * measure.first * c.reading.unit)
    if abs(column - plan.wealth.value) > 1e-9 * max(abs(column), abs(plan.wealth.value)):
        message = (
            f"household.wealth is {significant(plan.wealth.value)} per household, but the column 'wealth' begins with "
            f"{significant(column)}; the declared figure is used."
        )
        yield warn("wealth-flow", message, file=ledger.file, row=ledger.lines[0], column="wealth")


def flow_findings(ledger: Ledger, plan: Plan, found: Flow | None) -> Iterator[Finding]:
    """A column of wealth that contradicts the flows: where it starts, and the cell that would explain it."""
    if found is None or found.first is None:
        return
    row, date = ledger.lines[found.first], plan.rows.timeline.date(float(plan.rows.timeline.times[found.first]))
    size = significant(found.largest[0].value, 3)
    message = (
        f"reported wealth contradicts the flows from this row on ({date}): the largest residual is {size} per unit of human "
        f"capital, present value."
    )
    yield warn("wealth-flow", message, file=ledger.file, row=row, column="wealth")
    suspect = found.suspect
    if suspect is not None:
        others = f" (or {', '.join(repr(name) for name in suspect.columns[1:])} of the same row)" if suspect.columns[1:] else ""
        message = (
            f"this cell best explains the residuals of reported wealth{others}: {percent(suspect.share)} of their squares, if "
            f"{significant(suspect.change, 4)} is added to it."
        )
        name = suspect.columns[0]
        yield warn("wealth-flow", message, file=ledger.file, row=ledger.lines[suspect.index], column=name)
