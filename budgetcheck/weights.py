"""Weight per row: how much slack and present values move with each figure of the table.

Where values enter linearly, a present value is Σ weight·value, so a weight is a row's contribution per unit of money in its
cell. For a geometric path, and for rates, weights are first derivatives. With F(s) the discounted flows still to come at s, a
change φ of a rate that enters the exponent of a stream moves its present value by ±∫ φ F ds.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from .budget import Budget
from .flows import TOTALS
from .paths import Geometric, Linear, Step
from .plan import LARGEST_EXPONENT, Factors, Item, Plan
from .quadrature import NODES, WEIGHTS, Floats, at_nodes, summed
from .rows import RATES
from .trace import trace_of
from .wealth import WealthPath


@dataclass(frozen=True, kw_only=True, eq=False)
class RowWeights:
    """amounts (k, n): derivative of each column's present value, per unit of human capital, by each of its figures; rates: of
    slack by each figure of a column of rates, (n,), by its name, for printed figures; wealth: of slack by the first figure of a
    column of wealth, None where it is not the initial wealth.

    input_rounding: by how much half a unit in the last printed digit of every amount and rate, all against the plan at once,
    could move slack; None for figures that were never printed.
    """

    amounts: Floats
    rates: Mapping[str, Floats]
    wealth: float | None
    input_rounding: float | None


def row_weights(budget: Budget, path: WealthPath) -> RowWeights:
    """The weights of a plan."""
    plan = budget.plan
    amounts = _amount_weights(budget)
    measures = plan.rows.measures
    printed = [name for name in RATES if name in measures and measures[name].half_units is not None]
    rates = {name: _rate_weights(budget, path, name) for name in printed}
    wealth = None
    if plan.conventions.wealth is None:
        wealth = float(
            Factors(plan.rows, plan.conventions).exact(plan.conventions.wealth_basis) * plan.conventions.reading.unit
        )
        wealth /= plan.scale.value
    return RowWeights(amounts=amounts, rates=rates, wealth=wealth, input_rounding=_rounding(plan, amounts, rates, wealth))


def _amount_weights(budget: Budget) -> Floats:
    """Derivatives of each column's present value by its figures, tails included.

    One unit of a figure stands for e^q of its interval (continuous data), for a rate over its period, or for a lump sum;
    under a geometric path the column itself takes the place of e^q.
    """
    plan, streams = budget.plan, budget.unit.streams
    weights = np.zeros((len(plan.rows.amounts), len(plan.rows.timeline.times)))
    factors = Factors(plan.rows, plan.conventions)
    shared: dict[int, Floats] = {}
    for k, amounts in enumerate(plan.rows.amounts):
        factor = float(factors.exact(amounts.reading.basis) * amounts.reading.unit) / plan.scale.value
        if amounts.reading.timing not in TOTALS:
            assert streams.lumps is not None, "what is paid at a date is a lump sum"
            exponent = streams.lumps.exponent[min(k, len(streams.lumps.exponent) - 1)]
            weights[k] = factor * _per_cell(plan, k) * np.exp(exponent[streams.lumps.at[k]])
        elif isinstance(plan.amounts_path, Geometric):
            by_power = moments(plan, budget.unit.integral.nodes[k], 2)
            weights[k] = plan.amounts_path.row_weights(by_power, amounts.values)
        else:
            own = min(k, len(streams.q) - 1)
            if own not in shared:
                shared[own] = plan.amounts_path.row_weights(moments(plan, np.exp(at_nodes(streams.q[own])), 4))
            found = shared[own] * (factor * _per_cell(plan, k))
            weights[k, : len(found)] = found
        _add_tail(budget, k, factor, weights[k])
    return weights


def _per_cell(plan: Plan, k: int) -> Floats | float:
    per_cell = plan.per_cell
    return per_cell if isinstance(per_cell, float) else per_cell[min(k, len(per_cell) - 1)]


def moments(plan: Plan, nodes: Floats, count: int) -> Floats:
    """∫ z^j·f over the intervals between rows, (count, rows' intervals), from f at the nodes of the mesh, (m, 16)."""
    mesh = plan.mesh
    shift, stretch = _row_coordinate(plan)
    z = shift[:, None] + stretch[:, None] * NODES
    weighted = nodes * WEIGHTS * (mesh.lengths / 2.0)[:, None]
    pieces = np.empty((count, len(mesh.lengths)))
    for j in range(count):
        pieces[j] = summed(weighted)
        weighted *= z
    return np.asarray(np.add.reduceat(pieces, mesh.row_starts, axis=1)[:, : plan.row_intervals])


def _add_tail(budget: Budget, k: int, factor: float, weights: Floats) -> None:
    """The last row also stands for what follows it; a converging tail is taken to keep its shape."""
    plan, tail, decay = budget.plan, budget.unit.streams.tail, budget.plan.decays[k]
    if tail is None or decay.sign != 1:
        return
    if plan.extended:
        last = float(plan.rows.amounts[k].values[-1])
        weights[-1] += budget.unit.account.lines[k].tail.value / last if last else 0.0
    elif tail.period is not None:
        weights[-1] *= 1.0 + 1.0 / np.expm1(min(decay.value * tail.period, LARGEST_EXPONENT))
    else:
        weights[-1] += factor * np.exp(tail.exponent[min(k, len(tail.exponent) - 1)]) / decay.value


def _row_coordinate(plan: Plan) -> tuple[Floats, Floats]:
    """For each piece of the mesh, z of the whole interval between rows as shift + stretch·(z of the piece), both (m,)."""
    mesh = plan.mesh
    starts = mesh.row_starts
    length = np.add.reduceat(mesh.lengths, starts)[mesh.interval]
    left = mesh.breaks[:-1] - mesh.breaks[starts][mesh.interval]
    return 2.0 * (left + mesh.lengths / 2.0) / length - 1.0, mesh.lengths / length


def _in_exponent(name: str, item: Item, plan: Plan) -> float:
    """The sign with which a rate enters the exponent of a stream that is restated and discounted."""
    nominal_rate = plan.conventions.market_nominal
    return {
        "r": -1.0,
        "hazard": -1.0,
        "g": float(item.basis == "per effective unit"),
        "n": float(item.basis in ("per person", "per effective unit")),
        "inflation": float(nominal_rate) - float(item.nominal),
    }[name]


def _rate_weights(budget: Budget, path: WealthPath, name: str) -> Floats:
    plan = budget.plan
    measure = plan.rows.measures[name]
    assert measure.slopes is not None, "a column of rates has slopes"
    signs = np.array([_in_exponent(name, item, plan) for item in plan.items])
    if (signs == -1.0).all():
        # what is still to come of all streams, less the terminal requirement
        to_come = path.discounted_nodes - budget.unit.account.slack.value
    else:
        whole = np.array([line.whole.value for line in budget.unit.account.lines])
        moved = plan.signs * signs
        to_come = float(moved @ whole) - trace_of(budget, 0.0, moved).at_nodes
    zero = name == "r" and plan.conventions.curve == "zero"
    if zero and not plan.conventions.periods:
        by_row = _zero_weights(budget)
    else:
        shape = plan.amounts_path
        found = (Linear(shape.lengths) if isinstance(shape, Geometric) else shape).row_weights(moments(plan, to_come, 4))
        by_row = np.zeros(len(plan.rows.timeline.times))
        by_row[: len(found)] = found
    beyond = _beyond(budget, name)
    if zero and isinstance(plan.amounts_path, Step):
        by_row[-2:] += (beyond, 0.0)
        by_row = _forwards_adjoint(by_row, plan)
    else:
        by_row[-1] += beyond
    return np.asarray(by_row * measure.slopes)


def _beyond(budget: Budget, name: str) -> float:
    """The derivative of slack by the rate after the last row, by the decay d of each tail.

    Of a/d it is −tail/d. Of repeated periods of length h and present value b, Σ_j b·e^{−djh}: where the rate acts inside the
    period too, −(tail·h + M)/(e^{dh} − 1), M the first moment of the discounted flow about the start of the last period; where
    it only sets what one period is to the next, −tail·h/(1 − e^{−dh}).
    """
    plan, moved = budget.plan, 0.0
    enters = {"r": 1.0, "hazard": 1.0, "g": -1.0, "n": -1.0, "inflation": -float(plan.conventions.market_nominal)}[name]
    tail = budget.unit.streams.tail
    for k, (item, line, decay) in enumerate(zip(plan.items, budget.unit.account.lines, plan.decays, strict=True)):
        if tail is None or decay.sign != 1:
            continue
        value = line.tail.value
        change = value / decay.value
        if tail.period is not None:
            x = min(decay.value * tail.period, LARGEST_EXPONENT)
            change = value * tail.period / -np.expm1(-x)
            if _in_exponent(name, item, plan) == -enters:
                change = (value * tail.period + _first_moment(budget, k)) / np.expm1(x)
        moved -= item.sign * enters * change
    return moved


def _first_moment(budget: Budget, k: int) -> float:
    """∫ (t − t_0)·discounted flow of stream k over the last period, t_0 its start, lump sums too."""
    plan, route = budget.plan, budget.unit
    mesh = plan.mesh
    last = np.flatnonzero(mesh.interval == mesh.interval[-1])
    since = mesh.breaks[last] - mesh.breaks[last[0]]
    t = since[:, None] + mesh.lengths[last, None] * (1.0 + NODES) / 2.0
    moment = float(((route.integral.nodes[k, last] * t) @ WEIGHTS) @ mesh.lengths[last]) / 2.0
    if route.streams.lumps is not None and plan.items[k].timing not in TOTALS:
        at = int(route.streams.lumps.last[k])
        moment += float(route.streams.lumps.values()[0][k, at]) * float(mesh.breaks[at] - mesh.breaks[last[0]])
    return moment


def _zero_weights(budget: Budget) -> Floats:
    """By the zero rates of continuous data, R = z·t: −∫ t·φ·f ds, and what the tail is worth, since R(T) = z(T)·T."""
    plan, route = budget.plan, budget.unit
    mesh = plan.mesh
    net = np.tensordot(plan.signs, route.integral.nodes, axes=1)
    t = mesh.breaks[:-1, None] + mesh.lengths[:, None] * (1.0 + NODES) / 2.0
    shape = plan.amounts_path
    by_power = moments(plan, -net * t, 4)
    if route.streams.lumps is not None:
        paid = -(plan.signs @ route.streams.lumps.values()[0]) * mesh.breaks
        shift, stretch = _row_coordinate(plan)
        # a sum stands at the right end of the piece before its breakpoint; one at t = 0 is not discounted
        for piece in np.flatnonzero(paid[1:]):
            by_power[:, mesh.interval[piece]] += paid[piece + 1] * (shift[piece] + stretch[piece]) ** np.arange(4.0)
    by_row = np.asarray((Linear(shape.lengths) if isinstance(shape, Geometric) else shape).row_weights(by_power))
    account = route.account
    remaining = account.slack.value - account.rows_slack.value - account.terminal_wealth.value
    result = np.zeros(len(plan.rows.timeline.times))
    result[: len(by_row)] = by_row
    result[-1] -= remaining * float(plan.rows.timeline.times[-1])
    return result


def _forwards_adjoint(by_forward: Floats, plan: Plan) -> Floats:
    """From derivatives by the forward rate of each period to those by the zero rates: f_i = (z_{i+1}t_{i+1} − z_i t_i)/h_i, and
    the last forward rate goes on."""
    times, gaps = plan.rows.timeline.times, plan.rows.timeline.lengths
    forwards = by_forward[:-1].copy()
    forwards[-1] += by_forward[-1]
    by_row = np.zeros(len(times))
    by_row[1:] += forwards / gaps * times[1:]
    by_row[:-1] -= forwards / gaps * times[:-1]
    return by_row


def _rounding(plan: Plan, amounts: Floats, rates: Mapping[str, Floats], wealth: float | None) -> float | None:
    halves = [column.half_units for column in plan.rows.amounts]
    moved = [float(np.abs(weights) @ half) for weights, half in zip(amounts, halves, strict=True) if half is not None]
    for name, weights in rates.items():
        half = plan.rows.measures[name].half_units
        if half is not None:
            moved.append(float(np.abs(weights) @ half))
    if wealth is not None and (half := plan.rows.measures["wealth"].half_units) is not None:
        moved.append(abs(wealth) * float(half[0]))
    return sum(moved) if moved else None
