"""Exchange rate volatilities of the sample, and the correlations of shares and rates."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from saltmarsh.facts import UNDERLYINGS

#: Yearly volatility of the pairs that have one, and the correlation of the two.
FX_VOLATILITIES = {"EURUSD": 0.0780, "EURGBP": 0.0640}
_FX_CORRELATION = 0.42
#: Correlation of each pair with the common factor of a region: euros fall and sterling falls more when shares do.
_FX_AND_REGION = {
    "EURUSD": {"EUR": -0.12, "USD": 0.18, "GBP": 0.02},
    "EURGBP": {"EUR": -0.22, "USD": -0.20, "GBP": 0.15},
}
_BETWEEN_REGIONS = 0.55


def correlation_matrix() -> NDArray[np.float64]:
    """Correlations of underlyings and pairs, to three decimals: (n, n).

    One factor per currency's region, the regions correlated with each other and with the rates.
    """
    regions = ("EUR", "USD", "GBP")
    common = np.eye(len(regions) + len(FX_VOLATILITIES))
    for i, region in enumerate(regions):
        for j in range(i):
            common[i, j] = common[j, i] = _BETWEEN_REGIONS
        for j, pair in enumerate(FX_VOLATILITIES, start=len(regions)):
            common[i, j] = common[j, i] = _FX_AND_REGION[pair][region]
    common[-1, -2] = common[-2, -1] = _FX_CORRELATION
    loadings = np.zeros((len(UNDERLYINGS) + len(FX_VOLATILITIES), len(common)))
    for i, (region, *_, loading) in enumerate(UNDERLYINGS.values()):
        loadings[i, regions.index(region)] = loading
    for j in range(len(FX_VOLATILITIES)):
        loadings[len(UNDERLYINGS) + j, len(regions) + j] = 1.0
    matrix: NDArray[np.float64] = np.round(loadings @ common @ loadings.T, 3)
    np.fill_diagonal(matrix, 1.0)
    return matrix


def yearly_volatilities() -> list[float]:
    """Of the shares and pairs of the matrix, in its order."""
    return [*(row[5] for row in UNDERLYINGS.values()), *FX_VOLATILITIES.values()]
