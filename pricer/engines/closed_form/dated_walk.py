"""Any contract on one lognormal level, exact: by quadrature from date to date, over all it may remember.

Between two dates the level is lognormal, and what the contract is worth is a smooth function of it for every
state that its features may be in: coupons in memory, days in a range, barriers hit or not (Andricopoulos,
Widdicks, Duck & Newton 2003; Fusai & Recchioni 2007). The states, and what is paid on the way from one to the
next, are what the contract's own parts answer when they are shown a level between two triggers: nothing of
autocalls, coupons or barriers is told here a second time.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import date
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.ageing import Progress, walk
from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierState
from pricer.contracts.coupons import Coupons
from pricer.contracts.exercise import Exercise
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Ending, Feature
from pricer.contracts.levels import ReferenceSums
from pricer.contracts.profile import PiecewiseLinear
from pricer.contracts.trigger import Trigger
from pricer.engines.closed_form.contract_parts import live_features
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.one_level import OneLevel, one_level
from pricer.engines.closed_form.quadrature import gauss_legendre
from pricer.engines.contract_terms import ContractTerms

Array = NDArray[np.float64]

_FAR = 8.0  # deviations on either side of the law of a date
_KERNEL = 8.5  # deviations of a step beyond which the step is not taken
_PANEL = 6.0  # width of a panel, in deviations of the shortest step that starts or ends there
_ORDER, _COARSE = 32, 26  # nodes of a panel: at 32 a Gaussian of that width is integrated to 13 digits
_ROWS = 64  # nodes of a date treated together
_MOST_STATES = 200
_MOST_WORK = 2e8  # kernel values


@dataclass(frozen=True, slots=True)
class _Move:
    """What a state does on a level between two edges: the amount paid, discounted, and the state that follows.

    ``next`` is -1 where the contract ends; ``payoff`` is what is paid on the level itself then.
    """

    amount: float
    next: int
    payoff: PiecewiseLinear | None = None


@dataclass(frozen=True, slots=True)
class _Day:
    """``edges`` of one date, increasing, above 0; ``moves[state][interval]``."""

    edges: tuple[float, ...]
    moves: list[list[_Move]]


def by_dates(terms: ContractTerms) -> Estimate | None:
    """Discounted value without known amounts; None where the contract is not on one level, or too large.

    The error is the change when the panels get a fifth less nodes.
    """
    level = one_level(terms)
    if level is None or not _fits(terms, level):
        return None
    days = _days(terms, level)
    if days is None:
        return None
    fine, coarse = (_value(days, terms, level, order) for order in (_ORDER, _COARSE))
    return Estimate(fine, abs(fine - coarse) + 1e-13 * (1.0 + abs(fine)))


def _fits(terms: ContractTerms, level: OneLevel) -> bool:
    contract = terms.contract
    statistic = contract.statistic
    if not isinstance(statistic, ExpiryLevel) or statistic.day != contract.expiry.day:
        return False
    for feature, _ in live_features(terms):
        if isinstance(feature, Exercise) or (isinstance(feature, Barrier) and feature.continuous):
            return False
        trigger = feature.trigger if isinstance(feature, Autocall | Barrier | Coupons) else None
        if trigger is not None and (trigger.aggregate.cash is not None or _factor(level, trigger) <= 0.0):
            return False
    return level.power(statistic.aggregate)[0] > 0.0 and _work(level) < _MOST_WORK


def _aggregate(terms: ContractTerms) -> Aggregate:
    statistic = terms.contract.statistic
    assert isinstance(statistic, ExpiryLevel)  # asked for first
    return statistic.aggregate


def _factor(level: OneLevel, trigger: Trigger) -> float:
    return level.power(trigger.aggregate, trigger.scales)[0]


def _work(level: OneLevel) -> float:
    """Kernel values over all dates, roughly."""
    steps = np.sqrt(np.diff(level.variances, prepend=0.0))
    nodes = 2.0 * (_FAR * np.sqrt(level.variances)) / (_PANEL * steps) * _ORDER
    return float(np.sum(nodes * (4.0 * _KERNEL / _PANEL * _ORDER)))


def _days(terms: ContractTerms, level: OneLevel) -> list[_Day] | None:
    """Every date with the states that can be met before it; None for too many."""
    contract = terms.contract
    n = level.n_assets
    prices_of_one, sums = terms.as_of.references, terms.as_of.progress.references
    if prices_of_one is None:
        prices_of_one, count = np.ones(n), len(contract.levels.reference_dates)
        sums = ReferenceSums((float(count),) * n, count)
    states: list[Progress] = [replace(terms.as_of.progress, references=sums, payments=())]
    days = []
    for day in terms.dates[level.first :]:
        edges = _edges(terms, level, day)
        inside = _representatives(edges)
        following: dict[Any, int] = {}
        kept: list[Progress] = []
        moves: list[list[_Move]] = []
        for state in states:
            row = []
            for at in inside:
                prices = (prices_of_one * level.levels(np.array(at)))[np.newaxis]
                # The setting date is behind: it is not shown again.
                found = walk(contract, replace(state, payments=()), (day,), prices).progress
                row.append(_move(terms, found, following, kept))
            moves.append(row)
        if len(kept) > _MOST_STATES:
            return None
        days.append(_Day(edges, moves))
        states = kept
    return days


def _move(terms: ContractTerms, found: Progress, following: dict[Any, int], kept: list[Progress]) -> _Move:
    paid = [p for p in found.payments if found.ending is not Ending.EXPIRED or p.reason != "final payoff"]
    amount = math.fsum(p.amount * terms.discount(p.payment_date) for p in paid)
    if found.ending is Ending.EXPIRED:
        pairs = zip(terms.contract.features, found.features, strict=True)
        instead = (feature.payout_instead(state) for feature, state in pairs)
        payout = next((payout for payout in instead if payout is not None), terms.contract.payout)
        return _Move(amount, -1, payout.payoff().scaled(terms.discount(terms.contract.expiry.payment_date)))
    if found.ending is not None:
        return _Move(amount, -1)
    pairs = zip(terms.contract.features, found.features, strict=True)
    states = tuple(_plain(terms, feature, state) for feature, state in pairs)
    if states not in following:
        following[states] = len(kept)
        kept.append(replace(found, features=states, payments=()))
    return _Move(amount, following[states])


def _plain(terms: ContractTerms, feature: Feature[Any], state: Any) -> Any:
    """The state without what nothing will ask for: on which day a barrier was hit."""
    if isinstance(state, BarrierState) and state.hit_on is not None:
        return replace(state, hit_on=terms.as_of.valuation_date)
    return state


def _edges(terms: ContractTerms, level: OneLevel, day: date) -> tuple[float, ...]:
    """Levels at which something changes on ``day``."""
    found: set[float] = set()
    for feature, _ in live_features(terms):
        if isinstance(feature, Autocall | Barrier):
            pairs = zip(feature.schedule, feature.levels, strict=True)
            at: list[tuple[Trigger | None, float]] = [
                (feature.trigger, amount) for observation, amount in pairs if observation.day == day
            ]
        elif isinstance(feature, Coupons):
            asked = [c for c in feature.coupons if c.day == day or day in c.accrual_dates]
            at = [(feature.trigger, x) for c in asked for x in (c.level, c.ceiling) if x is not None]
        else:
            at = []
        found.update(level.place_of(x, trigger.aggregate, trigger.scales) for trigger, x in at if trigger is not None)
    if day == terms.contract.expiry.day:
        aggregate = _aggregate(terms)
        payouts = [terms.contract.payout, *(f.instead for f in terms.contract.features if isinstance(f, Barrier))]
        knots = {knot for payout in payouts for knot in payout.payoff().knots}
        if aggregate.cash is not None:
            knots.add(aggregate.cash)
        found.update(level.place_of(knot, aggregate) for knot in knots)
    return tuple(sorted(x for x in found if x > 0.0))


def _representatives(edges: Sequence[float]) -> list[float]:
    """One level inside every interval."""
    if not edges:
        return [1.0]
    between = [math.sqrt(a * b) for a, b in pairwise(edges)]
    return [0.5 * edges[0], *between, 2.0 * edges[-1]]


def _value(days: list[_Day], terms: ContractTerms, level: OneLevel, order: int) -> float:
    """Backward, in ``u = log M + variance / 2``, which has mean 0 and no drift."""
    variances = level.variances
    steps = np.sqrt(np.diff(variances, prepend=0.0))
    last = len(days) - 1
    after = np.zeros((0, 0))  # value of every state just after the date, at its nodes: (n_nodes, n_states)
    nodes: list[tuple[Array, Array, NDArray[np.intp]]] = [
        _nodes(days[k].edges, level, k, steps, order) for k in range(last + 1)
    ]
    for k in range(last, -1, -1):
        u, weights, interval = nodes[k]
        at = level.forwards[k] * np.exp(u - 0.5 * variances[k]) + level.floors[k]
        seen = _seen(days[k], interval, at, after, terms, level)
        before = nodes[k - 1][0] if k else np.zeros(1)
        after = _convolved(before, u, weights[:, np.newaxis] * seen, float(steps[k]))
    return float(after[0, 0])


def _seen(
    day: _Day, interval: NDArray[np.intp], at: Array, after: Array, terms: ContractTerms, level: OneLevel
) -> Array:
    """Value of every state just before the date's observations, at its nodes."""
    out = np.zeros((at.size, len(day.moves)))
    aggregate = None
    for state, row in enumerate(day.moves):
        for i, move in enumerate(row):
            where = interval == i
            out[where, state] = move.amount
            if move.next >= 0:
                out[where, state] += after[where, move.next]
            elif move.payoff is not None:
                if aggregate is None:
                    aggregate = _aggregate(terms)(level.levels(at))
                out[where, state] += move.payoff(aggregate[where])
    return out


