"""How long a check takes from a cold start, against a process that only imports the libraries it stands on.

python tests/bench/cold_start.py [--repetitions 15]
"""

from __future__ import annotations

import argparse
import math
import subprocess
import sys
import time
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

IMPORTS = "import numpy, pandas, scipy.interpolate, scipy.optimize, typer, rich.table"
LIMITS = {"annual totals": 0.65, "smooth path": 1.0}
ROWS = 60
UNDECIDED_IS_AN_ANSWER = (0, 3, 4)


def annual_totals() -> tuple[str, str]:
    """A working life and retirement in calendar years, as a table and assumptions."""
    lines = ["year,wage,consumption"]
    for i in range(ROWS):
        wage = 42_000 * 1.012**i if i < 42 else 0
        lines.append(f"{2025 + i},{wage:.0f},{29_500 * 1.01**i:.0f}")
    assumptions = '[market]\nr = 0.03\ncompounding = "annual"\n[household]\nwealth = 60000\n'
    return "\n".join(lines) + "\n", assumptions + '[horizon]\nkind = "finite"\nterminal_wealth = 0\n'


def smooth_path() -> tuple[str, str]:
    """A path that converges to balanced growth, with r as a column, as a table and assumptions."""
    lines = ["t,wage,consumption,r"]
    for i in range(ROWS):
        fading = math.exp(-0.08 * 2 * i)
        lines.append(f"{2 * i},{1.3 - 0.3 * fading:.10f},{1.35 - 0.2 * fading:.10f},{0.045 + 0.03 * fading:.12f}")
    growth = '[growth]\ng = 0.015\nn = 0.005\n[household]\nwealth = 4\nwealth_basis = "per effective unit"\n'
    amounts = '[amounts]\nbasis = "per effective unit"\npath = "smooth"\n[horizon]\nkind = "perpetual"\n'
    return "\n".join(lines) + "\n", growth + amounts


def seconds(command: list[str]) -> float:
    """The whole process, from start to exit."""
    start = time.perf_counter()
    done = subprocess.run(command, capture_output=True, check=False)
    taken = time.perf_counter() - start
    if done.returncode not in UNDECIDED_IS_AN_ANSWER:
        raise SystemExit(f"{' '.join(command)} ended with {done.returncode}: {done.stderr.decode()}")
    return taken


def main() -> None:
    """Alternate the processes, print medians and ratios."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repetitions", type=int, default=15)
    repetitions = parser.parse_args().repetitions
    with TemporaryDirectory() as folder:
        commands = {"imports only": [sys.executable, "-c", IMPORTS]}
        for name, (table, assumptions) in {"annual totals": annual_totals(), "smooth path": smooth_path()}.items():
            path = Path(folder) / f"{name.replace(' ', '-')}.csv"
            path.write_text(table, encoding="utf-8")
            path.with_suffix(".toml").write_text(assumptions, encoding="utf-8")
            commands[name] = [sys.executable, "-m", "budgetcheck", "assess", str(path)]
        for command in commands.values():
            seconds(command)
        taken: dict[str, list[float]] = {name: [] for name in commands}
        for _ in range(repetitions):
            for name, command in commands.items():
                taken[name].append(seconds(command))
    floor = median(taken["imports only"])
    print(f"imports only     {floor:.3f} s, median of {repetitions}")
    for name, limit in LIMITS.items():
        print(f"{name:15}  {median(taken[name]):.3f} s, ratio {median(taken[name]) / floor:.2f} (limit {limit})")


if __name__ == "__main__":
    main()
