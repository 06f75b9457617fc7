"""Does what a contract pays change without jumps along with its path?"""

from __future__ import annotations

from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierState
from pricer.contracts.coupons import Coupons
from pricer.contracts.exercise import Exercise
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.engines.contract_terms import ContractTerms

_KNOWN = (
    ExpiryLevel,
    Average,
    PerformanceSum,
    LockedIn,
    RealisedVariance,
    RealisedCorrelation,
    Coupons,
    Autocall,
    Barrier,
    Exercise,
)


def is_continuous(terms: ContractTerms) -> bool:
    """Whether differences on common draws serve: no jump in a payout, no feature that is still to decide.

    A selection decides who leaves, and so jumps where two underlyings change places, unless it is the last one.
    """
    contract, today = terms.contract, terms.as_of.valuation_date
    statistic, states = contract.statistic, terms.as_of.progress.features
    if not isinstance(statistic, _KNOWN) or not all(isinstance(feature, _KNOWN) for feature in contract.features):
        return False  # nothing is known of it
    payoffs = [contract.payout.payoff()]
    if isinstance(statistic, PerformanceSum):
        payoffs.append(statistic.local.payoff())
    for feature, state in zip(contract.features, states, strict=True):
        if isinstance(feature, Autocall) and feature.dates and feature.dates[-1] > today:
            return False
        if isinstance(feature, Coupons) and any(c.level is not None and c.day > today for c in feature.coupons):
            return False
        if isinstance(feature, Barrier):
            if isinstance(state, BarrierState) and state.hit_on is None and feature.dates[-1] > today:
                return False
            payoffs.append(feature.instead.payoff())
    if isinstance(statistic, LockedIn) and sum(day > today for day in statistic.schedule) > 1:
        return False
    return all(payoff.is_continuous for payoff in payoffs)
