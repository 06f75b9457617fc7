"""Levels of one currency paid in another: at a fixed rate (quanto) or at the day's rate (composite).

Every function takes the levels S_i in their own currencies and the exchange rates Q_i, in units of
the payment currency for one unit of the level's, and gives the law of what is paid under the
payment currency's measure. ``covariance`` (2n, 2n) is that of (log S_1..log S_n, log Q_1..log Q_n)
over the whole time to the date, so volatilities and rates may have any term structure. A level that
is in the payment currency already has a rate of 1, whose rows and columns are 0.

A rate quoted the other way round (units of the level's currency for one of the payment
currency) is 1/Q: its covariances with everything else change sign.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pricer.market.joint_lognormal import JointLognormal


def quanto(forwards: NDArray[np.float64], covariance: NDArray[np.float64]) -> JointLognormal:
    """Law of the S_i under the payment currency's measure.

    Forwards become ``F_i exp(-cov(log S_i, log Q_i))`` (Reiner 1992): the density of the payment
    currency's measure against the level's own is proportional to 1/Q_i, and shifts the mean of
    log S_i by minus that covariance. A level that tends to rise with its currency has the lower
    quanto forward. Covariances stay.
    """
    n = _size(forwards, covariance)
    return JointLognormal(forwards * np.exp(-np.diag(covariance[:n, n:])), covariance[:n, :n])


def composite(
    forwards: NDArray[np.float64], fx_forwards: NDArray[np.float64], covariance: NDArray[np.float64]
) -> JointLognormal:
    """Law of the S_i Q_i under the payment currency's measure (Reiner 1992).

    The forward is the product of both forwards, whatever the correlation: an asset converted
    at the day's rate is an asset of the payment currency. Log-levels add, and so do their covariances.
    """
    n = _size(forwards, covariance)
    total = covariance[:n, :n] + covariance[:n, n:] + covariance[n:, :n] + covariance[n:, n:]
    return JointLognormal(forwards * fx_forwards, total)


def with_rates(covariance: NDArray[np.float64], rates: Sequence[int | None]) -> NDArray[np.float64]:
    """The (2n, 2n) covariance of n levels and the rate of each, from that of n levels and k rates (n + k, n + k).

    ``rates`` says which of the k belongs to each level; None for a level in the payment currency.
    """
    n = len(rates)
    padded = np.pad(covariance, (0, 1))  # the last row and column are those of the rate 1
    pick = [*range(n), *(len(covariance) if rate is None else n + rate for rate in rates)]
    out: NDArray[np.float64] = padded[np.ix_(pick, pick)]
    return out


def _size(forwards: NDArray[np.float64], covariance: NDArray[np.float64]) -> int:
    n = len(forwards)
    if covariance.shape != (2 * n, 2 * n):
        raise ValueError(f"{n} levels and their rates do not fit a covariance of shape {covariance.shape}")
    return n
