"""Growth paths whose household plan is known to use its lifetime resources exactly: their slack is zero.

A household owns the capital of a growing economy with output k^α per unit of human capital, earns r = αk^{α−1} − δ on it and
the wage w = (1−α)k^α, and consumes the path c that it would choose. Then k is its wealth, and the plan (w, c, r) starting from
k(0) exhausts its lifetime budget. Three families:

Smith: inverse elasticity of substitution θ = α (W. T. Smith, A Closed Form Solution to the Ramsey Model, B.E. Journal of
    Macroeconomics 6(1), 2006): with z = k^{1−α}, z(t) = z* + (z(0) − z*)e^{−λt}, z* = α/(ρ + δ + αg), λ = (1−α)/z*, c = x·k.
ConstantSaving: saving rate 1/θ on the whole path (M. Kurz, International Economic Review, 1968; R. Barro and X.
    Sala-i-Martin, Economic Growth, 2nd ed., 2004, section 2.6.4), which chooses ρ = θα(n + g + δ) − δ − θg.
Ramsey: no closed form. In x = ln(k/k*), y = ln(c/c*) and with a = k*^{α−1}, b = c*/k*,

    dx/dt = a(e^{(α−1)x} − 1) − b(e^{y−x} − 1),    dy/dt = αa(e^{(α−1)x} − 1)/θ,

    integrated backward from next to the long-run values. Backward in time the saddle path attracts its neighbours, so that
    neither the start on its tangent nor rounding grows.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

Floats = NDArray[np.float64]


class Rows(NamedTuple):
    """A path at given times, each (n,): r (1/year), w, c (money per unit of human capital and year), k (money per unit)."""

    r: Floats
    w: Floats
    c: Floats
    k: Floats


@dataclass(frozen=True, kw_only=True)
class GrowthPath:
    """A calibration in the papers' own symbols (delta is depreciation; rates in 1/year) and k(0)/k*."""

    alpha: float
    delta: float
    n: float
    g: float
    start: float

    def at(self, t: Floats) -> Rows:
        """The path at times t (n,), years since the start."""
        k, c = self.capital_and_consumption(t)
        return Rows(r=self.alpha * k ** (self.alpha - 1) - self.delta, w=(1 - self.alpha) * k**self.alpha, c=c, k=k)

    def capital_and_consumption(self, t: Floats) -> tuple[Floats, Floats]:
        """k and c at times t (n,)."""
        raise NotImplementedError

    @property
    def long_run_net_rate(self) -> float:
        """D = r* − n − g."""
        raise NotImplementedError

    @property
    def inverse_elasticity(self) -> float:
        """θ."""
        raise NotImplementedError

    def discount_factors(self, t: Floats) -> Floats:
        """e^{−Λ} at times t (n,): integrated, the Euler equation says (c/c(0))^{−θ}·e^{−Dt}."""
        c = self.at(np.append(t, 0.0)).c
        return np.asarray((c[:-1] / c[-1]) ** -self.inverse_elasticity * np.exp(-self.long_run_net_rate * t))

    def lifetime_consumption(self) -> float:
        """∫ e^{−Λ} c dt over the whole life, by Gauss-Legendre on single years until nothing is left that counts."""
        nodes, weights = np.polynomial.legendre.leggauss(12)
        years = np.arange(math.ceil(36.0 / self.long_run_net_rate))
        t = (years[:, None] + (nodes + 1) / 2).ravel()
        flow = self.discount_factors(t) * self.at(t).c
        return float((flow.reshape(len(years), -1) @ weights).sum() / 2)

    def slack_if_growth_is_balanced_after(self, end: float) -> float:
        """Exact slack of the plan that follows the path to `end` and stays there: e^{−Λ}·(k − (c − w)/(r − n − g)) at `end`."""
        then = np.array([end])
        rows = self.at(then)
        left = rows.k - (rows.c - rows.w) / (rows.r - self.n - self.g)
        return float((self.discount_factors(then) * left)[0])

    def table(self, t: Floats, consumption: float = 1.0) -> pd.DataFrame:
        """The household's plan at times t, with all its consumption scaled by a factor."""
        rows = self.at(t)
        return pd.DataFrame({"t": t, "wage": rows.w, "consumption": consumption * rows.c, "r": rows.r})

    def table_with_wealth(self, t: Floats, consumption: float = 1.0) -> pd.DataFrame:
        """The same with the household's wealth at those times in a column."""
        return self.table(t, consumption).assign(wealth=self.at(t).k)

    @property
    def impatience(self) -> float:
        """ρ = D + n + (1 − θ)g: what the long run, where r* = ρ + θg, says of it."""
        return self.long_run_net_rate + self.n + (1 - self.inverse_elasticity) * self.g

    @property
    def preferences(self) -> dict[str, float]:
        """ρ and θ as assumptions."""
        return {"rho": self.impatience, "theta": self.inverse_elasticity}

    def settings_with_wealth(self, path: str | None = "smooth") -> dict[str, dict[str, object]]:
        """The assumptions of a table that says wealth itself, with preferences."""
        return self.settings(path) | {"household": {}, "preferences": dict(self.preferences)}

    def settings(self, path: str | None = "smooth", tail: str | None = "balanced growth") -> dict[str, dict[str, object]]:
        """The assumptions that go with the table; None leaves the path or the tail undeclared."""
        start = float(self.at(np.zeros(1)).k[0])
        return {
            "growth": {"g": self.g, "n": self.n},
            "household": {"wealth": start},
            "amounts": {"basis": "per effective unit"} | ({} if path is None else {"path": path}),
            "horizon": {"kind": "perpetual"} | ({} if tail is None else {"tail": tail}),
        }


