"""Contracts valued by walking simulated paths through them: any contract, one idea, no smoothing.

Lognormal prices are drawn exactly at the contract's dates, those under local volatility in steps. Where other
engines take a contract apart into legs and integrate its jumps exactly, this one knows nothing but the contract's
own rules; it is their independent check, and leads for what has no legs.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.core.randomness import Purpose
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.continuity import is_continuous
from pricer.engines.contract_walk.laws import lognormal_prices
from pricer.engines.contract_walk.life import life_of
from pricer.engines.contract_walk.run import Run
from pricer.engines.contract_walk.sampling import Sums
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.contract_walk.vegas import lognormal_vegas
from pricer.engines.model_value import Asked, ModelValue, UnitRatios
from pricer.engines.path_inputs import is_converted
from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import Interval, headline
from pricer.market.market import Market
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]

METHOD = "contract walked path by path"
_DEFAULT = WalkSettings()

#: How often steps are halved where they leave too much of a bias.
_REFINED = 2

#: Two to this power are the most points of a reference: contracts of one date have more than enough.
_MOST = 16


def walk_value(
    trade: Trade,
    terms: ContractTerms,
    market: Market,
    asked: Asked,
    settings: WalkSettings = _DEFAULT,
    *,
    smiled: bool,
    references: tuple[Reference, ...] = (),
) -> ModelValue:
    """One unit of a live contract; paths are doubled until the tolerances are met or the budget is spent.

    ``references`` go beside the value. Deltas hold local volatility fixed as a function of time and level, and are
    NaN for contracts that jump along a path; so are vegas, which are those under lognormal levels, and those of
    composites, whose correlations move with volatilities. Raises TypeError for a right to exercise, ValueError where
    a final level cannot be formed.
    """
    differentiable = asked.wants_ratios and is_continuous(terms)
    for finer in range(_REFINED + 1):
        cut = replace(settings, steps=settings.steps * 2**finer)
        run, precise = _sampled(trade, terms, market, asked, cut, smiled=smiled, differentiable=differentiable)
        found, sums = run.estimate(), run.sampler.sums
        if found.bias <= max(0.5 * asked.value_tolerance, 2.0 * found.bias_error):
            break
    error, points = math.hypot(found.standard_error, found.bias), sums.points
    notes = ["precision reached" if precise else f"budget of paths spent: standard error {error:.2g} against "
             f"{asked.value_tolerance:.2g}"]  # fmt: skip
    if found.bias > 0.5 * asked.value_tolerance:
        notes.append(f"{run.steps} time steps leave a bias of about {found.bias:.2g}")
    if run.steps and not run.halves:
        notes.append(f"one time step per date, {run.steps} in all; their bias was not measured")
    sample = SampledValue(
        found.value, error, found.degrees_of_freedom, points * settings.randomisations, settings.randomisations,
        "; ".join(notes),
    )  # fmt: skip
    leading = headline(sample, references, asked.value_tolerance)
    if leading.interval is not Interval.EXACT:
        leading = replace(leading, method=METHOD)
    return ModelValue(
        headline=leading,
        sample=sample,
        references=references,
        ratios=_ratios(trade, terms, market, asked, settings, sums, smiled=smiled)
        if differentiable
        else _no_ratios(terms),
        time_steps=run.steps,
        is_sound=found.bias <= max(0.5 * asked.value_tolerance, 3.0 * found.bias_error),
        life=life_of(terms, run.sampler.sums),
    )


def _sampled(
    trade: Trade,
    terms: ContractTerms,
    market: Market,
    asked: Asked,
    settings: WalkSettings,
    *,
    smiled: bool,
    differentiable: bool,
) -> tuple[Run, bool]:
    """Paths doubled until the tolerances are met or the budget is spent; whether they were met."""
    run = Run.of(trade, terms, market, asked, settings, Purpose.PRICE, smiled=smiled)
    run.sampler.with_slopes = differentiable
    points, sums = settings.initial_points, run.sampler.sums
    while True:
        run.extend(points)
        found = run.estimate()
        slopes, slope_errors = batch_estimate(sums.slopes / max(sums.slope_points, 1))
        limit = max(asked.delta_tolerance, asked.delta_fraction * float(np.sum(np.abs(slopes))))
        wanted = differentiable and float(np.max(slope_errors)) > limit
        run.sampler.with_slopes = run.sampler.with_slopes and wanted  # once they are good, only the value goes on
        precise = math.hypot(found.standard_error, found.bias) <= asked.value_tolerance and not wanted
        # More paths do not make a bias smaller: where it alone is beyond the tolerance, that is it.
        biased = found.bias > asked.value_tolerance and found.standard_error <= asked.value_tolerance
        if precise or biased or 2 * points * run.cells_per_point > settings.maximum_cells:
            return run, precise
        points *= 2


def walk_reference(
    trade: Trade,
    terms: ContractTerms,
    market: Market,
    asked: Asked,
    settings: WalkSettings = _DEFAULT,
    *,
    smiled: bool,
) -> Reference:
    """An independent sample of a fixed size, beside another engine's value; its draws share nothing with others'."""
    run = Run.of(trade, terms, market, asked, settings, Purpose.CHECK, smiled=smiled)
    most = settings.reference_cells / run.cells_per_point / (2.0 if smiled else 1.0)  # steps cost more than draws
    run.extend(1 << max(min(int(most).bit_length() - 1, _MOST), settings.initial_points.bit_length() - 1))
    found = run.estimate()
    source = f"{run.sampler.sums.points * settings.randomisations} paths, what the contract says on each"
    return Reference(METHOD, ReferenceKind.SAMPLE, found.value, found.standard_error, source, found.bias)


def _no_ratios(terms: ContractTerms) -> UnitRatios:
    unknown = np.full(len(terms.random_spots), np.nan)
    method = "none: the contract jumps along its paths, and nothing smooths it here"
    return UnitRatios(unknown, unknown, None, None, unknown, unknown, method)


def _ratios(
    trade: Trade,
    terms: ContractTerms,
    market: Market,
    asked: Asked,
    settings: WalkSettings,
    sums: Sums,
    *,
    smiled: bool,
) -> UnitRatios:
    shares = terms.random_spots * terms.rates
    slopes, errors = batch_estimate(sums.slopes / sums.slope_points)
    vegas = vega_errors = np.full(len(shares), np.nan)
    if asked.wants_ratios and not is_converted(trade, market):
        run = Run.of(trade, terms, market, asked, settings, Purpose.PRICE, smiled=False)
        law, noise = lognormal_prices(trade, terms, market), run.sampler.noise
        room = settings.maximum_cells / 8.0 / (run.cells_per_point * 2 * len(shares))
        points = min(sums.slope_points, 1 << max(int(room).bit_length() - 1, 4))
        vegas, vega_errors = lognormal_vegas(terms, law, noise, points, run.sampler.group, asked.seed)
    where = "vega under lognormal levels" if smiled else "vega, too"
    method = f"central differences of the spot on common draws; {where}"
    return UnitRatios(slopes / shares, errors / shares, None, None, vegas, vega_errors, method)
