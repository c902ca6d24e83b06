"""What is usual thereabouts: a running median, which a single outlier does not move."""

from __future__ import annotations

import numpy as np

from .quadrature import Floats

NEIGHBOURS = 8
"""Values on either side; a wrong cell shows in about three of them."""

MARGIN = 3.0
"""Usual differences vary by about this factor from one neighbourhood to the next where rows are evenly spaced (judgement)."""


def usual(sizes: Floats) -> Floats:
    """MARGIN times the running median of non-negative sizes (n,)."""
    reach = min(NEIGHBOURS, len(sizes) - 1)
    wide = np.pad(sizes, reach, mode="reflect") if reach else sizes
    return MARGIN * np.median(np.lib.stride_tricks.sliding_window_view(wide, 2 * reach + 1), axis=-1)
