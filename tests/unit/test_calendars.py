"""Business days, tenors and year fractions."""

from datetime import date, timedelta

import numpy as np
import pytest
import QuantLib as ql

from pricer.market import calendars
from pricer.market.calendars import add_tenor, advance, is_business_day, roll, year_fraction

YEAR_2026 = [date(2026, 1, 1) + timedelta(days=i) for i in range(365)]


@pytest.mark.parametrize(
    ("calendar", "day", "open_"),
    [
        # European Central Bank, "TARGET working days": closed on Good Friday, Easter Monday, 1 May,
        # 25 and 26 December, 1 January (from memory; Easter 2026 is 5 April).
        ("TARGET", date(2026, 4, 3), False),
        ("TARGET", date(2026, 4, 6), False),
        ("TARGET", date(2026, 5, 1), False),
        ("TARGET", date(2026, 12, 25), False),
        ("TARGET", date(2026, 5, 14), True),  # Ascension is a working day
        # Federal Reserve: a Saturday holiday closes no Friday (4 July 2026 is a Saturday);
        # the exchange closes on Friday 3 July 2026 instead (both from memory).
        ("US", date(2026, 7, 3), True),
        ("NYSE", date(2026, 7, 3), False),
        # Banks close on Columbus Day and work on Good Friday; the exchange the other way round.
        ("US", date(2026, 10, 12), False),
        ("NYSE", date(2026, 10, 12), True),
        ("US", date(2026, 4, 3), True),
        ("NYSE", date(2026, 4, 3), False),
        ("UK", date(2026, 8, 31), False),  # summer bank holiday, last Monday in August
        ("JP", date(2026, 4, 29), False),  # Showa Day
        ("WEEKENDS", date(2026, 12, 25), True),
        ("NONE", date(2026, 12, 26), True),
    ],
)
def test_published_holidays_are_known(calendar, day, open_):
    assert is_business_day(calendar, day) is open_


def test_every_calendar_can_be_built_and_closes_somewhere_in_the_year():
    for name in calendars.CALENDARS:
        closed = sum(not is_business_day(name, day) for day in YEAR_2026)
        assert closed == 0 if name == "NONE" else 104 <= closed <= 130, name


def test_a_joint_calendar_is_open_when_all_are():
    for day in YEAR_2026:
        both = is_business_day("TARGET", day) and is_business_day("US", day)
        assert is_business_day("TARGET+US", day) is both


def test_weekends_advance_and_roll_as_numpy_counts_them():
    """numpy's busday_offset is independent of QuantLib."""
    for day in YEAR_2026[:40]:
        for n in (1, 2, 5, -1, -3):
            # QuantLib counts from the day itself, so from a weekend the first business day is number 1.
            rule = "backward" if n > 0 else "forward"
            expected = np.busday_offset(np.datetime64(day), n, roll=rule).astype(date)
            assert advance("WEEKENDS", day, n) == expected
        for convention, name in (
            ("following", "forward"), ("preceding", "backward"),
            ("modified following", "modifiedfollowing"), ("modified preceding", "modifiedpreceding"),
        ):  # fmt: skip
            assert roll("WEEKENDS", day, convention) == np.busday_offset(np.datetime64(day), 0, roll=name).astype(date)


@pytest.mark.parametrize("name", ["TARGET", "NYSE", "JP", "TARGET+US"])
def test_advance_and_tenors_agree_with_quantlib(name):
    parts = [calendars.CALENDARS[part]() for part in name.split("+")]
    reference = parts[0] if len(parts) == 1 else ql.JointCalendar(*parts)
    for day in YEAR_2026[::7]:
        start = ql.Date(day.day, day.month, day.year)
        assert advance(name, day, 2) == reference.advance(start, ql.Period("2D")).to_date()
        for tenor in ("1D", "1W", "3M", "10Y"):
            expected = reference.advance(start, ql.Period(tenor), ql.ModifiedFollowing).to_date()
            assert add_tenor(name, day, tenor) == expected