@dataclass(frozen=True, kw_only=True)
class _InClosedForm(GrowthPath):
    """z = k^{1−α} converges to z* at the constant speed λ."""

    @property
    def z_star(self) -> float:
        """The long-run value of z."""
        raise NotImplementedError

    @property
    def speed(self) -> float:
        """λ, 1/year."""
        raise NotImplementedError

    @property
    def z_start(self) -> float:
        """z(0)."""
        return float(self.start ** (1 - self.alpha) * self.z_star)

    def z(self, t: Floats | float) -> Floats:
        """z at times t."""
        return np.asarray(self.z_star + (self.z_start - self.z_star) * np.exp(-self.speed * np.asarray(t)))


@dataclass(frozen=True, kw_only=True)
class Smith(_InClosedForm):
    """θ = α: consumption is a constant share x of capital, 1/year."""

    rho: float

    @property
    def z_star(self) -> float:
        return self.alpha / (self.rho + self.delta + self.alpha * self.g)

    @property
    def speed(self) -> float:
        return (1 - self.alpha) / self.z_star

    @property
    def inverse_elasticity(self) -> float:
        return self.alpha

    @property
    def share(self) -> float:
        """x = c/k = (ρ + δ)/α − n − δ."""
        return (self.rho + self.delta) / self.alpha - self.n - self.delta

    @property
    def long_run_net_rate(self) -> float:
        return self.rho + self.alpha * self.g - self.n - self.g

    def capital_and_consumption(self, t: Floats) -> tuple[Floats, Floats]:
        k = self.z(t) ** (1 / (1 - self.alpha))
        return k, self.share * k

    @property
    def _scale(self) -> float:
        return float(self.z_start ** (self.alpha / (1 - self.alpha)))

    def income_to(self, end: float) -> float:
        """∫ e^{−Λ} w dt from 0 to end (infinity: over the whole life): (1−α)·q·(1 − e^{−DT})/D, q = z(0)^{α/(1−α)}."""
        rate = self.long_run_net_rate
        return -(1 - self.alpha) * self._scale * math.expm1(-rate * end) / rate

    def consumption_to(self, end: float) -> float:
        """∫ e^{−Λ} c dt from 0 to end: x·q·(z*(1 − e^{−DT})/D + (z(0) − z*)(1 − e^{−xT})/x), where λ + D = x."""
        rate, share = self.long_run_net_rate, self.share
        settled = -self.z_star * math.expm1(-rate * end) / rate
        fading = -(self.z_start - self.z_star) * math.expm1(-share * end) / share
        return share * self._scale * (settled + fading)

    def wealth_left_at(self, end: float) -> float:
        """e^{−Λ(T)} k(T) = q·e^{−DT} z(T)."""
        return self._scale * math.exp(-self.long_run_net_rate * end) * float(self.z(end))

    def totals(self, years: int, *, balances: str = "start") -> pd.DataFrame:
        """Yearly totals that carry the path exactly: r is its mean over each year, so that k grows by the same factor, and a
        total spread evenly is worth what the year's flow is; wealth at the start or at the end of each year."""
        t = np.arange(years + 1.0)
        grown = -np.diff(np.log(self.discount_factors(t)))
        worth = self.discount_factors(t[:-1]) * -np.expm1(-grown) / grown
        wage = np.diff([self.income_to(end) for end in t]) / worth
        consumption = np.diff([self.consumption_to(end) for end in t]) / worth
        wealth = self.at(t).k[1:] if balances == "end" else self.at(t).k[:-1]
        r = grown + self.n + self.g
        return pd.DataFrame({"t": t[:-1], "wage": wage, "consumption": consumption, "r": r, "wealth": wealth})


@dataclass(frozen=True, kw_only=True)
class ConstantSaving(_InClosedForm):
    """c = (1 − 1/θ)·k^α."""

    theta: float

    @property
    def z_star(self) -> float:
        return 1 / self.theta / (self.n + self.g + self.delta)

    @property
    def speed(self) -> float:
        return (1 - self.alpha) * (self.n + self.g + self.delta)

    @property
    def inverse_elasticity(self) -> float:
        return self.theta

    @property
    def long_run_net_rate(self) -> float:
        return (self.theta * self.alpha - 1) * (self.n + self.g + self.delta)

    def capital_and_consumption(self, t: Floats) -> tuple[Floats, Floats]:
        z = self.z(t)
        return z ** (1 / (1 - self.alpha)), (1 - 1 / self.theta) * z ** (self.alpha / (1 - self.alpha))

    @property
    def output(self) -> float:
        """∫ e^{−Λ} k^α dt over the whole life, k(0)/(α − 1/θ)."""
        return float(self.z_start ** (1 / (1 - self.alpha))) / (self.alpha - 1 / self.theta)


