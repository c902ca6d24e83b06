"""What was found in an input: findings by rule and severity, and the exceptions that carry them."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum

from .text import quoted, visible


class Severity(StrEnum):
    """How much a finding weighs: by its consequence for the verdict, not by its oddness."""

    STOP = "stop"
    WARN = "warn"
    NOTE = "note"


@dataclass(frozen=True, kw_only=True)
class Finding:
    """One thing found. row is the line number in the file, the header being 1; cell the address in a workbook, such as C17; raw
    the text as it stands there; places: how many places it speaks of, more than one where the rest of a long list is summed
    up."""

    rule: str
    severity: Severity
    message: str
    file: str | None = None
    row: int | None = None
    column: str | None = None
    cell: str | None = None
    raw: str | None = None
    hint: str | None = None
    places: int = 1

    @property
    def place(self) -> str:
        """Where it is, as 'plan.csv, line 7, column wage' or 'plan.toml, line 3, key r'; empty where there is no place."""
        parts = [] if self.file is None else [visible(self.file)]
        if self.cell is not None:
            parts.append(f"cell {visible(self.cell)}")
        elif self.row is not None:
            parts.append(f"line {self.row}")
        if self.column is not None:
            parts.append(f"{'key' if (self.file or '').endswith('.toml') else 'column'} {quoted(self.column)}")
        return ", ".join(parts)

    @property
    def sentence(self) -> str:
        """Place, raw text, what is wrong and what to do, safe to print."""
        raw = "" if self.raw is None else f"{quoted(self.raw)}: "
        place = f"{self.place}: " if self.place else ""
        hint = f" {self.hint}" if self.hint else ""
        return f"{place}{raw}{self.message}{hint}"


def stop(rule: str, message: str, **where: object) -> Finding:
    """A finding that forbids a verdict."""
    return Finding(rule=rule, severity=Severity.STOP, message=message, **where)  # type: ignore[arg-type]


def warn(rule: str, message: str, **where: object) -> Finding:
    """A finding that may change the verdict."""
    return Finding(rule=rule, severity=Severity.WARN, message=message, **where)  # type: ignore[arg-type]


def note(rule: str, message: str, **where: object) -> Finding:
    """A finding worth knowing."""
    return Finding(rule=rule, severity=Severity.NOTE, message=message, **where)  # type: ignore[arg-type]


def rest(rule: str, count: int, named: int, what: str, **where: object) -> tuple[Finding, ...]:
    """What sums up the places of a stop beyond the first `named`; nothing where all were named."""
    if count <= named:
        return ()
    return (stop(rule, f"{count - named} more {what}, {count} in all.", places=count - named, **where),)


def worst_first(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """Stops, then warnings, then notes, otherwise in the order found."""
    order = list(Severity)
    return tuple(sorted(findings, key=lambda finding: order.index(finding.severity)))


class BudgetcheckError(Exception):
    """Base of the package's exceptions."""


class InputRefused(BudgetcheckError):
    """The input cannot be assessed; `findings` says where and why, every stop of the run."""

    def __init__(self, findings: Iterable[Finding]) -> None:
        self.findings = worst_first(findings)
        super().__init__("\n".join(finding.sentence for finding in self.findings))


class NotAffordable(BudgetcheckError):
    """An assessment did not give what was required of it; the message is the report."""