def test_two_business_days_over_easter_by_hand():
    assert advance("TARGET", date(2026, 4, 2), 2) == date(2026, 4, 8)  # Thursday; closed Friday to Monday
    assert advance("TARGET", date(2026, 4, 4), 0) == date(2026, 4, 7)


def test_modified_following_stays_in_the_month():
    # 28 February 2026 is a Saturday; following would be 2 March.
    assert add_tenor("TARGET", date(2025, 11, 28), "3M") == date(2026, 2, 27)
    assert add_tenor("TARGET", date(2025, 11, 28), "3M", "following") == date(2026, 3, 2)


@pytest.mark.parametrize("tenor", ["3m", " 3M ", "3 M"])
def test_tenors_forgive_case_and_blanks(tenor):
    assert add_tenor("NONE", date(2026, 1, 15), tenor) == date(2026, 4, 15)


@pytest.mark.parametrize("tenor", ["", "M3", "3", "1.5Y", "-1M", "3Q", "3M6"])
def test_a_bad_tenor_is_refused_with_the_way_to_write_one(tenor):
    with pytest.raises(ValueError) as caught:
        add_tenor("TARGET", date(2026, 1, 15), tenor)
    assert str(caught.value) == (
        f'"{tenor}" is not a tenor: write a whole number and D, W, M or Y for days, weeks, months or years, e.g. 3M'
    )


def test_unknown_names_are_refused_with_the_known_ones():
    with pytest.raises(ValueError, match=r'"TARGET\+MOON" is not a calendar; known are NONE, WEEKENDS, TARGET, US'):
        is_business_day("TARGET+MOON", date(2026, 1, 1))
    with pytest.raises(ValueError, match=r'"ACT/364" is not a day count; known are ACT/365F, ACT/360, 30/360, ACT/ACT'):
        year_fraction(date(2026, 1, 1), date(2027, 1, 1), "ACT/364")
    with pytest.raises(ValueError, match='"sideways" is not a roll convention'):
        roll("TARGET", date(2026, 1, 1), "sideways")
    with pytest.raises(ValueError, match='no settlement calendar is known for currency "XYZ"'):
        calendars.currency_calendar("XYZ")


def test_dates_beyond_the_calendars_are_refused_not_crashed_on():
    for call in (
        lambda: is_business_day("TARGET", date(2200, 1, 1)),
        lambda: advance("TARGET", date(2199, 12, 30), 50),
        lambda: add_tenor("TARGET", date(2026, 1, 1), "999Y"),
    ):
        with pytest.raises(ValueError, match="lies outside 1901-01-01 to 2199-12-31"):
            call()


def test_every_settlement_calendar_is_a_calendar():
    assert calendars.currency_calendar("EUR") == "TARGET"
    assert all(calendars.is_calendar(name) for name in calendars.CURRENCY_CALENDARS.values())
    assert not calendars.is_calendar("TARGET+") and not calendars.is_calendar("")


@pytest.mark.parametrize(
    ("day_count", "start", "end", "years"),
    [
        ("ACT/365F", date(2024, 1, 1), date(2025, 1, 1), 366 / 365),
        ("ACT/360", date(2026, 1, 1), date(2026, 7, 1), 181 / 360),
        # ISDA, "EMU and market conventions: recent developments" (1998), 1 Nov 2003 to 1 May 2004 (from memory).
        ("ACT/ACT", date(2003, 11, 1), date(2004, 5, 1), 61 / 365 + 121 / 366),
        # Bond basis: a first day 31 counts as 30, then so does a second (ISDA 2006, 4.16(f)).
        ("30/360", date(2026, 1, 31), date(2026, 3, 31), 60 / 360),
        ("30/360", date(2026, 1, 15), date(2026, 3, 31), 76 / 360),
    ],
)
def test_year_fractions_follow_their_definitions(day_count, start, end, years):
    assert year_fraction(start, end, day_count) == pytest.approx(years, abs=1e-15)


def test_the_global_evaluation_date_is_left_alone():
    before = ql.Settings.instance().evaluationDate
    add_tenor("TARGET", date(2001, 1, 2), "6M")
    assert ql.Settings.instance().evaluationDate == before
