"""Equivalence scales: how many single adults a household of some size counts for.

    OECD ("Oxford")   1 + 0.7·(adults − 1) + 0.5·children        (OECD, 1982)
    OECD-modified     1 + 0.5·(adults − 1) + 0.3·children        (A. Hagenaars, K. de Vos and M. A. Zaidi, 1994)
    square root       √(adults + children)

Source: OECD, note "What are equivalence scales?".
"""

from __future__ import annotations

import numpy as np

from .quadrature import Floats

SCALES = ("OECD", "OECD-modified", "square root")

_WEIGHTS = {"OECD": (0.7, 0.5), "OECD-modified": (0.5, 0.3)}


def equivalent_adults(adults: Floats, children: Floats, scale: str) -> Floats:
    """The scale at each row, (n,), for adults ≥ 1 and children ≥ 0, (n,); right to a few roundings."""
    if scale == "square root":
        return np.sqrt(adults + children)
    adult, child = _WEIGHTS[scale]
    return np.asarray(1.0 + adult * (adults - 1.0) + child * children)
