"""Prices with cash dividends: floors, forwards on every date, and what volatilities mean."""

import math
from dataclasses import replace
from datetime import date, timedelta

import numpy as np
import pytest
from scipy.stats import norm

from pricer.market.affine_price import AffineLevel, AffinePrice
from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.repo import RepoCurve
from pricer.market.volatility import CalendarArbitrageError, VolatilityCurve
from tests.unit.markets import TODAY, curve, small_market, volatility

EX, LATER_EX = date(2027, 5, 12), date(2028, 5, 10)
CASH = Dividends(0.01, (ProportionalDividend(LATER_EX, 0.02),), (CashDividend(EX, 3.0), CashDividend(LATER_EX, 2.0)))


def price(dividends=CASH, spot=100.0):
    return AffinePrice.of("ARVENNE", spot, dividends, curve())


def black_call(forward, strike, deviation):
    d = math.log(forward / strike) / deviation + 0.5 * deviation
    return forward * norm.cdf(d) - strike * norm.cdf(d - deviation)


def with_cash(dividends=CASH, level=0.20):
    market = small_market()
    share = replace(market.underlyings["ARVENNE"], dividends=dividends, volatility=volatility(level))
    return replace(market, underlyings={**market.underlyings, "ARVENNE": share})


def test_forwards_by_hand_day_by_day_over_the_ex_dates():
    """Each day's forward is the day before's, grown by that day's rate and yield, less that day's dividends."""
    rates, forward, day = curve(), 100.0, TODAY
    while day < LATER_EX + timedelta(days=3):
        last, day = day, day + timedelta(days=1)
        forward *= rates.discount_factor(last) / rates.discount_factor(day) * math.exp(-0.01 / 365)
        forward = {EX: forward - 3.0, LATER_EX: 0.98 * forward - 2.0}.get(day, forward)
        assert price().at(day).forward == pytest.approx(forward, rel=1e-12), day


def test_the_price_falls_by_the_cash_amount_whatever_it_is():
    """On any path: from the evening before to the ex date, one day's growth and then the dividends."""
    for ex, kept, amount in ((EX, 1.0, 3.0), (LATER_EX, 0.98, 2.0)):
        eve = ex - timedelta(days=1)
        before, after = price().at(eve), price().at(ex)
        growth = curve().discount_factor(eve) / curve().discount_factor(ex) * math.exp(-0.01 / 365)
        for x in (0.01, 0.5, 1.0, 3.0):
            high, low = (level.scale * x + level.floor for level in (before, after))
            assert low == pytest.approx(high * growth * kept - amount, rel=1e-12)


def test_the_floor_is_the_value_of_the_dividends_to_come():
    assert price().at(TODAY).floor == pytest.approx(
        3.0 * curve().discount_factor(EX) / math.exp(-0.01 * 163 / 365)
        + 2.0 * curve().discount_factor(LATER_EX) / (0.98 * math.exp(-0.01 * 527 / 365)),
        rel=1e-14,
    )
    assert price().at(LATER_EX).floor == 0.0
    assert price().at(LATER_EX - timedelta(days=1)).floor == pytest.approx(2.0 / 0.98, rel=1e-3)


def test_without_cash_dividends_nothing_changes():
    market, day = small_market(), date(2028, 12, 15)
    for name in market.underlyings:
        found = market.affine_price(name)
        assert not found.has_floor
        share = market.underlyings[name]
        rate = market.discount_factor(share.currency, "", day)
        assert market.forward(name, day) == share.spot * share.dividends.growth(TODAY, day) / rate
        assert market.pure_volatility(name) is share.volatility
    scales, floors = market.affine_levels(("ARVENNE", "BELCOR"), day)
    np.testing.assert_array_equal(floors, 0.0)
    np.testing.assert_array_equal(scales, market.joint_lognormal(("ARVENNE", "BELCOR"), day).forwards)


def test_todays_ex_dividend_is_already_out_of_the_spot():
    assert price(Dividends(0.0, (), (CashDividend(TODAY, 5.0),))).at(TODAY) == AffineLevel(100.0, 0.0)


def test_more_dividends_than_spot_are_refused():
    with pytest.raises(ValueError) as caught:
        price(spot=4.5)
    assert str(caught.value) == (
        "the cash dividends of ARVENNE to 2028-05-10 are worth 4.99262 tonight, and its spot is 4.5: a price cannot "
        "lie below the dividends it is still to pay"
    )


