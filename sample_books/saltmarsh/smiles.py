"""Quoted smiles of the sample: prices of a model with stochastic variance and jumps, as rounded volatilities.

The quotes come from the characteristic function of Bates (1996) through the call integral of Lewis (2001),
not from the family of curves that surfaces are fitted with, so they test the fit. Being prices of
one martingale they hold no arbitrage but that of rounding to 0.01 volatility points.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from pricer.market.affine_price import AffineLevel

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Dynamics:
    """Variance that reverts to its mean, and jumps of normal logarithm; all rates are yearly."""

    start: float  # of the variance
    mean: float
    reversion: float
    variance_volatility: float
    correlation: float  # of variance and price
    jumps: float  # expected number a year
    jump: float  # mean of the logarithm
    jump_deviation: float

    @classmethod
    def around(cls, volatility: float, skewness: float) -> Dynamics:
        """Dynamics whose volatility is about ``volatility``, the more skewed the larger ``skewness`` (1: usual)."""
        jumps, jump, deviation = 0.45, -0.30 * volatility * skewness, 0.40 * volatility
        of_jumps = jumps * (jump**2 + deviation**2)
        return cls(
            start=(1.07 * volatility) ** 2 - of_jumps,
            mean=(1.02 * volatility) ** 2 - of_jumps,
            reversion=1.3,
            variance_volatility=1.9 * volatility,
            correlation=-0.62 * min(skewness, 1.4),
            jumps=jumps,
            jump=jump,
            jump_deviation=deviation,
        )

    def characteristic(self, u: NDArray[np.complex128], years: float) -> NDArray[np.complex128]:
        """E[exp(i u log X)] of the martingale X with X(0) = 1, at ``years``."""
        sigma, iu = self.variance_volatility, 1j * u
        pull = self.reversion - self.correlation * sigma * iu
        root = np.sqrt(pull**2 + sigma**2 * (iu + u**2))
        ratio = (pull - root) / (pull + root)  # this order keeps the logarithm on one branch
        decay = np.exp(-root * years)
        level = (pull - root) * years - 2.0 * np.log((1.0 - ratio * decay) / (1.0 - ratio))
        slope = (pull - root) * (1.0 - decay) / (1.0 - ratio * decay)
        diffusion = (self.reversion * self.mean * level + self.start * slope) / sigma**2
        compensator = math.exp(self.jump + 0.5 * self.jump_deviation**2) - 1.0
        jump = np.exp(iu * self.jump - 0.5 * (self.jump_deviation * u) ** 2) - 1.0 - iu * compensator
        out: NDArray[np.complex128] = np.exp(diffusion + self.jumps * years * jump)
        return out

    def call(self, strike: float, years: float) -> float:
        """E[max(X - strike, 0)]."""
        u, weights = _nodes(120.0 / math.sqrt(self.start * years))
        wave = np.exp(-1j * u * math.log(strike)) * self.characteristic(u - 0.5j, years)
        return 1.0 - math.sqrt(strike) / math.pi * float(np.sum(weights * wave.real / (u**2 + 0.25)))


def volatility(dynamics: Dynamics, level: AffineLevel, strike: float, years: float) -> float:
    """Black's volatility of the price ``level.scale * X + level.floor`` at ``strike``."""
    value = level.scale * dynamics.call(level.pure_strike(strike), years)
    return float(brentq(lambda v: black_call(level.forward, strike, v * math.sqrt(years)) - value, 0.01, 3.0))


def parameters(dynamics: Dynamics, level: AffineLevel, years: float) -> tuple[float, float, float]:
    """Volatility at the forward, and its first and second derivative in the logarithm of the strike there."""
    h = 0.15 * math.sqrt(dynamics.start * years)
    low, mid, high = (volatility(dynamics, level, level.forward * math.exp(k), years) for k in (-h, 0.0, h))
    return mid, (high - low) / (2.0 * h), (high - 2.0 * mid + low) / h**2


def black_call(forward: float, strike: float, deviation: float) -> float:
    """An undiscounted call on a lognormal price (Black 1976)."""
    d = math.log(forward / strike) / deviation + 0.5 * deviation
    return forward * _normal(d) - strike * _normal(d - deviation)


def _normal(x: float) -> float:
    return 0.5 * math.erfc(-x / math.sqrt(2.0))


def _nodes(limit: float, panels: int = 24) -> tuple[Array, Array]:
    """Gauss-Legendre nodes and weights on [0, limit], in panels that are narrow near 0, where the integrand peaks."""
    nodes, weights = np.polynomial.legendre.leggauss(48)
    edges = limit * np.linspace(0.0, 1.0, panels + 1) ** 3
    half = 0.5 * np.diff(edges)[:, None]
    return (edges[:-1, None] + half * (nodes + 1.0)).ravel(), (half * weights).ravel()
