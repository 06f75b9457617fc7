"""Contracts on an average, averaging in or out, as the averages that closed forms know.

The mean of a weighted sum over dates is a weighted sum of all fixings, whatever part of it is past; the
mean of one lognormal level has its law by convolution; a price against the mean that sets its reference has
the law of that mean seen backwards from the end.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.average import Average, AverageOf, AverageState
from pricer.contracts.coupons import Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.option import Conversion
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.average_convolution import average_by_convolution
from pricer.engines.closed_form.average_strike import price_over_average
from pricer.engines.closed_form.contract_parts import (
    covariance_to,
    levels_law,
    live_features,
    on_core,
    payout_in_force,
    place,
    setting_place,
)
from pricer.engines.closed_form.european_parts import NotEuropeanError, coupon_problems
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.fixing_law import FixingLaw, arithmetic_average
from pricer.engines.closed_form.one_level import one_level
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import EuropeanProblem

Array = NDArray[np.float64]

_MOST_LEVELS = 200  # fixings of one law: bounds take its covariance whole, within about a second


def average_parts(terms: ContractTerms) -> tuple[EuropeanProblem, ...] | None:
    """The mean of a weighted sum as one weighted sum of fixings; None for other contracts, and for too many fixings."""
    statistic, since = terms.contract.statistic, setting_place(terms)
    if not isinstance(statistic, Average) or statistic.aggregate.kind is not AggregateKind.WEIGHTED_SUM:
        return None
    places = _places(terms, statistic)
    n = len(terms.contract.underlyings)
    if since is None or not places or len(places) * n > _MOST_LEVELS or not _is_inert(terms):
        return None
    if terms.has_floors and (since >= 0 or terms.contract.conversion is Conversion.COMPOSITE):
        return None
    laws = [levels_law(terms, k, since) for k in places]
    forwards = np.array([law.forwards for law in laws if law is not None])
    if len(forwards) < len(places):
        return None
    law = FixingLaw(forwards, np.array([law.covariance for law in laws if law is not None]))
    weights = np.tile(np.array(statistic.aggregate.weights) / len(statistic.schedule), (len(places), 1))
    fixed = _fixed(statistic, terms.as_of.progress.statistic)
    if terms.has_floors:
        known = terms.as_of.references
        assert known is not None  # made so by ``since``
        fixed += float(np.sum(weights * terms.floors[places] / known))
    payoff = on_core(payout_in_force(terms), statistic.aggregate)
    try:
        coupons = coupon_problems(terms)
    except NotEuropeanError:
        return None
    discount = terms.discount(terms.contract.expiry.payment_date)
    return (arithmetic_average(law, weights, payoff, discount, fixed), *coupons)


def average_of_one_level(terms: ContractTerms) -> Estimate | None:
    """The mean of one underlying, or of a geometric aggregate, on dates: exact, discounted."""
    statistic = terms.contract.statistic
    if not isinstance(statistic, Average) or live_features(terms):
        return None
    level, places = one_level(terms), _places(terms, statistic)
    if level is None or not places or places[0] < level.first:
        return None
    factor, exponent = level.power(replace(statistic.aggregate, cash=None))
    if factor <= 0.0 or abs(exponent - 1.0) > 1e-12:
        return None
    if level.n_assets > 1 and statistic.of is AverageOf.UNDERLYINGS:
        return None
    chosen = [k - level.first for k in places]
    law = FixingLaw(level.forwards[chosen, np.newaxis], level.variances[chosen, np.newaxis, np.newaxis])
    count = len(statistic.schedule)
    weights = np.full(len(places), factor / count)
    fixed = _fixed(statistic, terms.as_of.progress.statistic) + float(np.sum(weights * level.floors[chosen]))
    payoff = on_core(payout_in_force(terms), statistic.aggregate)
    return average_by_convolution(law, weights, payoff, fixed).times(terms.discount(terms.contract.expiry.payment_date))


def against_average(terms: ContractTerms) -> Estimate | None:
    """One underlying's performance from the mean that sets its reference: exact, discounted."""
    contract, statistic = terms.contract, terms.contract.statistic
    to_come = [place(terms, day) for day in terms.as_of.setting_dates_to_come]
    one = len(contract.underlyings) == 1
    if not one or not to_come or not isinstance(statistic, ExpiryLevel) or live_features(terms) or terms.has_floors:
        return None
    end, weight = place(terms, statistic.day), statistic.aggregate.weights[0]
    if end <= to_come[-1] or statistic.aggregate.kind is AggregateKind.GEOMETRIC or weight <= 0.0:
        return None
    variances = np.array([covariance_to(terms, k)[0, 0] for k in (*to_come, end)])
    if not np.all(np.diff(variances, prepend=0.0) > 0.0):
        return None
    sums = terms.as_of.progress.references
    count = len(contract.levels.reference_dates)
    law = FixingLaw(terms.forwards[to_come], variances[:-1, np.newaxis, np.newaxis])
    payoff = _of_multiple(on_core(payout_in_force(terms), statistic.aggregate), weight)
    found = price_over_average(
        law,
        np.full(len(to_come), 1.0 / count),
        float(terms.forwards[end, 0]),
        float(variances[-1]),
        payoff,
        fixed=sums.sums[0] / count,
    )
    return found.times(terms.discount(contract.expiry.payment_date))


def _places(terms: ContractTerms, statistic: Average) -> list[int]:
    return [place(terms, day) for day in statistic.schedule if place(terms, day) >= 0]


def _fixed(statistic: Average, state: AverageState) -> float:
    """What the fixings made add to the mean, of a weighted sum."""
    sums, count = np.array(state.sums), len(statistic.schedule)
    if statistic.of is AverageOf.AGGREGATE:
        return float(sums[0]) / count
    return float(np.array(statistic.aggregate.weights) @ sums) / count


def _is_inert(terms: ContractTerms) -> bool:
    return all(isinstance(feature, Coupons) for feature, _ in live_features(terms))


def _of_multiple(payoff: PiecewiseLinear, factor: float) -> PiecewiseLinear:
    """``a -> payoff(factor a)`` for a factor above 0."""
    return PiecewiseLinear(
        payoff.intercept,
        payoff.slope * factor,
        tuple(knot / factor for knot in payoff.knots),
        tuple(bend * factor for bend in payoff.bends),
        payoff.jumps,
    )
