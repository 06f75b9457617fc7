"""Sensitivities to volatility under lognormal levels: differences on common draws."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.core.randomness import Purpose
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.lognormal_prices import LognormalPrices
from pricer.engines.contract_walk.noise import Noise
from pricer.engines.contract_walk.sampling import WalkSampler
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]

#: By which volatilities are moved up and down: a tenth of a point.
BUMP = 1e-3
_POINT = 0.01


def lognormal_vegas(
    terms: ContractTerms, law: LognormalPrices, noise: Noise, points: int, group: str, seed: int
) -> tuple[Array, Array]:
    """Vegas per volatility point and their errors, (n,) each, for a contract that pays without jumps.

    Each underlying's volatility to every date moves, correlations stay, a quanto's forwards follow. ``law`` and
    ``noise`` are those of ``terms``; ``points`` of each randomisation are used.
    """
    n = len(terms.contract.underlyings)
    vegas, errors = np.zeros(n), np.zeros(n)
    for asset in range(n):
        if not np.any(terms.covariances[:, asset, asset] > 0.0):
            vegas[asset] = errors[asset] = np.nan  # no direction to move along
            continue
        sums = []
        for by in (BUMP, -BUMP):
            moved = terms.with_volatility_moved(asset, by)
            variances = np.diagonal(moved.covariances, axis1=1, axis2=2)
            draw = law.with_variances(moved.forwards, variances).draw
            sampler = WalkSampler(moved, noise, draw, group, seed, Purpose.PRICE)
            sampler.extend(points)
            sums.append(sampler.sums.values / points)
        (move,), (error,) = batch_estimate(((sums[0] - sums[1]) * (_POINT / (2.0 * BUMP)))[:, None])
        vegas[asset], errors[asset] = move, error
    return vegas, errors
