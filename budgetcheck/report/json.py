"""The JSON report, schema budgetcheck.assessment/1."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from ..assessment import Assessment
from ..assumptions import Assumption
from ..bounded import Bounded
from ..budget import Account, PresentValue, Reach
from ..carrying import RowShare
from ..conditions import Condition
from ..findings import Finding, Severity
from ..text import visible
from ..trace import Extreme
from ..version import SCHEMA, VERSION

if TYPE_CHECKING:
    from ..flow import Flow
    from ..preferences import Preferences

MOST_FINDINGS = 1000

UNITS = {
    "per_effective_unit": "money per unit of human capital (A·L, effective labour), at t = 0",
    "per_household": "money per household, at t = 0",
    "level_per_year": "money per household and year, real",
    "t": "years since the first row",
    "rates": "1/year, continuous",
    "shares": "fractions",
}


def render(assessment: Assessment) -> str:
    """The whole assessment as JSON, ASCII only, with no NaN and no infinity."""
    a = assessment
    body = {
        "schema": SCHEMA,
        "version": a.version,
        "input_sha256": a.input_sha256,
        "units": UNITS,
        "plan": {
            "file": visible(a.span.file),
            "assumptions": a.span.assumptions,
            "rows": a.span.rows,
            "first": a.span.first,
            "last": a.span.last,
            "end": a.span.end,
            "reading": a.span.reading,
        },
        "verdict": a.verdict,
        "reason": a.reason,
        "would_decide": a.would_decide,
        "slack": {
            "per_effective_unit": _bounded(a.slack.per_effective_unit),
            "per_household": _bounded(a.slack.per_household),
            "share_of_resources": a.slack.share_of_resources,
            "consumption_scale": a.slack.consumption_scale,
            "level_per_year": a.slack.level_per_year,
        },
        "present_values": _present_values(a.present_values),
        "present_values_per_household": _present_values(a.present_values_per_household),
        "routes": {"difference": a.routes_differ.value, "bound": a.routes_differ.bound},
        "error": _errors(a),
        "conditions": {name: _condition(condition) for name, condition in vars(a.conditions).items() if condition is not None},
        "wealth_path": {
            "minimum": _extreme(a.wealth_path.minimum),
            "per_household": {
                "minimum": _extreme(a.wealth_path.per_household.minimum),
                "largest_debt": _extreme(a.wealth_path.per_household.largest_debt),
            },
            "first_negative": a.wealth_path.first_negative,
            "until": a.wealth_path.until,
        },
        "tail": _tail(a),
        "carrying": _carrying(a),
        **({} if a.flow is None else {"flow_of_wealth": _flow(a, a.flow)}),
        **({} if a.preferences is None else {"preferences": _preferences(a.preferences)}),
        "assumptions": {visible(entry.key, 200): _assumption(entry) for entry in a.assumptions},
        "findings": [_finding(finding) for finding in a.findings[:MOST_FINDINGS]],
        "findings_total": sum(finding.places for finding in a.findings),
    }
    return _dumped(body)


def render_refused(findings: Iterable[Finding]) -> str:
    """A refused input: the findings, every stop of the run."""
    found = tuple(findings)
    return _dumped(
        {
            "schema": SCHEMA,
            "version": VERSION,
            "verdict": "REFUSED",
            "findings": [_finding(finding) for finding in found[:MOST_FINDINGS]],
            "findings_total": sum(finding.places for finding in found),
        }
    )


def _dumped(body: dict[str, Any]) -> str:
    return json.dumps(body, allow_nan=False, ensure_ascii=True, indent=2)


def _bounded(number: Bounded | None) -> dict[str, Any]:
    if number is None or not math.isfinite(number.bound):
        return {"value": None, "bound": None, "diverges": True}
    return {"value": number.value, "bound": number.bound}


def _side(side: PresentValue, lines: Iterable[PresentValue]) -> dict[str, Any]:
    found = _bounded(side.whole if side.reach is Reach.FINITE else None)
    own = [line for line in lines if line.side == side.role]
    columns = [{"column": visible(line.name, 200), "role": line.role, **_side(line, ())} for line in own]
    return {**found, "columns": columns} if columns else found


def _present_values(account: Account) -> dict[str, Any]:
    return {
        "initial_wealth": _bounded(account.initial_wealth),
        "income": _side(account.income, account.lines),
        "consumption": _side(account.consumption, account.lines),
        "terminal_wealth": _bounded(account.terminal_wealth),
    }


def _errors(a: Assessment) -> dict[str, Any]:
    kinds = {
        "numerical": a.error.numerical,
        "reconstruction": a.error.reconstruction,
        "tail": a.error.tail,
        "input_rounding": a.error.input_rounding,
        "in_verdict": a.error.in_verdict,
    }
    found: dict[str, Any] = {name: _finite(value) for name, value in kinds.items()}
    if any(value is not None and math.isinf(value) for value in kinds.values()):
        found["diverges"] = True
    return found


def _finite(value: float | None) -> float | None:
    return value if value is not None and math.isfinite(value) else None


def _condition(condition: Condition) -> dict[str, Any]:
    figures = {name: _finite(value) for name, value in vars(condition).items() if name not in ("holds", "sentence")}
    applicable: dict[str, Any] = {name: value for name, value in figures.items() if value is not None}
    if condition.limit is not None and "limit" not in applicable:
        applicable |= {"limit": None, "diverges": True}
    return {"holds": condition.holds, **applicable, "sentence": condition.sentence}


def _extreme(extreme: Extreme | None) -> dict[str, Any] | None:
    if extreme is None:
        return None
    return {"t": extreme.t, "value": _finite(extreme.value), "error": _finite(extreme.error)}


def _tail(a: Assessment) -> dict[str, Any]:
    found: dict[str, Any] = {
        "kind": a.tail.kind,
        "share_of_income": a.tail.share_of_income,
        "share_of_consumption": a.tail.share_of_consumption,
        "estimate": a.tail.estimate.why,
    }
    if a.tail.estimate.balanced is not None:
        found["balanced_growth_slack"] = a.tail.estimate.balanced
    if a.tail.estimate.fit is not None:
        fit = a.tail.estimate.fit
        found["fit"] = {
            name: {"long_run": curve.long_run, "departure": curve.departure, "speed": curve.speed}
            for name, curve in vars(fit).items()
        }
    return found


def _carrying(a: Assessment) -> dict[str, Any]:
    def row(share: RowShare) -> dict[str, Any]:
        return {
            "row": a.lines[share.index],
            "t": float(a.times[share.index]),
            "income": share.income,
            "consumption": share.consumption,
            "net": share.net,
            "rounding": share.rounding,
        }

    return {name: [row(share) for share in shares] for name, shares in vars(a.carrying).items()}


def _flow(a: Assessment, flow: Flow) -> dict[str, Any]:
    found: dict[str, Any] = {
        "gap": flow.gap,
        "first": None if flow.first is None else a.lines[flow.first],
        "largest": [{"row": a.lines[each.index], "residual": each.value} for each in flow.largest],
        "suspect": None,
    }
    if flow.suspect is not None:
        found["suspect"] = {
            "row": a.lines[flow.suspect.index],
            "columns": [visible(name, 200) for name in flow.suspect.columns],
            "change": flow.suspect.change,
            "share": flow.suspect.share,
        }
    return found


def _preferences(preferences: Preferences) -> dict[str, Any]:
    sizes = [abs(value) for value in preferences.euler.tolist() if math.isfinite(value)]
    found: dict[str, Any] = {"euler_largest": max(sizes, default=None), "best": None}
    best = preferences.best
    if best is not None:
        found["best"] = {
            "start": _bounded(best.start),
            "per_household": best.per_household,
            "growth_first": best.growth_first,
            "growth_last": best.growth_last,
            "planned": best.planned,
            "asked": best.asked,
            "change": best.change,
        }
    return found


def _assumption(entry: Assumption) -> dict[str, Any]:
    value = float(entry.value) if isinstance(entry.value, Fraction) else visible(entry.value, 200)
    return {"value": value, "unit": entry.unit, "origin": str(entry.origin)}


def _finding(finding: Finding) -> dict[str, Any]:
    return {
        "rule": finding.rule,
        "severity": str(Severity(finding.severity)),
        "row": finding.row,
        "column": None if finding.column is None else visible(finding.column, 200),
        "message": finding.sentence,
        "file": None if finding.file is None else visible(finding.file),
        "raw": None if finding.raw is None else visible(finding.raw),
    }
