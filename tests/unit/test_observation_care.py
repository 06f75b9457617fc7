"""Observations on ex dates and on holidays."""

from datetime import date, timedelta

from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.observation_care import observation_care
from pricer.market.underlying import Underlying

QUARTERS = (date(2026, 3, 16), date(2026, 6, 15), date(2026, 9, 14))


def share(*, cash=(), proportional=(), calendar="TARGET"):
    dividends = Dividends(
        cash=tuple(CashDividend(day, 1.25) for day in cash),
        proportional=tuple(ProportionalDividend(day, 0.021) for day in proportional),
    )
    return Underlying("VESKA", "EUR", 50.0, calendar, dividends=dividends)


def found(days, underlying):
    return [issue.found for issue in observation_care([days], [underlying])]


def test_an_observation_on_an_ex_date_is_told_with_its_dividend():
    underlying = share(cash=QUARTERS[1:2], proportional=QUARTERS[2:])
    assert found(QUARTERS, underlying) == [
        "observations on ex dates: 2026-06-15 of VESKA (1.25 EUR), 2026-09-14 of VESKA (2.10 % of its price)"
    ]


def test_ex_dates_between_the_observations_are_no_matter():
    assert found(QUARTERS, share(cash=[day + timedelta(days=1) for day in QUARTERS])) == []


def test_a_daily_series_meets_its_ex_dates_in_silence():
    days = [day for day in (QUARTERS[0] + timedelta(days=i) for i in range(100)) if day.weekday() < 5]
    assert found(days, share(cash=QUARTERS[1:], calendar="WEEKENDS")) == []


def test_a_daily_series_beside_quarterly_dates_hides_none_of_these():
    daily = [day for day in (QUARTERS[0] + timedelta(days=i) for i in range(100)) if day.weekday() < 5]
    (issue,) = observation_care([daily, QUARTERS], [share(cash=QUARTERS[1:2], calendar="WEEKENDS")])
    assert issue.found == "observations on ex dates: 2026-06-15 of VESKA (1.25 EUR)"


def test_a_daily_series_that_begins_on_an_ex_date_meets_it_in_silence():
    days = [QUARTERS[1] + timedelta(days=i) for i in range(4)]
    assert found(days, share(cash=QUARTERS[1:2])) == []


def test_days_without_trading_are_told_together_with_the_calendars_that_are_closed():
    # Good Friday, Labour Day, Christmas Day and New Year's Day
    days = (date(2026, 4, 3), date(2026, 5, 1), date(2026, 12, 25), date(2027, 1, 1))
    assert found(days, share()) == [
        "observations on days without trading: 2026-04-03 (TARGET), 2026-05-01 (TARGET), 2026-12-25 (TARGET) and 1 more"
    ]
    both = [share(), share(calendar="LSE")]
    (issue,) = observation_care([(date(2026, 5, 1), date(2026, 5, 4), date(2026, 12, 25))], both)
    assert issue.found == (
        "observations on days without trading: 2026-05-01 (TARGET), 2026-05-04 (LSE), 2026-12-25 (TARGET and LSE)"
    )
