"""What the gates find in tables that were read: at the cell to blame, refused or in doubt, down to the trades."""

from datetime import date

import pytest

from pricer.core.issues import Severity
from pricer.loader import load_market
from pricer.loader.write import write_tables
from pricer.market.coverage import coverage
from pricer.market.findings import nowhere
from tests.unit.market_tables import full_market
from tests.unit.markets import basket

PAIRS = {"EURUSD": 1.20, "EURGBP": 0.80, "GBPUSD": 1.50}


def load(tmp_path, **tables):
    write_tables(full_market() | tables, tmp_path / "market.xlsx")
    return load_market(tmp_path / "market.xlsx")


def rates(**changes):
    return [{"pair": pair, "spot": rate} for pair, rate in (PAIRS | changes).items()]


def told(market):
    return [(issue.sheet, issue.cell, issue.code, issue.severity) for issue in market.issues]


def test_the_examples_raise_nothing(tmp_path):
    assert told(load(tmp_path)) == []


def test_a_rate_the_wrong_way_round_converts_no_trade(tmp_path):
    market = load(tmp_path, fx=rates(GBPUSD=1 / 1.50))
    assert told(market) == [("fx", "A4", "inconsistent-fx", Severity.ERROR)]
    assert set(market.rejected) == {"GBPUSD"}
    assert market.fx.quotes["GBP", "USD"] == pytest.approx(1 / 1.50)  # still there, so that no cross takes its place
    assert coverage(basket("ORLUMA", expiry=date(2026, 12, 18)), market, nowhere) == ()


def test_a_doubted_rate_is_used_and_its_trades_say_so(tmp_path):
    market = load(tmp_path, fx=rates(EURUSD=1.24))
    assert told(market) == [("fx", "A2", "inconsistent-fx", Severity.WARNING)]
    assert market.rejected == {}
    assert set(market.doubts) == {"fx:EURUSD", "fx:EURGBP", "fx:GBPUSD"}


def volatilities(factor=1.0, spoilt="WEXMOOR"):
    rows = full_market()["volatilities"]
    for row in rows:
        if row["underlying"] == spoilt:
            row["volatility_decimal"] *= factor
    return rows


def test_volatilities_in_the_wrong_unit_mark_their_trades(tmp_path):
    rows = volatilities(0.1, "ORLUMA")
    market = load(tmp_path, volatilities=rows)
    first = next(n for n, row in enumerate(rows, 2) if row["underlying"] == "ORLUMA")
    codes = {issue.code: issue for issue in market.issues}
    issue = codes["implausible-volatility"]
    assert (issue.sheet, issue.column) == ("volatilities", "volatility_decimal")
    assert issue.row is not None and issue.row >= first
    assert "ORLUMA" in market.doubts
    found = [issue.code for issue in coverage(basket("ORLUMA", expiry=date(2026, 12, 18)), market, nowhere)]
    assert "doubtful-market-data" in found or "failing-surface" in found


def test_a_swap_in_the_wrong_unit_is_told_at_its_own_row(tmp_path):
    rows = full_market()["curve_points"]
    number, bad = next((n, row) for n, row in enumerate(rows, 2) if row.get("overnight_swap_rate_decimal"))
    bad["overnight_swap_rate_decimal"] *= 6.0
    market = load(tmp_path, curve_points=rows)
    told_at = [(i.sheet, i.row, i.column) for i in market.issues if i.code == "implausible-forward-rate"]
    assert told_at == [("curve_points", number, "tenor")]
    assert len(market.issues) == 1  # repo rates are not blamed for being far from it


def test_an_agreement_in_a_currency_without_a_curve_is_told_at_its_currency(tmp_path):
    rows = full_market()["agreements"]
    rows[0]["currency"] = "CHF"
    market = load(tmp_path, agreements=rows)
    assert told(market) == [("agreements", "C2", "agreement-without-curve", Severity.WARNING)]


def test_a_spot_in_another_unit_than_its_history(tmp_path):
    spot = full_market()["underlyings"][0]
    history = [
        {
            "date": full_market()["snapshot"][0]["valuation_date"],
            "underlying": spot["underlying"],
            "level": 0.01 * spot["spot"],
        }
    ]
    market = load(tmp_path, price_history=history)
    issues = [issue for issue in market.issues if issue.code == "level-against-history"]
    assert [(issue.sheet, issue.row, issue.column) for issue in issues] == [("underlyings", 2, "spot")]
