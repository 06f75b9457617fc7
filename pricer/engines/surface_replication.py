"""One underlying under its whole smile: the surface's own prices, without any dynamics.

A European payoff on one level is a sum of calls and digitals, and the implied surface prices both
at any strike; local volatility is built to give back the same. With total variance w(k) at
log-strike k, x = sqrt(w) and d2 = -k / x - x / 2,

    P(X > e^k) = N(d2) - phi(d2) w'(k) / (2 x)          (Breeden & Litzenberger 1978)

This is exact for the surface, and what the simulated model is measured by.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from pricer.engines.closed_form.family import Estimate, Side, expectation, other
from pricer.engines.closed_form.lognormal import ROUNDING, black, exceedance
from pricer.engines.closed_form.ranks import is_sum
from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.unit_terms import UnitTerms
from pricer.market.implied_surface import ImpliedSurface

METHOD = "implied volatility surface"
SOURCE = "Breeden & Litzenberger (1978)"

#: Tables of local volatility give vanillas back within this volatility (0.02 vol points): measured by repricing
#: quotes and by the forward equation, without the steps' bias, which has an error of its own.
CALIBRATION = 2e-4
#: What that allows the slope of the smile: the whole of it over this many standard deviations.
_OVER = 0.5


@dataclass(frozen=True, slots=True)
class SmiledLevel:
    """The law of ``shift + coefficient X`` at ``years``, X of mean 1 with the smile of ``surface`` there.

    ``coefficient`` is not 0. ``bump`` is added to volatilities, and ``tilt`` to their rise over half a
    standard deviation.
    """

    shift: float
    coefficient: float
    surface: ImpliedSurface
    years: float
    bump: float = 0.0
    tilt: float = 0.0

    def mean(self) -> Estimate:
        return Estimate(self.shift + self.coefficient)

    def option(self, strike: float, side: Side) -> Estimate:
        size, level, mirrored = self._mirror(strike, side)
        deviation, _ = self._smile(level / size)
        return Estimate(float(black(size, level, deviation, mirrored)), ROUNDING * (size + abs(level)))

    def digital(self, strike: float, side: Side) -> Estimate:
        size, level, mirrored = self._mirror(strike, side)
        deviation, slope = self._smile(level / size)
        value = float(exceedance(size, level, deviation, mirrored))
        if level > 0.0:
            d2 = -math.log(level / size) / deviation - 0.5 * deviation
            value -= mirrored * slope * math.exp(-0.5 * d2 * d2) / math.sqrt(2.0 * math.pi)
        return Estimate(min(max(value, 0.0), 1.0), ROUNDING)

    def _smile(self, strike: float) -> tuple[float, float]:
        """Deviation and its slope in log-strike at a strike on X; any at a strike that X always exceeds."""
        k = np.log(strike) if strike > 0.0 else 0.0
        at = self.surface.derivatives(k, self.years)
        root, deviation = math.sqrt(self.years), math.sqrt(float(at.variance))
        slope = 0.5 * float(at.slope) / deviation + self.tilt * root / (_OVER * deviation)
        return deviation + self.bump * root, slope

    def _mirror(self, strike: float, side: Side) -> tuple[float, float, Side]:
        """The same question about ``|coefficient| X`` alone."""
        if self.coefficient > 0.0:
            return self.coefficient, strike - self.shift, side
        return -self.coefficient, self.shift - strike, other(side)


def surface_reference(terms: UnitTerms, surfaces: tuple[ImpliedSurface, ...]) -> Reference | None:
    """The surface's own price of a payoff on one underlying in its own currency; None for any other.

    Its ``allowance`` is what paths calibrated to ``CALIBRATION`` may differ by.
    """
    single = len(surfaces) == 1 and is_sum(terms.aggregate.kind, terms.aggregate.weights)
    if not single or terms.is_composite or terms.drifts[0] != 0.0 or terms.years <= 0.0:
        return None
    weight = terms.aggregate.weights[0]
    scale, floor = float(terms.law.forwards[0]), float(terms.floors[0])

    def value(bump: float = 0.0, tilt: float = 0.0) -> Estimate | None:
        law = SmiledLevel(weight * floor, weight * scale, surfaces[0], terms.years, bump, tilt)
        found = expectation(terms.payoff, law)
        return None if found is None else found.times(terms.discount_factor)

    middle = value()
    moved = [value(bump=CALIBRATION), value(bump=-CALIBRATION), value(tilt=CALIBRATION)]
    if middle is None or any(each is None for each in moved):
        return None
    up, down, tilted = (abs(each.value - middle.value) for each in moved if each is not None)
    allowance = max(up, down) + tilted
    return Reference(METHOD, ReferenceKind.EXACT, middle.value, middle.error, SOURCE, allowance)
