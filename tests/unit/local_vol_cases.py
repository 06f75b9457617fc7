"""Local volatility problems shared by tests: surfaces given by a formula, and their bumped copies."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.local_vol_monte_carlo import LocalVolProblem
from pricer.simulation.local_vol_plan import LocalVolPlan


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
    return LocalVolProblem(surfaces, rho, scales, fixed, volatilities, years, aggregate, payoff, 0.95)


def flat(problem: LocalVolProblem) -> LocalVolProblem:
    """The same problem with the lognormal volatilities as flat surfaces."""
    surfaces = tuple(
        tabulated(lambda t, k, v=v: np.full(np.broadcast(t, k).shape, v), v, problem.years)
        for v in problem.volatilities
    )
    return replace(problem, surfaces=surfaces)


def plan_of(problem: LocalVolProblem, *, triangular: bool = False) -> LocalVolPlan:
    """The plan as the engine makes it."""
    shares = problem.scales / (problem.scales + problem.floors)
    law, aggregate, payoff = problem.lognormal.law, problem.aggregate, problem.payoff
    return LocalVolPlan.of(law, problem.surfaces, shares, problem.years, aggregate, payoff, triangular=triangular)
