"""How a figure is written for a reader."""

from __future__ import annotations

import math


def amount(value: float, scale: float) -> str:
    """An amount of money to about seven significant digits of `scale`, so that a column of amounts adds up by eye."""
    if value == 0.0:
        return "0"
    if not math.isfinite(value):
        return "not finite"
    if not 1e-9 < abs(scale) < 1e13:
        return significant(value)
    decimals = min(max(6 - math.floor(math.log10(abs(scale))), 0), 12)
    return f"{value:,.{decimals}f}".replace("-", "−")


def significant(value: float, digits: int = 6) -> str:
    """A figure to so many significant digits."""
    if not math.isfinite(value):
        return "not finite"
    if value != 0.0 and 1.0 <= abs(value) < 1e13:
        decimals = max(digits - 1 - math.floor(math.log10(abs(value))), 0)
        return f"{value:,.{decimals}f}".replace("-", "−")
    return f"{value:.{digits}g}".replace("-", "−")


def error(value: float) -> str:
    """An error: two digits, or that nothing bounds it."""
    return "± unknown" if not math.isfinite(value) else f"± {value:.2g}"


def percent(share: float | None) -> str:
    """A share as a percentage."""
    return "not defined" if share is None or not math.isfinite(share) else f"{100.0 * share:.4g} %".replace("-", "−")
