"""Discount factors from quoted deposits and overnight-indexed swaps, bootstrapped by QuantLib.

Conventions by currency (common practice), in :data:`CONVENTIONS`: overnight index with its
day count and calendar, days from trade to spot, days from the end of a swap period to its
payment. Swaps pay yearly (once, if shorter), modified following, both legs in the index's day
count, as do deposits. A deposit of one day begins tonight, everything else at spot. On a day
without business, quotes are those of the next business day; until then the first rate accrues.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum
from itertools import pairwise
from types import MappingProxyType
from typing import Any

import QuantLib as ql  # noqa: N813 - the short name of QuantLib's own examples

from pricer.market.calendars import day_counter, from_quantlib, to_period, to_quantlib
from pricer.market.evaluation_date import evaluation_date

#: A curve whose own discount factors miss a quoted rate by more than this is refused.
REPRICING_TOLERANCE = 1e-10


class QuoteKind(StrEnum):
    """What is quoted by a rate."""

    DEPOSIT = "deposit"
    OVERNIGHT_SWAP = "overnight swap"  # fixed against the compounded overnight rate


@dataclass(frozen=True, slots=True)
class RateQuote:
    """A simple rate per year of the currency's money market day count, e.g. 0.021 for 2.1 %."""

    kind: QuoteKind
    tenor: str
    rate: float

    def __post_init__(self) -> None:
        to_period(self.tenor)
        if not math.isfinite(self.rate):
            raise ValueError(f"the rate of the {self} must be a finite number; got {self.rate}")

    def __str__(self) -> str:
        return f"{self.tenor} {self.kind}"


@dataclass(frozen=True, slots=True)
class Convention:
    """How a currency's overnight market trades; ``index`` makes QuantLib's overnight index."""

    index: Callable[[], Any]
    spot_days: int
    payment_days: int


CONVENTIONS: Mapping[str, Convention] = MappingProxyType(
    {
        "EUR": Convention(ql.Estr, 2, 1),
        "USD": Convention(ql.Sofr, 2, 2),
        "GBP": Convention(ql.Sonia, 0, 0),
        "JPY": Convention(getattr(ql, "Tonar", None) or ql.Tona, 2, 2),  # renamed in QuantLib 1.39
        "CHF": Convention(ql.Saron, 2, 2),
    }
)


@dataclass(frozen=True, slots=True)
class Period:
    """One accrual period: its ends, when it is paid, and its length in years of the index's day count."""

    start: date
    end: date
    payment: date
    years: float


@dataclass(frozen=True, slots=True)
class Instrument:
    """What a quote obliges to; ``last_date`` is the last date on which it depends."""

    quote: RateQuote
    periods: tuple[Period, ...]
    last_date: date

    def par_rate(self, discount_factor: Callable[[date], float]) -> float:
        """The rate at which the instrument is worth nothing.

        Overnight rates compounded over a period grow 1 to ``P(start)/P(end)``, whatever the
        days between, because projection and discounting use one curve.
        """
        floating = fixed = 0.0
        for period in self.periods:
            paid = discount_factor(period.payment)
            floating += (discount_factor(period.start) / discount_factor(period.end) - 1.0) * paid
            fixed += period.years * paid
        return floating / fixed


@dataclass(frozen=True, slots=True)
class RepricedQuote:
    """A quote beside the rate that a curve gives for it; ``error`` is the curve's rate less the quoted."""

    quote: RateQuote
    last_date: date
    rate: float

    @property
    def error(self) -> float:
        return self.rate - self.quote.rate


@dataclass(frozen=True, slots=True)
class Bootstrap:
    """Discount factors at the quotes' last dates, in their order, and the instruments."""

    dates: tuple[date, ...]
    discount_factors: tuple[float, ...]
    instruments: tuple[Instrument, ...]


def first_day(currency: str, valuation_date: date) -> date:
    """The day from which quotes in ``currency`` count: the valuation date, or the next business day of its market."""
    if currency not in CONVENTIONS:
        return valuation_date
    calendar = CONVENTIONS[currency].index().fixingCalendar()
    return from_quantlib(calendar.adjust(to_quantlib(valuation_date), ql.Following))


