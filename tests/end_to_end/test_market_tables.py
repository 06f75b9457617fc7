"""A market with every table: from files to the structures, the same from a workbook as from .csv files."""

from __future__ import annotations

import math
from datetime import date

import openpyxl
import pytest

from pricer.loader import load_market, write_tables
from pricer.market.agreements import Agreement, CloseOut, Collateral
from pricer.market.checked_surface import VolatilityQuote, build_surface
from pricer.market.credit import HazardCurve
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import CashDividend, ProportionalDividend
from pricer.market.funding import FundingCurve
from pricer.market.quoted_curves import QuoteKind, RateQuote, reprice
from pricer.market.repo import RepoCurve
from pricer.market.volatility import VolatilityCurve
from tests.unit.market_tables import VALUATION_DATE, full_market, price_history


@pytest.fixture(scope="module", params=["market.xlsx", "market"])
def market(request, tmp_path_factory):
    path = tmp_path_factory.mktemp("full") / request.param
    write_tables(full_market(), path)
    return load_market(path)


def test_a_market_with_every_table_has_no_issue(market):
    assert market.issues == ()
    assert market.rejected == {}


def test_cash_and_proportional_dividends_stand_side_by_side(market):
    dividends = market.underlyings["WEXMOOR"].dividends
    assert dividends.cash == (CashDividend(date(2026, 8, 6), 0.62),)
    assert dividends.proportional == (ProportionalDividend(date(2027, 8, 5), 0.014),)


def test_repo_rates_are_counted_on_the_underlyings_calendar_and_grow_its_forward(market):
    days = [date(2026, 6, 30), date(2027, 3, 31), date(2029, 3, 30)]
    assert market.repo == {
        "WEXMOOR": RepoCurve.from_zero_rates(
            "WEXMOOR", "GBP", VALUATION_DATE, days, [0.0385, 0.0378, 0.037], [0.0345, 0.0338, 0.0325]
        )
    }
    # By hand: 91 days at (3.85 % + 3.45 %) / 2, no dividend before 30 June.
    assert market.forward("WEXMOOR", days[0]) == pytest.approx(44.1 * math.exp(0.0365 * 91 / 365), rel=1e-13)


def test_a_curve_from_deposits_and_swaps_reprices_them(market):
    quotes = (
        RateQuote(QuoteKind.DEPOSIT, "1M", 0.0375),
        RateQuote(QuoteKind.OVERNIGHT_SWAP, "1Y", 0.0362),
        RateQuote(QuoteKind.OVERNIGHT_SWAP, "5Y", 0.0355),
    )
    curve = market.curves["GBP", ""]
    assert curve == DiscountCurve.from_quotes("GBP-STANDARD", "GBP", "", VALUATION_DATE, quotes, "ACT/365F")
    assert curve.quotes == quotes
    assert [q.error for q in reprice("GBP", VALUATION_DATE, curve.quotes, curve.discount_factor)] == pytest.approx(
        [0.0] * 3, abs=1e-12
    )


def test_only_what_is_more_than_a_volatility_at_the_forward_becomes_a_surface(market):
    assert list(market.surfaces) == ["WEXMOOR"]
    assert market.underlyings["WEXMOOR"].volatility is None
    assert market.underlyings["ORLUMA"].volatility == VolatilityCurve.from_quotes(
        VALUATION_DATE, [date(2026, 6, 19), date(2027, 12, 17)], [0.215, 0.205]
    )


def test_the_surface_is_that_of_the_quotes_in_the_file(market):
    days = date(2026, 9, 18), date(2027, 3, 19), date(2028, 3, 17)
    quotes = [
        *(VolatilityQuote(days[0], v, strike=k) for k, v in ((38.0, 0.2555), (44.0, 0.2255), (50.0, 0.2085))),
        *(VolatilityQuote(days[1], v, relative_strike=k) for k, v in ((0.85, 0.2465), (1.0, 0.226), (1.15, 0.2125))),
        VolatilityQuote(days[2], 0.2275, skew=-0.085, curvature=0.12),
    ]
    expected = build_surface("WEXMOOR", market.affine_price("WEXMOOR"), VALUATION_DATE, quotes)
    found = market.surfaces["WEXMOOR"]
    assert (found.quotes, found.violations, found.failures) == (
        expected.quotes,
        expected.violations,
        expected.failures,
    )
    assert found.passes


def test_correlations_hold_currency_pairs_and_covariances_use_them(market):
    day = date(2027, 12, 17)
    covariance = market.log_covariance(["ORLUMA", "USDEUR"], day)
    # By hand: volatilities change on 19 June 2026, 80 days from tonight; 626 days in all.
    spans = [80 / 365, 546 / 365]
    orluma = [0.215**2 * 80 / 365, 0.205**2 * 626 / 365]
    pair = [0.072**2 * 80 / 365, 0.076**2 * 626 / 365]
    later = math.sqrt((orluma[1] - orluma[0]) / spans[1] * (pair[1] - pair[0]) / spans[1])
    assert covariance[0, 1] == pytest.approx(0.12 * (0.215 * 0.072 * spans[0] + later * spans[1]), rel=1e-12)


