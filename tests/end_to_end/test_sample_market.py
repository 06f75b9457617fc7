"""The sample's market: it holds what it is meant to show, and every trade of the sample can be priced on it."""

from __future__ import annotations

from collections import Counter
from copy import deepcopy
from functools import lru_cache

import numpy as np
import pytest

from pricer.contracts.book import Model
from pricer.contracts.option import Conversion, EuropeanOption
from pricer.core.issues import Severity
from pricer.loader import load_book, load_market, write_tables
from pricer.market.calendars import year_fraction
from pricer.market.quoted_curves import reprice
from pricer.run.admission import admit
from tests.end_to_end.desk import SAMPLE, saltmarsh, sample_maker


@lru_cache
def market():
    return load_market(SAMPLE / "market.xlsx")


@lru_cache
def book():
    return load_book(SAMPLE / "book.xlsx")


@lru_cache
def tables():
    return sample_maker().market_tables()


def changed(folder, **changes):
    """The sample's market with other tables, written and read again."""
    path = folder / "market.xlsx"
    write_tables({**deepcopy(tables()), **changes}, path)
    return load_market(path)


def test_nothing_is_wrong_with_it():
    assert market().issues == ()
    assert market().rejected == {}


def test_every_trade_can_be_priced_on_it_and_little_is_odd_about_any():
    """18 June 2027 is a holiday in New York (the 19th is a Saturday); the sample's README tells the rest."""
    admitted = admit(book(), market())
    assert admitted.refusals == ()
    assert len(admitted) == 156
    found = [(issue.code, issue.trade_id) for issue in admitted.issues if issue not in market().issues]
    assert found == [
        *(("expiry-on-holiday", trade_id) for trade_id in ("SMD-0021", "SMD-0048", "SMD-0057")),
        ("observed-on-ex-date", "SMD-0102"),
        ("touch-not-recorded", "SMD-0103"),
        *(("spot-for-fixing", trade_id) for trade_id in ("SMD-0115", "SMD-0120", "SMD-0133", "SMD-0153")),
    ]


def test_csv_files_and_workbook_hold_the_same_market():
    folder = load_market(SAMPLE / "market")
    for name in ("underlyings", "curves", "repo", "fx", "credit", "funding", "agreements"):
        assert getattr(folder, name) == getattr(market(), name), name
    assert np.array_equal(folder.correlation.matrix, market().correlation.matrix)
    assert folder.surfaces.keys() == market().surfaces.keys()
    for name, surface in folder.surfaces.items():
        assert surface.quotes == market().surfaces[name].quotes


def test_it_uses_every_table_and_every_way_of_quoting():
    m = market()
    assert set(m.surfaces) == set(m.underlyings) - {"WEXMOOR"}
    assert m.underlyings["WEXMOOR"].volatility is not None
    assert set(m.repo) == {"ORLUMA", "PELLOMAR", "KRUNTEL", "DRUVEX"}
    assert all(
        repo.long.zero_rate(day) > repo.short.zero_rate(day) for repo in m.repo.values() for day in repo.mid.dates
    )
    assert len(m.credit) == 6
    assert m.funding is not None
    assert {trade.netting_set for trade in book()} == set(m.agreements)
    assert {trade.counterparty for trade in book()} <= set(m.credit)
    assert {name for name in m.correlation.ids if name not in m.underlyings} == {"EURUSD", "EURGBP"}
    assert set(m.curves) == {("EUR", ""), ("USD", ""), ("GBP", ""), ("EUR", "USD"), ("GBP", "EUR")}
    assert sum(bool(u.dividends.cash) for u in m.underlyings.values()) == 7


def test_surfaces_pass_and_meet_their_quotes():
    """0.02 vol points: quotes are rounded to 0.01, and a fit of another family cannot be asked for more."""
    for name, surface in market().surfaces.items():
        assert surface.passes, name
        assert surface.violations == (), name
        middle = [abs(quote.error) for quote in surface.quotes if 0.10 <= quote.delta <= 0.90]
        assert max(middle) <= 2e-4, name


