"""Correlation and dispersion that a sample of underlyings realises under deterministic covariance.

Observed continuously nothing is uncertain: realised covariance is the integral of the instantaneous one, and
realised correlations, fixed-weight variances and their dispersion follow from it exactly. Observed date by date they
scatter about these numbers; what that does to the mean of a correlation is known for equal periods. None of
this prices the dependence between volatility and correlation that a market's own quotes hold.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln, hyp2f1

Array = NDArray[np.float64]


def realised_correlations(covariance: Array, past_products: Array | None = None) -> Array:
    """Realised correlations (n, n) from the covariance (n, n) of the logs to come.

    ``past_products`` (n, n) are the sums of products of the log-returns known by now. Exact for continuous
    observation; volatility that moves in time makes it differ from the average of the correlations.
    """
    total = covariance if past_products is None else covariance + past_products
    deviations = np.sqrt(np.diag(total))
    return np.asarray(total / np.outer(deviations, deviations))


def average_correlation(correlations: Array, weights: Array) -> float:
    """Average over pairs, weighted with the products of ``weights`` (n,): what a correlation swap pays on."""
    pairs = np.triu_indices(weights.size, 1)
    shares = np.outer(weights, weights)[pairs]
    return float(shares @ correlations[pairs] / shares.sum())


def expected_sample_correlation(correlation: float, returns: int, *, centred: bool) -> float:
    """Mean of the sample correlation of ``returns`` equal and independent pairs (Hotelling 1953).

    ``centred``: with the sample's means taken off; otherwise the returns' own means must be 0. It is nearer to 0 than
    ``correlation`` by about ``correlation (1 - correlation^2) / (2 returns)``. Raises ValueError for too few returns.
    """
    freedom = returns - 1 if centred else returns
    if freedom < 1:
        raise ValueError(f"{returns} returns do not make a correlation")
    if abs(correlation) >= 1.0:
        return correlation
    ratio = math.exp(2.0 * (gammaln(0.5 * (freedom + 1)) - gammaln(0.5 * freedom)))
    return float(2.0 / freedom * ratio * correlation * hyp2f1(0.5, 0.5, 0.5 * (freedom + 2), correlation**2))


def fixed_weight_variance(covariance: Array, weights: Array) -> float:
    """Variance realised by a portfolio of constant weights (n,) of value: exact, and certain, in continuous time.

    For a basket of constant numbers of shares, whose weights move, this is a proxy: of first order in variance.
    """
    return float(weights @ covariance @ weights)


def dispersion(covariance: Array, weights: Array) -> float:
    """Weighted variance of the parts less the variance of the portfolio of constant weights."""
    return float(weights @ np.diag(covariance)) - fixed_weight_variance(covariance, weights)


def implied_average_correlation(index_variance: float, variances: Array, weights: Array) -> float:
    """The one correlation of all pairs that makes the portfolio's variance ``index_variance``."""
    deviations = weights * np.sqrt(variances)
    alone = float(deviations @ deviations)
    together = float(deviations.sum()) ** 2 - alone
    return (index_variance - alone) / together
