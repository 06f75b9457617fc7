"""What the local-volatility engine answers."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.monte_carlo import Sample

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class LocalVolSample:
    """A value under local volatility and its sensitivities per unit, discounted, with standard errors.

    ``log_deltas`` : (n,) ``dV / d ln X(0)`` with the local volatility fixed in strikes: without cash
    dividends per logarithm of spot; with them, times spot over spot less the dividends' present value.
    ``level_deltas`` : (n,) ``dV / d ln level`` at expiry, the level moving in proportion with its smile: summed
    over composite assets of one exchange rate, the sensitivity to the logarithm of that rate.
    ``value`` is extrapolated to ever finer steps; ``step_difference`` : value on these steps less that on half as many,
    on common draws; ``step_bias`` : what to allow the value for its steps, as a standard error that is
    not in ``standard_error``. ``lognormal`` : the lognormal model's sample, with its vegas
    to the deviations of the levels' logarithms (of ln X where levels above known amounts had to be sampled as paths).
    ``model_difference`` : this value less the lognormal one. ``martingale_means`` : (n,) of X (times its rate, if
    composite) before the last step, 1 but for sampling; NaN for a quanto. ``steps`` is 0 where no path was needed.
    NaN stands where a sensitivity cannot be had; ``ending`` says why.
    """

    value: float
    standard_error: float
    log_deltas: Array
    log_delta_errors: Array
    level_deltas: Array
    level_delta_errors: Array
    model_difference: float
    model_difference_error: float
    lognormal: Sample
    steps: int
    step_difference: float
    step_difference_error: float
    step_bias: float
    martingale_means: Array
    martingale_mean_errors: Array
    paths: int
    randomisations: int
    reached: bool
    ending: str
    degrees_of_freedom: int


def without_paths(known: Sample) -> LocalVolSample:
    """The lognormal engine's answer as one of this engine."""
    n = len(known.log_deltas)
    return LocalVolSample(
        value=known.value,
        standard_error=known.standard_error,
        log_deltas=known.log_deltas,
        log_delta_errors=known.log_delta_errors,
        level_deltas=known.log_deltas,
        level_delta_errors=known.log_delta_errors,
        model_difference=0.0,
        model_difference_error=0.0,
        lognormal=known,
        steps=0,
        step_difference=0.0,
        step_difference_error=0.0,
        step_bias=0.0,
        martingale_means=np.ones(n),
        martingale_mean_errors=np.zeros(n),
        paths=known.paths,
        randomisations=known.randomisations,
        reached=known.reached,
        ending=known.ending,
        degrees_of_freedom=known.degrees_of_freedom,
    )


def as_lognormal(result: LocalVolSample, vegas: Array, vega_errors: Array) -> Sample:
    """Levels above known amounts, sampled as paths, as an answer of the lognormal engine."""
    return Sample(
        value=result.value,
        standard_error=math.hypot(result.standard_error, result.step_bias),
        log_deltas=result.log_deltas,
        log_delta_errors=result.log_delta_errors,
        log_gammas=None,
        log_gamma_errors=None,
        deviation_vegas=vegas,
        deviation_vega_errors=vega_errors,
        paths=result.paths,
        randomisations=result.randomisations,
        reached=result.reached,
        ending=result.ending,
        degrees_of_freedom=result.degrees_of_freedom,
    )
