"""Discount curves against QuantLib's and by hand."""

import math
import pickle
from datetime import date, timedelta

import pytest
import QuantLib as ql

from pricer.market.calendars import DAY_COUNTS
from pricer.market.curves import DiscountCurve

TODAY = date(2026, 11, 30)
DATES = [date(2026, 12, 7), date(2027, 2, 26), date(2027, 11, 30), date(2029, 11, 30), date(2036, 11, 28)]
ZEROS = [0.0192, 0.0195, 0.0204, -0.0025, 0.0241]


def from_zeros(day_count="ACT/365F", dates=DATES, zeros=ZEROS):
    return DiscountCurve.from_zero_rates("EUR-STD", "EUR", "", TODAY, dates, zeros, day_count, "TARGET")


def from_factors(factors, dates=DATES):
    return DiscountCurve.from_discount_factors("EUR-STD", "EUR", "", TODAY, dates, factors)


def ql_dates(days):
    return [ql.Date(d.day, d.month, d.year) for d in days]


@pytest.mark.parametrize("day_count", DAY_COUNTS)
def test_discount_factors_are_those_of_quantlib_between_at_and_beyond_the_quotes(day_count):
    ours = from_zeros(day_count)
    nodes = [1.0, *(ours.discount_factor(day) for day in DATES)]
    theirs = ql.DiscountCurve(ql_dates([TODAY, *DATES]), nodes, DAY_COUNTS[day_count]())
    theirs.enableExtrapolation()
    for days in (0, 1, 6, 7, 8, 31, 87, 88, 89, 364, 365, 366, 800, 1096, 3000, 3651, 3652, 5000, 9000):
        day = TODAY + timedelta(days=days)
        assert ours.discount_factor(day) == pytest.approx(theirs.discount(ql_dates([day])[0]), rel=1e-12)


@pytest.mark.parametrize("day_count", DAY_COUNTS)
def test_zero_rates_are_read_as_quantlib_reads_them(day_count):
    ours = from_zeros(day_count)
    theirs = ql.ZeroCurve(
        ql_dates([TODAY, *DATES]), [ZEROS[0], *ZEROS], DAY_COUNTS[day_count](), ql.NullCalendar(), ql.Linear(),
        ql.Continuous,
    )  # fmt: skip
    for day, zero in zip(DATES, ZEROS, strict=True):
        assert ours.discount_factor(day) == pytest.approx(theirs.discount(ql_dates([day])[0]), rel=1e-12)
        assert ours.zero_rate(day) == pytest.approx(zero, abs=1e-14)


def test_both_ways_of_quoting_give_one_curve():
    zeros = from_zeros()
    factors = from_factors([zeros.discount_factor(day) for day in DATES])
    with_today = from_factors([1.0, *(zeros.discount_factor(day) for day in DATES)], [TODAY, *DATES])
    for day in (TODAY, date(2028, 1, 1), date(2040, 1, 1)):
        assert factors.discount_factor(day) == pytest.approx(zeros.discount_factor(day), rel=1e-14)
        assert with_today.discount_factor(day) == factors.discount_factor(day)


def test_a_one_point_curve_is_flat():
    flat = from_zeros(dates=[date(2027, 11, 30)], zeros=[0.03])
    assert flat.discount_factor(date(2027, 5, 31)) == pytest.approx(math.exp(-0.03 * 182 / 365), rel=1e-15)
    assert flat.discount_factor(date(2036, 11, 30)) == pytest.approx(math.exp(-0.03 * 3653 / 365), rel=1e-14)
    assert flat.zero_rate(TODAY) == pytest.approx(0.03)


def test_the_forward_rate_beyond_the_last_date_is_the_last_one():
    ours = from_zeros()
    last = ours.last_date

    def forward(start, end):
        return math.log(ours.discount_factor(start) / ours.discount_factor(end)) * 365 / (end - start).days

    assert forward(last, date(2060, 1, 1)) == pytest.approx(forward(date(2029, 11, 30), last), rel=1e-12)


def test_the_curve_says_where_it_ends():
    ours = from_zeros()
    assert ours.last_date == DATES[-1]
    assert not ours.is_extrapolated(DATES[-1])
    assert ours.is_extrapolated(DATES[-1] + timedelta(days=1))


def test_today_is_worth_one_and_yesterday_nothing_can_be_said():
    ours = from_zeros()
    assert ours.discount_factor(TODAY) == 1.0
    with pytest.raises(ValueError) as caught:
        ours.discount_factor(date(2026, 11, 29))
    assert str(caught.value) == (
        "curve EUR-STD: 2026-11-29 lies before the valuation date 2026-11-30 and has no discount factor"
    )


@pytest.mark.parametrize(
    ("dates", "zeros", "message"),
    [
        ([], [], "no date after the valuation date 2026-11-30"),
        ([DATES[0]], ZEROS, "1 dates for 5 values"),
        ([TODAY], [0.01], "date 2026-11-30 is not after the valuation date 2026-11-30"),
        ([DATES[1], DATES[0]], [0.01, 0.01], "dates must increase; 2026-12-07 follows 2027-02-26"),
        ([DATES[0], DATES[0]], [0.01, 0.01], "dates must increase; 2026-12-07 follows 2026-12-07"),
        ([DATES[0]], [math.nan], "the value of 2026-12-07 is not a finite number"),
    ],
)
def test_bad_quotes_are_refused(dates, zeros, message):
    with pytest.raises(ValueError) as caught:
        from_zeros(dates=dates, zeros=zeros)
    assert str(caught.value) == f"curve EUR-STD: {message}"


def test_bad_discount_factors_are_refused():
    with pytest.raises(ValueError, match="the discount factor of 2026-12-07 must be above 0; got 0"):
        from_factors([0.0], DATES[:1])
    with pytest.raises(ValueError, match=r"on the valuation date 2026-11-30 must be 1; got 0\.99"):
        from_factors([0.99, 0.98], [TODAY, DATES[0]])


def test_dates_that_a_day_count_cannot_tell_apart_are_refused():
    with pytest.raises(ValueError, match="2027-01-31 adds no time to the date before it under 30/360"):
        from_zeros("30/360", [date(2027, 1, 30), date(2027, 1, 31)], [0.02, 0.02])


def test_a_curve_travels_to_another_process_unchanged():
    ours = from_zeros()
    assert pickle.loads(pickle.dumps(ours)) == ours
