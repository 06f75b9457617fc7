"""What the parts of a contract still do, as every closed form asks: the payout in force, the dates left."""

from __future__ import annotations

from datetime import date
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.feature import Feature
from pricer.contracts.levels import ReferenceSums
from pricer.contracts.option import Conversion
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.contract_terms import ContractTerms
from pricer.market.joint_lognormal import JointLognormal

Array = NDArray[np.float64]


def live_features(terms: ContractTerms) -> tuple[tuple[Feature[Any], Any], ...]:
    """The features that may still do something, with their states."""
    pairs = zip(terms.contract.features, terms.as_of.progress.features, strict=True)
    return tuple((f, state) for i, (f, state) in enumerate(pairs) if terms.as_of.appointments(i))


def payout_in_force(terms: ContractTerms) -> PiecewiseLinear:
    """What is paid at expiry if no feature does anything any more."""
    pairs = zip(terms.contract.features, terms.as_of.progress.features, strict=True)
    instead = (feature.payout_instead(state) for feature, state in pairs)
    return next((payout for payout in instead if payout is not None), terms.contract.payout).payoff()


def place(terms: ContractTerms, day: date) -> int:
    """Where ``day`` stands among the dates to come; -1 for today and before."""
    return terms.dates.index(day) if day in terms.dates else -1


def covariance_to(terms: ContractTerms, k: int) -> Array:
    """Covariance (n, n) of the logs from today to date ``k``; of nothing for -1."""
    return np.asarray(terms.covariances[: k + 1].sum(axis=0))


def setting_place(terms: ContractTerms) -> int | None:
    """The one date still to come that sets all references alone; -1 where they are set, None for averages of several.

    A reference that is a mean of prices with more than one date left is not of this form.
    """
    if terms.as_of.references is not None:
        return -1
    sums: ReferenceSums = terms.as_of.progress.references
    to_come = terms.as_of.setting_dates_to_come
    return place(terms, to_come[0]) if len(to_come) == 1 and sums.count == 0 else None


def levels_law(terms: ContractTerms, k: int, since: int = -1) -> JointLognormal | None:
    """Law of the random part of the levels on date ``k``, or of the performances since date ``since``.

    None where references are not known, or known cash makes a performance not lognormal.
    """
    if since >= 0:
        if bool(np.any(terms.floors[[since, k]] > 0.0)):
            return None
        change = terms.covariances[since + 1 : k + 1].sum(axis=0)
        return JointLognormal(terms.forwards[k] / terms.forwards[since], np.asarray(change))
    known = terms.as_of.references
    return None if known is None else JointLognormal(terms.forwards[k] / known, covariance_to(terms, k))


def known_shift(terms: ContractTerms, k: int, aggregate: Aggregate) -> float | None:
    """What floors add to the aggregate on date ``k``; None where they do not simply add to it."""
    if not np.any(terms.floors[k] > 0.0):
        return 0.0
    known = terms.as_of.references
    single = len(aggregate.weights) == 1 and aggregate.kind is not AggregateKind.GEOMETRIC
    if terms.contract.conversion is Conversion.COMPOSITE or known is None:
        return None
    if aggregate.kind is not AggregateKind.WEIGHTED_SUM and not single:
        return None
    return float(np.array(aggregate.weights) @ (terms.floors[k] / known))


def on_core(payoff: PiecewiseLinear, aggregate: Aggregate) -> PiecewiseLinear:
    """The payoff as a function of the aggregate without its cash level."""
    if aggregate.cash is None:
        return payoff
    if aggregate.kind is AggregateKind.BEST_OF:
        return payoff.of_floored_argument(aggregate.cash)
    return payoff.of_capped_argument(aggregate.cash)


def joined(left: PiecewiseLinear, right: PiecewiseLinear, at: float) -> PiecewiseLinear:
    """``left`` up to ``at``, ``right`` above it."""
    first, last = sum(k < at for k in left.knots), sum(k <= at for k in right.knots)
    (b0, m0), (b1, m1) = left.pieces(), right.pieces()
    knots = (*left.knots[:first], at, *right.knots[last:])
    return PiecewiseLinear.from_pieces(
        knots,
        tuple(map(float, (*b0[: first + 1], *b1[last:]))),
        tuple(map(float, (*m0[: first + 1], *m1[last:]))),
    )


def constant(amount: float) -> PiecewiseLinear:
    """``amount`` at every level."""
    return PiecewiseLinear(amount, 0.0)
