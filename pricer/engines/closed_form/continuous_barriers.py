"""Contracts with one barrier watched all the time, on the aggregate's own level or on another's.

Exact where growth comes at the pace of variance and the barrier is flat, as it is without dividends at known
dates and with constant rates and volatilities; else the same formulas are an approximation. What paths must be
allowed is what the correction for dates (Broadie, Glasserman & Kou 1997) leaves, measured on the barrier's own level.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.profile import PiecewiseLinear
from pricer.contracts.trigger import Direction
from pricer.engines.closed_form import FAMILIES
from pricer.engines.closed_form import barrier as watched_all_the_time
from pricer.engines.closed_form import discrete_barrier as watched_on_dates
from pricer.engines.closed_form.barrier import OVERSHOOT, Corridor, WatchedLevel
from pricer.engines.closed_form.contract_parts import covariance_to, levels_law, live_features, on_core, place
from pricer.engines.closed_form.external_barrier import knock_out_of_aggregate
from pricer.engines.closed_form.given_driver import first_exact
from pricer.engines.closed_form.payoff_pieces import lognormal_expectations
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import EuropeanProblem, Reference, ReferenceKind

Array = NDArray[np.float64]
_EVEN = 1e-9  # of the final variance and growth, within which both come at one pace


@dataclass(frozen=True, slots=True)
class _Watch:
    """A barrier left alone, and the level it looks at: ``asset`` times ``scale``, compared with ``at``."""

    barrier: Barrier
    asset: int
    at: float
    level: WatchedLevel
    forwards: Array  # (n_dates,) of that level
    variances: Array
    is_even: bool


def continuous_barriers(terms: ContractTerms) -> tuple[Reference, ...]:
    """The value by reflection, without known amounts; nothing for contracts of another form."""
    watch, payoffs = _watch(terms), _payoffs(terms)
    if watch is None or payoffs is None:
        return ()
    payoff, instead = payoffs
    if len(terms.contract.underlyings) == 1:
        return _on_own_level(terms, watch, payoff, instead)
    return _on_another(terms, watch, payoff, instead)


def _on_own_level(
    terms: ContractTerms, watch: _Watch, payoff: PiecewiseLinear, instead: PiecewiseLinear
) -> tuple[Reference, ...]:
    corridor, level = _corridor(watch), watch.level
    hit, clear = (payoff, instead) if watch.barrier.kind is BarrierKind.IN else (instead, payoff)
    found = watched_all_the_time.knock_in(level, corridor, hit) + watched_all_the_time.knock_out(level, corridor, clear)
    allowance = abs(_on_dates(watch, hit, clear) - found.value)
    discount = terms.discount(terms.contract.expiry.payment_date)
    kind = ReferenceKind.EXACT if watch.is_even else ReferenceKind.APPROXIMATION
    return (
        Reference(
            "continuous barrier by reflection",
            kind,
            discount * found.value,
            discount * found.error,
            "Merton (1973); Reiner & Rubinstein (1991)",
            discount * allowance,
        ),
    )


def _on_another(
    terms: ContractTerms, watch: _Watch, payoff: PiecewiseLinear, instead: PiecewiseLinear
) -> tuple[Reference, ...]:
    statistic = terms.contract.statistic
    assert isinstance(statistic, ExpiryLevel)  # made so by ``_payoffs``
    last = len(terms.dates) - 1
    law = levels_law(terms, last)
    if law is None or terms.has_floors:
        return ()
    core, total = replace(statistic.aggregate, cash=None), covariance_to(terms, last)
    hit, clear = (payoff, instead) if watch.barrier.kind is BarrierKind.IN else (instead, payoff)
    value_of = first_exact(FAMILIES)
    discount = terms.discount(terms.contract.expiry.payment_date)
    # hit everywhere, and the difference where the barrier never was.
    everywhere = EuropeanProblem(law, core, hit, discount)
    change = replace(everywhere, payoff=_less(clear, hit))
    plain = value_of(everywhere)
    rest = knock_out_of_aggregate(change, watch.level, _corridor(watch), total[:, watch.asset], value_of)
    if plain is None or rest is None:
        return ()
    scale = float(total[watch.asset, watch.asset])
    uneven = [c - total * (c[watch.asset, watch.asset] / scale) for c in terms.covariances]
    even = watch.is_even and float(np.abs(uneven).max()) < _EVEN
    one, none = PiecewiseLinear(1.0, 0.0), PiecewiseLinear(0.0, 0.0)
    touched = watched_all_the_time.knock_in(watch.level, _corridor(watch), one).value
    size = abs(plain.value) + discount * float(np.abs(clear(np.array(core(law.forwards))) - hit(core(law.forwards))))
    return (
        Reference(
            "barrier on another underlying",
            ReferenceKind.EXACT if even else ReferenceKind.APPROXIMATION,
            discount * plain.value + rest.value,
            discount * plain.error + rest.error,
            "Heynen & Kat (1994)",
            2.0 * abs(_on_dates(watch, one, none) - touched) * size,
        ),
    )


def _on_dates(watch: _Watch, hit: PiecewiseLinear, clear: PiecewiseLinear) -> float:
    """The same on the contract's dates, with the barrier moved towards the level by the mean overshoot of a step."""
    steps = np.sqrt(np.diff(watch.variances, prepend=0.0))
    side = 1.0 if watch.barrier.trigger.direction is Direction.UP else -1.0
    barriers = watch.at * np.exp(-side * OVERSHOOT * steps)
    up = side > 0.0
    observations = watched_on_dates.Observations(
        watch.forwards,
        watch.variances,
        np.zeros(steps.size) if up else barriers,
        barriers if up else np.full(steps.size, math.inf),
        np.empty(0),
    )
    forward, variance = float(watch.forwards[-1]), float(watch.variances[-1])
    out = watched_on_dates.knock_out(observations, forward, variance, _less(clear, hit)).value
    return out + float(lognormal_expectations(hit, np.array([forward]), math.sqrt(variance))[0])


