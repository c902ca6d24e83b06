"""Weight per row: how much slack and present values move with each figure of the table.

Where values enter linearly, a present value is Σ weight·value, so a weight is a row's contribution per unit of money in its
cell. For a geometric path, and for the interest rate, weights are first derivatives. With the discounted net flow still to
come, F(s) = S − D(s), D(s) = k(0) + ∫_0^s e^{−Λ}(w − c), a change φ of the rate path moves slack by −∫ φ F ds.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .budget import Budget
from .paths import Geometric, Linear
from .plan import LARGEST_EXPONENT, Plan, basis_factor
from .quadrature import NODES, WEIGHTS, Floats, at_nodes, summed
from .streams import Tail
from .wealth import WealthPath


@dataclass(frozen=True, kw_only=True, eq=False)
class RowWeights:
    """amounts (k, n): derivative of each column's present value, per unit of human capital, by each of its figures;
    rates (n,): derivative of slack by each figure of r, None where r is no column of printed figures.

    input_rounding: by how much half a unit in the last printed digit of every amount and rate, all against the plan at once,
    could move slack; None for figures that were never printed.
    """

    amounts: Floats
    rates: Floats | None
    input_rounding: float | None


def row_weights(budget: Budget, path: WealthPath) -> RowWeights:
    """The weights of a plan."""
    plan = budget.plan
    amounts = _amount_weights(budget)
    rates = None
    if plan.rows.rate_half_units is not None:
        rates = _rate_weights(budget, path)
    return RowWeights(amounts=amounts, rates=rates, input_rounding=_rounding(plan, amounts, rates))


def _amount_weights(budget: Budget) -> Floats:
    """Derivatives of each column's present value by its figures, tails included.

    One unit of a figure stands for e^q of its interval (continuous data), for a rate over its period, or for a lump sum;
    all columns share q unless the path is geometric, where the column itself takes the place of e^q.
    """
    plan, streams = budget.plan, budget.unit.streams
    weights = np.zeros((len(plan.rows.amounts), len(plan.rows.timeline.times)))
    if streams.lumps is not None:
        weights[:] = _factor(plan) * plan.per_cell * np.exp(streams.lumps.exponent[streams.lumps.at])
    elif isinstance(plan.amounts_path, Geometric):
        for k, amounts in enumerate(plan.rows.amounts):
            moments = _moments(plan, budget.unit.integral.nodes[k], 2)
            weights[k] = plan.amounts_path.row_weights(moments, amounts.values)
    else:
        exponential = np.exp(at_nodes(streams.q[0]))
        found = plan.amounts_path.row_weights(_moments(plan, exponential, 4)) * (_factor(plan) * plan.per_cell)
        weights[:, : len(found)] = found
    _add_tails(plan, streams.tail, weights)
    return weights


def _factor(plan: Plan) -> float:
    """One unit of a figure per unit of human capital, at t = 0."""
    c = plan.conventions
    return float(basis_factor(c, c.basis) * c.unit) / plan.scale.value


def _moments(plan: Plan, nodes: Floats, count: int) -> Floats:
    """∫ z^j·f over the intervals between rows, (count, rows' intervals), from f at the nodes of the mesh, (m, 16)."""
    mesh = plan.mesh
    shift, stretch = _row_coordinate(plan)
    z = shift[:, None] + stretch[:, None] * NODES
    weighted = nodes * WEIGHTS * (mesh.lengths / 2.0)[:, None]
    moments = np.empty((count, len(mesh.lengths)))
    for j in range(count):
        moments[j] = summed(weighted)
        weighted *= z
    return np.asarray(np.add.reduceat(moments, mesh.row_starts, axis=1))


def _add_tails(plan: Plan, tail: Tail | None, weights: Floats) -> None:
    """The last row also stands for what follows it."""
    if tail is None:
        return
    for k, decay in enumerate(plan.decays):
        if decay.sign != 1:
            continue
        if tail.period is not None:
            weights[k, -1] *= 1.0 + 1.0 / np.expm1(min(decay.value * tail.period, LARGEST_EXPONENT))
        else:
            weights[k, -1] += _factor(plan) * np.exp(tail.exponent) / decay.value


def _row_coordinate(plan: Plan) -> tuple[Floats, Floats]:
    """For each piece of the mesh, z of the whole interval between rows as shift + stretch·(z of the piece), both (m,)."""
    mesh = plan.mesh
    starts = mesh.row_starts
    length = np.add.reduceat(mesh.lengths, starts)[mesh.interval]
    left = mesh.breaks[:-1] - mesh.breaks[starts][mesh.interval]
    return 2.0 * (left + mesh.lengths / 2.0) / length - 1.0, mesh.lengths / length


def _rate_weights(budget: Budget, path: WealthPath) -> Floats:
    plan = budget.plan
    remaining = budget.unit.account.slack.value - path.discounted_nodes
    moments = _moments(plan, remaining, 4)
    path_of_amounts = plan.amounts_path
    linear = Linear(path_of_amounts.lengths)
    shape = linear if isinstance(path_of_amounts, Geometric) else path_of_amounts
    by_row = np.zeros(len(plan.rows.timeline.times))
    found = shape.row_weights(moments)
    by_row[: len(found)] = -found
    for line, decay in zip(budget.unit.account.lines, plan.decays, strict=True):
        if decay.sign == 1:
            sign = 1.0 if line.role == "income" else -1.0
            by_row[-1] -= sign * line.tail.value / decay.value
    assert plan.rows.rate_slopes is not None, "a column of rates has slopes"
    return np.asarray(by_row * plan.rows.rate_slopes)


def _rounding(plan: Plan, amounts: Floats, rates: Floats | None) -> float | None:
    halves = [column.half_units for column in plan.rows.amounts]
    moved = [float(np.abs(weights) @ half) for weights, half in zip(amounts, halves, strict=True) if half is not None]
    if rates is not None and plan.rows.rate_half_units is not None:
        moved.append(float(np.abs(rates) @ plan.rows.rate_half_units))
    return sum(moved) if moved else None
