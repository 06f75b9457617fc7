"""Quotes on a price in, a surface of its random part out, with fits, violations and a verdict."""

import math
from dataclasses import replace
from datetime import date
from itertools import pairwise

import numpy as np
import pytest
from scipy.stats import norm

from pricer.market.affine_price import AffinePrice
from pricer.market.checked_surface import UnusableQuotesError, VolatilityQuote, build_surface
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.slice_order import excess
from tests.unit.markets import TODAY, curve
from tests.unit.smiles import day
from tests.unit.surface_cases import CASH, DAYS, RELATIVE, built, flattening_quotes, heston_quotes, price


def faults_of(*quotes, cash=()):
    with pytest.raises(UnusableQuotesError) as caught:
        built(quotes, cash)
    return caught.value


def test_quotes_at_percentages_of_the_forward_are_met_and_pass():
    surface = built(heston_quotes())
    assert surface.passes and surface.violations == () and surface.underlying_id == "ARVENNE"
    assert len(surface.quotes) == len(DAYS) * len(RELATIVE)
    assert max(abs(fit.error) for fit in surface.quotes if fit.in_the_middle) < 1e-4
    first = surface.quotes[0]
    forward = price().at(day(30)).forward
    assert (first.expiry_date, first.relative_strike) == (day(30), pytest.approx(0.8))
    assert first.strike == pytest.approx(0.8 * forward) and first.pure_log_strike == pytest.approx(math.log(0.8))
    deviation = first.quoted_volatility * math.sqrt(30 / 365)
    assert first.delta == pytest.approx(norm.cdf(-math.log(0.8) / deviation + 0.5 * deviation))


def test_strikes_in_currency_are_the_same_quotes():
    relative = heston_quotes()
    absolute = [
        replace(q, strike=q.relative_strike * price().at(q.expiry_date).forward, relative_strike=None) for q in relative
    ]
    one, other = built(relative), built(list(reversed(absolute)))
    for fit, same in zip(one.quotes, other.quotes, strict=True):
        assert fit.fitted_volatility == pytest.approx(same.fitted_volatility, abs=1e-9)
        assert fit.strike == pytest.approx(same.strike, rel=1e-12)


def test_with_cash_dividends_the_surface_gives_the_quoted_prices_of_options_on_the_price():
    surface = built(heston_quotes(), CASH)
    assert surface.passes
    for fit in surface.quotes:
        level = price(CASH).at(fit.expiry_date)
        time = (fit.expiry_date - TODAY).days / 365
        deviation = float(surface.surface.volatility(fit.pure_log_strike, time)) * math.sqrt(time)
        d = -fit.pure_log_strike / deviation + 0.5 * deviation
        on_pure = level.scale * (norm.cdf(d) - math.exp(fit.pure_log_strike) * norm.cdf(d - deviation))
        own = fit.quoted_volatility * math.sqrt(time)
        e = -math.log(fit.relative_strike) / own + 0.5 * own
        on_price = level.forward * norm.cdf(e) - fit.strike * norm.cdf(e - own)
        vega = level.forward * norm.pdf(e) * math.sqrt(time)
        # The surface's error in volatility, a hundredth of a vol point in the middle, as a price.
        assert on_pure == pytest.approx(on_price, abs=vega * (1e-4 if fit.in_the_middle else 4e-4))


def test_the_level_curve_is_the_surface_at_the_forward():
    surface = built(heston_quotes(), CASH)
    for d in DAYS:
        wanted = float(surface.surface.total_variance(0.0, d / 365))
        assert surface.atm_curve.total_variance(day(d)) == pytest.approx(wanted, rel=1e-12)
    assert surface.last_date == day(730) and surface.valuation_date == TODAY
    assert surface.is_extrapolated(day(731)) and not surface.is_extrapolated(day(730))


def test_wings_stay_within_lees_bound():
    for left, right in built(heston_quotes()).wings:
        assert 0.0 <= left < 2.0 and 0.0 <= right < 2.0


def test_a_single_level_per_expiry_is_a_flat_surface():
    surface = built([VolatilityQuote(day(91), 0.2), VolatilityQuote(day(365), 0.22)])
    np.testing.assert_allclose(surface.surface.volatility([-0.5, 0.0, 0.5], 91 / 365), 0.2, rtol=1e-12)
    assert [fit.error for fit in surface.quotes] == [pytest.approx(0.0, abs=1e-12)] * 2


