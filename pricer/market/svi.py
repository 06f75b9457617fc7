"""One expiry's smile: total variance as a function of log-moneyness, in Gatheral's raw SVI form."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

#: Correlation given to a smile of which only level and slope are known; see ``from_forward``.
USUAL_CORRELATION = 0.7


@dataclass(frozen=True, slots=True)
class JumpWings:
    """A slice in terms a trader quotes (SVI-JW; Gatheral & Jacquier 2014, section 3.3).

    ``variance`` v: variance per year at the forward. ``skew`` psi: slope in k, at the forward, of the root of
    total variance. ``put_wing`` p and ``call_wing`` c: slopes of the wings over that root at the forward.
    ``minimum_variance`` v~: least variance per year. ``time`` in years.
    """

    variance: float
    skew: float
    put_wing: float
    call_wing: float
    minimum_variance: float
    time: float


@dataclass(frozen=True, slots=True)
class SviSlice:
    """``w(k) = a + b (rho (k - m) + sqrt((k - m)^2 + sigma^2))``, total variance at log-moneyness k.

    ``k = log(strike / forward)`` of the pure martingale X, whose forward is 1. With cash
    dividends between now and expiry a strike K is ``(K - D) / (F - D)`` in X; without them K / F.
    Source: Gatheral & Jacquier (2014), equation 3.1.
    """

    a: float
    b: float
    rho: float
    m: float
    sigma: float

    def __post_init__(self) -> None:
        numbers = (self.a, self.b, self.rho, self.m, self.sigma)
        if not all(map(math.isfinite, numbers)) or self.b < 0.0 or abs(self.rho) > 1.0 or self.sigma <= 0.0:
            raise ValueError(f"a slice needs b >= 0, rho from -1 to 1 and sigma above 0; got {self}")
        if self.minimum < -1e-12:
            raise ValueError(f"total variance must not be negative; its least is {self.minimum:g} for {self}")

    @classmethod
    def flat(cls, variance: float) -> SviSlice:
        """The same total variance at every strike."""
        return cls(variance, 0.0, 0.0, 0.0, 1.0)

    @classmethod
    def from_forward(cls, variance: float, slope: float, curvature: float | None = None) -> SviSlice:
        """The slice with this total variance, its first and its second derivative at k = 0.

        It has the SSVI shape ``theta/2 (1 + rho phi k + sqrt((phi k + rho)^2 + 1 - rho^2))``
        (Gatheral & Jacquier 2014, equation 4.1), which has three parameters as well. A
        ``curvature`` of None stands for "not quoted": rho is then 0.7 with the slope's sign,
        which is convex enough never to fall below 0, and flat where the slope is 0. A curvature
        below what keeps ``|rho| <= 0.99`` is raised to that.
        Raises ValueError unless variance is above 0, or if slope or curvature ask for anything of 0 variance.
        """
        if variance == 0.0 and slope == 0.0 and not curvature:
            return cls.flat(0.0)
        if not variance > 0.0:
            raise ValueError(f"total variance at the forward must be above 0; got {variance}")
        tilt = slope / variance  # rho phi
        if curvature is None:
            phi = abs(tilt) / USUAL_CORRELATION
        else:
            phi = max(math.sqrt(max(tilt * tilt + 2.0 * curvature / variance, 0.0)), abs(tilt) / 0.99)
        if phi < 1e-9:
            return cls.flat(variance)
        rho = tilt / phi
        root = math.sqrt(1.0 - rho * rho)
        return cls(0.5 * variance * root * root, 0.5 * variance * phi, rho, -rho / phi, root / phi)

    @classmethod
    def from_jump_wings(cls, jw: JumpWings) -> SviSlice:
        """The raw slice of jump-wing parameters (Gatheral & Jacquier 2014, lemma 3.2).

        Raises ValueError where no slice has them.
        """
        t, root = jw.time, math.sqrt(jw.variance * jw.time)
        b = 0.5 * root * (jw.call_wing + jw.put_wing)
        if b == 0.0:
            return cls.flat(jw.variance * t)
        rho = 1.0 - jw.put_wing * root / b
        beta = rho - 2.0 * jw.skew * root / b
        if not (abs(rho) <= 1.0 and abs(beta) <= 1.0):
            raise ValueError(f"no slice has the skew and wings of {jw}: -p <= 2 psi <= c is needed")
        fall, corner = (jw.variance - jw.minimum_variance) * t, math.sqrt(1.0 - rho * rho)
        if abs(beta) < 1e-12:
            m, sigma = 0.0, fall / (b * (1.0 - corner))
        else:
            alpha = math.copysign(math.sqrt(max(1.0 / (beta * beta) - 1.0, 0.0)), beta)
            signed = math.copysign(math.sqrt(1.0 + alpha * alpha), beta)
            m = fall / (b * (-rho + signed - alpha * corner))
            sigma = alpha * m
        return cls(jw.minimum_variance * t - b * sigma * corner, b, rho, m, sigma)

    def jump_wings(self, time: float) -> JumpWings:
        """The same slice in jump-wing terms, for an expiry in ``time`` years. Raises ValueError without variance."""
        variance = float(self.total_variance(0.0))
        if not (variance > 0.0 and time > 0.0):
            raise ValueError("a slice without variance or time has no jump wings")
        root = math.sqrt(variance)
        skew = 0.5 * self.b / root * (self.rho - self.m / math.hypot(self.m, self.sigma))
        put, call = self.b * (1.0 - self.rho) / root, self.b * (1.0 + self.rho) / root
        return JumpWings(variance / time, skew, put, call, self.minimum / time, time)

    @property
    def minimum(self) -> float:
        """The least total variance of any strike."""
        return self.a + self.b * self.sigma * math.sqrt(1.0 - self.rho * self.rho)

    @property
    def wings(self) -> tuple[float, float]:
        """Slopes of total variance in -k far left and in k far right; above 2 no martingale has them (Lee 2004)."""
        return self.b * (1.0 - self.rho), self.b * (1.0 + self.rho)

    def total_variance(self, k: ArrayLike) -> Array:
        """Total variance at log-moneyness ``k``, any shape."""
        x = np.asarray(k, dtype=float) - self.m
        out: Array = self.a + self.b * (self.rho * x + np.sqrt(x * x + self.sigma * self.sigma))
        return out

    def derivatives(self, k: ArrayLike) -> tuple[Array, Array, Array]:
        """Total variance and its first and second derivative in k, each of the shape of ``k``."""
        x = np.asarray(k, dtype=float) - self.m
        root = np.sqrt(x * x + self.sigma * self.sigma)
        value = self.a + self.b * (self.rho * x + root)
        return value, self.b * (self.rho + x / root), self.b * self.sigma * self.sigma / root**3

    def butterfly(self, k: ArrayLike) -> Array:
        """The function g of :func:`butterfly` at ``k``; below 0 the slice has butterfly arbitrage there."""
        return butterfly(k, *self.derivatives(k))


def butterfly(k: ArrayLike, variance: Array, slope: Array, curvature: Array) -> Array:
    """``g = (1 - k w'/(2w))^2 - w'^2/4 (1/w + 1/4) + w''/2``, any shape; 1 where there is no variance.

    The density of X at ``exp(k)`` is g times a positive factor, so g >= 0 means no butterfly
    arbitrage, and Dupire's local variance is dw/dt over g. Source: Gatheral & Jacquier (2014), equation 2.1.
    """
    k = np.asarray(k, dtype=float)
    with np.errstate(divide="ignore", invalid="ignore"):
        g = (1.0 - 0.5 * k * slope / variance) ** 2 - 0.25 * slope**2 * (1.0 / variance + 0.25) + 0.5 * curvature
    out: Array = np.where(variance > 0.0, g, 1.0)
    return out