def test_impossible_cash_dividends_are_refused():
    for amount in (-1.0, math.nan, math.inf):
        with pytest.raises(ValueError, match="the cash dividend of 2027-05-12 must be an amount from 0 up"):
            CashDividend(EX, amount)


def test_a_call_on_the_price_is_a_call_on_its_random_part():
    """The implied volatility at the forward fixes X; both sides are priced here by Black's formula."""
    level, deviation = AffineLevel(80.0, 25.0), 0.3
    pure = level.pure_deviation(deviation)
    assert pure > deviation
    assert 80.0 * black_call(1.0, level.pure_strike(105.0), pure) == pytest.approx(
        black_call(105.0, 105.0, deviation), rel=1e-13
    )
    assert level.pure_strike(25.0) == 0.0


def test_a_deviation_that_needs_more_than_the_random_part_is_refused():
    with pytest.raises(ValueError, match="a call at the forward 100 would be worth more than the 10 by which"):
        AffineLevel(10.0, 90.0).pure_deviation(0.3)


def test_volatilities_of_the_random_part_meet_those_of_the_price_after_the_last_dividend():
    market = with_cash(Dividends(0.01, (), (CashDividend(LATER_EX, 4.0),)))
    quoted, pure = market.underlyings["ARVENNE"].volatility, market.pure_volatility("ARVENNE")
    before, after = quoted.dates
    assert before < LATER_EX < after
    assert pure.volatility(after) == pytest.approx(quoted.volatility(after), rel=1e-12)
    level = market.affine_price("ARVENNE").at(before)
    root = math.sqrt(quoted.times[1])
    assert level.scale * black_call(1.0, 1.0, pure.volatility(before) * root) == pytest.approx(
        black_call(level.forward, level.forward, quoted.volatility(before) * root), rel=1e-12
    )


def test_volatilities_that_ignore_a_large_dividend_leave_no_random_part():
    heavy = with_cash(Dividends(0.0, (), (CashDividend(LATER_EX, 60.0),)))
    with pytest.raises(CalendarArbitrageError):
        heavy.pure_volatility("ARVENNE")


def test_a_law_with_dividends_after_its_date_must_be_asked_for_as_pure():
    market, day = with_cash(), date(2027, 12, 17)
    with pytest.raises(ValueError) as caught:
        market.joint_lognormal(("ARVENNE", "BELCOR"), day)
    assert str(caught.value) == (
        "the price of ARVENNE on 2027-12-17 is not lognormal: it holds 2.02768 of cash dividends still to come"
    )
    law = market.joint_lognormal(("ARVENNE", "BELCOR"), day, pure=True)
    scales, floors = market.affine_levels(("ARVENNE", "BELCOR"), day)
    np.testing.assert_array_equal(law.forwards, scales)
    assert floors[0] > 0.0 == floors[1]
    assert scales[0] + floors[0] == market.forward("ARVENNE", day)
    after = market.joint_lognormal(("ARVENNE",), date(2028, 12, 15))
    assert after.forwards[0] == market.forward("ARVENNE", date(2028, 12, 15))


def test_the_spot_grows_at_the_mid_of_the_repo_rates_where_there_are_any():
    repo = RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, [date(2027, 11, 30)], [0.025], [0.015])
    market = replace(with_cash(), repo={"ARVENNE": repo}, curves={})
    bare = replace(market, underlyings={"ARVENNE": replace(market.underlyings["ARVENNE"], dividends=Dividends())})
    assert bare.forward("ARVENNE", date(2027, 11, 30)) == pytest.approx(100.0 * math.exp(0.02), rel=1e-14)
    assert market.forward("ARVENNE", EX) == pytest.approx(100.0 * math.exp((0.02 - 0.01) * 163 / 365) - 3.0, rel=1e-13)


def test_the_pure_law_reprices_the_volatility_quote_of_the_price():
    """The quoted call at the forward, by quadrature over the affine price."""
    market, day = with_cash(), date(2027, 6, 18)
    law = market.joint_lognormal(("ARVENNE",), day, pure=True)
    floor = market.affine_levels(("ARVENNE",), day)[1][0]
    deviation, forward = law.deviations[0], market.forward("ARVENNE", day)
    z = np.linspace(-10.0, 10.0, 200_001)
    levels = law.forwards[0] * np.exp(deviation * z - 0.5 * deviation**2) + floor
    found = np.trapezoid(np.maximum(levels - forward, 0.0) * norm.pdf(z), z)
    quote = VolatilityCurve.from_quotes(TODAY, [day], [0.20]).total_variance(day)
    assert found == pytest.approx(black_call(forward, forward, math.sqrt(quote)), rel=1e-7)
