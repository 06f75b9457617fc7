"""Curves from deposits and overnight-indexed swaps."""

import math
from concurrent.futures import ThreadPoolExecutor
from datetime import date

import pytest
import QuantLib as ql

from pricer.market.calendars import to_quantlib
from pricer.market.curves import DiscountCurve
from pricer.market.evaluation_date import evaluation_date
from pricer.market.quoted_curves import CONVENTIONS, QuoteKind, RateQuote, reprice
from tests.unit.markets import TODAY

DEPOSIT, SWAP = QuoteKind.DEPOSIT, QuoteKind.OVERNIGHT_SWAP
DEPOSIT_TENORS, SWAP_TENORS = ("1D", "1W", "1M", "3M"), ("6M", "1Y", "18M", "2Y", "5Y", "10Y", "30Y")
QUOTES = [
    *(RateQuote(DEPOSIT, tenor, 0.020 + 0.0001 * i) for i, tenor in enumerate(DEPOSIT_TENORS)),
    *(RateQuote(SWAP, tenor, 0.021 + 0.0004 * i) for i, tenor in enumerate(SWAP_TENORS)),
]


def curve(quotes=QUOTES, currency="EUR", day=TODAY):
    return DiscountCurve.from_quotes("C", currency, "", day, quotes)


def refused(*args, **kwargs):
    with pytest.raises(ValueError) as caught:
        curve(*args, **kwargs)
    return str(caught.value)


@pytest.mark.parametrize("currency", CONVENTIONS)
def test_every_quote_is_repriced_by_the_curves_own_discount_factors(currency):
    found = curve(currency=currency)
    repriced = reprice(currency, TODAY, QUOTES, found.discount_factor)
    assert [quote.quote for quote in repriced] == QUOTES
    assert max(abs(quote.error) for quote in repriced) < 1e-10
    assert found.dates == tuple(quote.last_date for quote in repriced)


@pytest.mark.parametrize("currency", CONVENTIONS)
def test_quantlibs_swaps_on_our_curve_are_worth_nothing(currency):
    """The swap built day by day (no shortcut over the compounding), discounted and projected on our factors."""
    found, convention = curve(currency=currency), CONVENTIONS[currency]
    with evaluation_date(TODAY):
        days = [TODAY, *found.dates]
        factors = ql.DiscountCurve(
            [to_quantlib(day) for day in days], [found.discount_factor(day) for day in days], ql.Actual365Fixed()
        )
        handle = ql.YieldTermStructureHandle(factors)
        index = type(convention.index())(handle)
        for quote in QUOTES[4:]:
            swap = ql.MakeOIS(
                ql.Period(quote.tenor), index, quote.rate, settlementDays=convention.spot_days,
                paymentLag=convention.payment_days, telescopicValueDates=False,
                pricingEngine=ql.DiscountingSwapEngine(handle),
            )  # fmt: skip
            assert swap.fairRate() == pytest.approx(quote.rate, abs=1e-10), quote


def test_an_overnight_deposit_begins_tonight_and_others_at_spot():
    overnight, week = (curve([RateQuote(DEPOSIT, tenor, 0.02)]) for tenor in ("1D", "1W"))
    assert overnight.dates == (date(2026, 12, 1),)
    assert overnight.discount_factor(date(2026, 12, 1)) == pytest.approx(1 / (1 + 0.02 / 360), rel=1e-14)
    assert week.dates == (date(2026, 12, 9),)  # a week from 2 December, two days after tonight
    ratio = week.discount_factor(date(2026, 12, 2)) / week.discount_factor(date(2026, 12, 9))
    assert ratio == pytest.approx(1 + 0.02 * 7 / 360, rel=1e-12)


def test_a_one_year_swap_by_hand():
    """SONIA: starts and pays without delay, one payment, ACT/365F: the rate is the growth of 1 over the year."""
    found = curve([RateQuote(SWAP, "1Y", 0.04)], "GBP", date(2026, 11, 30))
    assert found.discount_factor(date(2027, 11, 30)) == pytest.approx(1 / 1.04, rel=1e-12)


def test_the_order_of_the_quotes_does_not_matter():
    assert curve(QUOTES[::-1]) == curve()


def test_beyond_the_last_quote_the_curve_says_so():
    found = curve()
    assert not found.is_extrapolated(found.last_date)
    assert found.is_extrapolated(date(2057, 1, 1))
    assert found.calendar == "TARGET"


def test_the_evaluation_date_is_put_back_and_serves_one_thread_at_a_time():
    settings = ql.Settings.instance()
    settings.evaluationDate = ql.Date(3, 2, 2025)
    try:
        days = [date(2026, 11, 27), date(2026, 11, 30)] * 8
        with ThreadPoolExecutor(4) as pool:
            found = list(pool.map(lambda day: curve(day=day), days))
        assert found == [curve(day=day) for day in days]
        assert settings.evaluationDate == ql.Date(3, 2, 2025)
        refused([RateQuote(SWAP, "5Y", -5.0)])
        assert settings.evaluationDate == ql.Date(3, 2, 2025)
    finally:
        settings.resetEvaluationDate()
    curve()
    assert settings.evaluationDate == ql.Date.todaysDate()


def test_what_cannot_make_a_curve_is_told():
    assert refused(currency="SEK") == (
        "curve C: no conventions for quotes in SEK are known (only EUR, USD, GBP, JPY, CHF): give zero rates or "
        "discount factors"
    )
    assert refused([]) == "curve C: no quotes are given"
    assert refused([RateQuote(SWAP, "1Y", 0.02), RateQuote(SWAP, "12M", 0.021)]) == (
        "curve C: the 1Y overnight swap and the 12M overnight swap both end on 2027-12-03: keep one"
    )
    assert refused([RateQuote(SWAP, "1Y", 0.02), RateQuote(SWAP, "5Y", 5.0)]) == (
        "curve C: no discount factor satisfies the 5Y overnight swap at 5 after the quotes before it"
    )
    with pytest.raises(ValueError, match='"soon" is not a tenor'):
        RateQuote(SWAP, "soon", 0.02)
    with pytest.raises(ValueError, match="the rate of the 1Y overnight swap must be a finite number; got nan"):
        RateQuote(SWAP, "1Y", math.nan)
