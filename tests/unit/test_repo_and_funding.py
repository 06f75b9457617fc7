"""Repo and funding curves: what is paid is never below what is earned."""

from datetime import date

import pytest

from pricer.market.funding import FundingCurve
from pricer.market.repo import RepoCurve
from tests.unit.markets import TODAY

DATES = [date(2027, 11, 30), date(2028, 11, 29)]  # one and two years of ACT/365F


def repo(long=(0.025, 0.03), short=(0.015, 0.018)):
    return RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, DATES, long, short)


def test_the_mid_is_the_mean_of_the_zero_rates():
    for day, rate in zip(DATES, (0.020, 0.024), strict=True):
        assert repo().mid.zero_rate(day) == pytest.approx(rate, rel=1e-13)


def test_half_spreads_come_from_forward_rates():
    assert repo().half_spread(TODAY, DATES[0]) == pytest.approx(0.005, rel=1e-12)
    # Forward from the first to the second year: long 2 * 3.0 - 2.5 = 3.5 %, short 2 * 1.8 - 1.5 = 2.1 %.
    assert repo().half_spread(*DATES) == pytest.approx(0.007, rel=1e-12)
    assert repo().half_spread(DATES[1], date(2029, 11, 29)) == pytest.approx(0.007, rel=1e-12)


def test_equal_sides_cost_nothing():
    assert repo((0.02, 0.03), (0.02, 0.03)).half_spread(*DATES) == 0.0


def test_earning_more_than_paying_is_refused_on_forward_rates_too():
    with pytest.raises(ValueError) as caught:
        repo((0.025, 0.021), (0.015, 0.018))
    assert str(caught.value) == (
        "repo of ARVENNE, long: from 2027-11-30 to 2028-11-29 the forward short rate 2.1000 % exceeds the forward long "
        "rate 1.7000 %"
    )


def test_a_missing_rate_is_refused():
    with pytest.raises(ValueError, match="repo of ARVENNE: 1 long rates for 2 short rates"):
        repo((0.025,))
    with pytest.raises(ValueError, match="a forward rate needs an end after its start"):
        repo().half_spread(DATES[0], DATES[0])


def test_funding_spreads_are_forward_spreads():
    funding = FundingCurve.from_zero_spreads(TODAY, DATES, [0.012, 0.015], [0.002, 0.003])
    assert funding.borrowing_spread(TODAY, DATES[0]) == pytest.approx(0.012, rel=1e-12)
    assert funding.borrowing_spread(*DATES) == pytest.approx(0.018, rel=1e-12)
    assert funding.lending_spread(*DATES) == pytest.approx(0.004, rel=1e-12)
    assert funding.is_extrapolated(date(2028, 11, 30)) and not funding.is_extrapolated(funding.last_date)


def test_lending_above_borrowing_is_refused():
    with pytest.raises(
        ValueError, match=r"forward lending rate 1\.3000 % exceeds the forward borrowing rate 1\.2000 %"
    ):
        FundingCurve.from_zero_spreads(TODAY, DATES, [0.012, 0.012], [0.002, 0.0075])
