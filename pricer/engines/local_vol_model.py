"""A trade by its paths: from the market to the sampling engine, and what it says of one unit.

Local volatility always goes this way; lognormal levels do where cash dividends still to come
at expiry keep a ranked or geometric aggregate, or a composite, from being lognormal.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.engines.local_vol_monte_carlo import LocalVolSettings, sample_local_vol
from pricer.engines.local_vol_problem import LocalVolProblem
from pricer.engines.local_vol_sample import LocalVolSample
from pricer.engines.model_value import Asked, ModelValue
from pricer.engines.monte_carlo import Sample
from pricer.engines.path_inputs import Drivers
from pricer.engines.problem import Reference
from pricer.engines.selector import headline
from pricer.engines.surface_replication import surface_reference
from pricer.engines.unit_ratios import european_ratios
from pricer.engines.unit_terms import UnitTerms
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.market import Market

Array = NDArray[np.float64]

_METHOD = "pathwise, local volatility held as a function of time and level; vega under lognormal levels"

#: Simulated forwards off by more than this and five standard errors are not those of the market.
_DRIFT = 1e-4


def path_problem(trade: Trade, terms: UnitTerms, market: Market, *, smiled: bool) -> LocalVolProblem:
    """The trade as paths see it, with every underlying's smile or with lognormal levels."""
    names, drivers = trade.contract.underlyings, Drivers.of(trade, market)
    surfaces = (LocalVolSurface.from_implied(market.implied_surface(name), horizon=terms.years) for name in names)
    return LocalVolProblem(
        surfaces=tuple(surfaces) if smiled else (),
        correlation=drivers.correlation,
        scales=terms.law.forwards * np.exp(-terms.drifts),
        floors=terms.floors,
        variance_times=drivers.times,
        variances=drivers.variances,
        years=terms.years,
        aggregate=terms.aggregate,
        payoff=terms.payoff,
        discount_factor=terms.discount_factor,
        exposures=drivers.exposures,
        composite=terms.is_composite,
    )


def local_vol_value(
    trade: Trade, terms: UnitTerms, market: Market, asked: Asked, settings: LocalVolSettings
) -> ModelValue:
    """One unit under local volatility, beside the surface's own price where there is one."""
    problem = path_problem(trade, terms, market, smiled=True)
    found = _sampled(problem, asked, settings)
    surfaces = tuple(market.implied_surface(name) for name in trade.contract.underlyings)
    known = surface_reference(terms, surfaces)
    return _value(found, terms, asked, () if known is None else (known,))


def lognormal_value_by_paths(
    trade: Trade, terms: UnitTerms, market: Market, asked: Asked, settings: LocalVolSettings
) -> ModelValue:
    """One unit under lognormal random parts on top of known floors."""
    found = _sampled(path_problem(trade, terms, market, smiled=False), asked, settings)
    return _value(found, terms, asked, ())


def _sampled(problem: LocalVolProblem, asked: Asked, settings: LocalVolSettings) -> LocalVolSample:
    return sample_local_vol(
        problem,
        group=asked.group,
        seed=asked.seed,
        value_tolerance=asked.value_tolerance,
        delta_tolerance=asked.delta_tolerance,
        delta_fraction=asked.delta_fraction,
        settings=settings,
    )


def _value(found: LocalVolSample, terms: UnitTerms, asked: Asked, known: tuple[Reference, ...]) -> ModelValue:
    sample = _as_sample(found)
    means, errors = found.martingale_means, found.martingale_mean_errors
    drifted = np.abs(means - 1.0) > 5.0 * errors + _DRIFT  # NaN, a quanto's mean, is no drift
    return ModelValue(
        headline=headline(sample, known, asked.value_tolerance),
        sample=sample,
        references=known,
        time_steps=found.steps,
        is_sound=not bool(np.any(drifted)),
        ratios=european_ratios(terms, sample, _METHOD),
    )


def _as_sample(found: LocalVolSample) -> Sample:
    """With the bias that the time steps leave in the error, and the lognormal model's vegas."""
    return Sample(
        value=found.value,
        standard_error=math.hypot(found.standard_error, found.step_bias),
        log_deltas=found.log_deltas,
        log_delta_errors=found.log_delta_errors,
        log_gammas=None,
        log_gamma_errors=None,
        deviation_vegas=found.lognormal.deviation_vegas,
        deviation_vega_errors=found.lognormal.deviation_vega_errors,
        paths=found.paths,
        randomisations=found.randomisations,
        reached=found.reached,
        ending=found.ending,
        degrees_of_freedom=found.degrees_of_freedom,
    )
