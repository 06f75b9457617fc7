"""Totals of the book and of its parts. Standard errors add in quadrature: every trade has draws of its own."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from pricer.contracts.book import Refusal
from pricer.engines.selector import COVERAGE, sampling_quantile
from pricer.report.rates import Rates
from pricer.report.sums import pooled_degrees_of_freedom, quadrature, total
from pricer.run.outcome import Interval, Outcome, Status, Valuation


@dataclass(frozen=True, slots=True)
class Total:
    """What a group of trades is worth, in the reporting currency; NaN where none of them was priced.

    ``gross_notional`` adds the absolute notionals. ``own_value`` and ``own_standard_error`` are in ``own_currency``,
    the one currency of the group's priced trades; NaN and empty where there are several. ``model_difference`` adds
    those of the trades that have one, ``without_model_difference`` counts the priced trades that have none.
    """

    grouping: str
    group: str
    trades: int
    priced: int
    precision_not_reached: int
    disputed: int
    failing_surface: int
    not_priced: int
    gross_notional: float
    own_currency: str
    own_value: float
    own_standard_error: float
    value: float
    standard_error: float
    model_difference: float
    model_difference_standard_error: float
    without_model_difference: int


@dataclass(frozen=True, slots=True)
class BookTotal:
    """The headline, in the reporting currency.

    ``lower`` and ``upper`` are the 99 % sampling interval; ``unsampled_error`` adds the half-widths of the values
    that have no sampling error, and what certified bounds leave open beyond it; ``unpaid_premium`` is already inside
    the value.
    """

    total: Total
    lower: float
    upper: float
    unsampled_error: float
    unpaid_premium: float


_BY_VALUATION: dict[str, Callable[[Valuation], str]] = {
    "currency": lambda v: v.currency,
    "product": lambda v: v.product,
    "strategy": lambda v: v.strategy,
    "counterparty": lambda v: v.counterparty,
    "netting_set": lambda v: v.netting_set,
    "model": lambda v: v.model,
}
_BY_REFUSAL: dict[str, Callable[[Refusal], str]] = {
    "currency": lambda r: r.currency,
    "product": lambda r: r.product,
    "strategy": lambda r: r.strategy,
    "counterparty": lambda r: r.counterparty,
    "netting_set": lambda r: r.netting_set,
    "model": lambda r: Status.NOT_PRICED,
}
GROUPINGS = tuple(_BY_VALUATION)


def priced(outcome: Outcome) -> list[Valuation]:
    """The valuations that carry a number, in book order."""
    return [v for v in outcome.valuations if v.status is not Status.NOT_PRICED]


def book_total(outcome: Outcome) -> BookTotal:
    """The headline of the book."""
    rates = Rates.from_outcome(outcome)
    whole = _total("book", outcome.facts.book_name, outcome.valuations, outcome.refusals, rates)
    valuations = priced(outcome)
    degrees = pooled_degrees_of_freedom(
        [v.reporting_standard_error for v in valuations], [v.degrees_of_freedom for v in valuations]
    )
    reach = sampling_quantile(degrees, 1.0 - COVERAGE) * whole.standard_error if degrees else 0.0
    return BookTotal(
        total=whole,
        lower=whole.value - reach,
        upper=whole.value + reach,
        unsampled_error=total(rates.reporting(_unsampled_error(v), v.currency) for v in valuations),
        unpaid_premium=total(rates.reporting(v.unpaid_premium, v.currency) for v in valuations),
    )


def _unsampled_error(v: Valuation) -> float:
    """The part of the half-width of the value's interval that its standard error does not cover."""
    half = (v.upper - v.lower) / 2.0
    if not v.standard_error:
        return half
    if v.interval is not Interval.CERTIFIED:
        return 0.0
    return max(0.0, half - sampling_quantile(v.degrees_of_freedom, 1.0 - COVERAGE) * v.standard_error)


def group_totals(outcome: Outcome, grouping: str) -> list[Total]:
    """The totals of one of :data:`GROUPINGS`, largest absolute value first; groups without a price come last."""
    rates = Rates.from_outcome(outcome)
    members: dict[str, tuple[list[Valuation], list[Refusal]]] = {}
    for valuation in outcome.valuations:
        members.setdefault(_BY_VALUATION[grouping](valuation), ([], []))[0].append(valuation)
    for refusal in outcome.refusals:
        members.setdefault(_BY_REFUSAL[grouping](refusal), ([], []))[1].append(refusal)
    totals = [_total(grouping, group, vs, rs, rates) for group, (vs, rs) in members.items()]
    return sorted(totals, key=lambda t: (math.isnan(t.value), 0.0 if math.isnan(t.value) else -abs(t.value), t.group))


def _total(
    grouping: str, group: str, valuations: Sequence[Valuation], refusals: Sequence[Refusal], rates: Rates
) -> Total:
    numbers = [v for v in valuations if v.status is not Status.NOT_PRICED]
    currencies = {v.currency for v in numbers}
    own = numbers if len(currencies) == 1 else []
    compared = [v for v in numbers if v.model_difference is not None]
    return Total(
        grouping=grouping,
        group=group,
        trades=len(valuations) + len(refusals),
        priced=sum(v.status is Status.PRICED for v in numbers),
        precision_not_reached=sum(v.status is Status.PRECISION_NOT_REACHED for v in numbers),
        disputed=sum(v.status is Status.DISPUTED for v in numbers),
        failing_surface=sum(v.status is Status.FAILING_SURFACE for v in numbers),
        not_priced=len(valuations) - len(numbers) + len(refusals),
        gross_notional=total(rates.reporting(abs(v.notional), v.currency) for v in numbers),
        own_currency=currencies.pop() if own else "",
        own_value=total(v.value for v in own),
        own_standard_error=quadrature(v.standard_error for v in own),
        value=total(v.reporting_value for v in numbers),
        standard_error=quadrature(v.reporting_standard_error for v in numbers),
        model_difference=total(rates.reporting(v.model_difference or 0.0, v.currency) for v in compared),
        model_difference_standard_error=quadrature(
            rates.reporting(v.model_difference_standard_error or 0.0, v.currency) for v in compared
        ),
        without_model_difference=len(numbers) - len(compared),
    )
