"""The joint law of several levels on several dates, and averages over them as European problems.

Under correlated geometric Brownian motion the logs on all dates are jointly normal, so that a fixing on a
date is one more level: an average of a basket is a weighted sum, and every formula, bound and quadrature for
baskets prices it. Fixings already made are known amounts.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class FixingLaw:
    """Levels of n underlyings on the dates still to come.

    ``forwards`` : (n_dates, n_assets), > 0. ``covariances`` : (n_dates, n_assets, n_assets), of the logs from today to
    each date; they grow from date to date. Volatility and correlation may change in time but not with the levels.
    """

    forwards: Array
    covariances: Array

    def __post_init__(self) -> None:
        dates, assets = self.forwards.shape
        if self.covariances.shape != (dates, assets, assets):
            raise ValueError(f"forwards {self.forwards.shape} and covariances {self.covariances.shape} do not fit")
        variances = np.diagonal(self.covariances, axis1=1, axis2=2)
        if np.any(np.diff(variances, axis=0, prepend=0.0) < -1e-14):
            raise ValueError("variance must not fall from date to date")

    def joint(self) -> JointLognormal:
        """All fixings as levels of one law, date by date: index ``date * n_assets + asset``.

        Two dates share the variance up to the earlier one.
        """
        dates, assets = self.forwards.shape
        earlier = np.minimum.outer(np.arange(dates), np.arange(dates))
        blocks = self.covariances[earlier]  # (dates, dates, assets, assets)
        size = dates * assets
        return JointLognormal(self.forwards.ravel(), blocks.transpose(0, 2, 1, 3).reshape(size, size))

    def ratios(self, start: int, end: int) -> JointLognormal:
        """Law of the performances ``S(end) / S(start)`` (forward starts; Rubinstein 1990).

        Exact: what happens after ``start`` does not depend on where the level was then.
        """
        return JointLognormal(
            self.forwards[end] / self.forwards[start], self.covariances[end] - self.covariances[start]
        )


def arithmetic_average(
    fixings: FixingLaw, weights: Array, payoff: PiecewiseLinear, discount_factor: float, fixed: float = 0.0
) -> EuropeanProblem:
    """Payoff on ``fixed + sum weights[date, asset] S(date, asset)``.

    ``weights`` (n_dates, n_assets), of either sign: averaging-out has ``asset weight / number of dates`` on its
    dates, averaging-in the negative of it times the strike. ``fixed`` is the same sum over fixings already made.
    """
    _must_fit(fixings, weights)
    aggregate = Aggregate.weighted_sum(tuple(map(float, weights.ravel())))
    return EuropeanProblem(fixings.joint(), aggregate, payoff.of_shifted_argument(fixed), discount_factor)


def geometric_average(
    fixings: FixingLaw, weights: Array, payoff: PiecewiseLinear, discount_factor: float, fixed: float = 1.0
) -> EuropeanProblem:
    """Payoff on ``fixed * product S(date, asset) ** weights[date, asset]``: lognormal, hence exact.

    ``fixed`` > 0 is the same product over fixings already made (Kemna & Vorst 1990; Turnbull & Wakeman 1991).
    """
    _must_fit(fixings, weights)
    aggregate = Aggregate.geometric(tuple(map(float, weights.ravel())))
    law = fixings.joint()
    # The known factor is spread over the levels, so that it comes out once.
    scaled = replace(law, forwards=law.forwards * math.exp(math.log(fixed) / float(weights.sum())))
    return EuropeanProblem(scaled, aggregate, payoff, discount_factor)


def forward_start(
    fixings: FixingLaw,
    start: int,
    end: int,
    aggregate: Aggregate,
    payoff: PiecewiseLinear,
    discount_factor: float,
) -> EuropeanProblem:
    """Payoff on an aggregate of performances from date ``start`` to date ``end``, in money of a fixed notional."""
    return EuropeanProblem(fixings.ratios(start, end), aggregate, payoff, discount_factor)


def average_over(dates: int, asset_weights: Sequence[float], made: int = 0) -> Array:
    """Equal weights (dates, n_assets) of an average over ``made + dates`` fixings, of which ``made`` are past."""
    return np.tile(np.asarray(asset_weights, dtype=float) / (made + dates), (dates, 1))


def _must_fit(fixings: FixingLaw, weights: Array) -> None:
    if weights.shape != fixings.forwards.shape:
        raise ValueError(f"weights {weights.shape} do not fit forwards {fixings.forwards.shape}")
