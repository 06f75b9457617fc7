"""How much of a claim its writer pays, as a function of one normal variable.

A writer who fails pays part of the claim. What part, and when, is written as *shares* of the claim
on the two sides of a limit of one standard normal driver: the writer's assets (structural models), or
the variable behind a time of default (reduced form, with or without dependence).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from pricer.engines.closed_form.family import Side

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Share:
    """``factor exp(tilt w - tilt^2 / 2)`` of the claim where ``where (w - limit) > 0``."""

    factor: float
    tilt: float
    limit: float
    where: Side

    def __call__(self, w: Array) -> Array:
        inside = self.where * (w - self.limit) > 0.0
        return np.asarray(np.where(inside, self.factor * np.exp(self.tilt * (w - 0.5 * self.tilt)), 0.0))


@dataclass(frozen=True, slots=True)
class WriterAssets:
    """The writer's assets at expiry: lognormal, in the currency of the claim and per unit of it.

    ``forward`` > 0; ``deviation`` > 0 of their log over the whole time to expiry; ``covariance`` (n,) of their
    log with the log-levels. Units: ``forward`` and everything compared with it count money per unit of the
    option, like its payoff.
    """

    forward: float
    deviation: float
    covariance: Array

    def __post_init__(self) -> None:
        if not (self.forward > 0.0 and self.deviation > 0.0):
            raise ValueError(f"assets need a forward and a deviation above 0; got {self.forward}, {self.deviation}")

    @property
    def loadings(self) -> Array:
        """Covariances (n,) of the log-levels with the standard normal variable that drives the assets."""
        return np.asarray(self.covariance / self.deviation)

    def at(self, w: float) -> float:
        """The assets given their driver."""
        return self.forward * math.exp(self.deviation * (w - 0.5 * self.deviation))

    def driver_at(self, level: float) -> float:
        """Where the assets are at ``level`` >= 0."""
        if level <= 0.0:
            return -math.inf
        return math.log(level / self.forward) / self.deviation + 0.5 * self.deviation


def fixed_boundary(assets: WriterAssets, boundary: float, liabilities: float, deadweight: float) -> tuple[Share, Share]:
    """Default at expiry where the assets are below ``boundary``; then the claim gets its part of what is left.

    Paid in default: ``(1 - deadweight) assets / liabilities`` of the claim (Klein 1996). The claim itself does not
    count among the ``liabilities``, so that it must be small beside them. ``deadweight`` in [0, 1].
    Raises ValueError where a defaulted writer could pay more than the claim.
    """
    if not 0.0 <= deadweight <= 1.0 or boundary < 0.0 or liabilities <= 0.0:
        raise ValueError(f"boundary {boundary}, liabilities {liabilities} or deadweight {deadweight} out of range")
    if (1.0 - deadweight) * boundary > liabilities:
        raise ValueError(f"just below the boundary {boundary} more than the whole claim would be paid")
    limit = assets.driver_at(boundary)
    left = (1.0 - deadweight) * assets.forward / liabilities
    return Share(1.0, 0.0, limit, 1), Share(left, assets.deviation, limit, -1)


def time_of_default(survival: float, recovery: float) -> tuple[Share, Share]:
    """Default before expiry with probability ``1 - survival``; then ``recovery`` of the claim, at expiry.

    The driver is the normal variable of a Gaussian copula (Li 2000): the writer fails where it is low. Loadings
    of the levels on it say how far they fall with the writer; none of them: independence (Jarrow & Turnbull 1995).
    """
    if not (0.0 <= survival <= 1.0 and 0.0 <= recovery <= 1.0):
        raise ValueError(f"survival {survival} and recovery {recovery} must lie between 0 and 1")
    limit = -float(ndtri(survival))
    return Share(1.0, 0.0, limit, 1), Share(recovery, 0.0, limit, -1)


def independent_default(survival: float, recovery: float) -> float:
    """Factor on the default-free value: recovery of the claim itself (Jarrow & Turnbull 1995).

    Paid at expiry, or at default as the claim's default-free value: for a European claim that never
    has to be paid by its holder both are worth the same.
    """
    return survival + recovery * (1.0 - survival)


def recovery_of_market_value(survival: float, recovery: float) -> float:
    """Factor where default pays ``recovery`` of the claim's value just before it (Duffie & Singleton 1999)."""
    return float(survival ** (1.0 - recovery))
