"""Observation schedules against QuantLib's own and against NumPy's business days."""

from datetime import date

import numpy as np
import pytest
import QuantLib as ql

from pricer.market.calendars import from_quantlib, is_business_day, to_quantlib
from pricer.market.schedules import ScheduleRule, Stub, joint, period_dates, schedule

START, END = date(2026, 1, 15), date(2027, 2, 28)


def quarterly(stub, **terms):
    return ScheduleRule("3M", "NONE", "unadjusted", stub, **terms)


@pytest.mark.parametrize(
    ("stub", "between"),
    [
        (Stub.SHORT_FIRST, ["2026-02-28", "2026-05-28", "2026-08-28", "2026-11-28"]),
        (Stub.LONG_FIRST, ["2026-05-28", "2026-08-28", "2026-11-28"]),
        (Stub.SHORT_LAST, ["2026-04-15", "2026-07-15", "2026-10-15", "2027-01-15"]),
        (Stub.LONG_LAST, ["2026-04-15", "2026-07-15", "2026-10-15"]),
    ],
)
def test_a_stub_lies_where_it_should(stub, between):
    """Counted by hand in threes of months."""
    assert period_dates(START, END, quarterly(stub)) == (START, *map(date.fromisoformat, between), END)


@pytest.mark.parametrize("stub", Stub)
def test_without_an_odd_period_all_stubs_agree(stub):
    days = period_dates(START, date(2027, 1, 15), quarterly(stub))
    assert days == tuple(date(2026 + m // 12, m % 12 + 1, 15) for m in (0, 3, 6, 9, 12))


@pytest.mark.parametrize("stub", Stub)
def test_a_span_shorter_than_two_periods_is_one_or_two_of_them(stub):
    days = period_dates(START, date(2026, 5, 20), quarterly(stub))
    assert len(days) == (2 if stub in (Stub.LONG_FIRST, Stub.LONG_LAST) else 3)
    assert period_dates(START, date(2026, 2, 20), quarterly(stub)) == (START, date(2026, 2, 20))


@pytest.mark.parametrize("end_of_month", [False, True])
@pytest.mark.parametrize("convention", ["following", "modified following", "preceding"])
@pytest.mark.parametrize("frequency", ["1M", "3M", "1Y", "2W"])
def test_rolled_dates_are_those_of_quantlib_on_the_joint_calendar(frequency, convention, end_of_month):
    names = {"following": ql.Following, "modified following": ql.ModifiedFollowing, "preceding": ql.Preceding}
    start, end = date(2024, 1, 31), date(2028, 1, 31)
    calendar = ql.JointCalendar(ql.TARGET(), ql.UnitedStates(ql.UnitedStates.NYSE))
    want = ql.MakeSchedule(
        effectiveDate=to_quantlib(start),
        terminationDate=to_quantlib(end),
        tenor=ql.Period(frequency),
        calendar=calendar,
        convention=names[convention],
        terminalDateConvention=names[convention],
        rule=ql.DateGeneration.Backward,
        endOfMonth=end_of_month,
    )
    rule = ScheduleRule(frequency, "TARGET+NYSE", convention, end_of_month=end_of_month)
    assert period_dates(start, end, rule) == tuple(map(from_quantlib, want))


def test_every_date_is_a_business_day_of_both_calendars_and_pays_on_one():
    rule = ScheduleRule("1M", "XETRA+NYSE", payment_lag_days=3, payment_calendar="TARGET")
    for observation in schedule(START, END, rule):
        assert is_business_day("XETRA", observation.day)
        assert is_business_day("NYSE", observation.day)
        assert is_business_day("TARGET", observation.payment_date)


def test_payments_follow_so_many_business_days_later_as_numpy_counts_them():
    rule = ScheduleRule("1M", "WEEKENDS", payment_lag_days=3)
    for observation in schedule(START, END, rule):
        assert observation.payment_date == np.busday_offset(observation.day, 3).astype(date)


def test_a_daily_schedule_is_every_business_day_after_the_start():
    days = [observation.day for observation in schedule(START, END, ScheduleRule("1D", "WEEKENDS"))]
    assert len(days) == np.busday_count("2026-01-16", "2027-03-01")  # NumPy leaves the end out
    assert (days[0], days[-1]) == (date(2026, 1, 16), date(2027, 2, 26))


@pytest.mark.parametrize(
    ("stub", "want"),
    [(Stub.SHORT_FIRST, (1, 2, 7, 12)), (Stub.SHORT_LAST, (1, 6, 11, 12)), (Stub.LONG_LAST, (1, 6, 12))],
)
def test_every_fifth_business_day_is_counted_from_the_end_away_from_the_stub(stub, want):
    # 1 June 2026 is a Monday; business days 1 to 12 end on Tuesday 16 June.
    business_days = [np.busday_offset("2026-06-01", k).astype(date) for k in range(12)]
    days = period_dates(date(2026, 6, 1), date(2026, 6, 16), ScheduleRule("5D", "WEEKENDS", stub=stub))
    assert tuple(business_days.index(day) + 1 for day in days) == want


def test_a_joint_calendar_names_each_once():
    assert joint("TARGET", "NYSE+TARGET", "LSE") == "TARGET+NYSE+LSE"


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: period_dates(END, START, quarterly(Stub.SHORT_FIRST)), "does not lie after"),
        (lambda: period_dates(START, END, ScheduleRule("quarterly", "TARGET")), "not a tenor"),
        (lambda: period_dates(START, END, ScheduleRule("0M", "TARGET")), "above zero"),
        (lambda: period_dates(START, END, ScheduleRule("3M", "MOON")), "not a calendar"),
        (lambda: period_dates(START, END, ScheduleRule("3M", "TARGET", "sideways")), "not a roll convention"),
        (lambda: period_dates(date(2026, 4, 3), date(2026, 4, 6), ScheduleRule("1D", "TARGET")), "no business day"),
        (lambda: ScheduleRule("3M", "TARGET", payment_lag_days=-1), "from 0 up"),
    ],
)
def test_rules_that_make_no_schedule_are_refused(make, message):
    with pytest.raises(ValueError, match=message):
        make()
