"""The flow of wealth: a column of reported wealth held against the flows of the plan.

From dk/dt = (r − g − n)k + w − c, over each row, in discounted form,

    e^{−Λ(t_{i+1})} k_{i+1} − e^{−Λ(t_i)} k_i − ∫_i e^{−Λ}(w − c) dt = residual of row i,                     (1)

so that residuals add up to the gap they make in slack. A wrong figure of wealth shows in two rows with opposite signs, one of a
smooth path of consumption in several; the cell whose change would explain the residuals best is named. To first order, a change
φ of r changes (1) by −∫ φ·e^{−Λ}k, so that cells of r are told apart too.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .budget import Budget, Route, per_unit
from .paths import Geometric, Linear, Step
from .plan import Factors, Plan
from .quadrature import EXP_ERROR, Floats, at_nodes
from .timeline import every_second
from .usual import usual
from .wealth import WealthPath
from .weights import RowWeights, moments

NEIGHBOURS = 4
"""Rows on either side of the largest residual whose cells are tried."""

EXPLAINS = 0.9
"""Share of the sum of squared residuals that one cell must explain to be named."""

MOST_NAMED = 5

FEWEST_PAIRS = 3
"""Below this many rows left, what the path between rows leaves open cannot be estimated."""


@dataclass(frozen=True, kw_only=True)
class RowResidual:
    """index: of the row; value: the residual, discounted, per unit of human capital."""

    index: int
    value: float


@dataclass(frozen=True, kw_only=True)
class Suspect:
    """The cell that best explains the residuals: index of its row; columns: its name first, then those of cells of the same row
    that explain them as well; change: what added to the first would explain them, in its own units; share explained."""

    index: int
    columns: tuple[str, ...]
    change: float
    share: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Flow:
    """residuals (j,) of the rows `rows` (j,); tolerances (j,): what numerical error, the path between rows (estimated) and
    rounding of the printed figures leave open; largest: the rows with the largest residuals; gap: their sum, in slack; first:
    the first row beyond its tolerance, None where there is none; suspect: None where none is needed or no single cell explains
    them."""

    rows: NDArray[np.intp]
    residuals: Floats
    tolerances: Floats
    largest: tuple[RowResidual, ...]
    gap: float
    first: int | None
    suspect: Suspect | None


def flow(budget: Budget, path: WealthPath, weights: RowWeights, thinned: Plan | None, threshold: float) -> Flow | None:
    """The residuals of a plan with a column of wealth; None without one. thinned: the same plan from every second row, None
    where its path is what it means; threshold: τ·scale."""
    plan = budget.plan
    if "wealth" not in plan.rows.measures:
        return None
    values, per_cell = _balances(plan)
    flows, bounds = _flows(budget.unit, plan)
    at_end = plan.conventions.wealth_at == "end" and plan.conventions.periods
    if at_end:
        before = np.concatenate([[budget.unit.account.initial_wealth.value], values[:-1]])
        rows, residuals = np.arange(len(flows)), values[: len(flows)] - before[: len(flows)] - flows
    else:
        rows = np.arange(len(values) - 1)
        residuals = np.diff(values) - flows[: len(rows)]
    tolerances = bounds[: len(rows)] + threshold + 8.0 * EXP_ERROR * np.abs(values[: len(rows)])
    tolerances = tolerances + _rounding(plan, weights, per_cell, rows)
    if thinned is not None:
        tolerances = tolerances + _between_rows(flows, thinned)[: len(rows)]
    wrong = np.flatnonzero(np.abs(residuals) > tolerances)
    order = np.argsort(-np.abs(residuals), kind="stable")[:MOST_NAMED]
    suspect = _suspect(budget, path, weights, per_cell, residuals) if len(wrong) else None
    return Flow(
        rows=rows,
        residuals=residuals,
        tolerances=tolerances,
        largest=tuple(RowResidual(index=int(rows[i]), value=float(residuals[i])) for i in order),
        gap=float(residuals.sum()),
        first=int(rows[wrong[0]]) if len(wrong) else None,
        suspect=suspect,
    )


def _between_rows(flows: Floats, thinned: Plan) -> Floats:
    """Estimate of what the path between rows leaves open in the flow of each: what leaving out every second row changes over
    two rows, as it is usual thereabouts, so that one wrong cell does not excuse itself."""
    kept = every_second(len(flows) + 1)
    if len(kept) < FEWEST_PAIRS:
        return np.full(len(flows), np.inf)
    coarse = _flows(per_unit(thinned), thinned)[0]
    pairs = np.abs(np.add.reduceat(flows, kept[:-1]) - coarse)
    return np.repeat(usual(pairs), np.diff(kept))


def _balances(plan: Plan) -> tuple[Floats, Floats]:
    """Reported wealth, discounted, per unit of human capital, and its derivative by each figure, both (n,)."""
    c = plan.conventions
    factor = float(Factors(plan.rows, c).exact(c.wealth_basis) * c.reading.unit) / plan.scale.value
    exponent = (plan.requirement - plan.drifts.discounting).exponent(plan.mesh)
    wealth = plan.rows.measures["wealth"].values
    starts = plan.mesh.row_starts[: plan.row_intervals]
    end = int(np.searchsorted(plan.mesh.interval, plan.row_intervals))
    if c.wealth_at == "end" and c.periods:
        at = np.append(starts[1:], end)
        grown = np.ones(len(at)) if exponent is None else np.exp(exponent.before[at])
    else:
        at = starts if c.periods else np.append(starts, end)
        grown = np.ones(len(at)) if exponent is None else np.exp(exponent.after[at])
    per_cell = factor * grown
    return wealth * per_cell, per_cell


def _flows(route: Route, plan: Plan) -> tuple[Floats, Floats]:
    """What each row's interval adds to discounted wealth, and the proved bound of it, both (rows' intervals,)."""
    starts = plan.mesh.row_starts
    inside = np.add.reduceat(plan.signs @ route.integral.value, starts)
    bounds = np.add.reduceat(route.integral.bound.sum(axis=0), starts)
    if route.streams.lumps is not None:
        lumps = route.streams.lumps
        values, errors = lumps.values()
        pieces = len(plan.mesh.lengths)
        # a sum at a breakpoint belongs to the row that begins there, one paid in arrears to the row that ends there
        forward = np.append(plan.mesh.interval, plan.mesh.interval[-1])
        backward = np.concatenate([plan.mesh.interval[:1], plan.mesh.interval])
        for k, item in enumerate(plan.items):
            single_at_end = item.index is None and np.flatnonzero(values[k]).max(initial=0) == pieces
            row = forward if lumps.after[k, 0] or single_at_end else backward
            inside += item.sign * np.bincount(row, values[k], minlength=len(inside))
            bounds += np.bincount(row, errors[k], minlength=len(inside))
    return inside[: plan.row_intervals], bounds[: plan.row_intervals]


def _rounding(plan: Plan, weights: RowWeights, per_cell: Floats, rows: NDArray[np.intp]) -> Floats:
    """What half a unit of the last printed digits of a row and its neighbours could make of its residual."""
    half = plan.rows.measures["wealth"].half_units
    count = len(per_cell)
    cells = np.zeros(count) if half is None else np.abs(per_cell) * half
    for k, amounts in enumerate(plan.rows.amounts):
        if amounts.half_units is not None:
            cells = cells + np.abs(weights.amounts[k]) * amounts.half_units
    beside = np.append(cells[1:], 0.0) + np.concatenate([[0.0], cells[:-1]])
    return np.asarray((cells + beside)[rows])


def _suspect(budget: Budget, path: WealthPath, weights: RowWeights, per_cell: Floats, residuals: Floats) -> Suspect | None:
    """The cell near the largest residual whose influence is most nearly in proportion to the residuals."""
    plan = budget.plan
    worst = int(np.argmax(np.abs(residuals)))
    last = len(plan.rows.timeline.times)
    candidates = np.arange(max(worst - NEIGHBOURS, 0), min(worst + NEIGHBOURS + 2, last))
    found = []
    for name, influences in _influences(budget, path, weights, per_cell, candidates):
        for row, influence in zip(candidates.tolist(), influences, strict=True):
            influence = influence[: len(residuals)]
            size = float(influence @ influence)
            if size > 0.0:
                along = float(influence @ residuals)
                found.append((along * along / size, row, name, -along / size))
    if not found:
        return None
    squares = float(residuals @ residuals)
    best, row, _, _ = max(found)
    if best < EXPLAINS * squares:
        return None
    # cells of one row may have influences of the same shape: then all of them are named, amounts before wealth before r
    left = 2.0 * (squares - best) + 1e-9 * squares
    alike = {name: change for value, at, name, change in found if at == row and squares - value <= left}
    first = next(iter(alike))
    return Suspect(index=row, columns=tuple(alike), change=alike[first], share=best / squares)


def _influences(
    budget: Budget, path: WealthPath, weights: RowWeights, per_cell: Floats, candidates: NDArray[np.intp]
) -> list[tuple[str, Floats]]:
    """For each column, the change of all residuals by each candidate cell, (candidates, rows' intervals)."""
    plan = budget.plan
    intervals, count = plan.row_intervals, len(candidates)
    wealth = np.zeros((count, intervals + 2))
    shift = 1 if plan.conventions.wealth_at == "end" and plan.conventions.periods else 0
    chosen = np.arange(count)
    # closing balances: residual i has +K_i − K_{i−1}; opening ones: +K_{i+1} − K_i
    wealth[chosen, candidates + shift] += per_cell[candidates]
    wealth[chosen, candidates + shift + 1] -= per_cell[candidates]
    found: list[tuple[str, Floats]] = []
    unit_cells = np.zeros((count, len(plan.rows.timeline.times)))
    unit_cells[chosen, candidates] = 1.0
    consumption_first = sorted(enumerate(plan.rows.amounts), key=lambda pair: pair[1].role != "consumption")
    for k, amounts in consumption_first:
        if isinstance(plan.amounts_path, Step):
            influence = np.zeros((count, intervals))
            inside = candidates < intervals
            influence[chosen[inside], candidates[inside]] = weights.amounts[k, candidates[inside]]
        else:
            influence = _along_path(plan, unit_cells, _kernel(budget, k), amounts.values)
        found.append((amounts.name, -plan.items[k].sign * influence))
    found.append(("wealth", wealth[:, 1 : intervals + 1]))
    if "r" in plan.rows.measures and plan.conventions.curve == "forward":
        kernel = path.discounted_nodes
        influence = _along_path(plan, unit_cells, kernel, None)
        found.append(("r", -influence))
    return found


def _kernel(budget: Budget, k: int) -> Floats:
    """What one unit of column k is worth at the nodes, (m, 16); under a geometric path, the column itself."""
    plan, streams = budget.plan, budget.unit.streams
    if isinstance(plan.amounts_path, Geometric):
        return np.asarray(budget.unit.integral.nodes[k])
    factors = Factors(plan.rows, plan.conventions)
    reading = plan.rows.amounts[k].reading
    factor = float(factors.exact(reading.basis) * reading.unit) / plan.scale.value
    return factor * np.exp(at_nodes(streams.q[min(k, len(streams.q) - 1)]))


def _along_path(plan: Plan, unit_cells: Floats, kernel: Floats, values: Floats | None) -> Floats:
    """∫ over each row's interval of what a unit in each candidate cell adds along the path, times the kernel."""
    shape = plan.amounts_path
    if isinstance(shape, Geometric):
        shape = Linear(shape.lengths)
        if values is not None:
            unit_cells = unit_cells / values
    p = shape.coefficients(unit_cells, 0.0).p
    found = moments(plan, kernel, p.shape[2])
    return np.asarray(np.einsum("cmj,jm->cm", p, found))
