"""Levels of several currencies in one law: which factors enter, with which sign, and what is refused."""

import math
from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.option import Conversion
from pricer.market.correlation import checked
from pricer.market.currency_conversion import composite, quanto, with_rates
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.fx import FxRates, MissingRate
from pricer.market.market import MissingMarketDataError
from pricer.market.volatility import VolatilityCurve
from tests.unit.markets import TODAY, small_market

DAY = date(2027, 11, 30)  # one year of ACT/365F
QUANTO, COMPOSITE = Conversion.QUANTO, Conversion.COMPOSITE


def flat(level):
    return VolatilityCurve.from_quotes(TODAY, [DAY], [level])


def mixed_market(
    ids=("ARVENNE", "CADMUS", "EURUSD"), rows=((1.0, 0.5, -0.1), (0.5, 1.0, -0.4), (-0.1, -0.4, 1.0)), **fx
):
    """ARVENNE in EUR at 20 %, CADMUS in USD at 25 %, EURUSD at 10 %."""
    market = small_market(correlation=checked(ids, np.array(rows))[0])
    underlyings = {
        name: replace(market.underlyings[name], volatility=flat(level))
        for name, level in (("ARVENNE", 0.20), ("CADMUS", 0.25))
    }
    rates = FxRates.from_pairs(fx.get("pairs", {"EURUSD": 1.10}), fx.get("volatilities", {"EURUSD": flat(0.10)}))
    return replace(market, underlyings=underlyings, fx=rates)


def law(conversion, market=None, ids=("ARVENNE", "CADMUS"), currency="EUR"):
    return (market or mixed_market()).joint_lognormal(ids, DAY, payment_currency=currency, conversion=conversion)


def test_a_quanto_basket_by_hand():
    """CADMUS has the correlation +0.4 with USD in EUR, 1/EURUSD: its forward falls by 0.4 * 25 % * 10 %."""
    found, market = law(QUANTO), mixed_market()
    assert found.forwards[0] == market.forward("ARVENNE", DAY)
    assert found.forwards[1] == pytest.approx(market.forward("CADMUS", DAY) * math.exp(-0.01), rel=1e-13)
    np.testing.assert_allclose(found.covariance, [[0.04, 0.025], [0.025, 0.0625]], rtol=1e-12)


def test_a_composite_basket_by_hand():
    found, market = law(COMPOSITE), mixed_market()
    assert found.forwards[1] == pytest.approx(market.forward("CADMUS", DAY) / 1.10 * math.exp(0.02 - 0.035), rel=1e-13)
    # ARVENNE with CADMUS and with USD in EUR: 0.5 * 20 % * 25 % + 0.1 * 20 % * 10 %.
    np.testing.assert_allclose(
        found.covariance, [[0.04, 0.027], [0.027, 0.0625 + 2 * 0.4 * 0.25 * 0.1 + 0.01]], rtol=1e-12
    )


def test_a_composite_is_an_asset_of_the_payment_currency():
    """Converted and discounted in EUR it is worth the spot converted, less dividends, whatever the correlation."""
    for rho in (-0.4, 0.0, 0.7):
        market = mixed_market(("CADMUS", "EURUSD"), ((1.0, rho), (rho, 1.0)))
        forward = law(COMPOSITE, market, ("CADMUS",)).forwards[0]
        assert forward * market.discount_factor("EUR", "", DAY) == pytest.approx(
            80.0 / 1.10 * math.exp(-0.01), rel=1e-13
        )


def test_the_other_currencys_investor_sees_the_other_sign():
    found, market = law(QUANTO, currency="USD"), mixed_market()
    # ARVENNE with EUR in USD: -0.1.
    assert found.forwards[0] == pytest.approx(market.forward("ARVENNE", DAY) * math.exp(0.1 * 0.20 * 0.10), rel=1e-13)
    assert found.forwards[1] == market.forward("CADMUS", DAY)


def test_a_matrix_that_names_the_pair_the_other_way_round_says_the_same():
    turned = mixed_market(("ARVENNE", "CADMUS", "USDEUR"), ((1.0, 0.5, 0.1), (0.5, 1.0, 0.4), (0.1, 0.4, 1.0)))
    for conversion in Conversion:
        np.testing.assert_array_equal(law(conversion).forwards, law(conversion, turned).forwards)
        np.testing.assert_allclose(law(conversion).covariance, law(conversion, turned).covariance, rtol=1e-15)


def test_a_cross_without_a_volatility_is_a_chain_of_pairs():
    """CADMUS (USD) paid in GBP through EUR: log USDGBP = log EURGBP - log EURUSD."""
    market = mixed_market(
        ("CADMUS", "EURUSD", "EURGBP"),
        ((1.0, -0.4, 0.2), (-0.4, 1.0, 0.3), (0.2, 0.3, 1.0)),
        pairs={"EURUSD": 1.10, "EURGBP": 0.85},
        volatilities={"EURUSD": flat(0.10), "EURGBP": flat(0.08)},
    )
    assert market.fx.log_factors("USD", "GBP") == {"EURUSD": -1.0, "EURGBP": 1.0}
    covariance = 0.25 * (0.2 * 0.08 + 0.4 * 0.10)
    found = law(QUANTO, market, ("CADMUS",), "GBP")
    assert found.forwards[0] == pytest.approx(market.forward("CADMUS", DAY) * math.exp(-covariance), rel=1e-13)
    assert market.log_covariance(("USDGBP",), DAY)[0, 0] == pytest.approx(
        0.10**2 + 0.08**2 - 2 * 0.3 * 0.1 * 0.08, rel=1e-12
    )


