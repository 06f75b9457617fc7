"""Options whose value the implied surface knows without any simulation: what time steps are measured by.

On one asset the surface's own digitals are exact (Breeden & Litzenberger 1978); independent assets multiply: that at
least k of n are above a level is a sum over products of these.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import timedelta

import numpy as np
from scipy.special import ndtr

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.local_vol_monte_carlo import LocalVolProblem, sample_local_vol
from pricer.engines.selector import COVERAGE, sampling_quantile
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.smile_quotes import SmileQuotes
from tests.unit.smiles import TODAY, smiles

BP = 1e-4

EVENT = {7: 0.10, 10: 0.45, 30: 0.30, 91: 0.22, 365: 0.20}


@dataclass(frozen=True)
class Found:
    """Error of the value, the stated standard error with the steps' share, and whether the 99 % interval covers."""

    off: float
    stated: float
    covered: bool
    steps: int

    @property
    def z(self) -> float:
        return self.off / self.stated


def above(surface: ImpliedSurface, levels: np.ndarray, years: float) -> np.ndarray:
    """Probability that X ends above each level."""
    k = np.log(levels)
    at = surface.derivatives(k, years)
    root = np.sqrt(at.variance)
    d2 = -k / root - 0.5 * root
    return ndtr(d2) - np.exp(-0.5 * d2 * d2) / np.sqrt(2.0 * np.pi) * at.slope / (2.0 * root)


def known_value(surfaces: list[ImpliedSurface], kth_best: int, kind: ProfileKind, strike: float, years: float) -> float:
    """Undiscounted, on the k-th best of independent X."""
    levels = np.unique(np.concatenate([np.geomspace(1e-3, 40.0, 40_001), np.linspace(0.2, 4.0, 40_001), [strike]]))
    at_least = np.zeros((len(surfaces) + 1, len(levels)))
    at_least[0] = 1.0
    for surface in surfaces:
        p = above(surface, levels, years)
        at_least[1:] = at_least[1:] * (1.0 - p) + at_least[:-1] * p
        at_least[0] *= 1.0 - p
    tail = at_least[kth_best:].sum(axis=0)
    place = int(np.searchsorted(levels, strike))
    if kind is ProfileKind.CASH_DIGITAL_CALL:
        return float(tail[place])
    if kind is ProfileKind.CALL:
        return float(np.trapezoid(tail[place:], levels[place:]))
    return float(levels[0] + np.trapezoid(1.0 - tail[: place + 1], levels[: place + 1]) - levels[0] * tail[0])


def measured(
    surfaces: list[ImpliedSurface],
    kth_best: int,
    kind: ProfileKind,
    strike: float,
    days: int,
    *,
    tolerance: float = BP,
    seed: int = 1,
) -> Found:
    """The engine's value, by default at the usual precision, a basis point of the forward, beside the surface's own."""
    years, n = days / 365, len(surfaces)
    inner = sorted({t for surface in surfaces for t in surface.times if t < years})
    times = np.array([0.0, *inner, years])
    variances = np.stack([np.append(0.0, surface.total_variance(0.0, times[1:])) for surface in surfaces])
    problem = LocalVolProblem(
        tuple(LocalVolSurface.from_implied(surface, horizon=years) for surface in surfaces),
        np.eye(n),
        np.ones(n),
        np.zeros(n),
        times,
        variances,
        years,
        Aggregate.kth_best(kth_best, n) if n > 1 else Aggregate.weighted_sum((1.0,)),
        Profile(kind, strike).payoff(),
        1.0,
    )
    got = sample_local_vol(
        problem, group=f"{days} {kind} {strike:.6f}", seed=seed, value_tolerance=tolerance, delta_tolerance=1e9
    )
    stated = float(np.hypot(got.standard_error, got.step_bias))
    off = got.value - known_value(surfaces, kth_best, kind, strike, years)
    return Found(off, stated, abs(off) <= sampling_quantile(got.degrees_of_freedom, 1.0 - COVERAGE) * stated, got.steps)


def index_surface(seed: int, *, index: bool = True) -> ImpliedSurface:
    """As a sample market's: eight expiries."""
    return ImpliedSurface.from_quotes(TODAY, smiles(seed, index=index))


def event_surface() -> ImpliedSurface:
    """A quiet week, then an event: forward volatility jumps from 10 % to 84 % and back."""
    quotes = []
    for days, level in EVENT.items():
        z = np.linspace(-2.2, 1.8, 9)
        k = z * level * np.sqrt(days / 365)
        volatilities = level * (1.0 - 0.2 * 0.35 * z + 0.3 * 0.15 * z * z)
        quotes.append(SmileQuotes.of(TODAY + timedelta(days=days), k, volatilities))
    return ImpliedSurface.from_quotes(TODAY, quotes)
