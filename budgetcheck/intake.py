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
class Intake:
    """A table and assumptions that can be assessed, with the findings that do not forbid it."""

    ledger: Ledger
    stated: Assumptions
    conventions: Conventions
    findings: tuple[Finding, ...]


def take_in(plan: pd.DataFrame | str | Path, source: assumptions_module.Source, options: dict[str, str] | None) -> Intake:
    """Table, assumptions and the conventions they settle. Raises InputRefused with the faults of all together."""
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
    return Intake(ledger, stated, conventions, tuple(found))


def _beside(plan: object) -> Path | None:
    """The assumptions file with the plan's own name, if there is one."""
    if not isinstance(plan, (str, Path)) or str(plan) == "-":
        return None
    try:
        beside = Path(plan).with_suffix(".toml")
        return beside if beside.is_file() else None
    except (OSError, ValueError):
        return None