def _watch(terms: ContractTerms) -> _Watch | None:
    live = live_features(terms)
    if len(live) != 1 or len(terms.contract.features) != 1 or not isinstance(live[0][0], Barrier):
        return None
    barrier, aggregate = live[0][0], live[0][0].trigger.aggregate
    today = terms.as_of.levels
    weights = np.array(aggregate.weights)
    single = len(weights) == 1 or (
        aggregate.kind is AggregateKind.WEIGHTED_SUM and np.count_nonzero(weights) == 1 and weights.max() > 0.0
    )
    dates = [observation.day for observation in barrier.schedule if place(terms, observation.day) >= 0]
    pairs = zip(barrier.schedule, barrier.levels, strict=True)
    levels = {level for observation, level in pairs if observation.day in dates}
    settled = terms.as_of.references is not None and today is not None and not terms.has_floors
    spacing = np.diff(terms.times, prepend=0.0)
    begun = barrier.schedule[0].day <= terms.as_of.valuation_date or spacing[0] <= 2.0 * float(np.median(spacing))
    watched = tuple(dates) == terms.dates and len(levels) == 1 and begun
    if not (barrier.continuous and single and settled and watched) or aggregate.cash is not None:
        return None
    if barrier.rebate_at_hit or aggregate.kind is AggregateKind.GEOMETRIC or weights.max() <= 0.0:
        return None
    asset = int(np.argmax(weights))
    scale = 1.0 if barrier.trigger.scales is None else barrier.trigger.scales[asset]
    assert today is not None and terms.as_of.references is not None
    spot, references = today[asset], terms.as_of.references
    forwards = terms.forwards[:, asset] / references[asset]
    variances = np.cumsum(terms.covariances[:, asset, asset])
    at = levels.pop() * scale / float(weights[asset])
    if not np.all(np.diff(variances, prepend=0.0) > 0.0) or at <= 0.0:
        return None
    level = WatchedLevel(spot, float(forwards[-1]), math.sqrt(float(variances[-1])))
    growth, share = np.log(forwards / spot), variances / variances[-1]
    is_even = bool(np.max(np.abs(growth - growth[-1] * share)) < _EVEN)
    return _Watch(barrier, asset, at, level, forwards, variances, is_even)


def _corridor(watch: _Watch) -> Corridor:
    if watch.barrier.trigger.direction is Direction.UP:
        return Corridor(0.0, watch.at)
    return Corridor(watch.at)


def _payoffs(terms: ContractTerms) -> tuple[PiecewiseLinear, PiecewiseLinear] | None:
    """What is paid at expiry in force, and out of force, as functions of the aggregate without cash."""
    statistic, contract = terms.contract.statistic, terms.contract
    if not isinstance(statistic, ExpiryLevel) or statistic.day != contract.expiry.day:
        return None
    barrier = contract.features[0] if contract.features else None
    if not isinstance(barrier, Barrier):
        return None
    n = len(contract.underlyings)
    factor = float(statistic.aggregate.weights[0])
    if n == 1 and (statistic.aggregate.kind is AggregateKind.GEOMETRIC or factor != 1.0):
        return None
    payoff = on_core(contract.payout.payoff(), statistic.aggregate)
    if barrier.rebate_at_hit is not None:
        return payoff, PiecewiseLinear(0.0, 0.0)
    return payoff, on_core(barrier.instead.payoff(), statistic.aggregate)


def _less(first: PiecewiseLinear, second: PiecewiseLinear) -> PiecewiseLinear:
    """``first - second``."""
    knots = tuple(sorted({*first.knots, *second.knots}))
    bends = {k: 0.0 for k in knots}
    jumps = {k: 0.0 for k in knots}
    for sign, payoff in ((1.0, first), (-1.0, second)):
        for knot, bend, jump in zip(payoff.knots, payoff.bends, payoff.jumps, strict=True):
            bends[knot] += sign * bend
            jumps[knot] += sign * jump
    return PiecewiseLinear(
        first.intercept - second.intercept,
        first.slope - second.slope,
        knots,
        tuple(bends[k] for k in knots),
        tuple(jumps[k] for k in knots),
    )
