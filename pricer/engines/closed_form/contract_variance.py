"""Realised variance and volatility of lognormal levels: the law of what is still to be counted.

Returns of one lognormal level are independent normals: their squares add up to a quadratic form whose mean, root
and options are known. Weighted series add in expectation. The variance of a basket of fixed numbers of shares is
not of this form: it is approximated by that of the lognormal level with the basket's first two moments.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.engines.closed_form.contract_parts import covariance_to, live_features, payout_in_force, place
from pricer.engines.closed_form.family import Estimate, expectation
from pricer.engines.closed_form.quadratic_law import QuadraticLaw
from pricer.engines.closed_form.realised_correlation import average_correlation, realised_correlations
from pricer.engines.contract_terms import ContractTerms

Array = NDArray[np.float64]


def realised_variance(terms: ContractTerms) -> Estimate | None:
    """Discounted value where every series that counts is of one lognormal level; exact."""
    return _value(terms, moments=False)


def basket_variance(terms: ContractTerms) -> Estimate | None:
    """The same with a basket's variance from its first two moments; None where nothing is approximated."""
    return None if _value(terms, moments=False) is not None else _value(terms, moments=True)


def correlation_at_once(terms: ContractTerms) -> Estimate | None:
    """A realised correlation as if covariances to come were certain, as they are when observed all the time."""
    statistic = terms.contract.statistic
    to_come = [place(terms, day) for day in statistic.dates if place(terms, day) >= 0]
    if not isinstance(statistic, RealisedCorrelation) or not to_come or live_features(terms) or terms.has_floors:
        return None
    state = terms.as_of.progress.statistic
    n = len(statistic.weights)
    since = -1 if state.last is not None else to_come[0]
    covariance = covariance_to(terms, to_come[-1]) - covariance_to(terms, since)
    past = np.array(state.products).reshape(n, n)
    total = covariance + past
    if np.min(np.diag(total)) <= 0.0:
        return None
    level = average_correlation(realised_correlations(covariance, past), np.array(statistic.weights))
    value = float(payout_in_force(terms)(np.array(level)))
    return Estimate(value).times(terms.discount(terms.contract.expiry.payment_date))


def series_law(terms: ContractTerms, statistic: RealisedVariance, series: int, *, moments: bool) -> QuadraticLaw | None:
    """Law of one series' annualised variance; the last series is the aggregate's. None where it is not lognormal."""
    state = terms.as_of.progress.statistic
    to_come = [place(terms, day) for day in statistic.dates if place(terms, day) >= 0]
    logs, variances = _log_level(terms, statistic, series, to_come, moments=moments) or (None, None)
    if logs is None or variances is None:
        return None
    last = None if state.last is None else state.last[series]
    if last is None:
        means, squares = np.diff(logs), np.diff(variances)
    else:
        means, squares = np.diff(logs, prepend=last), np.diff(variances, prepend=0.0)
    if np.any(squares <= 0.0):
        return None
    factor = statistic.returns_per_year / (len(statistic.schedule) - 1)
    return QuadraticLaw(factor * state.squares[series], factor, np.sqrt(squares), means - 0.5 * squares)


def _value(terms: ContractTerms, *, moments: bool) -> Estimate | None:
    statistic = terms.contract.statistic
    if not isinstance(statistic, RealisedVariance) or live_features(terms) or terms.has_floors:
        return None
    if terms.as_of.references is None or not terms.as_of.statistic_dates_to_come:
        return None
    counted = [i for i, weight in enumerate(statistic.weights) if weight != 0.0]
    laws = [series_law(terms, statistic, i, moments=moments) for i in counted]
    weights = [statistic.weights[i] for i in counted]
    payoff = payout_in_force(terms)
    discount = terms.discount(terms.contract.expiry.payment_date)
    if not payoff.knots:
        total = Estimate(payoff.intercept)
        for weight, law in zip(weights, laws, strict=True):
            if law is None:
                return None
            part = law.mean_root() if statistic.as_volatility else law.mean()
            total = total + part.times(weight * payoff.slope)
        return total.times(discount)
    law = laws[0]
    if len(laws) > 1 or law is None or statistic.as_volatility or weights[0] <= 0.0:
        return None
    scaled = QuadraticLaw(weights[0] * law.shift, weights[0] * law.factor, law.deviations, law.means)
    found = expectation(payoff, scaled)
    return None if found is None else found.times(discount)


def _log_level(
    terms: ContractTerms, statistic: RealisedVariance, series: int, to_come: list[int], *, moments: bool
) -> tuple[Array, Array] | None:
    """Logs of the forwards of the level on the dates to come, and variances of its log since today."""
    known = terms.as_of.references
    assert known is not None  # checked above
    forwards = terms.forwards[to_come] / known
    totals = np.array([covariance_to(terms, k) for k in to_come])
    n = len(known)
    if series < n:
        return np.log(forwards[:, series]), totals[:, series, series]
    aggregate = statistic.aggregate
    weights = np.array(aggregate.weights)
    if aggregate.cash is not None:
        return None
    if aggregate.kind is AggregateKind.GEOMETRIC:
        variances = np.einsum("kij,i,j->k", totals, weights, weights)
        logs = (np.log(forwards) - 0.5 * np.diagonal(totals, axis1=1, axis2=2)) @ weights
        return logs + 0.5 * variances, variances
    if n == 1 and weights[0] > 0.0:
        return np.log(weights[0] * forwards[:, 0]), totals[:, 0, 0]
    if aggregate.kind is AggregateKind.WEIGHTED_SUM and moments and weights.min() >= 0.0:
        amounts = forwards * weights
        means = amounts.sum(axis=1)
        second = np.einsum("ki,kj,kij->k", amounts, amounts, np.exp(totals))
        return np.log(means), np.log(second / means**2)
    return None