def test_credit_funding_and_agreements_are_as_given(market):
    assert market.credit == {
        "Guldmar Bank": HazardCurve.from_cds_spreads(
            "Guldmar Bank", market.curves["EUR", ""], 0.4, ["1Y", "5Y"], [0.0065, 0.0125]
        )
    }
    quotes = market.quotes.credit["Guldmar Bank"]
    assert (quotes.currency, quotes.recovery, quotes.tenors, quotes.spreads) == (
        "EUR",
        0.4,
        ("1Y", "5Y"),
        (0.0065, 0.0125),
    )
    assert market.funding == FundingCurve.from_zero_spreads(
        VALUATION_DATE, [date(2027, 3, 31), date(2031, 3, 31)], [0.0085, 0.0125], [0.0015, 0.002]
    )
    assert market.agreements == {
        "GUL-1": Agreement(
            "GUL-1", "Guldmar Bank", "EUR", Collateral.TWO_WAY, 2e6, 2e6, 250e3, 500e3, -0.001, 10,
            CloseOut.REPLACEMENT_VALUE,
        ),
        "OST-1": Agreement("OST-1", "Ostrevane Trust", "EUR"),
    }  # fmt: skip


def test_a_workbook_and_csv_files_give_equal_structures(tmp_path):
    tables = full_market()
    tables["snapshot"][0]["correlation_source"] = "price history"
    del tables["correlations"]
    tables["price_history"] = price_history([*(row["underlying"] for row in tables["underlyings"]), "EURUSD"])
    markets = []
    for name in ("market.xlsx", "market"):
        write_tables(tables, tmp_path / name)
        markets.append(load_market(tmp_path / name))
    one, other = markets
    for part in ("underlyings", "curves", "repo", "credit", "funding", "agreements", "fx", "issues", "rejected"):
        assert getattr(one, part) == getattr(other, part), part
    assert (one.correlation.matrix == other.correlation.matrix).all()
    assert one.correlation.ids == other.correlation.ids
    assert one.surfaces["WEXMOOR"].quotes == other.surfaces["WEXMOOR"].quotes
    assert one.quotes.credit == other.quotes.credit


def test_quality_gates_point_at_the_cells_of_the_new_tables(tmp_path):
    tables = full_market()
    tables["repo"][2]["long_rate_decimal"] = 0.31
    tables["dividends"][2]["cash_amount"] = 25.0
    tables["credit"][0]["cds_spread_decimal"] = 0.35
    tables["credit"][1]["cds_spread_decimal"] = 0.35
    tables["fx"].append({"pair": "GBPUSD", "spot": 1.2806})
    tables["fx_volatilities"] += [
        {"pair": "EURGBP", "expiry_date": date(2026, 6, 19), "volatility_decimal": 0.05},
        {"pair": "GBPUSD", "expiry_date": date(2026, 6, 19), "volatility_decimal": 0.2},
    ]
    write_tables(tables, tmp_path / "market.xlsx")
    market = load_market(tmp_path / "market.xlsx")
    assert {(issue.code, issue.sheet, issue.cell) for issue in market.issues} >= {
        ("implausible-rate", "repo", "B4"),
        ("heavy-cash-dividends", "dividends", "A4"),
        ("implausible-hazard-rate", "credit", "A2"),
        ("inconsistent-fx-volatility", "fx_volatilities", "A5"),
    }


def test_the_template_has_a_sheet_with_notes_for_every_table(tmp_path):
    from pricer.loader import write_templates

    write_templates(tmp_path)
    workbook = openpyxl.load_workbook(tmp_path / "market.xlsx")
    assert workbook.sheetnames == [
        "read me", "snapshot", "underlyings", "dividends", "repo", "volatilities", "correlations", "price_history",
        "fixings", "curves", "curve_points", "fx", "fx_volatilities", "credit", "funding", "agreements", "examples",
    ]  # fmt: skip
    notes = {cell.value: cell.comment.text for cell in workbook["volatilities"][1]}
    assert notes["strike_of_forward_decimal"] == (
        "The strike as a part of the forward for the expiry date, as a decimal (0.95 = 95 %).\n"
        "Leave blank for a strike in currency, or for a quote at the forward.\n"
        "Allowed: a decimal number above 0 and no larger than 10.\n"
        "Example: 0.95"
    )
    lists = [str(rule.formula1) for rule in workbook["agreements"].data_validations.dataValidation]
    assert lists == ['"none,two-way,one-way to desk,one-way to counterparty"', '"risk-free mark,replacement value"']
