"""Time: the rows' dates as years since the start, and the period that each row speaks of."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Context, Decimal
from itertools import pairwise

import numpy as np

from .quadrature import Floats

KINDS = ("t", "year")
"""Time columns that are read: `t`, years counted from the first row, and `year`, calendar years."""

LATER_KINDS = ("date", "quarter", "month", "age")

_DIGITS = Context(prec=50)


@dataclass(frozen=True, eq=False)
class Timeline:
    """kind: "t" or "year"; start: the first row's figure; times (n,): years since the first row; lengths (n − 1,): years
    between neighbouring rows, each right to one rounding of the difference of the printed figures."""

    kind: str
    start: float
    times: Floats
    lengths: Floats

    def period_lengths(self) -> Floats:
        """The lengths of the n periods that period data speak of: to the next row, the last as long as the one before."""
        return np.concatenate([self.lengths, self.lengths[-1:]])

    def thinned(self) -> Timeline:
        """Every second row, the first and the last kept."""
        kept = every_second(len(self.times))
        times = self.times[kept]
        summed = np.add.reduceat(self.lengths, kept[:-1])
        return Timeline(kind=self.kind, start=self.start, times=times, lengths=summed)

    def date(self, t: float) -> str:
        """How a practitioner would name the time t: "t = 12.5", or the calendar year it lies in."""
        if self.kind == "year":
            return f"{self.start + t:.2f}".rstrip("0").rstrip(".")
        return f"t = {t:.6g}"


def every_second(rows: int) -> np.ndarray[tuple[int, ...], np.dtype[np.intp]]:
    """Indices 0, 2, 4, … and the last one."""
    kept = np.arange(0, rows, 2)
    return kept if kept[-1] == rows - 1 else np.append(kept, rows - 1)


def from_figures(kind: str, figures: Sequence[str] | None, values: Floats) -> Timeline:
    """The timeline of a time column: printed figures (differences are taken in decimals), or numbers exact as they are.

    values (n,), n ≥ 2, are the figures as floating-point numbers, in increasing order.
    """
    if figures is None:
        return Timeline(kind=kind, start=float(values[0]), times=values - values[0], lengths=np.diff(values))
    exact = [Decimal(figure.strip(" \t").replace("\u2212", "-")) for figure in figures]
    subtract = _DIGITS.subtract
    times = np.array([float(subtract(later, exact[0])) for later in exact])
    gaps = [float(subtract(later, earlier)) for earlier, later in pairwise(exact)]
    return Timeline(kind=kind, start=float(values[0]), times=times, lengths=np.array(gaps))