def bootstrap(currency: str, valuation_date: date, quotes: Sequence[RateQuote], day_count: str) -> Bootstrap:
    """Discount factors that reprice every quote, log-linear in years of ``day_count`` in between.

    Raises ValueError for a currency without conventions, no quotes, two quotes that end on the
    same date, and quotes that no curve satisfies.
    """
    if not quotes:
        raise ValueError("no quotes are given")
    with evaluation_date(first_day(currency, valuation_date)):
        made = [(_helper(currency, quote), quote) for quote in quotes]
        instruments = sorted(
            (_instrument(helper, currency, quote) for helper, quote in made), key=lambda i: i.last_date
        )
        for before, after in pairwise(instruments):
            if before.last_date == after.last_date:
                raise ValueError(f"the {before.quote} and the {after.quote} both end on {after.last_date}: keep one")
        made.sort(key=lambda pair: pair[0].pillarDate())
        start, counter = to_quantlib(valuation_date), day_counter(day_count)
        try:
            nodes = _nodes(start, [helper for helper, _ in made], counter)
        except RuntimeError as error:
            raise ValueError(_culprit(start, made, counter)) from error
    return Bootstrap(tuple(day for day, _ in nodes), tuple(factor for _, factor in nodes), tuple(instruments))


def reprice(
    currency: str, valuation_date: date, quotes: Sequence[RateQuote], discount_factor: Callable[[date], float]
) -> tuple[RepricedQuote, ...]:
    """Each quote beside the rate that ``discount_factor`` gives for it, by last date."""
    with evaluation_date(first_day(currency, valuation_date)):
        instruments = [_instrument(_helper(currency, quote), currency, quote) for quote in quotes]
    return repriced(instruments, discount_factor)


def repriced(instruments: Sequence[Instrument], discount_factor: Callable[[date], float]) -> tuple[RepricedQuote, ...]:
    """Each instrument's quote beside the rate that ``discount_factor`` gives for it, by last date."""
    ordered = sorted(instruments, key=lambda instrument: instrument.last_date)
    return tuple(RepricedQuote(i.quote, i.last_date, i.par_rate(discount_factor)) for i in ordered)


def _nodes(start: Any, helpers: Sequence[Any], counter: Any) -> list[tuple[date, float]]:
    nodes = ql.PiecewiseLogLinearDiscount(start, helpers, counter).nodes()
    return [(from_quantlib(day), float(factor)) for day, factor in nodes][1:]


def _culprit(start: Any, made: Sequence[tuple[Any, RateQuote]], counter: Any) -> str:
    """The first quote, by last date, that cannot follow those before it."""
    for count, (_, quote) in enumerate(made, 1):
        try:
            _nodes(start, [helper for helper, _ in made[:count]], counter)
        except RuntimeError:
            return f"no discount factor satisfies the {quote} at {quote.rate:g} after the quotes before it"
    return "no discount factors satisfy the quotes together"


def _helper(currency: str, quote: RateQuote) -> Any:
    if currency not in CONVENTIONS:
        raise ValueError(
            f"no conventions for quotes in {currency} are known (only {', '.join(CONVENTIONS)}): "
            "give zero rates or discount factors"
        )
    convention, tenor = CONVENTIONS[currency], to_period(quote.tenor)
    index = convention.index()
    if quote.kind is QuoteKind.DEPOSIT:
        days, months = tenor.units() in (ql.Days, ql.Weeks), tenor.units() in (ql.Months, ql.Years)
        overnight = tenor.units() == ql.Days and tenor.length() == 1
        return ql.DepositRateHelper(
            quote.rate,
            tenor,
            0 if overnight else convention.spot_days,
            index.fixingCalendar(),
            ql.Following if days else ql.ModifiedFollowing,
            months,  # from the last business day of a month to the last of another
            index.dayCounter(),
        )
    return ql.OISRateHelper(
        convention.spot_days,
        tenor,
        quote.rate,
        index,
        telescopicValueDates=True,
        paymentLag=convention.payment_days,
        paymentFrequency=ql.Annual,
        paymentCalendar=index.fixingCalendar(),
    )


def _instrument(helper: Any, currency: str, quote: RateQuote) -> Instrument:
    last = from_quantlib(helper.pillarDate())
    if quote.kind is QuoteKind.DEPOSIT:
        start, end = helper.earliestDate(), helper.maturityDate()
        years = CONVENTIONS[currency].index().dayCounter().yearFraction(start, end)
        first, final = from_quantlib(start), from_quantlib(end)
        return Instrument(quote, (Period(first, final, final, float(years)),), last)
    coupons = [ql.as_coupon(flow) for flow in helper.swap().fixedLeg()]
    periods = tuple(
        Period(
            from_quantlib(coupon.accrualStartDate()),
            from_quantlib(coupon.accrualEndDate()),
            from_quantlib(coupon.date()),
            float(coupon.accrualPeriod()),
        )
        for coupon in coupons
    )
    return Instrument(quote, periods, last)
