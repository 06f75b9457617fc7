"""From an engine's sensitivities to logarithms to those of one unit to each underlying's price."""

from __future__ import annotations

import math

import numpy as np

from pricer.engines.model_value import UnitRatios
from pricer.engines.monte_carlo import Sample
from pricer.engines.unit_terms import UnitTerms


def european_ratios(terms: UnitTerms, drawn: Sample, method: str) -> UnitRatios:
    """Shares, gammas and vegas of one unit.

    The random part of a forward is proportional to that of the spot, so a derivative with respect to its
    logarithm, divided by the latter in the trade's currency, is the number of shares. A quanto's forward moves with
    the volatility, which its vega includes. Vegas are NaN for composites of several underlyings: their
    correlations move with their volatilities.
    """
    shares = terms.random_spots * terms.rates
    gammas = gamma_errors = None
    if drawn.log_gammas is not None and drawn.log_gamma_errors is not None:
        gammas = drawn.log_gammas / (terms.random_spots * shares)
        gamma_errors = drawn.log_gamma_errors / (terms.random_spots * shares)
    if terms.is_composite:
        vegas = vega_errors = np.full(len(shares), np.nan)
    else:
        per_point = 0.01 * math.sqrt(terms.years) * terms.vega_slopes
        deviations = terms.law.deviations
        drifts = terms.drifts / np.where(deviations > 0.0, deviations, 1.0)
        vegas = per_point * (drawn.deviation_vegas + drifts * drawn.log_deltas)
        vega_errors = per_point * np.hypot(drawn.deviation_vega_errors, drifts * drawn.log_delta_errors)
    return UnitRatios(
        deltas=drawn.log_deltas / shares,
        delta_errors=drawn.log_delta_errors / shares,
        gammas=gammas,
        gamma_errors=gamma_errors,
        vegas=vegas,
        vega_errors=vega_errors,
        method=method,
    )