@dataclass(frozen=True, kw_only=True)
class Ramsey(GrowthPath):
    """Any θ: the saddle path, solved numerically to about 1e−11."""

    rho: float
    theta: float

    NEAR = 1e-9
    """|ln(k/k*)| from which the path is followed by its tangent."""

    @property
    def long_run_net_rate(self) -> float:
        return self.rho + self.theta * self.g - self.n - self.g

    @property
    def inverse_elasticity(self) -> float:
        return self.theta

    @property
    def k_star(self) -> float:
        """Long-run capital, where r = ρ + θg."""
        return float((self.alpha / (self.rho + self.theta * self.g + self.delta)) ** (1 / (1 - self.alpha)))

    @property
    def c_star(self) -> float:
        """Long-run consumption."""
        return self.k_star**self.alpha - (self.n + self.g + self.delta) * self.k_star

    @property
    def _pull(self) -> float:
        """(α − 1)αa/θ, the derivative of dy/dt by x at the long-run values."""
        return (self.alpha - 1) * self.alpha * self.k_star ** (self.alpha - 1) / self.theta

    @property
    def stable_eigenvalue(self) -> float:
        """μ < 0 of the linearised system, 1/year: μ² − Dμ + b(α − 1)αa/θ = 0 with D = r* − n − g."""
        trace = self.long_run_net_rate
        return (trace - math.sqrt(trace**2 - 4 * self._pull * self.c_star / self.k_star)) / 2

    def _backward(self, _: float, logs: Floats) -> Floats:
        x, y = logs
        gap = self.k_star ** (self.alpha - 1) * np.expm1((self.alpha - 1) * x)
        return -np.array([gap - self.c_star / self.k_star * np.expm1(y - x), self.alpha * gap / self.theta])

    @cached_property
    def _solution(self) -> tuple[object, float]:
        goal = math.log(self.start)
        near = math.copysign(self.NEAR, goal)

        def arrived(_: float, logs: Floats) -> float:
            return float(logs[0]) - goal

        arrived.terminal = True  # type: ignore[attr-defined]
        found = solve_ivp(
            self._backward,
            (0.0, 1e4),
            [near, near * self._pull / self.stable_eigenvalue],
            method="DOP853",
            rtol=1e-13,
            atol=1e-22,
            max_step=1.0,
            dense_output=True,
            events=arrived,
        )
        return found.sol, float(found.t[-1])

    def capital_and_consumption(self, t: Floats) -> tuple[Floats, Floats]:
        solution, span = self._solution
        left = np.maximum(span - t, 0.0)
        x, y = solution(left) * np.exp(self.stable_eigenvalue * np.maximum(t - span, 0.0))  # type: ignore[operator]
        return self.k_star * np.exp(x), self.c_star * np.exp(y)


def model(name: str, start: float | None = None) -> GrowthPath:
    """A calibration by name, from its usual k(0)/k* or from another one."""
    kind, usual, figures = CALIBRATIONS[name]
    return kind(start=usual if start is None else start, **figures)


CALIBRATIONS: dict[str, tuple[type[GrowthPath], float, dict[str, float]]] = {
    "S1": (Smith, 0.5, {"alpha": 1 / 3, "rho": 0.04, "delta": 0.05, "n": 0.01, "g": 0.02}),
    "S2": (Smith, 0.1, {"alpha": 0.3, "rho": 0.05, "delta": 0.05, "n": 0.01, "g": 0.015}),
    "S5": (Smith, 0.2, {"alpha": 0.75, "rho": 0.05, "delta": 0.05, "n": 0.01, "g": 0.02}),
    "K1": (ConstantSaving, 0.1, {"alpha": 0.75, "theta": 1.75, "delta": 0.05, "n": 0.01, "g": 0.02}),
    "K2": (ConstantSaving, 0.5, {"alpha": 0.3, "theta": 17.5, "delta": 0.05, "n": 0.01, "g": 0.02}),
    # the calibration of D. Romer, Advanced Macroeconomics, ch. 2 (from memory)
    "romer": (Ramsey, 0.5, {"alpha": 1 / 3, "theta": 1.0, "rho": 0.04, "delta": 0.0, "n": 0.02, "g": 0.01}),
    # the benchmark of Barro and Sala-i-Martin (2004), ch. 2
    "bsim": (Ramsey, 0.1, {"alpha": 0.3, "theta": 3.0, "rho": 0.02, "delta": 0.05, "n": 0.01, "g": 0.02}),
}
"""Kind, usual k(0)/k*, figures."""
