"""Random plans hold every convention often enough that a fault in one would show; the same seed gives the same plan."""

from __future__ import annotations

import csv
from collections import Counter
from collections.abc import Iterator

import pytest
from strategies import Sample, draw

PLANS = 1000
LEAST = 8

SAMPLES = [draw(seed) for seed in range(PLANS)]


def said(sample: Sample) -> Iterator[str]:
    """Headers, roles, keys and words of a plan."""
    yield from (f"column {head}" for head in next(csv.reader([sample.text.split("\n")[0]])))
    for section, body in sample.assumptions.items():
        if section == "lump_sum":
            yield from (f"lump_sum.{key}" for entry in body for key in entry)
        elif section == "columns":
            for entry in body.values():
                yield from (f"columns.{key}" for key in (entry if isinstance(entry, dict) else {"role": entry}))
        else:
            yield from (
                f"{section}.{key} = {value}" if isinstance(value, str) else f"{section}.{key}" for key, value in body.items()
            )


RATES = ("r", "g", "n", "inflation", "hazard")
LEVELS = ("survival", "members", "productivity", "adults", "children")

COUNTS = Counter(word for sample in SAMPLES for word in set(said(sample)))

COLUMNS = ["t", "year", "wage", "Tax", "consumption", "wealth", *RATES, *LEVELS]
KEYS = [
    *(f"market.prices = {word}" for word in ("real", "nominal")),
    *(f"amounts.prices = {word}" for word in ("real", "nominal")),
    *(f"amounts.timing = {word}" for word in ("continuous", "spread", "in advance", "in arrears", "at mid-period")),
    *(f"amounts.path = {word}" for word in ("step", "linear", "geometric", "smooth")),
    *(f"amounts.quoted = {word}" for word in ("per period", "per year")),
    *(f"household.scale = {word}" for word in ("OECD", "OECD-modified", "square root")),
    *(f"horizon.tail = {word}" for word in ("balanced growth", "growing", "converging")),
    *(f"columns.{key}" for key in ("role", "timing", "basis", "unit", "quoted", "prices")),
    *(f"lump_sum.{key}" for key in ("t", "year", "basis", "label")),
    "amounts.basis = per equivalent adult",
    "market.curve = zero",
    "market.inflation",
    "household.hazard",
    "horizon.interest",
]


@pytest.mark.parametrize("word", [*(f"column {name}" for name in COLUMNS), *KEYS])
def test_random_plans_hold_every_convention(word: str) -> None:
    """Each column, key and word is part of several random plans."""
    assert COUNTS[word] >= LEAST


def test_a_seed_gives_one_plan() -> None:
    """The same seed gives the same plan again."""
    assert [draw(seed) for seed in range(50)] == SAMPLES[:50]
