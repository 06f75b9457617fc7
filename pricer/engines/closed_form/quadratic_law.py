"""A sum of squares of independent normals and what is paid on it: realised variance under deterministic volatility.

Its moment generating function is known, and calls, digitals and the mean square root follow from it by one
integral each (Imhof 1961 for the law; Lee 2004 for shifted contours; the root by its Laplace transform).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.family import Estimate, Side

Array = NDArray[np.float64]
Complexes = NDArray[np.complex128]

_MOST = 200_000  # nodes of a contour
_SHARE = 6.0  # nodes within the distance to the nearest pole: exp(-2 pi 6) is 4e-17
_NEGLIGIBLE = 1e-15
_ROUNDING = 1e-13


@dataclass(frozen=True, slots=True)
class QuadraticLaw:
    """``shift + factor * sum_k (deviations[k] z_k + means[k])^2`` with independent standard normal z.

    ``factor`` > 0; ``deviations`` > 0 and ``means`` (n,).
    """

    shift: float
    factor: float
    deviations: Array
    means: Array

    def mean(self) -> Estimate:
        value = self.shift + self.factor * float(np.sum(self.deviations**2 + self.means**2))
        return Estimate(value, _ROUNDING * (abs(value) + abs(self.shift)))

    def option(self, strike: float, side: Side) -> Estimate | None:
        """``E[(side (A - strike))+]``; None where the contour would take too many nodes."""
        level = (strike - self.shift) / self.factor
        mean = float(np.sum(self.deviations**2 + self.means**2))
        forward = side * self.factor * (mean - level)
        if level <= 0.0:
            return Estimate(max(forward, 0.0), _ROUNDING * abs(forward))
        found = self._contour(level, 2)
        if found is None:
            return None
        value, error, above = found
        whole = value * self.factor + (0.0 if above == side else forward)
        return Estimate(max(whole, 0.0), (error + _ROUNDING * (mean + level)) * self.factor)

    def digital(self, strike: float, side: Side) -> Estimate | None:
        """``P(A > strike)`` for side +1, ``P(A <= strike)`` for -1."""
        level = (strike - self.shift) / self.factor
        if level <= 0.0:
            return Estimate(1.0 if side == 1 else 0.0)
        found = self._contour(level, 1)
        if found is None:
            return None
        value, error, above = found
        near = above * value  # a contour on the left of 0 gives the probability below, with a minus sign
        return Estimate(near if above == side else 1.0 - near, error + _ROUNDING)

    def mean_root(self) -> Estimate:
        """``E[sqrt(A)]`` for a shift of 0 or more: ``1 / (2 sqrt(pi)) int (1 - E exp(-s A)) s^(-3/2) ds``."""
        scale = self.shift + self.factor * float(np.sum(self.deviations**2 + self.means**2))

        def integral(spacing: float) -> float:
            x = np.arange(-75.0, 75.0, spacing)  # of log(s scale); both tails are below 1e-16 beyond
            s = np.exp(x) / scale
            lost = -np.expm1(self._log_laplace(self.factor * s) - self.shift * s)
            return float(np.sum(lost * np.exp(-0.5 * x)) * spacing) * math.sqrt(scale) / (2.0 * math.sqrt(math.pi))

        fine, coarse = integral(0.1), integral(0.15)
        return Estimate(fine, abs(fine - coarse) + 1e-12 * abs(fine))

    def _log_transform(self, z: NDArray[Any]) -> Complexes:
        """``log E exp(z Q)`` at points (m,)."""
        points = np.asarray(z, dtype=complex)[:, np.newaxis]
        rest = 1.0 - 2.0 * points * self.deviations**2
        return np.asarray(np.sum(-0.5 * np.log(rest) + points * self.means**2 / rest, axis=1))

    def _log_laplace(self, s: Array) -> Array:
        """``log E exp(-s Q)`` at points (m,) >= 0, to the last digit also where it is all but 0."""
        twice = 2.0 * s[:, np.newaxis] * self.deviations**2
        return np.asarray(-np.sum(0.5 * np.log1p(twice) + s[:, np.newaxis] * self.means**2 / (1.0 + twice), axis=1))

    def _contour(self, level: float, power: int) -> tuple[float, float, Side] | None:
        """``1/pi int Re exp(log E - z level) / z^power du`` on ``z = a + iu``; +1 for a contour on the right of 0."""
        a = self._saddle(level)
        pole = 0.5 / float(np.max(self.deviations)) ** 2
        spacing = min(abs(a), pole - a) / _SHARE
        total, largest, first = 0.0, 0.0, 0
        while first < _MOST:
            u = spacing * np.arange(first, first + 512)
            z = a + 1j * u
            terms = (np.exp(self._log_transform(z) - z * level) / z**power).real
            terms[0] *= 0.5 if first == 0 else 1.0
            total += float(terms.sum())
            sizes = np.abs(terms)
            largest = max(largest, float(sizes.max()))
            first += 512
            # The integrand falls at least as a power of u; what is left is about the last term times u.
            left = float(sizes[-64:].max()) * first
            if left <= _NEGLIGIBLE * largest:
                break
        else:
            return None
        side: Side = 1 if a > 0.0 else -1
        return total * spacing / math.pi, spacing * (left + _ROUNDING * largest) / math.pi, side

    def _saddle(self, level: float) -> float:
        """Where ``log E exp(a Q) - a level`` is about least, away from the poles at 0 and on the right."""
        squares, means = self.deviations**2, self.means**2
        pole = 0.5 / float(squares.max())
        deviation = math.sqrt(float(np.sum(2.0 * squares**2 + 4.0 * squares * means)))

        def slope(a: float) -> float:
            rest = 1.0 - 2.0 * a * squares
            return float(np.sum(squares / rest + means / rest**2)) - level

        low, high = -50.0 * (1.0 / deviation + len(squares) / level), pole * (1.0 - 1e-6)
        for _ in range(100):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if slope(middle) < 0.0 else (low, middle)
        near = min(1.0 / deviation, 0.25 * pole)
        found = 0.5 * (low + high)
        if abs(found) < near:
            found = near if found >= 0.0 else -near
        return min(found, 0.9 * pole)
