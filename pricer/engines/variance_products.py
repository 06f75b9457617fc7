"""Variance, volatility and dispersion contracts whose value is known: lognormal levels, and one smile at a time.

Under lognormal levels what is still to be counted has a known law. Under local volatility the expected variance of
one underlying is a strip of the options on its surface (Neuberger 1994; Demeterfi, Derman, Kamal & Zou
1999), for each period between two dates the difference of two strips; squares of returns over a period differ
from it by their drift, and by a skewness that is small for short periods and stated here. The basket's own
variance, roots and correlations have no such strip: they are left to paths.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.contracts.realised_variance import RealisedVariance
from pricer.engines.closed_form.contract_parts import live_features, payout_in_force, place
from pricer.engines.closed_form.contract_references import contract_references
from pricer.engines.closed_form.contract_variance import realised_variance
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.log_contract import variance_of_surface
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.exact_value import exact_value
from pricer.engines.model_value import Asked, ModelValue
from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.surface_replication import CALIBRATION
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.market import Market

Array = NDArray[np.float64]

_SOURCE = "Neuberger (1994); Demeterfi, Derman, Kamal & Zou (1999)"
_STRIPS = 12  # dates at which variance is summed over strikes
_STEP = 0.01  # of log-strike: slope of local variance at the forward


def variance_value(
    trade: Trade, terms: ContractTerms, market: Market, asked: Asked, settings: object = None, *, smiled: bool
) -> ModelValue | None:
    """One unit of a contract on realised variance under lognormal levels where its value is exact; else None.

    None with ``smiled`` : paths have to lead there, because deltas hang on how volatility moves with the level;
    :func:`variance_references` gives them the value.
    """
    if smiled or not isinstance(terms.contract.statistic, RealisedVariance):
        return None
    return exact_value(terms, contract_references(terms), _plain, asked.value_tolerance)


def variance_references(terms: ContractTerms, market: Market) -> tuple[Reference, ...]:
    """The value by the checked surfaces, per unit and discounted, amounts already known included; none for others.

    Straight payouts on the variances of underlyings in their own currency. What paths may differ by besides is what
    they are calibrated within.
    """
    statistic = terms.contract.statistic
    if not isinstance(statistic, RealisedVariance):
        return ()
    found = _smiled(terms, statistic, market)
    if found is None:
        return ()
    value, allowance = found
    return (
        Reference(
            "strips of options",
            ReferenceKind.EXACT,
            value.value + terms.known_value,
            value.error,
            _SOURCE,
            allowance,
        ),
    )


def _plain(moved: ContractTerms) -> float | None:
    """Without known amounts, which nothing moves."""
    estimate = realised_variance(moved)
    return None if estimate is None else estimate.value


def _smiled(terms: ContractTerms, statistic: RealisedVariance, market: Market) -> tuple[Estimate, float] | None:
    """Discounted, with what paths may differ by."""
    names, payoff = terms.contract.underlyings, payout_in_force(terms)
    if live_features(terms) or terms.has_floors or payoff.knots or statistic.as_volatility:
        return None
    if terms.as_of.references is None or terms.contract.conversion is not None:
        return None
    series = np.array(statistic.weights[:-1])
    if statistic.weights[-1] != 0.0:
        if len(names) > 1 or statistic.aggregate.cash is not None:
            return None
        series = series + statistic.weights[-1]  # the aggregate of one moves as that one
    total, allowance = Estimate(payoff.intercept), 0.0
    for i, weight in enumerate(series):
        if weight != 0.0:
            part = _annualised(terms, statistic, i, market.implied_surface(names[i]))
            total = total + part.times(float(weight) * payoff.slope)
            allowance += abs(weight * payoff.slope) * 2.0 * math.sqrt(part.value) * CALIBRATION
    discount = terms.discount(terms.contract.expiry.payment_date)
    return total.times(discount), allowance * discount


def _annualised(terms: ContractTerms, statistic: RealisedVariance, asset: int, surface: ImpliedSurface) -> Estimate:
    """Expected annualised variance of one underlying: counted so far, and to come."""
    state = terms.as_of.progress.statistic
    known = terms.as_of.references
    assert known is not None  # asked by the caller
    places = [place(terms, day) for day in statistic.dates if place(terms, day) >= 0]
    times = terms.times[places]
    logs = np.log(terms.forwards[places, asset] / known[asset])
    variances, coarse, strip_error = _expected(surface, times)
    if state.last is None:
        growths, spans, starts = np.diff(logs), np.diff(times), times[:-1]
        squares, others = np.diff(variances), np.diff(coarse)
    else:
        growths = np.diff(logs, prepend=state.last[asset])
        spans, starts = np.diff(times, prepend=0.0), np.concatenate(([0.0], times[:-1]))
        squares, others = np.diff(variances, prepend=0.0), np.diff(coarse, prepend=0.0)
    drifts, rough = (float(np.sum((growths - 0.5 * each) ** 2)) for each in (squares, others))
    third, unsure = _skewness(surface, starts, spans, squares)
    factor = statistic.returns_per_year / (len(statistic.schedule) - 1)
    to_come = float(np.sum(squares)) + drifts + third
    error = unsure + 2.0 * strip_error + abs(drifts - rough)
    return Estimate(factor * (state.squares[asset] + to_come), factor * error)


def _expected(surface: ImpliedSurface, times: Array) -> tuple[Array, Array, float]:
    """Expected total variances at ``times``, the same from half the strips, and the strips' error.

    Strips are summed at some of the dates, the first and the last among them; between these, variance, which is
    asked for there only by drifts and skewness, is interpolated.
    """
    chosen = np.unique(np.linspace(0, len(times) - 1, _STRIPS).round().astype(int))
    strips = [variance_of_surface(surface, float(t)) for t in times[chosen]]
    at, values = np.concatenate(([0.0], times[chosen])), np.array([0.0, *(strip.value for strip in strips)])
    half = np.unique(np.concatenate((np.arange(0, len(at), 2), [1, len(at) - 1])))
    fine, coarse = np.interp(times, at, values), np.interp(times, at[half], values[half])
    return fine, coarse, max(strip.error for strip in strips)


def _skewness(surface: ImpliedSurface, starts: Array, spans: Array, squares: Array) -> tuple[float, float]:
    """What expected squared returns add to variances and squared means, and how unsure that is.

    ``d(x^2) = dQ + 2 x dx`` leaves ``-E int x dQ``: about half the slope of local variance in log-price, times the
    variance, times the period. As much again is left open, and the spread of the variance itself.
    """
    middles = np.maximum(starts + 0.5 * spans, 1e-4)
    strikes = np.array([-_STEP, _STEP])[:, np.newaxis]
    implied = surface.total_variance(strikes, middles[np.newaxis]) / middles
    # Local variance moves with the level about twice as fast as implied variance with the strike (near the forward).
    slopes = 2.0 * (implied[1] - implied[0]) / (2.0 * _STEP)
    leading = -0.5 * slopes * squares * spans
    open_ = np.abs(leading) + slopes**2 * spans * squares
    return float(np.sum(leading)), float(np.sum(open_))
