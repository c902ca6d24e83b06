"""Which column is what: the role of every header, known or declared, and where r comes from."""

from __future__ import annotations

import difflib

from .assumptions import Assumptions
from .findings import Finding, stop
from .keys import FLOW_ROLES
from .table import Table
from .text import folded, quoted
from .timeline import KINDS

MEASURES = ("r", "g", "n", "inflation", "hazard", "survival", "members", "productivity", "adults", "children", "wealth")
"""Headers of rates, levels and heads: each is a role of its own."""

KNOWN_ROLES = {
    "wage": "income",
    "income": "income",
    "consumption": "consumption",
    **{name: name for name in MEASURES},
    **dict.fromkeys(KINDS, "time"),
}


def roles_of(table: Table, assumptions: Assumptions) -> tuple[dict[str, str], list[Finding]]:
    """The role of every header, and what is wrong with headers and roles."""
    declared = {folded(entry.header): entry.role for entry in assumptions.columns}
    headers = [column.header for column in table.columns]
    findings = [
        stop(
            "header-role",
            "the assumptions give this column a role, but the table does not have it;",
            file=assumptions.file,
            row=entry.row,
            column=entry.header,
            hint=_nearest(entry.header, headers),
        )
        for entry in assumptions.columns
        if folded(entry.header) not in {folded(h) for h in headers}
    ]
    roles: dict[str, str] = {}
    for header in headers:
        key = folded(header)
        role = declared.get(key) or KNOWN_ROLES.get(key)
        if role is None and f"columns.{key}" not in assumptions.attempted:
            findings.append(_without_role(header, table))
        elif role is None:
            roles[header] = "ignore"
        else:
            roles[header] = role
    findings.extend(_role_findings(roles, declared, table))
    findings.extend(_rate_findings(roles, assumptions, table))
    return roles, findings


def _without_role(header: str, table: Table) -> Finding:
    if folded(header) == "household":
        hint = f'Give each household a table of its own, or say [columns] "{header}" = "ignore" where all rows are of one.'
        message = "a column 'household' belongs to a panel of households, not to one plan."
    else:
        likely = difflib.get_close_matches(folded(header), KNOWN_ROLES, n=1, cutoff=0.6)
        near = f" or rename it to {quoted(likely[0])}" if likely else ""
        message = "has no role;"
        hint = f"give it one under [columns] in the assumptions ({', '.join(FLOW_ROLES)} or ignore){near}."
    return stop("header-role", message, file=table.file, row=1, column=header, raw=header, hint=hint)


def _role_findings(roles: dict[str, str], declared: dict[str, str], table: Table) -> list[Finding]:
    findings: list[Finding] = []
    present = set(roles.values())
    by_role = {role: [h for h, r in roles.items() if r == role] for role in present}
    if len(by_role.get("time", [])) > 1:
        columns = by_role["time"]
        message = f"has {len(columns)} time columns, {_joined(columns)}; keep one, or give the others the role ignore."
        findings.append(stop("header-role", message, file=table.file, row=1))
    if "time" not in present:
        message = f"has no time column; name one {' or '.join(quoted(kind) for kind in KINDS)}."
        findings.append(stop("header-role", message, file=table.file, row=1))
    for role, name in (("income", "wage"), ("consumption", "consumption")):
        if role not in present:
            message = f"has no {role} column; name one {quoted(name)}, or give a column the role {role}"
            hint = "(a column of zeros where there is none)." if role == "income" else "under [columns]."
            findings.append(stop("header-role", message, file=table.file, row=1, hint=hint))
    both = {"wage", "income"} & {folded(h) for h in roles} - declared.keys()
    if len(both) == 2:
        message = "has both 'wage' and 'income', and one may be part of the other; declare the role of each under [columns]."
        findings.append(stop("header-role", message, file=table.file, row=1))
    return findings


def _rate_findings(roles: dict[str, str], assumptions: Assumptions, table: Table) -> list[Finding]:
    """The market interest rate has exactly one source."""
    declared, columns = assumptions.stated("market.r"), [h for h, role in roles.items() if role == "r"]
    if declared is None and not columns and "market.r" not in assumptions.attempted:
        message = "the market interest rate r is missing; declare [market] r, use --r, or give the table a column 'r'."
        if assumptions.stated("preferences.rho") is not None:
            message += " The subjective discount rate rho does not stand in for it."
        return [stop("rate-missing", message, file=assumptions.file or table.file)]
    if declared is not None and columns:
        message = "r has two sources, this column and [market] r (or --r); keep one, or give the column the role ignore."
        return [stop("rate-missing", message, file=table.file, row=1, column=columns[0])]
    return []


def _nearest(header: str, headers: list[str]) -> str:
    near = difflib.get_close_matches(header, headers, n=1, cutoff=0.5)
    return f"the nearest header is {quoted(near[0])}." if near else f"it has {_joined(headers)}."


def _joined(words: list[str]) -> str:
    return ", ".join(quoted(word) for word in words[:12])
