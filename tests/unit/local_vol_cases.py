"""Local volatility problems shared by tests: surfaces given by a formula, and their bumped copies."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.local_vol_paths import LocalVolSettings, PathSamplers
from pricer.engines.local_vol_problem import LocalVolProblem


@dataclass(frozen=True)
class Table:
    """What an engine needs of a local volatility surface."""

    times: np.ndarray
    widths: np.ndarray
    reach: float
    values: np.ndarray


def tabulated(
    sigma: Callable[[np.ndarray, np.ndarray], np.ndarray],
    width: float,
    years: float,
    *,
    shift: float = 0.0,
    cells: int = 48,
    nodes: int = 241,
    reach: float = 8.0,
) -> Table:
    """``sigma(t, k)`` at the middle of cells, nodes ``width sqrt(t) y``; ``shift`` moves log X(0) by that much."""
    times = np.linspace(0.0, years, cells + 1)
    widths = width * np.sqrt(times[1:])
    middles = 0.5 * (times[1:] + times[:-1])
    k = widths[:, None] * np.linspace(-reach, reach, nodes)
    return Table(times, widths, reach, sigma(middles[:, None], k + shift))


def power(volatility: float, exponent: float, growth: float = 0.0, cap: float = 2.0):
    """``volatility (S / S(0))^(exponent - 1)``, at most ``cap``, with ``S = X S(0) exp(growth t)``."""
    return lambda t, k: np.minimum(volatility * np.exp((exponent - 1.0) * (k + growth * t)), cap)


def smile(volatility: float, skew: float, curvature: float):
    """An invented smile that flattens with time."""
    return lambda t, k: (
        volatility * np.exp(skew * np.tanh(2.0 * k) / np.sqrt(0.25 + t)) * (1.0 + curvature * np.tanh(k) ** 2)
    )


def skewed(
    aggregate: Aggregate,
    payoff: PiecewiseLinear,
    *,
    shifts: np.ndarray | None = None,
    floors: np.ndarray | None = None,
    correlation: np.ndarray | None = None,
    years: float = 1.5,
    cells: int = 12,
) -> LocalVolProblem:
    """Up to six unlike assets near 100 with skews; ``shifts`` bump log X(0) with the surfaces held in strikes."""
    n = len(aggregate.weights)
    volatilities = np.array([0.15, 0.2, 0.3, 0.4, 0.25, 0.35])[:n]
    skews = np.array([-0.5, -0.2, -0.4, 0.1, -0.3, 0.0])[:n]
    forwards = np.array([100.0, 95.0, 104.0, 110.0, 98.0, 90.0])[:n]
    moves = np.zeros(n) if shifts is None else shifts
    fixed = np.zeros(n) if floors is None else floors
    surfaces = tuple(
        tabulated(smile(v, s, 0.2), v, years, shift=float(m), cells=cells, nodes=161)
        for v, s, m in zip(volatilities, skews, moves, strict=True)
    )
    rho = 0.4 + 0.6 * np.eye(n) if correlation is None else correlation
    scales = (forwards - fixed) * np.exp(moves)
    times, variances = constant(volatilities, years)
    return LocalVolProblem(surfaces, rho, scales, fixed, times, variances, years, aggregate, payoff, 0.95)


def constant(volatilities: np.ndarray, years: float) -> tuple[np.ndarray, np.ndarray]:
    """Times and total variances of constant volatilities, (2,) and (n, 2)."""
    return np.array([0.0, years]), np.outer(np.asarray(volatilities) ** 2, [0.0, years])


def flat(problem: LocalVolProblem) -> LocalVolProblem:
    """The same problem with the lognormal volatilities as flat surfaces; a table, not the engine's own short cut."""
    rows = np.sqrt(np.diff(problem.variances[: problem.n_assets], axis=1) / np.diff(problem.variance_times))
    surfaces = tuple(
        Table(problem.variance_times, np.full(len(row), 0.2), 8.0, np.repeat(row[:, None], 9, axis=1)) for row in rows
    )
    return replace(problem, surfaces=surfaces)


def paths_of(
    problem: LocalVolProblem, *, seed: int = 1, group: str = "test", settings: LocalVolSettings | None = None
) -> PathSamplers:
    """Plan, grid, noise and samplers as the engine makes them."""
    return PathSamplers(problem.with_floors_in_payoff(), group, seed, settings or LocalVolSettings())


def converted(problem: LocalVolProblem, *, composite: bool) -> LocalVolProblem:
    """The same problem with two exchange rates of varying volatility: the second asset in none of them."""
    n = problem.n_assets
    times = np.array([0.0, 0.3, 0.9, max(problem.years, 1.0)])
    of_assets = np.stack([np.interp(times, problem.variance_times, row) for row in problem.variances])
    of_rates = np.cumsum(np.outer([0.1**2, 0.14**2], np.diff(times, prepend=0.0)) * [0.0, 1.0, 2.0, 0.7], axis=1)
    rho = np.eye(n + 2)
    rho[:n, :n] = problem.correlation
    rho[:n, n], rho[:n, n + 1] = -0.3, np.linspace(0.1, 0.35, n)
    rho[n, n + 1] = 0.4
    rho = np.triu(rho) + np.triu(rho, 1).T
    exposures = np.array([[float(i != 1 and i % 2 == j) for j in range(2)] for i in range(n)])
    return replace(
        problem,
        correlation=rho,
        variance_times=times,
        variances=np.vstack([of_assets, of_rates]),
        exposures=exposures,
        composite=composite,
    )
