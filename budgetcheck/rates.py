"""One rate of growth or interest as an exact number, so that r = g + n is seen as a tie and not as 3.5e−18.

A declared rate is a decimal figure under a compounding convention: the continuous rate is x itself, or m·ln(1 + x/m) for m
conversions a year (1 + i = (1 + i^(m)/m)^m = e^δ). Sums and differences of such rates are kept symbolically as
linear + Σ m·ln F_m with rational linear and F_m, and are evaluated once, to 100 digits. A rate that was measured along a path
is known only in floating point and carries its error.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from decimal import Context, Decimal
from fractions import Fraction
from functools import cached_property

from .quadrature import UNIT

CONVERSIONS = {"annual": 1, "semiannual": 2, "quarterly": 4, "monthly": 12, "daily": 365}
"""Conversions a year by compounding convention; "continuous" has none."""

COMPOUNDINGS = ("continuous", *CONVERSIONS)

_DIGITS = Context(prec=100)
_NEGLIGIBLE = Decimal("1e-70")


@dataclass(frozen=True, kw_only=True)
class Rate:
    """A continuous rate in 1/year, closed under + and −.

    linear : rational part; logs : pairs (m, F), each standing for m·ln F, m rational; measured, measured_error : the part known
    only in floating point.
    """

    linear: Fraction = Fraction(0)
    logs: tuple[tuple[int | Fraction, Fraction], ...] = field(default=())
    measured: float = 0.0
    measured_error: float = 0.0

    @classmethod
    def declared(cls, figure: Fraction, compounding: str) -> Rate:
        """The rate that `figure` states under that compounding. Raises ValueError unless 1 + figure/m is positive."""
        if compounding == "continuous":
            return cls(linear=figure)
        conversions = CONVERSIONS[compounding]
        factor = 1 + figure / conversions
        if factor <= 0:
            raise ValueError(f"a rate of {float(figure):g} with {compounding} compounding loses more than everything")
        return cls(logs=((conversions, factor),) if factor != 1 else ())

    @classmethod
    def along_path(cls, value: float, error: float) -> Rate:
        """A rate read off a path, |value − exact| ≤ error."""
        return cls(measured=value, measured_error=error)

    def __add__(self, other: Rate) -> Rate:
        return self._combined(other, 1)

    def __sub__(self, other: Rate) -> Rate:
        return self._combined(other, -1)

    def _combined(self, other: Rate, sign: int) -> Rate:
        if other is ZERO:
            return self
        if self is ZERO and sign == 1:
            return other
        if not (self.logs or other.logs or self._measured or other._measured):
            total = self.linear + other.linear if sign == 1 else self.linear - other.linear
            return Rate(linear=total) if total else ZERO
        factors = dict(self.logs)
        for conversions, factor in other.logs:
            factors[conversions] = factors.get(conversions, Fraction(1)) * factor**sign
        return Rate(
            linear=self.linear + sign * other.linear,
            logs=tuple((m, f) for m, f in sorted(factors.items()) if f != 1),
            measured=self.measured + sign * other.measured,
            measured_error=self.measured_error + other.measured_error,
        )

    def times(self, by: Fraction) -> Rate:
        """The rate times a rational number."""
        if by == 0:
            return ZERO
        size = abs(float(by))
        measured = self.measured * float(by)
        return Rate(
            linear=self.linear * by,
            logs=tuple((m * by, f) for m, f in self.logs),
            measured=measured,
            measured_error=1.01 * (self.measured_error * size + 2.0 * UNIT * abs(measured)),
        )

    @property
    def _measured(self) -> bool:
        """Whether part of it is known only in floating point."""
        return self.measured != 0.0 or self.measured_error != 0.0

    @cached_property
    def _declared_part(self) -> Decimal:
        total = _decimal(self.linear)
        for conversions, factor in self.logs:
            total = _DIGITS.add(total, _DIGITS.multiply(_decimal(Fraction(conversions)), _DIGITS.ln(_decimal(factor))))
        return total

    @cached_property
    def value(self) -> float:
        """The rate in floating point, within `error`."""
        return float(self._declared_part) + self.measured

    @property
    def error(self) -> float:
        """Bound on |value − exact rate|; relative to the rate itself where all of it was declared."""
        rounding = UNIT * abs(float(self._declared_part))
        if not self._measured:
            return rounding * 1.01
        return 1.01 * (rounding + self.measured_error + 2.0 * UNIT * abs(self.measured) + UNIT * abs(self.value))

    @cached_property
    def sign(self) -> int | None:
        """1, 0 or −1, exactly, for declared rates; None where a measured rate is within its own error of zero."""
        if not self._measured:
            return self._declared_sign
        if abs(self.value) <= self.error:
            return None
        return 1 if self.value > 0.0 else -1

    @property
    def _declared_sign(self) -> int | None:
        if not self.logs:
            return (self.linear > 0) - (self.linear < 0)
        if abs(self._declared_part) > _NEGLIGIBLE:
            return 1 if self._declared_part > 0 else -1
        product = Fraction(1)
        common = math.lcm(*(Fraction(conversions).denominator for conversions, _ in self.logs))
        for conversions, factor in self.logs:
            power = Fraction(conversions) * common
            if abs(power) > 10_000:
                return None
            product *= factor ** int(power)
        # ln of a rational other than 1 is irrational, so a tie needs both parts to vanish
        return (product > 1) - (product < 1) if self.linear == 0 else None


ZERO = Rate()


def _decimal(number: Fraction) -> Decimal:
    return _DIGITS.divide(Decimal(number.numerator), Decimal(number.denominator))
