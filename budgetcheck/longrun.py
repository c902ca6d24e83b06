"""Where a converging tail leads, seen from the last row: its curves, and each side as multiples of its last value."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction

from .bounded import Bounded
from .plan import NoPath, Plan
from .quadrature import EXP_ERROR, UNIT
from .rates import Rate
from .settling import Curve, Curves, last_rows


def declared_curves(plan: Plan) -> Curves:
    """The curves of a declared converging tail."""
    target = plan.conventions.long_run
    assert target is not None, "the tail is declared"
    income, consumption, _ = last_rows(plan).values[:, -1].tolist()
    speed = float(target.speed)
    rate = plan.drifts.discounting.beyond.value
    settled = rate if target.interest is None else rate + target.interest.value - _r_beyond(plan).value
    return Curves(
        income=Curve(long_run=float(target.income), departure=income - float(target.income), speed=speed),
        consumption=Curve(long_run=float(target.consumption), departure=consumption - float(target.consumption), speed=speed),
        interest=Curve(long_run=settled, departure=rate - settled, speed=speed),
    )


def _r_beyond(plan: Plan) -> Rate:
    """The market rate of the last row, in the prices it is quoted in."""
    r = plan.rows.measures["r"]
    return Rate.along_path(float(r.values[-1]), abs(float(r.values[-1])) * r.error)


@dataclass(frozen=True, eq=False)
class Side:
    """Income or consumption beyond the last row as multiples of its last value, m = ratio·(1 − e^{−μs}) + e^{−μs}: target:
    where it leads; ratio: target over last value, within ratio_error; speed: μ; moves: whether it is not there yet."""

    target: Fraction
    ratio: float
    ratio_error: float
    speed: float
    moves: bool

    @property
    def share_moving(self) -> float:
        """Bound on |1 − ratio|: what fades, as a share of the last value."""
        return abs(1.0 - self.ratio) + self.ratio_error if self.moves else 0.0


def shift_of(plan: Plan, interest: Curve) -> Rate:
    """How far the discount rate moves beyond the last row, exactly where it is declared."""
    target = plan.conventions.long_run
    if target is not None:
        return Rate() if target.interest is None else target.interest - _r_beyond(plan)
    departure = interest.departure
    return Rate() if departure == 0.0 else Rate.along_path(-departure, 4.0 * UNIT * abs(departure))


def side_of(plan: Plan, name: str, curve: Curve) -> Side:
    """Income or consumption beyond the last row along its curve. Raises NoPath where it is zero in the last row and should
    become something."""
    declared = plan.conventions.long_run
    target = Fraction(curve.long_run)
    if declared is not None:
        target = declared.income if name == "income" else declared.consumption
    elif curve.departure == 0.0:
        return Side(target, 1.0, 0.0, curve.speed, moves=False)
    if target == 0:
        return Side(target, 0.0, 0.0, curve.speed, moves=True)
    now = last_value(plan, name)
    if abs(now.value) <= 4.0 * now.bound:
        raise NoPath(
            f"{name} is not told from zero in the last row, from where no share of it can grow to {float(target):g}; add a row"
        )
    ratio = float(target) / now.value
    relative = 1.4 * now.bound / abs(now.value) + 4.0 * UNIT
    return Side(target, ratio, abs(ratio) * relative, curve.speed, moves=True)


def last_value(plan: Plan, side: str) -> Bounded:
    """What one side flows at in the last row, money per unit of human capital and year, with a proved bound: in continuous data
    at its date, in period data over its period, restated in the middle of it; single amounts do not flow."""
    c, tail = plan.conventions, plan.streams.tail
    assert tail is not None, "a converging tail belongs to a perpetual plan"
    net = replace(tail.restated(plan.growth_exponent, -1), period=None) if plan.growth_exponent is not None else tail
    total = Bounded(0.0)
    values, bounds = net.values()
    factor = plan.scale.reciprocal()
    for k, item in enumerate(plan.items):
        if item.side != side or item.index is None:
            continue
        value = Bounded(float(values[k]), float(bounds[k]))
        if c.periods:
            value = _in_mid_period(plan, k)
        value = value.times(factor.value, factor.bound / factor.value)
        total = total + value if item.role != "deduction" else total - value
    return total


def _in_mid_period(plan: Plan, k: int) -> Bounded:
    """The last total of a stream as a yearly rate in household money less growth, restated in the middle of its period."""
    item, tail = plan.items[k], plan.streams.tail
    assert tail is not None, "a converging tail belongs to a perpetual plan"
    period = float(plan.amounts_path.lengths[-1])
    value = Bounded(float(tail.levels[k]), float(tail.errors[k]))
    if item.quoted == "per period":
        value = value.times(1.0 / period, 3.0 * UNIT)
    own = plan.drifts.of_basis(item.basis, nominal=item.nominal) - plan.drifts.growth
    exponent = own.exponent(plan.mesh)
    if exponent is None:
        return value
    start = int(plan.mesh.row_starts[plan.row_intervals - 1])
    middle = (float(exponent.after[start]) + float(exponent.before[-1])) / 2.0
    error = max(float(exponent.at_error[start]), float(exponent.at_error[-1])) + 2.0 * UNIT * abs(middle)
    return value.times(math.exp(middle), 1.01 * error + EXP_ERROR)
