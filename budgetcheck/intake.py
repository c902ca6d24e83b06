"""What comes in: a table and its assumptions as a ledger under conventions, or every fault of both at once."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from . import assumptions as assumptions_module
from .assumptions import Assumptions
from .audit import audit
from .conventions import Conventions, settle
from .findings import Finding, InputRefused, Severity
from .ledger import Ledger, keep
from .table import Table, from_frame, read_csv

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, eq=False)
class Gathered:
    """What could be made out of a table and its assumptions: ledger, stated and conventions are None as far as faults among the
    findings forbid them."""

    ledger: Ledger | None
    stated: Assumptions | None
    conventions: Conventions | None
    findings: tuple[Finding, ...]

    @property
    def refused(self) -> bool:
        """Whether a finding forbids a verdict."""
        return any(finding.severity is Severity.STOP for finding in self.findings)


@dataclass(frozen=True, eq=False)
class Intake:
    """A table and assumptions that can be assessed, with the findings that do not forbid it."""

    ledger: Ledger
    stated: Assumptions
    conventions: Conventions
    findings: tuple[Finding, ...]


def take_in(plan: pd.DataFrame | str | Path, source: assumptions_module.Source, options: dict[str, str] | None) -> Intake:
    """Table, assumptions and the conventions they settle. Raises InputRefused with the faults of all together."""
    found = gather(plan, source, options)
    if found.refused or found.ledger is None or found.stated is None or found.conventions is None:
        raise InputRefused(found.findings)
    return Intake(found.ledger, found.stated, found.conventions, found.findings)


def gather(plan: pd.DataFrame | str | Path, source: assumptions_module.Source, options: dict[str, str] | None) -> Gathered:
    """Table and assumptions read, settled and audited as far as they can be, every fault among the findings."""
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
        return Gathered(None, stated, None, tuple(found))
    ledger = keep(table, stated or assumptions_module.NONE)
    # what an unreadable assumptions file might have said of roles and rates is not held against the table
    excused = ("header-role", "rate-missing") if stated is None else ()
    found.extend(finding for finding in ledger.findings if finding.rule not in excused)
    if stated is None:
        return Gathered(ledger, None, None, table.addressed(found))
    found.extend(audit(ledger, stated))
    conventions = None
    try:
        conventions = settle(ledger, stated)
    except InputRefused as refused:
        found.extend(refused.findings)
    return Gathered(ledger, stated, conventions, table.addressed(found))


def _beside(plan: object) -> Path | None:
    """The assumptions file with the plan's own name, if there is one."""
    if not isinstance(plan, (str, Path)) or str(plan) == "-":
        return None
    try:
        beside = Path(plan).with_suffix(".toml")
        return beside if beside.is_file() else None
    except (OSError, ValueError):
        return None
