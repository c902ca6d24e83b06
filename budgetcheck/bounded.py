"""A number that travels with a proved bound on its error."""

from __future__ import annotations

import math
from dataclasses import dataclass

from .quadrature import SAFETY, UNDERFLOW, UNIT, Floats

LARGE = 1e290
"""Below its reciprocal a product may lose digits to gradual underflow."""


@dataclass(frozen=True)
class Bounded:
    """|value − exact| ≤ bound."""

    value: float
    bound: float = 0.0

    def __add__(self, other: Bounded) -> Bounded:
        value = self.value + other.value
        return Bounded(value, (self.bound + other.bound + UNIT * abs(value)) * SAFETY)

    def __sub__(self, other: Bounded) -> Bounded:
        return self + Bounded(-other.value, other.bound)

    def reciprocal(self) -> Bounded:
        """1/x for x known to better than a tenth of itself."""
        value = 1.0 / self.value
        relative = self.bound / abs(self.value)
        rounding = 0.0 if abs(self.value) == 1.0 else UNIT
        return Bounded(value, abs(value) * (1.2 * relative + rounding) * SAFETY)

    def times(self, factor: float, factor_error: float = 0.0) -> Bounded:
        """The product with a factor known to a relative error."""
        value = self.value * factor
        bound = self.bound * abs(factor) * (1.0 + factor_error) + abs(value) * (factor_error + UNIT)
        lost = UNDERFLOW if self.value != 0.0 and abs(value) < 1.0 / LARGE else 0.0
        return Bounded(value, bound * SAFETY + lost)


ZERO = Bounded(0.0)
ONE = Bounded(1.0)


def total(values: Floats, bounds: Floats) -> Bounded:
    """The sum of all values, rounded once (math.fsum), with the sum of their bounds."""
    value = math.fsum(values.ravel().tolist())
    return Bounded(value, (float(bounds.sum()) * SAFETY + UNIT * abs(value)) * SAFETY)
