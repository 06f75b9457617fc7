"""Sensitivities of legs to volatility under lognormal levels: differences on common draws."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.engines.contract_legs.result import ContractLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from pricer.engines.path_inputs import Drivers
from pricer.engines.stepwise.run import Run
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.market.market import Market
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]

#: Differences are central, over this much volatility either way.
_BUMP = 2.5e-3
_POINT = 0.01


def lognormal_vegas(
    trade: Trade,
    terms: ContractTerms,
    legs: ContractLegs,
    market: Market,
    asked: Asked,
    settings: StepwiseSettings,
    drivers: Drivers,
    points: int,
) -> tuple[Array, Array]:
    """Per volatility point, and errors, (n,) each: a volatility to every date moves, correlations stay.

    A quanto's forwards follow; cash dividends still to come stay. The 2 n values together take about ``points`` of
    each randomisation.
    """
    n = len(terms.random_spots)
    vegas, errors = np.empty(n), np.empty(n)
    each = max(points >> (2 * n).bit_length(), settings.initial_points)
    for asset in range(n):
        means = []
        for by in (_BUMP, -_BUMP):
            moved = drivers.with_volatility_moved(asset, by)
            run = Run.of(trade, terms, legs, market, asked, settings, smiled=False, drivers=moved)
            run.fine.extend(each)
            means.append(run.fine.values.sum(axis=1) / each)
        (move,), (error,) = batch_estimate(((means[0] - means[1]) * (_POINT / (2.0 * _BUMP)))[:, None])
        vegas[asset], errors[asset] = float(move), float(error)
    return vegas, errors