def test_fx_forwards_are_covered_by_both_curves():
    market = mixed_market()
    assert market.fx_forward("EUR", "USD", DAY) == pytest.approx(1.10 * math.exp(0.035 - 0.02), rel=1e-14)
    assert market.fx_forward("EUR", "USD", DAY) * market.fx_forward("USD", "EUR", DAY) == pytest.approx(1.0, rel=1e-15)
    assert market.fx_forward("EUR", "EUR", DAY) == 1.0
    with pytest.raises(MissingRate):
        market.fx_forward("EUR", "NOK", DAY)


def test_underlyings_of_the_payment_currency_need_no_rate():
    market = replace(mixed_market(), fx=FxRates({}))
    plain = market.joint_lognormal(("ARVENNE",), DAY)
    for conversion in (None, *Conversion):
        found = law(conversion, market, ("ARVENNE",))
        np.testing.assert_array_equal(found.forwards, plain.forwards)
        np.testing.assert_array_equal(found.covariance, plain.covariance)


def test_cash_dividends_to_come_leave_the_part_above_them_lognormal():
    market = mixed_market()
    paid = Dividends(0.0, (), (CashDividend(date(2028, 5, 10), 4.0),))
    share = replace(market.underlyings["CADMUS"], dividends=paid)
    market = replace(market, underlyings={**market.underlyings, "CADMUS": share})
    with pytest.raises(ValueError, match="the price of CADMUS on 2027-11-30 is not lognormal"):
        law(QUANTO, market)
    found = market.joint_lognormal(("CADMUS",), DAY, payment_currency="EUR", conversion=QUANTO, pure=True)
    scale = market.affine_levels(("CADMUS",), DAY)[0][0]
    deviation = market.pure_volatility("CADMUS").volatility(DAY)
    assert found.forwards[0] == pytest.approx(scale * math.exp(-0.4 * deviation * 0.10), rel=1e-13)
    both = market.joint_lognormal(("CADMUS",), DAY, payment_currency="EUR", conversion=COMPOSITE, pure=True)
    assert both.forwards[0] == pytest.approx(scale * market.fx_forward("USD", "EUR", DAY), rel=1e-13)


def test_what_is_missing_is_named():
    market = mixed_market()
    for broken, message in (
        (
            replace(market, fx=FxRates.from_pairs({"EURUSD": 1.1})),
            "neither an underlying USDEUR nor a volatility for such an exchange rate",
        ),
        (
            mixed_market(("ARVENNE", "CADMUS"), ((1.0, 0.5), (0.5, 1.0))),
            "the market's correlation matrix does not hold EURUSD",
        ),
    ):
        with pytest.raises(MissingMarketDataError) as caught:
            law(QUANTO, broken)
        assert message in str(caught.value)
    with pytest.raises(MissingMarketDataError, match="the market has neither an underlying NOBODY nor"):
        market.log_covariance(("NOBODY",), DAY)


def test_a_law_that_is_not_determined_is_refused():
    with pytest.raises(ValueError, match="CADMUS is quoted in USD, not in EUR: it needs a conversion"):
        law(None)
    with pytest.raises(ValueError, match="a quanto law needs a payment currency"):
        mixed_market().joint_lognormal(("CADMUS",), DAY, conversion=QUANTO)
    with pytest.raises(ValueError, match="'quantum' is not a valid Conversion"):
        law("quantum")
    np.testing.assert_array_equal(law("composite").forwards, law(COMPOSITE).forwards)
    with pytest.raises(ValueError, match="a joint law needs underlyings; got none"):
        law(QUANTO, ids=())
    for make in (lambda c: quanto(np.ones(2), c), lambda c: composite(np.ones(2), np.ones(2), c)):
        with pytest.raises(ValueError, match=r"2 levels and their rates do not fit a covariance of shape \(2, 2\)"):
            make(np.eye(2))


def test_rates_are_paired_with_their_levels():
    covariance = np.arange(9.0).reshape(3, 3)
    found = with_rates(covariance, [0, None])
    np.testing.assert_array_equal(found[:2, :2], covariance[:2, :2])
    np.testing.assert_array_equal(found[:, 2], [2.0, 5.0, 8.0, 0.0])
    np.testing.assert_array_equal(found[:, 3], 0.0)


def test_a_volatility_given_both_ways_is_refused():
    with pytest.raises(ValueError, match="both EURUSD and USDEUR have a volatility: keep one of them"):
        FxRates.from_pairs({}, {"EURUSD": flat(0.1), "USDEUR": flat(0.1)})
    rates = FxRates.from_pairs({}, {"EURUSD": flat(0.1)})
    assert rates.volatility("USD", "EUR") is rates.volatility("EUR", "USD") is not None
    assert rates.volatility("USD", "GBP") is None
