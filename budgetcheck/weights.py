"""Weight per row: how much slack and present values move with each figure of the table.

Where values enter linearly, a present value is Σ weight·value, so a weight is a row's contribution per unit of money in its
cell. For a geometric path, and for the interest rate, weights are first derivatives. With the discounted net flow still to
come, F(s) = S − D(s), D(s) = k(0) + ∫_0^s e^{−Λ}(w − c), a change φ of the rate path moves slack by −∫ φ F ds.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .budget import Budget, restated_per_unit
from .paths import Geometric, Linear, Step, path_named
from .plan import LARGEST_EXPONENT, Plan, basis_factor, basis_rate
from .quadrature import NODES, WEIGHTS, Floats
from .streams import Exponent, Streams, Tail
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
    plan = budget.plan
    weights = np.zeros((len(plan.rows.amounts), len(plan.rows.timeline.times)))
    growth = Exponent.constant(plan.growth, plan.mesh)
    kernel = restated_per_unit(_kernel(plan), plan, growth, budget.unit.discount)
    if kernel.lumps is not None:
        weights[:] = kernel.lumps.values()[0][0, kernel.lumps.at]
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


def _kernel(plan: Plan) -> Streams:
    """What one unit of a figure in the table stands for, in household money: z^j of its interval for continuous data, a
    rate or a lump sum for totals; for a geometric path the column itself and z times it."""
    c, mesh = plan.conventions, plan.mesh
    shift, stretch = _row_coordinate(plan)
    none = np.zeros((1, len(mesh.lengths)))
    per_unit = float(basis_factor(c, c.basis)) * float(c.unit)
    tail = None
    if c.perpetual and not c.periods:
        tail = Tail(levels=np.array([per_unit]), errors=np.zeros(1), flows=np.ones(1, dtype=bool))
    exponent = Exponent.constant(basis_rate(c, c.basis), mesh)
    if plan.streams.lumps is not None:
        lumps = plan.streams.lumps
        zeros = np.zeros_like(lumps.exponent)
        amounts = zeros[None].copy()
        amounts[0, lumps.at] = per_unit * plan.per_cell
        ones = replace(lumps, amounts=amounts, errors=zeros[None], exponent=zeros, exponent_error=zeros)
        empty = Streams(p=none[:, :, None], q=none[:, :, None], p_error=none, q_error=none, lumps=ones)
        return empty.restated(exponent)
    if isinstance(plan.amounts_path, Geometric):
        # the column's own stream is in household money already, and so is the exponent of its tail
        if tail is not None and plan.streams.tail is not None:
            tail = replace(plan.streams.tail, levels=tail.levels, errors=tail.errors, flows=tail.flows)
        own = plan.streams.p[:, :, 0]
        p = np.zeros((2 * len(own), len(mesh.lengths), 2))
        p[0::2, :, 0], p[1::2, :, 0], p[1::2, :, 1] = own, own * shift, own * stretch
        return Streams(p=p, q=np.repeat(plan.streams.q, 2, axis=0), p_error=none, q_error=none, tail=tail)
    powers = 1 if isinstance(plan.amounts_path, Step) else 2 if isinstance(plan.amounts_path, Linear) else 4
    p = np.zeros((powers, len(mesh.lengths), powers))
    p[0, :, 0] = per_unit * np.broadcast_to(np.asarray(plan.per_cell), plan.amounts_path.lengths.shape)[mesh.interval]
    for j in range(1, powers):
        p[j] = p[j - 1] * shift[:, None]
        p[j, :, 1:] += p[j - 1, :, :-1] * stretch[:, None]
    return Streams(p=p, q=none[:, :, None], p_error=none, q_error=none, tail=tail).restated(exponent)


def _add_tails(plan: Plan, kernel: Streams, weights: Floats) -> None:
    """The last row also stands for what follows it."""
    tail = plan.streams.tail
    if tail is None:
        return
    for k, decay in enumerate(plan.decays):
        if decay.sign != 1:
            continue
        if tail.period is not None:
            weights[k, -1] *= 1.0 + 1.0 / np.expm1(min(decay.value * tail.period, LARGEST_EXPONENT))
        elif kernel.tail is not None:
            weights[k, -1] += kernel.tail.values()[0][0] / decay.value


def _row_coordinate(plan: Plan) -> tuple[Floats, Floats]:
    """For each piece of the mesh, z of the whole interval between rows as shift + stretch·(z of the piece), both (m,)."""
    mesh = plan.mesh
    starts = np.flatnonzero(np.diff(mesh.interval, prepend=-1))
    length = np.add.reduceat(mesh.lengths, starts)[mesh.interval]
    left = mesh.breaks[:-1] - mesh.breaks[starts][mesh.interval]
    return 2.0 * (left + mesh.lengths / 2.0) / length - 1.0, mesh.lengths / length


def _rate_weights(budget: Budget, path: WealthPath) -> Floats:
    plan = budget.plan
    remaining = budget.unit.account.slack.value - path.discounted_nodes
    mesh = plan.mesh
    starts = np.flatnonzero(np.diff(mesh.interval, prepend=-1))
    shift, stretch = _row_coordinate(plan)
    z = shift[:, None] + stretch[:, None] * NODES
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
