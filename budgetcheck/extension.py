"""A converging tail: income, consumption and r go on beyond the last row towards long-run values,

    y(T + s) = y* + (y(T) − y*)·e^{−μs},

per unit of human capital, each with a speed of its own. It is carried by intervals beyond the last row, on which e^{−μs} is its
Taylor polynomial within rounding (continuous data), or by further periods like the last one, until what is left is below
rounding; from there on growth is balanced. So no new kind of stream is needed.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from .budget import NEAR_TIE
from .drifts import Drifts
from .exponents import Drift, Exponent, Mesh, padded
from .flows import TOTALS
from .longrun import Side, shift_of, side_of
from .plan import LARGEST_EXPONENT, Item, NoPath, Plan
from .quadrature import EXP_ERROR, SAFETY, UNIT, Floats
from .rates import Rate
from .settling import Curves
from .streams import Lumps, Streams, Tail

DEGREE = 15
"""Degree of the Taylor polynomial of e^{−xz}: for x ≤ 1/2 it is off by at most x^16/16!·e^x < 2e−18."""

SETTLED = 46.0
"""Time constants after which what still moves is below rounding: e^−46 is 1e−20."""

MOST_INTERVALS = 20_000

_FACTORIALS = np.array([math.factorial(i) for i in range(DEGREE + 1)], dtype=float)


def extended(plan: Plan, curves: Curves) -> Plan:
    """The plan with a converging tail in place of balanced growth from the last row on. Raises NoPath where the tail converges
    too slowly to be carried that way."""
    made = _Extension(plan, curves)
    decays = tuple(decay + made.shift for decay in plan.decays)
    targets = (made.sides["income"].target, made.sides["consumption"].target)
    if not made.finite(decays):
        return replace(plan, decays=made.unknown(decays), long_run=targets)
    mesh = made.mesh()
    return replace(
        plan,
        mesh=_joined(plan.mesh, mesh),
        streams=made.streams(mesh),
        drifts=made.drifts(mesh),
        decays=decays,
        long_run=targets,
    )


def _joined(mesh: Mesh, later: Mesh) -> Mesh:
    return Mesh(
        breaks=np.concatenate([mesh.breaks, mesh.breaks[-1] + later.breaks[1:]]),
        lengths=np.concatenate([mesh.lengths, later.lengths]),
        interval=np.concatenate([mesh.interval, later.interval]),
        halvings=mesh.halvings + 1,
    )


class _Extension:
    """What follows the rows of a plan along curves."""

    def __init__(self, plan: Plan, curves: Curves) -> None:
        assert plan.streams.tail is not None, "a converging tail belongs to a perpetual plan"
        self.plan, self.tail = plan, plan.streams.tail
        self.periods = plan.conventions.periods
        self.period = float(plan.amounts_path.lengths[-1])
        self.growth = plan.drifts.growth.beyond
        self.interest = curves.interest
        self.shift = shift_of(plan, curves.interest)
        self.sides = {
            "income": side_of(plan, "income", curves.income),
            "consumption": side_of(plan, "consumption", curves.consumption),
        }
        self.pattern: NDArray[np.intp] = np.flatnonzero(plan.mesh.interval == plan.row_intervals - 1)

    def _of(self, item: Item) -> Side:
        return self.sides[item.side]

    @property
    def _speeds(self) -> list[float]:
        """Of everything that moves."""
        speeds = [side.speed for side in self.sides.values() if side.moves]
        return [*speeds, *([self.interest.speed] if self.shift.sign != 0 else [])]

    def finite(self, decays: tuple[Rate, ...]) -> bool:
        """Whether every present value along the curves is finite: what lasts needs δ > 0, what fades δ + μ > 0."""
        for item, decay, flows in zip(self.plan.items, decays, self.tail.flows, strict=True):
            side = self._of(item)
            lasting = decay.sign == 1 and decay.value >= NEAR_TIE * decay.error
            fading = side.target == 0 and decay.value - decay.error + side.speed > 0.0
            if flows and not (lasting or fading):
                return False
        settled = min(decay.value for decay in decays)
        return all(speed + settled > 0.0 for speed in self._speeds)

    def unknown(self, decays: tuple[Rate, ...]) -> tuple[Rate, ...]:
        """The decays, of no known sign for what fades: its present value is not worked out beside an infinite one."""
        nothing_known = Rate.along_path(0.0, 1.0)
        return tuple(
            nothing_known if self._of(item).target == 0 and self._of(item).moves else decay
            for item, decay in zip(self.plan.items, decays, strict=True)
        )

    def mesh(self) -> Mesh:
        """Intervals beyond the last row, counted from it, until (μ + δ)·s = SETTLED for the slowest movement: as long as the
        fastest one allows, or periods like the last."""
        first = self.plan.row_intervals
        settled = min(decay.value for decay in self.plan.decays) + self.shift.value
        end = SETTLED / (min(self._speeds) + settled) if self._speeds else 0.0
        rates = abs(self.plan.drifts.discounting.beyond.value), abs(self.growth.value), abs(self.shift.value)
        if end * max(rates) > LARGEST_EXPONENT:
            raise NoPath(f"the tail converges so slowly (over {end:.0f} years) that discounting leaves the supported range")
        if self.periods:
            lengths = self.plan.mesh.lengths[self.pattern]
            count = max(math.ceil(end / self.period), 1)
            self._check(count * len(lengths))
            within = np.append(np.cumsum(lengths[:-1]), self.period)
            breaks = (np.arange(count)[:, None] * self.period + within).ravel()
            interval = first + np.repeat(np.arange(count), len(lengths))
            return Mesh(breaks=np.append(0.0, breaks), lengths=np.tile(lengths, count), interval=interval)
        steps: list[float] = []
        at = 0.0
        while at < end:
            moving = [speed for speed in self._speeds if speed * at < SETTLED]
            steps.append(min(1.0 / max(moving, default=1.0 / end), max(end - at, 1e-3 * end)))
            at += steps[-1]
            self._check(len(steps))
        breaks = np.append(0.0, np.cumsum(steps or [1.0]))
        return Mesh(breaks=breaks, lengths=np.diff(breaks), interval=first + np.arange(len(breaks) - 1))

    def _check(self, intervals: int) -> None:
        if intervals > MOST_INTERVALS:
            raise NoPath(
                f"the tail converges so slowly that it would take more than {MOST_INTERVALS} intervals; declare its end"
            )

    def _fading(self, speed: float, mesh: Mesh) -> Floats:
        """e^{−μs} as polynomials (J, DEGREE + 1) in z, or for periods as one value each, (J, 1); right to 4·EXP_ERROR."""
        if self.periods:
            # the j-th period further on holds the value j periods further on
            return np.asarray(np.exp(-speed * self.period * self._ordinal(mesh))[:, None])
        x = speed * mesh.lengths / 2.0
        middle = np.exp(-speed * (mesh.breaks[:-1] + mesh.lengths / 2.0))
        # once it has faded, a longer step may not follow it: nothing is left to follow
        x = np.where(x <= 0.5 + 1e-9, x, 0.0)
        powers = np.repeat(-x[:, None], DEGREE + 1, axis=1)
        powers[:, 0] = middle
        return np.asarray(np.cumprod(powers, axis=1) / _FACTORIALS)

    def _fading_error(self, speed: float, mesh: Mesh) -> Floats:
        """What the argument, the exponential and a step that is too long leave open in it, (J,)."""
        s = mesh.breaks[1:] if not self.periods else self.period * self._ordinal(mesh)
        left = np.where(speed * mesh.lengths > 1.0 + 1e-9, math.exp(-SETTLED), 0.0)
        return 4.0 * EXP_ERROR + 6.0 * UNIT * speed * s * np.exp(-speed * s * 0.5) + left

    def _ordinal(self, mesh: Mesh) -> Floats:
        """How many periods after the last one each piece lies."""
        return np.asarray(mesh.interval - self.plan.row_intervals + 1.0)

    def drifts(self, mesh: Mesh) -> Drifts:
        """The drifts beyond the rows: each goes on at its last rate, and r moves by the shift."""
        plan, shift = self.plan, self.shift

        def goes_on(exponent: Exponent) -> Exponent:
            assert exponent.beyond is not None, "a part is no sum"
            return exponent.joined(Exponent.constant(exponent.beyond, mesh) or _nothing(mesh))

        drifts = plan.drifts.mapped(goes_on)
        if shift.sign == 0:
            return drifts
        rate = -shift.value * self._fading(self.interest.speed, mesh)
        rate[:, 0] += shift.value
        error = abs(shift.value) * (self._fading_error(self.interest.speed, mesh) + 4.0 * UNIT) + 2.0 * shift.error
        moved = _nothing(plan.mesh).joined(Exponent.of(rate, error, mesh.lengths, shift))
        return replace(drifts, interest=drifts.interest + Drift(parts=((1, moved),)))

    def streams(self, mesh: Mesh) -> Streams:
        """The streams of the rows and what follows them, restated in household money."""
        s, tail = self.plan.streams, self.tail
        multiples, open_ = self._multiples(mesh)
        if self.periods:
            p, p_error, q, q_error = self._repeated(mesh, multiples, open_)
        else:
            p = multiples * tail.levels[:, None, None]
            size = np.abs(p).sum(axis=-1)
            p_error = tail.errors[:, None] * np.abs(multiples).sum(axis=-1) + np.abs(tail.levels)[:, None] * open_
            p_error += 4.0 * UNIT * size
            q, q_error = self._grown(mesh)
        self._leave(mesh, p_error)
        width, degree, count = max(s.p.shape[2], p.shape[2]), max(s.q.shape[2], q.shape[2]), max(len(s.q), len(q))
        return Streams(
            p=np.concatenate([padded(s.p, width), padded(p, width)], axis=1),
            q=np.concatenate([_rows(padded(s.q, degree), count), _rows(padded(q, degree), count)], axis=1),
            p_error=np.concatenate([_rows(s.p_error, len(p)), p_error * SAFETY], axis=1),
            q_error=np.concatenate([_rows(s.q_error, count), _rows(q_error * SAFETY, count)], axis=1),
            lumps=None if s.lumps is None else self._lumps(s.lumps, mesh, multiples, open_),
            tail=self._tail(mesh),
        )

    def _multiples(self, mesh: Mesh) -> tuple[Floats, Floats]:
        """y(T + s)/y(T) of each stream's side, as polynomials (k, J, d), and bounds on their error, (k, J)."""
        found = {}
        for name, side in self.sides.items():
            fading = self._fading(side.speed, mesh)
            multiple = (1.0 - side.ratio) * fading
            multiple[:, 0] += side.ratio
            size = 1.0 + abs(side.ratio)
            error = size * (self._fading_error(side.speed, mesh) + 4.0 * UNIT) + 2.0 * side.ratio_error
            if not side.moves:
                multiple, error = np.zeros_like(fading), np.zeros(len(fading))
                multiple[:, 0] = 1.0
            found[name] = multiple, error
        parts = [found[item.side] for item in self.plan.items]
        return np.stack([multiple for multiple, _ in parts]), np.stack([error for _, error in parts])

    def _grown(self, mesh: Mesh) -> tuple[Floats, Floats]:
        """The exponent of balanced growth from the last row on, of each stream or of all."""
        growth, tail = self.growth, self.tail
        line = np.stack([mesh.breaks[:-1] + mesh.lengths / 2.0, mesh.lengths / 2.0], axis=1) * growth.value
        q = np.broadcast_to(line, (len(tail.exponent), *line.shape)).copy()
        q[:, :, 0] += tail.exponent[:, None]
        error = tail.exponent_error[:, None] + (growth.error + 6.0 * UNIT * abs(growth.value)) * mesh.breaks[1:]
        return q, error + 2.0 * UNIT * np.abs(q).sum(axis=-1)

    def _repeated(self, mesh: Mesh, multiples: Floats, open_: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """The pieces of the last period again and again, scaled by the multiples and the growth over each period."""
        s, pattern, growth = self.plan.streams, self.pattern, self.growth
        count = len(mesh.lengths) // len(pattern)
        elapsed = self._ordinal(mesh) * self.period
        last = np.tile(s.p[:, pattern], (1, count, 1))
        p = last * multiples
        p_error = np.tile(_rows(s.p_error, len(p))[:, pattern], (1, count)) * (np.abs(multiples[:, :, 0]) + open_)
        p_error += np.abs(last).sum(axis=-1) * open_ + 4.0 * UNIT * np.abs(p).sum(axis=-1)
        q = np.tile(s.q[:, pattern], (1, count, 1))
        q[:, :, 0] += growth.value * elapsed
        q_error = np.tile(s.q_error[:, pattern], (1, count)) + (growth.error + 4.0 * UNIT * abs(growth.value)) * elapsed
        return p, p_error, q, q_error + 2.0 * UNIT * np.abs(q).sum(axis=-1)

    def _leave(self, mesh: Mesh, p_error: Floats) -> None:
        """Take what has not faded by the end into the error of the last interval, or of the last period that is repeated."""
        end, length = float(mesh.breaks[-1]), float(mesh.lengths[-1])
        last = mesh.interval == mesh.interval[-1]
        for k, (item, decay) in enumerate(zip(self.plan.items, self.plan.decays, strict=True)):
            side = self._of(item)
            settled = decay.value + self.shift.value
            size = abs(float(self.tail.levels[k])) * max(1.0, 1.0 / self.period if self.periods else 1.0)
            left = size * side.share_moving * math.exp(-side.speed * end)
            if side.target == 0 and settled + side.speed > 0.0:
                left *= math.exp(min(abs(settled) * length, 1.0)) * (1.0 + 1.0 / ((settled + side.speed) * length))
            p_error[k, last] += left

    def _lumps(self, lumps: Lumps, mesh: Mesh, multiples: Floats, open_: Floats) -> Lumps:
        """Lump sums of the last period again and again; single amounts do not come again."""
        before, pattern, growth = len(self.plan.mesh.lengths), self.pattern, self.growth
        count, size = len(lumps.amounts), before + 1 + len(mesh.lengths)

        def wider(values: Floats) -> Floats:
            result = np.zeros((count, size))
            result[:, : before + 1] = values
            return result

        amounts, errors = wider(lumps.amounts), wider(lumps.errors)
        exponent, exponent_error = wider(lumps.exponent), wider(lumps.exponent_error)
        last = lumps.last.copy()
        steps = len(mesh.lengths) // len(pattern) if self.periods else 0
        elapsed = (np.arange(steps) + 1.0) * self.period
        for k, item in enumerate(self.plan.items):
            if item.index is None or item.timing in TOTALS or not steps:
                continue
            source = int(lumps.last[k])
            at = source + (np.arange(steps) + 1) * len(pattern)
            multiple, error = multiples[k, :: len(pattern), 0], open_[k, :: len(pattern)]
            paid, paid_error = float(lumps.amounts[k, source]), float(lumps.errors[k, source])
            amounts[k, at] = paid * multiple
            errors[k, at] = paid_error * (np.abs(multiple) + error) + abs(paid) * error + 4.0 * UNIT * np.abs(amounts[k, at])
            exponent[k, at] = exponent[k, source] + growth.value * elapsed
            exponent_error[k, at] = exponent_error[k, source] + (growth.error + 4.0 * UNIT * abs(growth.value)) * elapsed
            exponent_error[k, at] += UNIT * np.abs(exponent[k, at])
            last[k] = at[-1]
        return replace(lumps, amounts=amounts, errors=errors, exponent=exponent, exponent_error=exponent_error, last=last)

    def _tail(self, mesh: Mesh) -> Tail:
        """Balanced growth at the long-run values."""
        tail, growth, end = self.tail, self.growth, float(mesh.breaks[-1])
        sides = [self._of(item) for item in self.plan.items]
        ratio = np.array([side.ratio for side in sides])
        left = np.array([side.share_moving * math.exp(-side.speed * end) + side.ratio_error for side in sides])
        errors = tail.errors * (np.abs(ratio) + left) + np.abs(tail.levels) * (left + 4.0 * UNIT * np.abs(ratio))
        return replace(
            tail,
            levels=tail.levels * ratio,
            errors=errors * SAFETY,
            flows=np.array([side.target != 0 for side in sides]) & tail.flows,
            exponent=tail.exponent + growth.value * end,
            exponent_error=(tail.exponent_error + (growth.error + 4.0 * UNIT * abs(growth.value)) * end) * SAFETY,
        )


def _rows(values: Floats, count: int) -> Floats:
    """The same for each of `count` streams, where it was shared."""
    return np.broadcast_to(values, (count, *values.shape[1:])) if len(values) == 1 else values


def _nothing(mesh: Mesh) -> Exponent:
    """The exponent of a rate of zero."""
    zero = np.zeros(len(mesh.breaks))
    return Exponent(coefficients=zero[1:, None], error=zero[1:], before=zero, after=zero, at_error=zero, beyond=Rate())
