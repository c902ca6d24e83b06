"""The assessment of a plan: the verdict with all it rests on, in one frozen object."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from .assumptions import Assumption
from .bounded import Bounded
from .budget import Account
from .carrying import Carrying
from .conditions import Conditions
from .estimates import TailEstimate
from .findings import Finding, NotAffordable
from .quadrature import Floats
from .verdict import Decision, Errors
from .wealth import WealthPath
from .weights import RowWeights

if TYPE_CHECKING:
    from .flow import Flow
    from .preferences import Preferences


@dataclass(frozen=True, kw_only=True)
class Slack:
    """Lifetime resources less uses. per_effective_unit: money per unit of human capital; per_household: money, both at
    t = 0; share_of_resources; consumption_scale: the factor on all consumption that exhausts the budget; level_per_year:
    slack as a level yearly amount per household over the plan. None where infinite or without meaning."""

    per_effective_unit: Bounded | None
    per_household: Bounded | None
    share_of_resources: float | None
    consumption_scale: float | None
    level_per_year: float | None


@dataclass(frozen=True, kw_only=True, eq=False)
class Tail:
    """kind: how the plan goes on after its last row; shares of the present values that come from there; estimate: of the
    error of an undeclared tail."""

    kind: str
    share_of_income: float | None
    share_of_consumption: float | None
    estimate: TailEstimate


@dataclass(frozen=True, kw_only=True, eq=False)
class Span:
    """What was read: file, assumptions file if any, number of rows, first and last date, and the end of the plan, as words;
    timing and path in words."""

    file: str
    assumptions: str | None
    rows: int
    first: str
    last: str
    end: str
    reading: str


@dataclass(frozen=True, kw_only=True, eq=False)
class Assessment:
    """The verdict on a plan and all it rests on; the names are those of the JSON report, from `version` to `findings`.

    decision: the verdict's rule with its figures; weights: what each row contributes, carrying: the rows that contribute most;
    flow: reported wealth against the flows, preferences: what they say of the plan, None where there are none; lines: of the
    table's rows in their file; span: what was read; routes_differ: slack per household over A(0)L(0)/H less slack per unit;
    date(t): how the time t is named; times: of the rows, years since the start; report(assessment): the report in words.
    """

    version: str
    input_sha256: str
    span: Span
    verdict: str
    reason: str
    would_decide: str | None
    slack: Slack
    present_values: Account
    present_values_per_household: Account
    routes_differ: Bounded
    error: Errors
    decision: Decision
    conditions: Conditions
    wealth_path: WealthPath
    weights: RowWeights
    carrying: Carrying
    flow: Flow | None
    preferences: Preferences | None
    tail: Tail
    assumptions: tuple[Assumption, ...]
    findings: tuple[Finding, ...]
    lines: tuple[int, ...]
    times: Floats
    date: Callable[[float], str]
    report: Callable[[Assessment], str]

    def require(
        self,
        *,
        transversality: bool = False,
        flow_of_wealth: bool = False,
        euler: bool = False,
        utility: bool = False,
        marginal_utility: bool = False,
    ) -> Assessment:
        """The assessment itself, for use in a test suite. Raises NotAffordable, with the report, unless the verdict is PASS and
        every condition asked for holds; one that does not apply (no column of wealth, no preferences) does not hold."""
        asked = {
            "transversality": transversality,
            "flow_of_wealth": flow_of_wealth,
            "euler": euler,
            "utility": utility,
            "marginal_utility": marginal_utility,
        }
        conditions = [getattr(self.conditions, name) for name, wanted in asked.items() if wanted]
        if self.verdict != "PASS" or not all(condition is not None and condition.holds is True for condition in conditions):
            raise NotAffordable(self.report(self))
        return self
