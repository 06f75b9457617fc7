"""A contract that formulas value to the last digit: its number, and its sensitivities by their differences."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.option import Conversion
from pricer.engines.closed_form import best_exact
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Life, ModelValue, UnitRatios
from pricer.engines.problem import Reference
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import headline

Array = NDArray[np.float64]
#: A number for moved terms; None where there is none.
ValueOf = Callable[[ContractTerms], float | None]

_STEP = 0.02  # of a forward's logarithm, in its deviations to expiry; half of it as well
_POINT = 0.01


def exact_value(
    terms: ContractTerms, references: tuple[Reference, ...], value_of: ValueOf, tolerance: float, *, vegas: bool = True
) -> ModelValue | None:
    """The model's value where an exact reference is within ``tolerance``; None otherwise.

    ``value_of`` gives the same number for terms with other forwards and volatilities. Without ``vegas`` they are NaN,
    as they are for composites of several underlyings, whose correlations move with their volatilities.
    """
    exact = best_exact(references, tolerance)
    if exact is None:
        return None
    sample = SampledValue.exact(exact.value)
    n = len(terms.contract.underlyings)
    shares = terms.random_spots * terms.rates
    slopes = [_slope(terms, i, value_of) for i in range(n)]
    several = terms.contract.conversion is Conversion.COMPOSITE and bool(np.any(terms.rates != 1.0))
    known = vegas and not several
    points = [_vega(terms, i, value_of) if known else np.nan for i in range(n)]
    ratios = UnitRatios(
        deltas=np.array([slope for slope, _ in slopes]) / shares,
        delta_errors=np.array([error for _, error in slopes]) / shares,
        gammas=None,
        gamma_errors=None,
        vegas=np.array(points),
        vega_errors=np.zeros(n) if known else np.full(n, np.nan),
        method="differences of the exact value",
    )
    return ModelValue(headline(sample, references, tolerance), sample, references, ratios, life=Life(terms.years, 0.0))


def _slope(terms: ContractTerms, asset: int, value_of: ValueOf) -> tuple[float, float]:
    """By the logarithm of an asset's forwards: central, extrapolated, with what the extrapolation changed."""
    deviation = float(np.sqrt(terms.covariances[:, asset, asset].sum()))
    step = _STEP * deviation if deviation > 0.0 else _STEP * 0.1
    wide, near = (_central(lambda h: moved_forwards(terms, asset, h), h, value_of) for h in (step, 0.5 * step))
    found = near + (near - wide) / 3.0
    return found, abs(found - near)


def _vega(terms: ContractTerms, asset: int, value_of: ValueOf) -> float:
    """Per volatility point of the asset."""
    return _POINT * _central(lambda h: terms.with_volatility_moved(asset, h), 0.1 * _POINT, value_of)


def _central(moved: Callable[[float], ContractTerms], step: float, value_of: ValueOf) -> float:
    up, down = (value_of(moved(h)) for h in (step, -step))
    return np.nan if up is None or down is None else (up - down) / (2.0 * step)


def moved_forwards(terms: ContractTerms, asset: int, by: float) -> ContractTerms:
    """All forwards of an asset times ``exp(by)``."""
    factors = np.ones(terms.forwards.shape[1])
    factors[asset] = np.exp(by)
    return replace(terms, forwards=terms.forwards * factors)
