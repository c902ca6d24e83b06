"""How far the reported bounds are used up on many random plans, against exact arithmetic.

python tests/bench/ball_arithmetic.py [--plans 10000] [--seed 1] [--processes 2]
"""

from __future__ import annotations

import argparse
import sys
import time
import warnings
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from agreement import claims, relative_bound, share_used, violations
from oracle import exact
from strategies import LARGEST_EXPONENT, draw

import budgetcheck

CHUNK = 250

NEAR_THE_RANGE = 0.85 * LARGEST_EXPONENT
"""Beyond this a refusal is right: the package bounds a path by its coefficients, which may exceed what the path reaches."""

Outcome = tuple[int, list[str], dict[str, float], float | None, float]
"""Seed, what is wrong, the share of its bound each figure uses, the bound as a share of resources, the largest exponent."""


def outcome(seed: int, folder: Path) -> Outcome:
    """One plan."""
    sample = draw(seed)
    truth = exact(sample.text, sample.assumptions)
    path = folder / "plan.csv"
    path.write_text(sample.text, encoding="utf-8")
    try:
        found = budgetcheck.assess(path, sample.assumptions)
    except budgetcheck.InputRefused as error:
        beyond = truth.size > NEAR_THE_RANGE and any(finding.rule == "out-of-range" for finding in error.findings)
        return seed, [] if beyond else [f"refused: {error}"], {}, None, truth.size
    except Exception as error:
        return seed, [f"{type(error).__name__}: {error}"], {}, None, truth.size
    used: dict[str, float] = {}
    for name, claim, value in claims(found, truth):
        kind = name if name.split(" (")[0] in ("slack", "income", "consumption", "wealth", "terminal") else "one column"
        used[kind] = max(used.get(kind, 0.0), share_used(claim, value))
    return seed, violations(found, truth), used, relative_bound(found, truth), truth.size


def chunk(first: int, count: int) -> list[Outcome]:
    """Some plans, with warnings as errors."""
    warnings.simplefilter("error")
    with TemporaryDirectory() as folder:
        return [outcome(seed, Path(folder)) for seed in range(first, first + count)]


def report(outcomes: list[Outcome], seconds: float) -> None:
    """Print the figures."""
    worst: dict[str, tuple[float, int]] = {}
    wrong: Counter[str] = Counter()
    for seed, problems, used, _, _ in outcomes:
        for problem in problems:
            wrong[problem[:60]] += 1
        if problems:
            print(f"seed {seed}: {'; '.join(problems)}"[:300])
        for name, share in used.items():
            worst[name] = max(worst.get(name, (0.0, seed)), (share, seed))
    shares = np.array([share for _, _, _, share, _ in outcomes if share is not None])
    sizes = np.array([size for *_, size in outcomes])
    print(
        f"plans                        {len(outcomes)} in {seconds:.0f} s, {len(shares)} of finite slack and positive resources"
    )
    print(f"plans with anything wrong    {sum(1 for _, problems, *_ in outcomes if problems)}")
    for problem, count in wrong.most_common(10):
        print(f"    {count} x {problem}")
    for name, (share, seed) in sorted(worst.items()):
        print(f"worst true error / bound     {share:.3f}  {name}, seed {seed}")
    median, high = np.quantile(shares, [0.5, 0.99])
    print(f"bound / lifetime resources   median {median:.2e}, 99th percentile {high:.2e}, largest {shares.max():.2e}")
    print(f"largest exponent             median {np.median(sizes):.3g}, {(sizes > 300.0).sum()} plans beyond 300")
    print(f"rightly refused              {sum(1 for _, problems, used, *_ in outcomes if not problems and not used)}")


def main() -> None:
    """Parse, run, report."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--plans", type=int, default=10_000)
    parser.add_argument("--seed", type=int, default=1, help="plans are drawn from seeds seed·10⁶, seed·10⁶ + 1, …")
    parser.add_argument("--processes", type=int, default=2)
    options = parser.parse_args()
    first, start = options.seed * 1_000_000, time.perf_counter()
    counts = [min(CHUNK, options.plans - done) for done in range(0, options.plans, CHUNK)]
    starts = [first + CHUNK * i for i in range(len(counts))]
    with ProcessPoolExecutor(options.processes) as pool:
        outcomes = [one for part in pool.map(chunk, starts, counts) for one in part]
    report(outcomes, time.perf_counter() - start)


if __name__ == "__main__":
    main()