def test_each_smile_by_strike_has_seven_to_nine_quotes_at_each_of_eight_expiries():
    by_strike = Counter(
        (row["underlying"], row["expiry_date"])
        for row in tables()["volatilities"]
        if row.get("strike") or row.get("strike_of_forward_decimal")
    )
    assert len(by_strike) == 9 * 8
    assert set(by_strike.values()) <= {7, 8, 9}


def test_smiles_are_steeper_the_sooner_they_expire():
    """Volatility at 95 % less that at 105 % of the forward, for the first, the fourth and the last expiry."""
    expiries = saltmarsh("volatilities").EXPIRIES
    times = [year_fraction(market().valuation_date, expiries[i]) for i in (0, 3, -1)]
    for name, surface in market().surfaces.items():
        low, high = (surface.surface.volatility(np.log(strike), times) for strike in (0.95, 1.05))
        first, middle, last = low - high
        assert first > middle > last > 0.0, name


def test_the_euro_curve_meets_its_deposits_and_swaps():
    maker, curve = saltmarsh("rates"), market().curves["EUR", ""]
    found = reprice("EUR", market().valuation_date, maker.euro_quotes(), curve.discount_factor)
    assert len(found) == 12
    assert max(abs(quote.error) for quote in found) < 1e-10


def test_at_least_ten_trades_expire_before_cash_dividends_that_their_shares_still_pay():
    season = [trade for trade in book() if trade.strategy == "dividend season"]
    assert len(season) == 10
    for trade in season:
        _, floors = market().affine_levels(trade.contract.underlyings, trade.contract.expiry_date)
        assert floors.max() > 0.0, trade.trade_id


def test_quantos_composites_and_models_are_in_the_book():
    conversions = Counter(trade.contract.conversion for trade in book())
    assert conversions == {None: 139, Conversion.QUANTO: 10, Conversion.COMPOSITE: 7}
    models = Counter(trade.model for trade in book())
    assert models[Model.LOCAL_VOLATILITY] >= 5
    assert models[Model.LOGNORMAL] >= 2


def test_fixings_of_composites_are_in_the_trades_currency():
    for trade in book():
        contract = trade.contract
        if contract.conversion is Conversion.COMPOSITE and contract.on_performance:
            is_european = isinstance(contract, EuropeanOption)
            fixings = contract.reference_levels if is_european else contract.levels.references
            for name, fixing in zip(contract.underlyings, fixings, strict=True):
                spot = market().spot_in(name, trade.currency, Conversion.COMPOSITE)
                assert 0.85 < fixing / spot < 1.15, (trade.trade_id, name)


def test_correlations_can_be_estimated_from_the_history_instead(tmp_path):
    """130 weekdays and a half-life of 60 leave about 100 returns: a standard error of 0.1 per correlation."""
    snapshot = [{**tables()["snapshot"][0], "correlation_source": "price history"}]
    estimated = changed(tmp_path, snapshot=snapshot)
    assert set(estimated.correlation.ids) == set(market().correlation.ids)
    difference = estimated.correlation.sub(market().correlation.ids) - market().correlation.matrix
    assert 0.0 < np.sqrt(np.mean(difference**2)) < 0.15
    assert admit(book(), estimated).refusals == ()
    # Exchanges are closed on different days; a level that none could have is not missing.
    assert estimated.issues == ()


@pytest.mark.parametrize(
    "name", ["dividends", "repo", "price_history", "fixings", "fx_volatilities", "credit", "funding", "agreements"]
)
def test_it_loads_without_any_of_its_optional_tables(tmp_path, name):
    rest = {table: rows for table, rows in tables().items() if table != name}
    write_tables(rest, tmp_path / "market.xlsx")
    found = load_market(tmp_path / "market.xlsx")
    assert all(issue.severity is Severity.WARNING for issue in found.issues)
    assert found.rejected == {}
