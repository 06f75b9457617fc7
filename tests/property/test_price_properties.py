"""What must hold for prices with cash dividends, stresses, conversions and estimates, whatever the numbers."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from pricer.contracts.option import Conversion
from pricer.market.affine_price import AffinePrice
from pricer.market.correlation import checked
from pricer.market.correlation_estimate import HistoryRules, estimate
from pricer.market.correlation_stress import stressed
from pricer.market.credit import HazardCurve
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.fx import FxRates
from pricer.market.quoted_curves import CONVENTIONS, QuoteKind, RateQuote, reprice
from pricer.market.volatility import VolatilityCurve
from tests.unit.markets import TODAY, curve, small_market

repeatable = settings(max_examples=40, deadline=None, derandomize=True)
ahead = st.integers(1, 1500).map(lambda n: TODAY + timedelta(days=n))


@st.composite
def dividends(draw):
    days = draw(st.lists(ahead, min_size=0, max_size=6, unique=True))
    cash = tuple(CashDividend(day, draw(st.floats(0.0, 8.0))) for day in days)
    falls = draw(st.lists(st.one_of(ahead, st.sampled_from(days)) if days else ahead, max_size=4, unique=True))
    proportional = tuple(ProportionalDividend(day, draw(st.floats(0.0, 0.1))) for day in falls)
    return Dividends(draw(st.floats(-0.03, 0.06)), proportional, cash)


@repeatable
@given(dividends(), ahead)
def test_forwards_follow_the_dividends_and_prices_stay_above_their_floors(paid, day):
    price = AffinePrice.of("U", 100.0, paid, curve())
    rates = price.growth_curve
    for ex in {day, *(d.ex_date for d in paid.cash)}:
        eve = ex - timedelta(days=1)
        before, after = price.at(eve), price.at(ex)
        assert after.scale > 0.0 and after.floor >= 0.0
        growth = rates.discount_factor(eve) / rates.discount_factor(ex) * np.exp(-paid.yield_rate / 365)
        kept = np.prod([1.0 - d.fraction for d in paid.proportional if d.ex_date == ex])
        amount = sum(d.amount for d in paid.cash if d.ex_date == ex)
        assert after.forward == pytest.approx(before.forward * growth * kept - amount, rel=1e-11)
        assert after.floor == pytest.approx(before.floor * growth * kept - amount, abs=1e-10)


@repeatable
@given(st.integers(2, 7), st.integers(0, 2**32 - 1), st.floats(0.001, 1.0), st.data())
def test_a_stressed_matrix_is_a_correlation_matrix_nearer_its_target(n, seed, share, data):
    loads = np.random.default_rng(seed).standard_normal((n, n))
    loads /= np.linalg.norm(loads, axis=1, keepdims=True)
    ids = tuple(f"U{i}" for i in range(n))
    matrix, _ = checked(ids, loads @ loads.T)
    chosen = data.draw(st.lists(st.sampled_from(ids), min_size=1, unique=True))
    inside = np.ix_([ids.index(i) for i in chosen], [ids.index(i) for i in chosen])
    for target, found in (
        (1.0, stressed(matrix, towards_one=share, ids=chosen)),
        (0.0, stressed(matrix, towards_zero=share, ids=chosen)),
    ):
        assert np.linalg.eigvalsh(found.matrix)[0] >= -1e-12
        np.testing.assert_array_equal(np.diag(found.matrix), 1.0)
        wanted = (1.0 - share) * matrix.matrix[inside] + share * target
        np.fill_diagonal(wanted, 1.0)
        np.testing.assert_allclose(found.matrix[inside], wanted, atol=1e-14)
        assert np.all(np.abs(found.matrix) <= 1.0)


@repeatable
@given(
    st.sampled_from(sorted(CONVENTIONS)),
    st.lists(st.floats(-0.01, 0.08), min_size=6, max_size=6),
    st.sampled_from(["ACT/365F", "ACT/360"]),
)
def test_quoted_curves_reprice_their_quotes(currency, rates, day_count):
    deposit, swap = QuoteKind.DEPOSIT, QuoteKind.OVERNIGHT_SWAP
    tenors = ((deposit, "1D"), (deposit, "3M"), (swap, "1Y"), (swap, "18M"), (swap, "5Y"), (swap, "10Y"))
    quotes = [RateQuote(kind, tenor, rate) for (kind, tenor), rate in zip(tenors, rates, strict=True)]
    try:
        found = DiscountCurve.from_quotes("C", currency, "", TODAY, quotes, day_count)
    except ValueError as refused:  # a swap curve may fall too steeply for any discount factor
        assume("no discount factor satisfies" not in str(refused))
        raise
    for quote in reprice(currency, TODAY, quotes, found.discount_factor):
        assert abs(quote.error) < 1e-10


@repeatable
@given(st.lists(st.floats(0.001, 0.05), min_size=4, max_size=4), st.floats(0.0, 0.6))
def test_survival_falls_and_flat_spreads_give_nearly_flat_hazard_rates(spreads, recovery):
    tenors = ["1Y", "3Y", "5Y", "10Y"]
    flat = HazardCurve.from_cds_spreads("N", curve(), recovery, tenors, [spreads[0]] * 4)
    # The credit triangle (common practice): spread over loss, on ACT/360, with premium paid quarterly.
    assert max(flat.hazard_rates) / min(flat.hazard_rates) < 1.01
    assert flat.hazard_rates[0] == pytest.approx(spreads[0] * 365 / 360 / (1.0 - recovery), rel=0.02)
    try:
        found = HazardCurve.from_cds_spreads("N", curve(), recovery, tenors, spreads)
    except ValueError as refused:
        assert "no hazard rate between 0 and 1" in str(refused)
        return
    survival = [found.survival_probability(TODAY + timedelta(days=n)) for n in range(0, 5000, 250)]
    assert survival[0] == 1.0
    assert np.all(np.diff(survival) <= 0.0)


@repeatable
@given(st.floats(-0.95, 0.95), st.floats(0.02, 0.4), st.sampled_from(["EURUSD", "USDEUR"]), ahead)
def test_the_direction_of_a_quote_changes_nothing(rho, level, pair, day):
    """Quoted one way or the other, with the correlation's sign to match, the laws are the same."""
    spot = {"EURUSD": 1.10, "USDEUR": 1.0 / 1.10}
    sign = {"EURUSD": 1.0, "USDEUR": -1.0}
    laws = []
    for quoted in ("EURUSD", pair):
        fx = FxRates.from_pairs(
            {quoted: spot[quoted]}, {quoted: VolatilityCurve.from_quotes(TODAY, [date(2027, 12, 1)], [level])}
        )
        signed = sign[quoted] * rho
        matrix = checked(("CADMUS", quoted), np.array([[1.0, signed], [signed, 1.0]]))[0]
        market = replace(small_market(), fx=fx, correlation=matrix)
        laws.append(
            [market.joint_lognormal(("CADMUS",), day, payment_currency="EUR", conversion=kind) for kind in Conversion]
        )
    for one, other in zip(*laws, strict=True):
        np.testing.assert_allclose(one.forwards, other.forwards, rtol=1e-12)
        np.testing.assert_allclose(one.covariance, other.covariance, rtol=1e-10, atol=1e-16)


@settings(max_examples=15, deadline=None, derandomize=True)
@given(st.integers(0, 2**32 - 1), st.floats(0.0, 0.3))
def test_estimates_with_gaps_are_correlation_matrices_and_ignore_units(seed, gaps):
    random = np.random.default_rng(seed)
    days = [TODAY - timedelta(days=n) for n in range(250)][::-1]
    levels = 100.0 * np.exp(np.cumsum(0.01 * random.standard_normal((250, 4)), axis=0))
    levels[random.random(levels.shape) < gaps] = np.nan
    rules = HistoryRules(minimum_returns=10)
    found = estimate(tuple("ABCD"), days, levels, rules, limit=1.0)
    assert np.linalg.eigvalsh(found.matrix.matrix)[0] >= -1e-12
    other = estimate(tuple("ABCD"), days, levels * [1.0, 7.0, 0.01, 1e4], rules, limit=1.0)
    np.testing.assert_allclose(found.matrix.matrix, other.matrix.matrix, atol=1e-9)