@pytest.mark.parametrize("cash", [(), CASH])
def test_level_skew_and_curvature_are_reproduced(cash):
    quotes = [VolatilityQuote(day(d), 0.2, skew=-0.1 / math.sqrt(d / 91), curvature=0.4) for d in (91, 182, 365)]
    surface = built(quotes, cash)
    assert surface.passes and len(surface.quotes) == 9
    # With cash dividends level, skew and curvature at the forward are met; a deviation away the shapes differ a little.
    assert max(abs(fit.error) for fit in surface.quotes) < (1e-12 if not cash else 4e-4)
    for fit in surface.quotes[1::3]:
        assert fit.relative_strike == pytest.approx(1.0) and fit.quoted_volatility == pytest.approx(0.2)
        assert fit.error == pytest.approx(0.0, abs=1e-9)


def test_parameters_no_smile_has_are_missed_and_the_miss_is_told():
    """A curvature of -3 with no skew: total variance would be concave, so the nearest smile is flat."""
    surface = built([VolatilityQuote(day(91), 0.2, skew=0.0, curvature=-3.0)])
    low, mid, high = surface.quotes
    one = 0.2 * math.sqrt(91 / 365)
    assert mid.error == pytest.approx(0.0, abs=1e-9)
    assert low.error == pytest.approx(high.error) == pytest.approx(1.5 * one * one, rel=1e-6)
    assert not surface.passes
    assert surface.failures == (
        "a quote is missed by 1.50 vol points: 2027-03-01, strike 90.5 % of the forward (and 1 more)",
    )


def test_a_quote_out_of_line_fails_the_surface_with_what_and_where():
    quotes = heston_quotes()
    i = next(i for i, q in enumerate(quotes) if q.expiry_date == day(91) and q.relative_strike == 1.0)
    quotes[i] = replace(quotes[i], volatility=quotes[i].volatility + 0.03)
    surface = built(quotes)
    assert not surface.passes
    worst = max((v for v in surface.violations if v.quoted), key=lambda v: v.size)
    assert (worst.kind, worst.expiry_date) == ("butterfly", day(91))
    assert math.exp(worst.log_moneyness) == pytest.approx(1.0, abs=1e-9)
    assert surface.failures[0].startswith("quotes contradict each other: butterfly arbitrage, 2027-03-01, strike 100.0")
    assert "a quote is missed by" in surface.failures[-1]


def test_small_contradictions_are_violations_but_no_failure():
    """A level 0.1 vol points below what total variance allows."""
    least = 0.2 * math.sqrt(182 / 365)
    quotes = [VolatilityQuote(day(182), 0.2), VolatilityQuote(day(365), least - 0.001)]
    surface = built(quotes)
    (found,) = surface.violations
    assert (found.kind, found.later_date, found.quoted) == ("calendar", day(365), True)
    assert found.size == pytest.approx(0.001) and surface.passes


def test_total_variance_that_falls_by_more_fails():
    least = 0.2 * math.sqrt(182 / 365)
    surface = built([VolatilityQuote(day(182), 0.2), VolatilityQuote(day(365), least - 0.006)])
    assert surface.failures == (
        "quotes contradict each other: calendar arbitrage, 2027-05-31 to 2027-11-30, strike 100.0 % of the forward: "
        "0.60 vol points",
        "a quote is missed by 0.60 vol points: 2027-11-30, strike 100.0 % of the forward",
    )


def test_violations_are_told_in_terms_of_the_price_not_of_its_random_part():
    """A mistyped quote at 90 % of the forward with half the price riskless: the strike on X is another."""
    quotes = heston_quotes(days=(365,))
    quotes[1] = replace(quotes[1], volatility=quotes[1].volatility + 0.04)
    surface = built(quotes, CASH)
    worst = max((v for v in surface.violations if v.quoted), key=lambda v: v.size)
    assert math.exp(worst.log_moneyness) == pytest.approx(0.9, abs=1e-9)
    level = price(CASH).at(day(365))
    assert level.pure_strike(0.9 * level.forward) < 0.89
    without = max((v for v in built(quotes).violations if v.quoted), key=lambda v: v.size)
    assert worst.size == pytest.approx(without.size, rel=0.05)


