"""A contract's legs under lognormal levels, one factor of every path integrated exactly."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.option import Conversion
from pricer.engines.contract_legs.drawing import Drawn, draw
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.result import ContractLegs, NotAsLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked, ModelValue, UnitRatios
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings
from pricer.engines.problem import Reference
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import headline
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]

_METHOD = "derivatives of the smoothed paths; vegas by differences on the same draws"
_POINT = 0.01
#: Vegas are central differences over this many volatility points either way: their bias is of third order.
_BUMP = 0.25


def smooth_value(
    terms: ContractTerms,
    legs: ContractLegs,
    asked: Asked,
    settings: PathSettings,
    references: tuple[Reference, ...],
) -> ModelValue:
    """One unit under lognormal levels without floors, decided amounts included.

    Raises ValueError for prices with floors and readings with weights below 0.
    """
    if terms.has_floors:
        raise ValueError("prices with cash dividends to come are not lognormal")
    drawn = draw(_problem(terms, legs), asked, settings)
    value = drawn.value + terms.known_value
    random = drawn.randomisations
    sample = SampledValue(value, drawn.standard_error, random - 1, drawn.paths, random, drawn.ending)
    return ModelValue(
        headline=headline(sample, references, asked.value_tolerance),
        sample=sample,
        references=references,
        ratios=_ratios(terms, drawn, asked),
        life=legs.life_of(drawn.legs, terms.dates),
    )


def _problem(terms: ContractTerms, legs: ContractLegs) -> PathProblem:
    return PathProblem(_law(terms), legs.legs)


def _law(terms: ContractTerms) -> PathLaw:
    return PathLaw(terms.times, terms.forwards, terms.covariances)


def _ratios(terms: ContractTerms, drawn: Drawn, asked: Asked) -> UnitRatios:
    """Shares, since a derivative by the logarithm of all forwards of an asset is one by that of its random spot."""
    shares = terms.random_spots * terms.rates
    vegas, vega_errors = _vegas(terms, drawn, asked)
    return UnitRatios(
        deltas=drawn.log_deltas / shares,
        delta_errors=drawn.log_delta_errors / shares,
        gammas=None,
        gamma_errors=None,
        vegas=vegas,
        vega_errors=vega_errors,
        method=_METHOD,
    )


def _vegas(terms: ContractTerms, drawn: Drawn, asked: Asked) -> tuple[Array, Array]:
    """Per volatility point, with errors; NaN for composites of several underlyings.

    Those 2 n values together take about as many paths as the value, which costs less than the value and its deltas.
    """
    n = len(terms.contract.underlyings)
    missing = np.full(n, np.nan)
    converted = terms.contract.conversion is Conversion.COMPOSITE and bool(np.any(terms.rates != 1.0))
    if not asked.wants_ratios or (converted and n > 1):
        return missing, missing
    fewer = 2 ** int(np.ceil(np.log2(2 * n)))
    by_asset = []
    for asset in range(n):
        up, down = (_moved(terms, asset, sign * _BUMP * _POINT, drawn, fewer, asked) for sign in (1.0, -1.0))
        if up is None or down is None:
            return missing, missing
        by_asset.append((up - down) / (2.0 * _BUMP))
    return batch_estimate(np.stack(by_asset, axis=1))


def _moved(terms: ContractTerms, asset: int, by: float, drawn: Drawn, fewer: int, asked: Asked) -> Array | None:
    """The value by randomisation after a volatility has moved, from a part of the points that were drawn."""
    moved = terms.with_volatility_moved(asset, by)
    legs = contract_legs(moved)  # barriers watched at all times move with volatilities
    if isinstance(legs, NotAsLegs):
        return None
    return drawn.again(PathProblem(_law(moved), legs.legs, drawn_like=_law(terms)), asked, fewer)
