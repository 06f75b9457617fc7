"""Sensitivities of legs to volatility under lognormal levels: differences on common draws."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.engines.contract_legs.drawing import Drawn
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.result import NotAsLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from pricer.engines.stepwise.control import lognormal_legs
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
    market: Market,
    asked: Asked,
    settings: StepwiseSettings,
    run: Run,
    known: Drawn | None,
) -> tuple[Array, Array]:
    """Per volatility point, and errors, (n,) each: a volatility to every date moves, correlations stay.

    A quanto's forwards follow, cash dividends still to come stay, and barriers watched at all times are corrected for
    the moved volatility. With ``known``, legs on lognormal prices drawn by their own engine, only the difference that
    cash dividends make is sampled here. NaN where moved legs cannot be told.
    """
    n = len(terms.random_spots)
    vegas, errors = np.full((2, n), np.nan)
    fewer = 2 ** int(np.ceil(np.log2(2 * n)))
    most = max(run.fine.slope_points // fewer, settings.initial_points)
    for asset in range(n):
        smooth, stepped = [], []
        for by in (_BUMP, -_BUMP):
            moved = terms.with_volatility_moved(asset, by)
            legs = contract_legs(moved)
            if isinstance(legs, NotAsLegs):
                return vegas, errors
            if known is not None:
                smooth.append(known.again(lognormal_legs(moved, legs, terms), asked, fewer))
            if known is None or terms.has_floors:
                drivers = run.drivers.with_volatility_moved(asset, by)
                stepped.append(
                    Run.of(trade, terms, legs, market, asked, settings, smiled=False, drivers=drivers, known=known)
                )
        found = [_difference(*smooth)] if smooth else []
        if stepped:
            found.append(_stepped(stepped[0], stepped[1], most, asked))
        vegas[asset] = sum(value for value, _ in found)
        errors[asset] = np.sqrt(sum(error**2 for _, error in found))
    return vegas, errors


def _stepped(up: Run, down: Run, most: int, asked: Asked) -> tuple[float, float]:
    """On ``most`` points, or as few as a vega within the value's tolerance asks for."""
    points = min(up.settings.initial_points, most)
    while True:
        value, error = _difference(_values(up, points), _values(down, points))
        if error <= asked.value_tolerance or points >= most:
            return value, error
        points *= 2


def _values(run: Run, points: int) -> Array:
    """By randomisation, (randomisations,); less the same without cash dividends if those are known."""
    run.fine.extend(points)
    out = run.fine.values.sum(axis=1) / points
    if run.control is not None:
        run.control.extend(points)
        out = out - run.control.values.sum(axis=1) / points
    return np.asarray(out)


def _difference(up: Array, down: Array) -> tuple[float, float]:
    (move,), (error,) = batch_estimate(((up - down) * (_POINT / (2.0 * _BUMP)))[:, None])
    return float(move), float(error)
