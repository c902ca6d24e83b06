"""Weight per row: how much slack and present values move with each figure of the table.

Where values enter linearly, a present value is Σ weight·value, so a weight is a row's contribution per unit of money in its
cell. For a geometric path, and for the interest rate, weights are first derivatives. With the discounted net flow still to
come, F(s) = S − D(s), D(s) = k(0) + ∫_0^s e^{−Λ}(w − c), a change φ of the rate path moves slack by −∫ φ F ds.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .budget import Budget, restated_per_unit
from .paths import Geometric, Step, path_named
from .plan import Plan
from .quadrature import NODES, WEIGHTS, Floats
from .streams import Exponent, Streams
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
    """The weights of a plan, from the integrals of its kernel."""
    plan = budget.plan
    growth = Exponent.constant(plan.growth, plan.mesh)
    kernel = restated_per_unit(plan.kernel, plan, growth, budget.unit.discount)
    amounts = _amount_weights(plan, kernel)
    rates = None
    if plan.rows.rate_half_units is not None:
        rates = _rate_weights(budget, path)
    return RowWeights(amounts=amounts, rates=rates, input_rounding=_rounding(plan, amounts, rates))


def _amount_weights(plan: Plan, kernel: Streams) -> Floats:
    columns, rows = len(plan.rows.amounts), len(plan.rows.timeline.times)
    weights = np.zeros((columns, rows))
    if kernel.lumps is not None:
        paid = np.flatnonzero(kernel.lumps.amounts[0])
        weights[:] = kernel.lumps.values()[0][0, paid]
    else:
        starts = np.flatnonzero(np.diff(plan.mesh.interval, prepend=-1))
        moments = np.add.reduceat(kernel.integral(plan.mesh.lengths).value, starts, axis=1)
        if isinstance(plan.amounts_path, Geometric):
            for k, amounts in enumerate(plan.rows.amounts):
                weights[k] = plan.amounts_path.row_weights(moments[2 * k : 2 * k + 2], amounts.values)
        else:
            found = plan.amounts_path.row_weights(moments)
            weights[:, : len(found)] = found
    _add_tails(plan, kernel, weights)
    return weights


def _add_tails(plan: Plan, kernel: Streams, weights: Floats) -> None:
    """The last row also stands for what follows it."""
    tail = plan.streams.tail
    if tail is None:
        return
    for k, decay in enumerate(plan.decays):
        if decay.sign != 1:
            continue
        if tail.period is not None:
            weights[k, -1] *= 1.0 + 1.0 / np.expm1(min(decay.value * tail.period, 690.0))
        elif kernel.tail is not None:
            weights[k, -1] += kernel.tail.values()[0][0] / decay.value


def _rate_weights(budget: Budget, path: WealthPath) -> Floats:
    plan = budget.plan
    remaining = budget.unit.account.slack.value - path.discounted_nodes
    mesh = plan.mesh
    starts = np.flatnonzero(np.diff(mesh.interval, prepend=-1))
    row_length = np.add.reduceat(mesh.lengths, starts)
    # z of the whole interval between rows at the nodes of its pieces
    offset = (mesh.breaks[:-1] - mesh.breaks[starts][mesh.interval])[:, None] + mesh.lengths[:, None] * (1.0 + NODES) / 2.0
    z = 2.0 * offset / row_length[mesh.interval][:, None] - 1.0
    weighted = remaining * WEIGHTS * (mesh.lengths / 2.0)[:, None]
    moments = np.stack([np.add.reduceat((weighted * z**j).sum(axis=1), starts) for j in range(4)])
    shape = plan.amounts_path
    if isinstance(shape, Geometric):
        shape = path_named("linear", shape.lengths)
    by_row = np.zeros(len(plan.rows.timeline.times))
    found = shape.row_weights(moments[:1] if isinstance(shape, Step) else moments)  # type: ignore[call-arg]
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
