"""Payments at expiry on the statistic of a path."""

from __future__ import annotations

from typing import Any

import numpy as np

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.average import Average, AverageOf, AverageState
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Statistic
from pricer.contracts.performance_sum import PerformanceState, PerformanceSum
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.contract_legs.draft import DraftLeg
from pricer.engines.contract_legs.final_payoff import is_flat, is_zero
from pricer.engines.contract_legs.readings import Readings
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.paths.leg import Fixing, Payment, When


class FinalLevel:
    """What is paid at expiry on the statistic; ``state`` is that of tonight."""

    def __init__(self, contract: Contract, state: Any, terms: ContractTerms, readings: Readings) -> None:
        self._statistic: Statistic[Any] = contract.statistic
        self._state, self._readings = state, readings
        self._expiry = readings.places[contract.expiry.day]
        self._df = terms.discount(contract.expiry.payment_date)
        self._today = terms.as_of.valuation_date

    @property
    def is_read_at_expiry(self) -> bool:
        """Whether one reading on the expiry date decides."""
        return isinstance(self._statistic, ExpiryLevel) and self._place == self._expiry

    def pay(self, draft: DraftLeg, f: PiecewiseLinear, when: When = When.SURVIVING) -> None:
        """``f`` of the final level for all paths of ``when`` at expiry. Raises UnsayableError."""
        if is_zero(f):
            return
        if is_flat(f):
            draft.pay(self._expiry, Payment.fixed(f.intercept, self._df, when))
            return
        match self._statistic:
            case ExpiryLevel() as level:
                self._pay_level(draft, level, f, when)
            case Average() as average:
                self._pay_average(draft, average, f, when)
            case PerformanceSum() as total:
                self._pay_sum(draft, total, f)
            case _:
                raise UnsayableError(f"the {self._statistic.label} of a path is no sum of readings")

    @property
    def _place(self) -> int:
        return self._readings.places[self._statistic.dates[-1]]

    def _check_stops(self, draft: DraftLeg) -> None:
        if self._place < self._expiry and draft.last_stop > self._place:
            raise UnsayableError("the contract may still end after its final level is known")

    def _pay_level(self, draft: DraftLeg, level: ExpiryLevel, f: PiecewiseLinear, when: When) -> None:
        self._check_stops(draft)
        if self._readings.is_setting(level.day):
            known = float(level.aggregate(np.ones(len(self._readings.references))))
            draft.pay(self._place, Payment.fixed(float(f(np.array(known))), self._df, when))
            return
        reading = self._readings.reading(level.aggregate)
        draft.pay(self._place, Payment(with_cash(f, level.aggregate), self._df, when, reading))

    def _pay_average(self, draft: DraftLeg, average: Average, f: PiecewiseLinear, when: When) -> None:
        self._check_stops(draft)
        aggregate, n = averaged_aggregate(average), len(average.schedule)
        state: AverageState = self._state
        so_far = np.array(state.sums) / n
        known = float(aggregate(so_far)) if average.of is AverageOf.UNDERLYINGS else float(so_far[0])
        reading = self._readings.reading(aggregate)
        for day in average.schedule:
            if day <= self._today:
                continue
            if self._readings.is_setting(day):
                known += float(aggregate(np.ones(len(self._readings.references)))) / n
            else:
                draft.fix(self._readings.places[day], Fixing(reading, 1.0 / n))
        draft.sum_so_far = known
        if self._readings.is_setting(average.schedule[-1]):
            draft.pay(self._place, Payment.fixed(float(f(np.array(known))), self._df, when))
        else:
            draft.pay(self._place, Payment(f, self._df, when, reading, averaged=True))

    def _pay_sum(self, draft: DraftLeg, total: PerformanceSum, f: PiecewiseLinear) -> None:
        if f.knots:
            raise UnsayableError("the sum of performances is limited as a whole")
        if draft.last_stop >= 0:
            raise UnsayableError("the contract may end while its performances are being added up")
        state: PerformanceState = self._state
        local = with_cash(total.local.payoff().scaled(f.slope), total.aggregate)
        draft.pay(self._expiry, Payment.fixed(f.intercept + f.slope * state.total, self._df, When.ALIVE))
        starts, since = state.period_start, None
        for day in total.schedule:
            if day <= self._today:
                continue
            if starts is not None or since is not None:
                reading = self._readings.performance(total.aggregate, since, starts)
                draft.pay(self._readings.places[day], Payment(local, self._df, When.ALIVE, reading))
            starts, since = None, day


def averaged_aggregate(average: Average) -> Aggregate:
    """The aggregate each day's levels enter a sum by. Raises UnsayableError where the mean is no sum of readings."""
    aggregate = average.aggregate
    if aggregate.cash is not None:
        raise UnsayableError("an average competes with cash")
    single = len(aggregate.weights) == 1 and aggregate.kind is not AggregateKind.GEOMETRIC
    summed = aggregate.kind is AggregateKind.WEIGHTED_SUM or single
    if average.of is AverageOf.UNDERLYINGS and not summed:
        raise UnsayableError("the underlyings are averaged one by one before they are ranked or multiplied")
    return aggregate


def with_cash(f: PiecewiseLinear, aggregate: Aggregate) -> PiecewiseLinear:
    """``f`` of the aggregate as a function of its assets' part."""
    if aggregate.cash is None:
        return f
    if aggregate.kind is AggregateKind.BEST_OF:
        return f.of_floored_argument(aggregate.cash)
    return f.of_capped_argument(aggregate.cash)
