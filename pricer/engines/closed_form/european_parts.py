"""Contracts whose payments each hang on the levels of one day: a sum of European options, date by date.

Coupons without memory and accruals are digitals on their days; a barrier or a call that is left on the expiry
date alone is a piece of the final payoff; a forward start is an option on a performance (Rubinstein 1990), and
a sum of limited performances, where nothing limits the sum, an option on each period's.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import date
from itertools import pairwise

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.coupons import Coupon, Coupons, CouponState
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import PiecewiseLinear
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form.contract_parts import (
    constant,
    joined,
    known_shift,
    levels_law,
    live_features,
    on_core,
    payout_in_force,
    place,
    setting_place,
)
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal


class NotEuropeanError(Exception):
    """A payment hangs on the levels of more than one day."""


@dataclass(frozen=True, slots=True)
class _Part:
    """``payoff`` of an aggregate on one day, paid on another."""

    day: date
    aggregate: Aggregate
    payoff: PiecewiseLinear
    payment_date: date


def european_parts(terms: ContractTerms) -> tuple[EuropeanProblem, ...] | None:
    """The contract without its known amounts as European options; None where it is not of that form."""
    try:
        if isinstance(terms.contract.statistic, PerformanceSum):
            return (*_cliquet(terms, terms.contract.statistic), *coupon_problems(terms))
        return (_at_expiry(terms), *coupon_problems(terms))
    except NotEuropeanError:
        return None


def coupon_problems(terms: ContractTerms) -> tuple[EuropeanProblem, ...]:
    """The coupons to come of a contract that nothing can end before them. Raises NotEuropeanError for others."""
    parts: list[_Part] = []
    for feature, state in live_features(terms):
        if isinstance(feature, Coupons):
            parts += _coupons(terms, feature, state)
        elif not _only_on_expiry(terms, feature):
            raise NotEuropeanError
    return tuple(_problem(terms, part) for part in parts)


def _coupons(terms: ContractTerms, feature: Coupons, state: CouponState) -> Iterator[_Part]:
    left = feature.coupons[state.decided :]
    conditional = [coupon for coupon in left if coupon.level is not None]
    if feature.memory and len(left) > 1 and conditional:
        raise NotEuropeanError
    for i, coupon in enumerate(left):
        days_in_range = state.days_in_range if i == 0 else 0
        if coupon.accrual_dates:
            yield from _accrual(terms, feature, coupon, days_in_range)
        else:
            amount = constant(coupon.amount + (state.memory if i == 0 else 0.0))
            payoff = amount if coupon.level is None else _where(feature.trigger, coupon.level, amount, constant(0.0))
            yield _Part(coupon.day, _aggregate(feature.trigger, terms), payoff, coupon.payment_date)


def _accrual(terms: ContractTerms, feature: Coupons, coupon: Coupon, days_in_range: int) -> Iterator[_Part]:
    share = coupon.amount / len(coupon.accrual_dates)
    aggregate = _aggregate(feature.trigger, terms)
    yield _Part(coupon.day, aggregate, constant(share * days_in_range), coupon.payment_date)
    assert coupon.level is not None
    inside = _where(feature.trigger, coupon.level, constant(share), constant(0.0))
    if coupon.ceiling is not None:
        inside = joined(inside, constant(0.0), coupon.ceiling)
    for day in coupon.accrual_dates:
        if place(terms, day) >= 0:
            yield _Part(day, aggregate, inside, coupon.payment_date)


def _at_expiry(terms: ContractTerms) -> EuropeanProblem:
    """The final payoff with all that may still happen on the expiry date itself."""
    statistic, expiry = terms.contract.statistic, terms.contract.expiry
    if not isinstance(statistic, ExpiryLevel) or statistic.day != expiry.day or not terms.dates:
        raise NotEuropeanError
    core = replace(statistic.aggregate, cash=None)
    payoff = on_core(terms.contract.payout.payoff(), statistic.aggregate)
    pairs = list(zip(terms.contract.features, terms.as_of.progress.features, strict=True))
    live = [feature for feature, _ in live_features(terms)]
    # The first feature out of force decides what is paid instead, so that it is put around those after it.
    for feature, state in reversed(pairs):
        instead = feature.payout_instead(state)
        if any(feature is other for other in live) and isinstance(feature, Barrier):
            if feature.rebate_at_hit is None:
                payoff = _in_force(feature, core, payoff, on_core(feature.instead.payoff(), statistic.aggregate))
        elif instead is not None:
            payoff = on_core(instead.payoff(), statistic.aggregate)
    # What ends the contract ends it whatever is in force; the first to do so pays.
    for feature in reversed(live):
        if isinstance(feature, Autocall):
            payoff = _ended(terms, feature, core, feature.amounts[-1], payoff)
        elif isinstance(feature, Barrier) and feature.rebate_at_hit is not None:
            payoff = _ended(terms, feature, core, feature.rebate_at_hit, payoff)
        elif not isinstance(feature, Barrier | Coupons):
            raise NotEuropeanError
    return _problem(terms, _Part(expiry.day, core, payoff, expiry.payment_date))


def _in_force(barrier: Barrier, core: Aggregate, payoff: PiecewiseLinear, instead: PiecewiseLinear) -> PiecewiseLinear:
    hit, clear = (payoff, instead) if barrier.kind is BarrierKind.IN else (instead, payoff)
    return _where(_same(barrier.trigger, core), barrier.levels[-1], hit, clear)


def _ended(
    terms: ContractTerms, feature: Autocall | Barrier, core: Aggregate, amount: float, payoff: PiecewiseLinear
) -> PiecewiseLinear:
    moved = terms.discount(feature.schedule[-1].payment_date) / terms.discount(terms.contract.expiry.payment_date)
    return _where(_same(feature.trigger, core), feature.levels[-1], constant(amount * moved), payoff)


def _cliquet(terms: ContractTerms, statistic: PerformanceSum) -> tuple[EuropeanProblem, ...]:
    """One option on the performance of each period to come, where the payout is straight on all that may happen."""
    if any(not isinstance(feature, Coupons) for feature, _ in live_features(terms)) or terms.has_floors:
        raise NotEuropeanError
    state = terms.as_of.progress.statistic
    local, core = on_core(statistic.local.payoff(), statistic.aggregate), replace(statistic.aggregate, cash=None)
    to_come = [place(terms, day) for day in statistic.dates if place(terms, day) >= 0]
    periods = len(statistic.dates) - 1 - state.periods
    if periods == 0:
        raise NotEuropeanError  # the sum is known: nothing is an option any more
    intercept, slope = _straight(payout_in_force(terms), state.total, local, periods)
    discount = terms.discount(terms.contract.expiry.payment_date)
    problems = []
    starts = [-1, *to_come] if state.period_start is not None else to_come
    for start, end in pairwise(starts):
        law = levels_law(terms, end, start)
        if law is None:
            raise NotEuropeanError
        if start < 0:
            law = JointLognormal(law.forwards / np.array(state.period_start), law.covariance)
        share = (intercept + slope * state.total) / periods
        payoff = local.scaled(slope)
        payoff = replace(payoff, intercept=payoff.intercept + share)
        problems.append(EuropeanProblem(law, core, payoff, discount))
    return tuple(problems)


def _straight(payout: PiecewiseLinear, total: float, local: PiecewiseLinear, periods: int) -> tuple[float, float]:
    """Intercept and slope of the payout on every sum that the periods left may make. Raises NotEuropeanError."""
    low, high = _range(local)
    least, most = total + periods * low, total + periods * high
    if any(least < knot < most for knot in payout.knots):
        raise NotEuropeanError
    piece = sum(knot <= least for knot in payout.knots)
    intercepts, slopes = payout.pieces()
    return float(intercepts[piece]), float(slopes[piece])


def _range(payoff: PiecewiseLinear) -> tuple[float, float]:
    """Between what numbers the payoff lies, on levels from 0."""
    intercepts, slopes = payoff.pieces()
    edges = [0.0, *(max(knot, 0.0) for knot in payoff.knots), np.inf]
    ends = [
        float(b if m == 0.0 else b + m * edge)
        for b, m, lo, hi in zip(intercepts, slopes, edges[:-1], edges[1:], strict=True)
        for edge in (lo, hi)
    ]
    return min(ends), max(ends)


def _problem(terms: ContractTerms, part: _Part) -> EuropeanProblem:
    k, since = place(terms, part.day), setting_place(terms)
    if k < 0 or since is None:
        raise NotEuropeanError
    core = replace(part.aggregate, cash=None)
    shift = known_shift(terms, k, core) if since < 0 else 0.0
    law = levels_law(terms, k, since)
    if law is None or shift is None:
        raise NotEuropeanError
    payoff = on_core(part.payoff, part.aggregate).of_shifted_argument(shift)
    return EuropeanProblem(law, core, payoff, terms.discount(part.payment_date))


def _only_on_expiry(terms: ContractTerms, feature: object) -> bool:
    index = next(i for i, f in enumerate(terms.contract.features) if f is feature)
    if isinstance(feature, Barrier) and feature.continuous:
        return False
    return all(item.day == terms.contract.expiry.day for item in terms.as_of.appointments(index))


def _same(trigger: Trigger, core: Aggregate) -> Trigger:
    """The trigger, if it looks at the payout's own aggregate."""
    if trigger.aggregate != core or trigger.scales is not None:
        raise NotEuropeanError
    return trigger


def _aggregate(trigger: Trigger | None, terms: ContractTerms) -> Aggregate:
    if trigger is None:
        n = len(terms.contract.underlyings)
        return Aggregate.weighted_sum((1.0 / n,) * n)  # of no matter: what is paid does not hang on it
    if trigger.scales is not None:
        raise NotEuropeanError
    return trigger.aggregate


def _where(trigger: Trigger | None, level: float, met: PiecewiseLinear, not_met: PiecewiseLinear) -> PiecewiseLinear:
    assert trigger is not None  # checked by the contract
    if trigger.direction is Direction.UP:
        return joined(not_met, met, level)
    return joined(met, not_met, level)