def test_several_faults_are_told_at_once_in_order():
    error = faults_of(
        VolatilityQuote(day(182), 0.2, strike=100.0),
        VolatilityQuote(day(182), 0.21, strike=100.0),
        VolatilityQuote(day(91), -0.2, strike=90.0),
        VolatilityQuote(day(91), 0.2, strike=100.0),
        VolatilityQuote(TODAY, 0.2, strike=95.0),
    )
    assert (error.expiry_date, error.strike) == (TODAY, 95.0)
    assert str(error) == (
        "found a volatility for 2026-11-30; expected an expiry date after the valuation date 2026-11-30. "
        "Remove the quotes of expiries that are over, or correct the date.\n"
        "found a volatility of -0.2 for 2027-03-01; expected finite numbers, and a volatility above 0. "
        "Enter 20 % as 0.20.\n"
        "found two volatilities for 2027-05-31 at strike 100, 0.2 and 0.21; expected one volatility for a strike. "
        "Remove one of them."
    )


@pytest.mark.parametrize("bad", [1e-300, 1e-7, 10.5, 1e300])
def test_a_volatility_that_nothing_has_is_refused(bad):
    error = faults_of(*heston_quotes(days=(91,)), VolatilityQuote(day(91), bad, relative_strike=1.3))
    assert str(error) == (
        f"found a volatility of {bad:g} for 2027-03-01; expected a volatility from 1e-06 to 10. Enter 20 % as 0.20."
    )


@pytest.mark.parametrize("bad", [0.0, -5.0])
def test_a_strike_that_is_no_price_is_refused(bad):
    error = faults_of(VolatilityQuote(day(91), 0.2, strike=bad), VolatilityQuote(day(91), 0.2))
    assert error.strike == bad and "expected a strike above 0. Remove the quote" in str(error)


def test_a_strike_below_the_cash_dividends_still_to_come_is_refused():
    error = faults_of(*heston_quotes(days=(91,)), VolatilityQuote(day(91), 0.5, strike=10.0), cash=CASH)
    floor = price(CASH).at(day(91)).floor
    assert (error.expiry_date, error.strike) == (day(91), 10.0)
    assert str(error) == (
        f"found a volatility for 2027-03-01 at strike 10; expected a strike above {floor:.6g}, what the cash dividends "
        "after 2027-03-01 are worth then. Remove the quote or correct its strike: the price cannot end below it."
    )


def test_a_volatility_no_random_part_can_have_is_refused():
    heavy = [CashDividend(date(2028, 5, 12), 60.0)]
    error = faults_of(VolatilityQuote(day(365), 1.5, strike=100.0), VolatilityQuote(day(365), 0.2), cash=heavy)
    assert error.strike == 100.0
    assert str(error).startswith(
        "found a volatility of 150.00 % for 2027-11-30 at strike 100; expected an option worth"
    )


@pytest.mark.parametrize("shape", [{}, {"skew": -0.1}])
def test_a_lone_level_among_smiles_is_refused_with_what_to_give(shape):
    smile = [VolatilityQuote(day(91), 0.2, **shape)] if shape else heston_quotes(days=(91,))
    error = faults_of(*smile, VolatilityQuote(day(365), 0.2))
    assert str(error) == (
        "found a single volatility for 2027-11-30, without skew, while other expiries have smiles; expected at least "
        "three strikes, or a skew. Enter volatilities of more strikes, or the skew at the forward (0 if it is known "
        "to be flat)."
    )


def test_two_ways_of_quoting_one_expiry_are_refused():
    error = faults_of(VolatilityQuote(day(91), 0.2, skew=-0.1), VolatilityQuote(day(91), 0.22, strike=90.0))
    assert "found a skew or curvature beside quotes at strikes for 2027-03-01" in str(error)
    error = faults_of(VolatilityQuote(day(91), 0.2, strike=90.0, relative_strike=0.9), VolatilityQuote(day(91), 0.2))
    assert "found a strike of 90 and a relative strike of 0.9 for 2027-03-01; expected one of the two" in str(error)


def test_no_quotes_are_refused():
    with pytest.raises(ValueError, match="needs at least one quote"):
        built([])


def test_the_forward_of_the_price_counts_for_relative_strikes():
    rich = AffinePrice.of("ARVENNE", 100.0, Dividends(-0.10), curve())
    surface = build_surface("ARVENNE", rich, TODAY, heston_quotes(days=(365,)))
    assert surface.quotes[3].strike == pytest.approx(rich.at(day(365)).forward)


def test_a_slice_whose_wings_touch_the_expiry_before_is_still_brought_to_its_quotes():
    """Three years of a smile that flattens: its SVI slice is held up by one year's wings, eight deviations out."""
    surface = built(flattening_quotes())
    assert max(abs(fit.error) for fit in surface.quotes) < 2.1e-4
    assert surface.passes and surface.violations == ()
    for before, after in pairwise(surface.surface.slices):
        assert excess(before, after)[1] <= 0.0
