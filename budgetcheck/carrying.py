"""What carries the verdict: the rows that contribute most to the present values and to slack.

With the weight of each row, a present value is Σ weight·figure (for a geometric path too, since it is homogeneous of degree
one), so that every row has a share in it; the last row of a perpetual plan also stands for what follows it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .plan import Plan
from .quadrature import Floats
from .weights import RowWeights

MOST_NAMED = 5


@dataclass(frozen=True, kw_only=True, eq=False)
class RowShare:
    """What one row contributes, present value per unit of human capital: index of the row; income less deductions; consumption;
    rounding: by how much half a unit of its last printed digits could move slack, None for figures never printed."""

    index: int
    income: float
    consumption: float
    rounding: float | None

    @property
    def net(self) -> float:
        """What it contributes to slack."""
        return self.income - self.consumption


@dataclass(frozen=True, kw_only=True, eq=False)
class Carrying:
    """to_slack, to_values: the rows that contribute most to slack, and to the present values of income and consumption;
    to_rounding: those whose printed rounding could move slack most, empty for figures never printed."""

    to_slack: tuple[RowShare, ...]
    to_values: tuple[RowShare, ...]
    to_rounding: tuple[RowShare, ...]


def carrying(plan: Plan, weights: RowWeights) -> Carrying:
    """The rows that carry a plan."""
    shares = weights.amounts * np.stack([amounts.values for amounts in plan.rows.amounts])
    consumed = np.array([amounts.role == "consumption" for amounts in plan.rows.amounts])
    signs = plan.signs[: len(shares)]
    consumption = shares[consumed].sum(axis=0)
    income = (signs[:, None] * shares)[~consumed].sum(axis=0)
    rounding = _rounding(plan, weights)

    def most(by: Floats) -> tuple[RowShare, ...]:
        order = np.argsort(-np.abs(by), kind="stable")[:MOST_NAMED]
        return tuple(
            RowShare(
                index=int(i),
                income=float(income[i]),
                consumption=float(consumption[i]),
                rounding=None if rounding is None else float(rounding[i]),
            )
            for i in order
        )

    gross = np.abs(shares).sum(axis=0)
    return Carrying(
        to_slack=most(income - consumption),
        to_values=most(gross),
        to_rounding=() if rounding is None else most(rounding),
    )


def _rounding(plan: Plan, weights: RowWeights) -> Floats | None:
    """By row, what half a unit of the last printed digits could move, (n,)."""
    found = [
        np.abs(by_cell) * amounts.half_units
        for by_cell, amounts in zip(weights.amounts, plan.rows.amounts, strict=True)
        if amounts.half_units is not None
    ]
    for name, by_cell in weights.rates.items():
        half = plan.rows.measures[name].half_units
        if half is not None:
            found.append(np.abs(by_cell) * half)
    return np.sum(found, axis=0) if found else None
