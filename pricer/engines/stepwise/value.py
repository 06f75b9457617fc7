"""A contract's legs on paths in steps, one factor of every path integrated.

Levels follow local volatility by the splitting scheme of ``simulation.local_vol_tables``, or are lognormal above
known amounts. One normal factor of the whole path, which moves all log-levels alike, is split off its motions and
integrated: every path is simulated at nine values of it, prices in between are smooth, and legs are integrated cell by
cell (``simulation.kernels.stepwise_legs``). Triggers, digital coupons and knots are so smooth in what is sampled,
whatever the legs and the signs of weights. The same legs on lognormal prices are the control variate where their
engine knows them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.engines.contract_legs.result import ContractLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked, ModelValue, UnitRatios
from pricer.engines.path_inputs import is_converted
from pricer.engines.problem import Reference
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import Interval, headline
from pricer.engines.stepwise.control import known_mean
from pricer.engines.stepwise.run import Run
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.engines.stepwise.vegas import lognormal_vegas
from pricer.market.market import Market

Array = NDArray[np.float64]

METHOD = "randomised low-discrepancy sampling, one factor of every path integrated"
_RATIOS = "derivatives of the smoothed paths, local volatility held as a function of time and level"
_DEFAULT = StepwiseSettings()

#: Cells of the factor are doubled up to this many.
_MOST_CELLS = 96

#: Simulated forwards off by more than this and five standard errors are not those of the market.
_DRIFT = 1e-4


def stepwise_value(
    trade: Trade,
    terms: ContractTerms,
    legs: ContractLegs,
    market: Market,
    asked: Asked,
    settings: StepwiseSettings = _DEFAULT,
    references: tuple[Reference, ...] = (),
    *,
    smiled: bool,
) -> ModelValue:
    """One unit of a live contract under local volatility (``smiled``) or lognormal levels, decided amounts included.

    ``references`` go beside the value. Deltas hold local volatility fixed as a function of time and of the level over
    the present forward; vegas are those under lognormal levels, NaN for composites, whose correlations would move.
    Raises as :meth:`Market.driver_correlation` and :meth:`Market.implied_surface`.
    """
    known = known_mean(terms, legs, asked)
    run = Run.of(trade, terms, legs, market, asked, settings, smiled=smiled, known=known)
    found = _sample(run, asked)
    sample = SampledValue(
        value=found.value + terms.known_value,
        standard_error=math.hypot(found.error, found.bias),
        degrees_of_freedom=run.degrees_of_freedom,
        paths=run.fine.points * settings.randomisations,
        randomisations=settings.randomisations,
        ending=found.ending,
    )
    leading = headline(sample, references, asked.value_tolerance)
    if leading.interval is not Interval.EXACT:
        leading = replace(leading, method=METHOD)
    shares = terms.random_spots * terms.rates
    vegas, vega_errors = np.full((2, len(shares)), np.nan)
    if asked.wants_ratios and not is_converted(trade, market):
        vegas, vega_errors = lognormal_vegas(trade, terms, market, asked, settings, run, known)
    return ModelValue(
        headline=leading,
        sample=sample,
        references=references,
        ratios=UnitRatios(
            deltas=found.slopes / shares,
            delta_errors=found.slope_errors / shares,
            gammas=None,
            gamma_errors=None,
            vegas=vegas,
            vega_errors=vega_errors,
            method=f"{_RATIOS}; vega under lognormal levels"
            if smiled
            else "derivatives of the smoothed paths; vegas by differences on common draws",
        ),
        time_steps=run.steps,
        is_sound=found.is_sound,
        life=legs.life_of(run.stops(), terms.dates),
    )


@dataclass(frozen=True, slots=True)
class _Found:
    value: float
    error: float
    bias: float
    slopes: Array
    slope_errors: Array
    is_sound: bool
    ending: str


def _sample(run: Run, asked: Asked) -> _Found:
    """Until errors are within tolerance or the budget is spent."""
    points, with_slopes = run.settings.initial_points, True
    run.extend(points, with_slopes=True)
    while run.cell_bias > 0.5 * asked.value_tolerance and run.fine.cells < _MOST_CELLS:
        run.double_cells()
    while True:
        run.extend(points, with_slopes=with_slopes)
        value, error = run.value()
        slopes, slope_errors = run.slopes()
        limit = max(asked.delta_tolerance, asked.delta_fraction * float(np.sum(np.abs(slopes))))
        worst = float(np.max(slope_errors))
        with_slopes = with_slopes and worst > limit
        precise = error <= asked.value_tolerance and worst <= limit
        if precise or points >= run.most_points:
            break
        points *= 2
    miss = _miss(error, asked.value_tolerance, worst, limit)
    bias, noise = abs(run.step_bias[0]), run.step_bias[1]
    limit = 0.5 * asked.value_tolerance
    is_biased, is_crude = bias > max(limit, 3.0 * noise), run.cell_bias > limit
    notes = ["precision reached" if precise else miss]
    if is_biased:
        notes.append(f"{run.steps} time steps leave a bias of about {bias:.2g}")
    if is_crude:
        notes.append(f"{run.fine.cells} cells of the factor leave a bias of about {run.cell_bias:.2g}")
    if run.cut is not None:
        notes.append(f"one time step per date, {run.steps} in all; their bias was measured on few paths")
    is_sound = not is_biased and not is_crude and _come_back(run)
    left, slope_errors = math.hypot(bias, run.cell_bias), np.hypot(slope_errors, run.slope_bias)
    return _Found(value, error, left, slopes, slope_errors, is_sound, "; ".join(notes))


def _miss(error: float, tolerance: float, delta_error: float, limit: float) -> str:
    misses = []
    if not error <= tolerance:
        misses.append(f"standard error {error:.2g} against {tolerance:.2g}")
    if not delta_error <= limit:
        misses.append(f"standard error of a log-delta {delta_error:.2g} against {limit:.2g}")
    return "budget of paths spent: " + ", ".join(misses)


def _come_back(run: Run) -> bool:
    """Whether simulated forwards are those of the market, where the measure leaves X a martingale."""
    means, errors = run.forwards()
    converted = np.any(run.drivers.exposures != 0.0, axis=1)
    return not bool(np.any(~converted & (np.abs(means - 1.0) > 5.0 * errors + _DRIFT)))
