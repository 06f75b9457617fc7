"""Arbitrage planted in quotes and in surfaces is found where it was planted, as large as it was."""

import numpy as np
import pytest

from pricer.market.arbitrage import ArbitrageKind, Violation, quote_violations, surface_violations
from pricer.market.black import call
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.smile_quotes import SmileQuotes
from pricer.market.svi import SviSlice
from tests.unit.smiles import TODAY, day, smiles

K = np.linspace(-0.2, 0.2, 9)


def skewed(days, level, k=K, skew=-0.1):
    return SmileQuotes.of(day(days), k, level + skew * k + 0.2 * k * k)


def moved(quote, i, by):
    volatilities = quote.volatilities.copy()
    volatilities[i] += by
    return SmileQuotes.of(quote.expiry_date, quote.log_moneyness, volatilities)


def surface(*slices, days=(182, 365)):
    dates = tuple(day(d) for d in days[: len(slices)])
    return ImpliedSurface(TODAY, dates, tuple(d / 365 for d in days[: len(slices)]), slices)


@pytest.mark.parametrize("seed", range(5))
def test_sound_quotes_have_no_arbitrage(seed):
    assert quote_violations(TODAY, smiles(seed)) == ()


def test_a_quote_too_high_is_a_butterfly_at_its_strike_and_lowering_it_by_the_size_mends_it():
    planted = moved(skewed(182, 0.2), 5, 0.03)
    (found,) = quote_violations(TODAY, [planted])
    assert (found.kind, found.expiry_date, found.later_date, found.quoted) == ("butterfly", day(182), None, True)
    assert found.log_moneyness == pytest.approx(K[5])
    assert 0.0 < found.size < 0.03
    assert quote_violations(TODAY, [moved(planted, 5, -found.size * 1.02 - 2e-4)]) == ()


def test_the_size_of_a_butterfly_is_the_price_above_the_neighbours_chord():
    planted = moved(skewed(182, 0.2), 4, 0.03)
    (found,) = quote_violations(TODAY, [planted])
    low = planted.volatilities[4] - found.size
    strikes, deviations = np.exp(K), planted.volatilities * np.sqrt(182 / 365)
    prices = call(K, deviations)
    share = (strikes[4] - strikes[3]) / (strikes[5] - strikes[3])
    chord = prices[3] + share * (prices[5] - prices[3])
    # One Newton step from the quote: vega is all but constant over a vol point at the forward.
    assert float(call(K[4], low * np.sqrt(182 / 365))) == pytest.approx(chord, abs=2e-6)


def test_a_far_call_worth_more_than_a_nearer_one_is_found():
    (found,) = quote_violations(TODAY, [moved(skewed(182, 0.2), 8, 0.12)])
    assert found.kind is ArbitrageKind.BUTTERFLY and found.log_moneyness == pytest.approx(K[8])


def test_rounding_to_a_hundredth_of_a_vol_point_is_no_arbitrage():
    k = np.linspace(-0.1, 0.1, 81)
    exact = skewed(91, 0.2, k)
    rounded = SmileQuotes.of(exact.expiry_date, k, np.round(exact.volatilities, 4))
    assert quote_violations(TODAY, [rounded]) == ()


def test_total_variance_that_falls_is_a_calendar_arbitrage_of_the_size_that_mends_it():
    early, late = skewed(182, 0.30), skewed(365, 0.20)
    (found,) = quote_violations(TODAY, [early, late])
    assert (found.kind, found.expiry_date, found.later_date) == ("calendar", day(182), day(365))
    assert found.log_moneyness == pytest.approx(0.2)
    needed = early.volatilities[-1] * np.sqrt(182 / 365)
    assert found.size == pytest.approx(needed - late.volatilities[-1], abs=1e-12)
    raised = SmileQuotes.of(day(365), K, late.volatilities + found.size)
    assert quote_violations(TODAY, [early, raised]) == ()


def test_strikes_that_do_not_overlap_are_not_compared():
    early, late = skewed(182, 0.30, K[:4]), skewed(365, 0.18, K[5:])
    assert [v for v in quote_violations(TODAY, [early, late]) if v.kind is ArbitrageKind.CALENDAR] == []


def test_a_slice_with_negative_density_is_reported_where_g_is_least():
    """The arbitrageable smile of Gatheral & Jacquier (2014), example 3.1: g = -0.0329 at k = 0.879 (see reference)."""
    (found,) = surface_violations(surface(SviSlice(-0.041, 0.1331, 0.306, 0.3586, 0.4153), days=(365,)))
    assert (found.kind, found.expiry_date, found.quoted) == ("butterfly", day(365), False)
    assert found.log_moneyness == pytest.approx(0.879263, abs=1e-4)
    assert found.size == pytest.approx(0.0328635735, abs=1e-7)


def test_slices_that_cross_are_reported_at_the_strike_where_they_cross_most():
    found = surface_violations(surface(SviSlice.flat(0.03), SviSlice.flat(0.02)))
    calendar = [v for v in found if v.kind is ArbitrageKind.CALENDAR]
    assert len(calendar) == 1
    assert calendar[0].size == pytest.approx(np.sqrt(0.03) - np.sqrt(0.02), abs=1e-12)
    steep, flat = SviSlice.from_forward(0.02, -0.03, 0.02), SviSlice.flat(0.021)
    calendar = [v for v in surface_violations(surface(steep, flat)) if v.kind is ArbitrageKind.CALENDAR]
    assert calendar[0].log_moneyness == pytest.approx(-8.0 * np.sqrt(0.021))


def test_a_smile_between_two_sound_slices_can_be_unsound_and_is_reported_where_it_matters(monkeypatch):
    """Both slices have g >= 0 and are ordered, their mean in total variance is not: far out in a steep wing."""
    early = SviSlice(-0.1287, 0.169, -0.02, -0.42, 0.78)
    late = SviSlice(-0.09, 0.172, 0.0, -0.31, 0.69)
    assert surface_violations(surface(early)) == surface_violations(surface(late)) == ()
    assert surface_violations(surface(early, late)) == ()  # no option there is worth anything
    monkeypatch.setattr("pricer.market.slice_correction.MATERIAL_DEVIATIONS", np.inf)
    monkeypatch.setattr("pricer.market.slice_correction.LEAST_VALUE", 0.0)
    found = surface_violations(surface(early, late))
    assert [(v.kind, v.expiry_date, v.later_date) for v in found] == [("butterfly", day(182), day(365))]


@pytest.mark.parametrize(
    ("violation", "text"),
    [
        (
            Violation(ArbitrageKind.BUTTERFLY, day(182), None, np.log(1.1), 0.0123, True),
            "butterfly arbitrage, 2027-05-31, strike 110.0 % of the forward: 1.23 vol points",
        ),
        (
            Violation(ArbitrageKind.CALENDAR, day(182), day(365), np.log(0.8), 0.002, False),
            "calendar arbitrage, 2027-05-31 to 2027-11-30, strike 80.0 % of the forward: 0.20 vol points",
        ),
        (
            Violation(ArbitrageKind.BUTTERFLY, day(182), None, 0.0, 0.0329, False),
            "butterfly arbitrage, 2027-05-31, strike 100.0 % of the forward: g = -0.0329",
        ),
    ],
)
def test_a_violation_says_what_where_and_how_large(violation, text):
    assert str(violation) == text