def _nodes(
    edges: Sequence[float], level: OneLevel, k: int, steps: Array, order: int
) -> tuple[Array, Array, NDArray[np.intp]]:
    """Nodes and weights of date ``k``, panel by panel between its edges, and in which interval they lie."""
    variance = float(level.variances[k])
    reach = _FAR * math.sqrt(variance) + variance
    places = [
        math.log((edge - level.floors[k]) / level.forwards[k]) + 0.5 * variance if edge > level.floors[k] else -math.inf
        for edge in edges
    ]
    cuts = [-reach, *(min(max(x, -reach), reach) for x in places), reach]
    shortest = float(steps[k : k + 2].min())
    x, w = gauss_legendre(order)
    u: list[Array] = [np.empty(0)]
    weights: list[Array] = [np.empty(0)]
    interval: list[NDArray[np.intp]] = [np.empty(0, dtype=np.intp)]
    for i, (low, high) in enumerate(pairwise(cuts)):
        if high <= low:
            continue
        ends = np.linspace(low, high, 1 + math.ceil((high - low) / (_PANEL * shortest)))
        half = 0.5 * (ends[1] - ends[0])
        u.append(np.add.outer(ends[:-1] + half, half * x).ravel())
        weights.append(np.tile(half * w, ends.size - 1))
        interval.append(np.full(u[-1].size, i, dtype=np.intp))
    return np.concatenate(u), np.concatenate(weights), np.concatenate(interval)


def _convolved(before: Array, nodes: Array, amounts: Array, step: float) -> Array:
    """``sum_k amounts[k] density(nodes[k] - before[i])`` of a normal step, for rising nodes: (n_before, n_states)."""
    out = np.empty((before.size, amounts.shape[1]))
    for first in range(0, before.size, _ROWS):
        rows = before[first : first + _ROWS]
        a, b = np.searchsorted(nodes, (rows[0] - _KERNEL * step, rows[-1] + _KERNEL * step))
        z = (nodes[a:b] - rows[:, np.newaxis]) / step
        out[first : first + _ROWS] = np.exp(-0.5 * z * z) @ amounts[a:b]
    return out / (step * math.sqrt(2.0 * math.pi))
