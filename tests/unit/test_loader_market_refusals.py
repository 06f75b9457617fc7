"""Every refusal of the market's tables of carry, smiles, quotes, credit and collateral, word for word."""

from __future__ import annotations

from datetime import date

import pytest

from pricer.core.issues import InputError
from pricer.loader import load_market, write_tables
from tests.unit.market_tables import full_market


def changed(table, row, **values):
    """A change of some cells of one row, counted from 0."""

    def change(tables):
        tables[table][row].update(values)

    return change


def added(table, **values):
    """One more row."""
    return lambda tables: tables[table].append(values)


def replaced(table, rows):
    """Other rows."""
    return lambda tables: tables.update({table: rows})


def replaced_dates(table, rows, day):
    """Another expiry date in some rows."""

    def change(tables):
        for row in tables[table][rows]:
            row["expiry_date"] = day

    return change


def without_gbp(tables):
    """WEXMOOR is quoted by strike, but nothing tells its forward."""
    tables["repo"] = []
    tables["curves"] = tables["curves"][:2]
    tables["curve_points"] = tables["curve_points"][:5]


def quoted_in_sek(tables):
    tables["curves"].append({"curve": "SEK", "currency": "SEK", "day_count": "ACT/360"})
    tables["curve_points"].append({"curve": "SEK", "tenor": "1Y", "deposit_rate_decimal": 0.02})


def told(issues):
    """Severity and text, without the part of the place that is the same in all."""
    return [f"{issue.severity}: {issue}".replace("market.xlsx, sheet ", "") for issue in issues]


# What is wrong, how it is done, the messages, and what it costs.
CASES = [
    pytest.param(
        changed("dividends", 2, fraction_of_spot_decimal=0.01),
        [
            'error: dividends, row 4, column "fraction_of_spot_decimal" (cell D4): found 0.01; expected a '
            "blank cell, as this is for rows without cash_amount only. Clear the cell, or correct "
            "cash_amount.",
        ],
        ["WEXMOOR"],
        id="a dividend both in cash and as a fraction",
    ),
    pytest.param(
        changed("dividends", 2, cash_amount=None),
        [
            'error: dividends, row 4, column "fraction_of_spot_decimal" (cell D4): found a blank cell; '
            "expected a decimal number of at least 0 and below 1, as there is no cash_amount either. Enter "
            "the part of the price that is paid out, as a decimal (0.018 = 1.8 %), e.g. 0.018.",
        ],
        ["WEXMOOR"],
        id="a dividend of nothing",
    ),
    pytest.param(
        changed("dividends", 2, cash_amount=-1.0),
        [
            'error: dividends, row 4, column "cash_amount" (cell C4): found -1; expected a number of at '
            "least 0. Enter the amount per share, in the underlying's currency, e.g. 1.85, or clear the "
            "cell where there is a fraction of the price.",
        ],
        ["WEXMOOR"],
        id="a negative dividend",
    ),
    pytest.param(
        added("dividends", underlying="WEXMOOR", ex_date=date(2026, 8, 6), cash_amount=0.2),
        [
            'error: dividends, row 6, column "ex_date" (cell B6): found the date 2026-08-06, also in row 4; '
            "expected each date once. Delete one of the two rows.",
        ],
        ["WEXMOOR"],
        id="two cash dividends on one day",
    ),
    pytest.param(
        changed("dividends", 2, cash_amount=100.0),
        [
            'error: dividends, row 4, column "underlying" (cell A4): found the cash dividends of WEXMOOR to '
            "2026-08-06 are worth 98.7375 tonight, and its spot is 44.1: a price cannot lie below the "
            "dividends it is still to pay; expected cash dividends worth less than the spot. Correct the "
            "amounts or the spot, or enter dividends far ahead as proportional ones.",
        ],
        ["WEXMOOR"],
        id="cash dividends above the spot",
    ),
    pytest.param(
        changed("repo", 0, short_rate_decimal=3.45),
        [
            'error: repo, row 2, column "short_rate_decimal" (cell E2): found 3.45; expected a decimal '
            "number no larger than 1. Did you mean 0.0345 (3.45 %)?",
        ],
        ["WEXMOOR"],
        id="a repo rate in percentage points",
    ),
    pytest.param(
        changed("repo", 0, short_rate_decimal=0.05),
        [
            'error: repo, row 2, column "short_rate_decimal" (cell E2): found 0.05; expected a number of at '
            "most 0.0385, the rate paid long in long_rate_decimal. Correct one of the two, or swap them.",
        ],
        ["WEXMOOR"],
        id="repo rates that are swapped",
    ),
    pytest.param(
        changed("repo", 2, long_rate_decimal=0.03695, short_rate_decimal=0.0369),
        [
            'error: repo, row 4, column "short_rate_decimal" (cell E4): found repo of WEXMOOR, long: from '
            "2027-03-31 to 2029-03-30 the forward short rate 3.8450 % exceeds the forward long rate 3.6525 "
            "%; expected forward rates earned that do not exceed those paid. Correct the rates at the two "
            "ends of this span.",
        ],
        ["WEXMOOR"],
        id="repo rates whose forward rates cross",
    ),
    pytest.param(
        changed("repo", 0, date=date(2027, 1, 4)),
        [
            'error: repo, row 2, column "tenor" (cell C2): found 3M; expected a blank cell, as this is for '
            "rows without date only. Clear the cell, or correct date.",
        ],
        ["WEXMOOR"],
        id="repo by date and tenor",
    ),
    pytest.param(
        changed("repo", 0, tenor=None),
        [
            'error: repo, row 2, column "tenor" (cell C2): found a blank cell; expected a tenor: a whole '
            "number and D, W, M or Y, such as 3M, as there is no date either. Enter the point's tenor, e.g. "
            "1Y.",
        ],
        ["WEXMOOR"],
        id="repo without date and tenor",
    ),
    pytest.param(
        changed("repo", 2, date=date(2027, 3, 31)),
        [
            'error: repo, row 4, column "date" (cell B4): found a second point on 2027-03-31, as in row 3; '
            "expected each date once in a curve. Delete one of the two rows.",
        ],
        ["WEXMOOR"],
        id="two repo rates on one day",
    ),
    pytest.param(
        changed("repo", 2, date=date(2026, 3, 30)),
        [
            'warning: repo, row 4, column "date" (cell B4): found the date 2026-03-30; expected a date '
            "after the valuation date 2026-03-31. Ignored. Delete the row.",
        ],
        [],
        id="a repo rate that is over",
    ),
    pytest.param(
        replaced("repo", [dict(full_market()["repo"][2], date=date(2026, 3, 30))]),
        [
            'warning: repo, row 2, column "date" (cell B2): found the date 2026-03-30; expected a date '
            "after the valuation date 2026-03-31. Ignored. Delete the row.",
            'error: repo, row 2, column "date" (cell B2): found no point after 2026-03-31; expected at '
            "least one. Add points to the curve.",
        ],
        ["WEXMOOR"],
        id="nothing but repo rates that are over",
    ),
    pytest.param(
        added("repo", underlying="ZZZ", tenor="1Y", long_rate_decimal=0.03, short_rate_decimal=0.02),
        [
            'error: repo, row 5, column "underlying" (cell A5): found "ZZZ"; expected a known underlying. '
            "Not used. Add it to its own table, or delete these rows.",
        ],
        [],
        id="repo of an unknown underlying",
    ),
    pytest.param(
        changed("volatilities", 5, strike_of_forward_decimal=0.9),
        [
            'error: volatilities, row 7, column "strike_of_forward_decimal" (cell E7): found 0.9; expected '
            "a blank cell, as this is for rows without strike only. Clear the cell, or correct strike.",
        ],
        ["WEXMOOR"],
        id="a volatility with two strikes",
    ),
    pytest.param(
        changed("volatilities", 5, skew_decimal=-0.1),
        [
            'error: volatilities, row 7, column "skew_decimal" (cell F7): found -0.1; expected a blank '
            "cell, as this is for rows without strike only. Clear the cell, or correct strike.",
        ],
        ["WEXMOOR"],
        id="a skew at a strike",
    ),
    pytest.param(
        changed("volatilities", 8, curvature_decimal=0.1),
        [
            'error: volatilities, row 10, column "curvature_decimal" (cell G10): found 0.1; expected a '
            "blank cell, as this is for rows without strike_of_forward_decimal only. Clear the cell, or "
            "correct strike_of_forward_decimal.",
        ],
        ["WEXMOOR"],
        id="a curvature at a relative strike",
    ),
    pytest.param(
        changed("volatilities", 8, strike_of_forward_decimal=85.0),
        [
            'error: volatilities, row 10, column "strike_of_forward_decimal" (cell E10): found 85; expected '
            "a decimal number above 0 and no larger than 10. Did you mean 0.85 (85 %)?",
        ],
        ["WEXMOOR"],
        id="a relative strike in percent",
    ),
    pytest.param(
        changed("volatilities", 11, skew_decimal=-8.5),
        [
            'error: volatilities, row 13, column "skew_decimal" (cell F13): found -8.5; expected a decimal '
            "number no larger than 5. Did you mean -0.085 (-8.5 %)?",
        ],
        ["WEXMOOR"],
        id="a skew in vol points",
    ),
    pytest.param(
        changed("volatilities", 6, strike=38.0),
        [
            'error: volatilities, row 8, column "volatility_decimal" (cell C8): found two volatilities for '
            "2026-09-18 at strike 38, 0.2555 and 0.2255; expected one volatility for a strike. Remove one "
            "of them.",
        ],
        ["WEXMOOR"],
        id="two volatilities at one strike",
    ),
    pytest.param(
        replaced("volatilities", full_market()["volatilities"][:9]),
        [
            'error: volatilities, row 10, column "volatility_decimal" (cell C10): found a single volatility '
            "for 2027-03-19, without skew, while other expiries have smiles; expected at least three "
            "strikes, or a skew. Enter volatilities of more strikes, or the skew at the forward (0 if it is "
            "known to be flat).",
        ],
        ["WEXMOOR"],
        id="an expiry with one strike among smiles",
    ),
    pytest.param(
        changed("volatilities", 11, expiry_date=date(2027, 3, 19)),
        [
            'error: volatilities, row 10, column "volatility_decimal" (cell C10): found a skew or curvature '
            "beside quotes at strikes for 2027-03-19; expected volatilities at strikes, or one at the "
            "forward with skew and curvature. Keep one of the two ways to quote this expiry.",
        ],
        ["WEXMOOR"],
        id="a skew beside strikes",
    ),
    pytest.param(
        replaced_dates("volatilities", slice(5, 8), date(2026, 3, 20)),
        [
            'warning: volatilities, row 7, column "expiry_date" (cell B7): found the date 2026-03-20 (and 2 '
            "more rows); expected an expiry after the valuation date 2026-03-31. Ignored. Delete the rows.",
        ],
        [],
        id="a smile that has expired",
    ),
    pytest.param(
        without_gbp,
        [
            'error: volatilities, row 7, column "volatility_decimal" (cell C7): found quotes by strike or '
            "skew of WEXMOOR, which has no forward: GBP has no usable standard curve; expected an "
            "underlying with a forward, from which strikes are measured. Mend the underlying's curve or "
            "dividends first.",
        ],
        ["WEXMOOR"],
        id="strikes without a forward",
    ),
    pytest.param(
        changed("curve_points", 5, overnight_swap_rate_decimal=0.03),
        [
            'error: curve_points, row 7, column "overnight_swap_rate_decimal" (cell F7): found 0.03; '
            "expected a blank cell, as this is for rows without deposit_rate_decimal only. Clear the cell, "
            "or correct deposit_rate_decimal.",
        ],
        ["GBP-STANDARD"],
        id="a deposit and a swap rate in one row",
    ),
    pytest.param(
        changed("curve_points", 5, tenor=None, date=date(2027, 1, 4)),
        [
            'error: curve_points, row 7, column "deposit_rate_decimal" (cell E7): found 0.0375; expected a '
            "blank cell, as this is for rows with a tenor only. Clear the cell, or correct date.",
        ],
        ["GBP-STANDARD"],
        id="a quoted rate by date",
    ),
    pytest.param(
        changed("curve_points", 5, deposit_rate_decimal=None),
        [
            'error: curve_points, row 7, column "discount_factor" (cell G7): found a blank cell; expected a '
            "decimal number above 0 and no larger than 3, as the row has no other value. Enter the discount "
            "factor, e.g. 0.9777.",
        ],
        ["GBP-STANDARD"],
        id="a point without a value",
    ),
    pytest.param(
        changed("curve_points", 5, deposit_rate_decimal=None, zero_rate_decimal=0.03),
        [
            'error: curve_points, row 8, column "overnight_swap_rate_decimal" (cell F8): found the '
            "overnight_swap_rate_decimal 0.0362; expected a zero_rate_decimal in all points of curve "
            '"GBP-STANDARD", or in none. Give all points of a curve in one way.',
        ],
        ["GBP-STANDARD"],
        id="a zero rate among quoted rates",
    ),
    pytest.param(
        changed("curve_points", 7, tenor="1Y"),
        [
            'error: curve_points, row 9, column "tenor" (cell C9): found a second '
            "overnight_swap_rate_decimal of 1Y, as in row 8; expected each tenor once for a kind of quote. "
            "Delete one of the two rows.",
        ],
        ["GBP-STANDARD"],
        id="two swap rates of one tenor",
    ),
    pytest.param(
        changed("curve_points", 5, tenor="1Y"),
        [
            'error: curve_points, row 7, column "deposit_rate_decimal" (cell E7): found curve GBP-STANDARD: '
            "the 1Y deposit and the 1Y overnight swap both end on 2027-03-31: keep one; expected points "
            "that make a curve. Correct or delete the point named.",
        ],
        ["GBP-STANDARD"],
        id="two kinds of quotes that end on one day",
    ),
    pytest.param(
        changed("curve_points", 7, overnight_swap_rate_decimal=0.9),
        [
            'error: curve_points, row 9, column "overnight_swap_rate_decimal" (cell F9): found curve '
            "GBP-STANDARD: no discount factor satisfies the 5Y overnight swap at 0.9 after the quotes "
            "before it; expected points that make a curve. Correct or delete the point named.",
        ],
        ["GBP-STANDARD"],
        id="a quoted rate that no curve satisfies",
    ),
    pytest.param(
        quoted_in_sek,
        [
            'error: curve_points, row 12, column "deposit_rate_decimal" (cell E12): found a quoted rate in '
            "SEK; expected quoted rates in EUR, USD, GBP, JPY, CHF only, whose conventions are known. Give "
            "zero rates or discount factors in all points of the curve.",
        ],
        ["SEK"],
        id="a quoted rate of a currency without conventions",
    ),
    pytest.param(
        changed("fx_volatilities", 0, volatility_decimal=7.2),
        [
            'error: fx_volatilities, row 2, column "volatility_decimal" (cell C2): found 7.2; expected a '
            "decimal number above 0 and no larger than 3. Did you mean 0.072 (7.2 %)?",
        ],
        ["fx_volatilities:EURUSD"],
        id="a volatility of a pair in percentage points",
    ),
    pytest.param(
        added("fx_volatilities", pair="USDEUR", expiry_date=date(2027, 1, 4), volatility_decimal=0.07),
        [
            'error: fx_volatilities, row 2, column "pair" (cell A2): found the pair EURUSD, and its inverse '
            "in row 4; expected each pair of currencies in one direction. Delete one of the two rows.",
            'error: fx_volatilities, row 4, column "pair" (cell A4): found the pair USDEUR, and its inverse '
            "in row 2; expected each pair of currencies in one direction. Delete one of the two rows.",
        ],
        ["fx_volatilities:EURUSD", "fx_volatilities:USDEUR"],
        id="volatilities of a pair and of its inverse",
    ),
    pytest.param(
        changed("fx_volatilities", 0, expiry_date=date(2026, 3, 2)),
        [
            'warning: fx_volatilities, row 2, column "expiry_date" (cell B2): found the date 2026-03-02; '
            "expected an expiry after the valuation date 2026-03-31. Ignored. Delete the row.",
        ],
        [],
        id="a volatility of a pair that has expired",
    ),
    pytest.param(
        changed("fx_volatilities", 1, expiry_date=date(2026, 6, 19)),
        [
            'error: fx_volatilities, row 3, column "expiry_date" (cell B3): found the date 2026-06-19, also '
            "in row 2; expected each date once. Delete one of the two rows.",
        ],
        ["fx_volatilities:EURUSD"],
        id="two volatilities of a pair for one expiry",
    ),
    pytest.param(
        changed("fx_volatilities", 1, volatility_decimal=0.02),
        [
            'error: fx_volatilities, row 3, column "volatility_decimal" (cell C3): found 0.02: total '
            "variance falls from 0.001136 on 2026-06-19 to 0.000686 on 2027-12-17, by 0.000450; the "
            "volatility of 2027-12-17 must be at least 2.58 %; expected total variance (volatility squared "
            "times years) that does not fall with time. Correct this volatility or that of 2026-06-19.",
        ],
        ["fx_volatilities:EURUSD"],
        id="volatilities of a pair whose variance falls",
    ),
    pytest.param(
        changed("fx_volatilities", 1, pair="EUREUR"),
        [
            'error: fx_volatilities, row 3, column "pair" (cell A3): found "EUREUR"; expected two different '
            "currency codes of ISO 4217 written together, such as EURUSD. Enter two currencies, in either "
            "order, e.g. EURUSD.",
        ],
        [],
        id="a pair of one currency",
    ),
    pytest.param(
        changed("credit", 0, cds_spread_decimal=65.0),
        [
            'error: credit, row 2, column "cds_spread_decimal" (cell C2): found 65; expected a decimal '
            "number above 0 and no larger than 1. Did you mean 0.0065 (65 basis points)?",
        ],
        ["credit:Guldmar Bank"],
        id="a spread in basis points",
    ),
    pytest.param(
        changed("credit", 0, cds_spread_decimal=1.2),
        [
            'error: credit, row 2, column "cds_spread_decimal" (cell C2): found 1.2; expected a decimal '
            "number above 0 and no larger than 1. Did you mean 0.012 (1.2 %) or 0.00012 (1.2 basis points)?",
        ],
        ["credit:Guldmar Bank"],
        id="a spread in percentage points",
    ),
    pytest.param(
        changed("credit", 0, cds_spread_decimal=0.0),
        [
            'error: credit, row 2, column "cds_spread_decimal" (cell C2): found 0; expected a decimal '
            "number above 0 and no larger than 1. Enter the running spread per year, as a decimal (0.0125 = "
            "125 basis points), e.g. 0.0125.",
        ],
        ["credit:Guldmar Bank"],
        id="a spread of nothing",
    ),
    pytest.param(
        changed("credit", 1, recovery_decimal=40.0),
        [
            'error: credit, row 3, column "recovery_decimal" (cell D3): found 40; expected a decimal number '
            "of at least 0 and below 1. Did you mean 0.4 (40 %)?",
        ],
        ["credit:Guldmar Bank"],
        id="a recovery in percent",
    ),
    pytest.param(
        changed("credit", 1, recovery_decimal=0.3),
        [
            'error: credit, row 3, column "recovery_decimal" (cell D3): found 0.3, but 0.4 in row 2; '
            'expected one recovery_decimal for "Guldmar Bank". Correct one of them.',
        ],
        ["credit:Guldmar Bank"],
        id="two recoveries of one name",
    ),
    pytest.param(
        changed("credit", 1, currency="USD"),
        [
            'error: credit, row 3, column "currency" (cell E3): found USD, but EUR in row 2; expected one '
            'currency for "Guldmar Bank". Correct one of them.',
        ],
        ["credit:Guldmar Bank"],
        id="two currencies of one name",
    ),
    pytest.param(
        replaced("credit", [dict(full_market()["credit"][0], currency="CHF")]),
        [
            'error: credit, row 2, column "currency" (cell E2): found CHF, which has no usable standard '
            "curve; expected a currency with a curve without collateral in the table curves. Add or mend "
            "the curve, or correct the currency.",
        ],
        ["credit:Guldmar Bank"],
        id="a spread in a currency without a curve",
    ),
    pytest.param(
        changed("credit", 1, tenor="1Y"),
        [
            'error: credit, row 3, column "tenor" (cell B3): found a second spread of 1Y, as in row 2; '
            "expected each tenor once for a name. Delete one of the two rows.",
        ],
        ["credit:Guldmar Bank"],
        id="two spreads of one tenor",
    ),
    pytest.param(
        changed("credit", 0, cds_spread_decimal=0.2),
        [
            'error: credit, row 3, column "cds_spread_decimal" (cell C3): found credit Guldmar Bank: no '
            "hazard rate between 0 and 1 a year satisfies the spread 125 bp of 5Y after the spreads before "
            "it; expected spreads from which hazard rates follow. Correct the spreads, or leave one of the "
            "tenors out.",
        ],
        ["credit:Guldmar Bank"],
        id="spreads that no hazard rates satisfy",
    ),
    pytest.param(
        changed("funding", 0, lending_spread_decimal=15.0),
        [
            'error: funding, row 2, column "lending_spread_decimal" (cell D2): found 15; expected a decimal '
            "number no larger than 1. Did you mean 0.0015 (15 basis points)?",
        ],
        ["funding"],
        id="a funding spread in basis points",
    ),
    pytest.param(
        changed("funding", 0, lending_spread_decimal=0.02),
        [
            'error: funding, row 2, column "lending_spread_decimal" (cell D2): found 0.02; expected a '
            "number of at most 0.0085, the spread paid in borrowing_spread_decimal. Correct one of the two, "
            "or swap them.",
        ],
        ["funding"],
        id="funding spreads that are swapped",
    ),
    pytest.param(
        changed("funding", 1, lending_spread_decimal=0.0124),
        [
            'error: funding, row 3, column "lending_spread_decimal" (cell D3): found funding, borrowing: '
            "from 2027-03-31 to 2031-03-31 the forward lending rate 1.5123 % exceeds the forward borrowing "
            "rate 1.3499 %; expected forward rates earned that do not exceed those paid. Correct the rates "
            "at the two ends of this span.",
        ],
        ["funding"],
        id="funding spreads whose forward spreads cross",
    ),
    pytest.param(
        changed("agreements", 1, counterparty_threshold=1e6, margin_period_days=5),
        [
            'error: agreements, row 3, column "counterparty_threshold" (cell E3): found 1000000; expected a '
            "blank cell, as this is for agreements in which the counterparty posts only. Clear the cell, or "
            "correct collateral.",
            'error: agreements, row 3, column "margin_period_days" (cell J3): found 5; expected a blank '
            "cell, as this is for agreements with collateral only. Clear the cell, or correct collateral.",
        ],
        ["agreements:OST-1"],
        id="terms of collateral without collateral",
    ),
    pytest.param(
        changed("agreements", 0, collateral="one-way to desk"),
        [
            'error: agreements, row 2, column "desk_threshold" (cell F2): found 2000000; expected a blank '
            "cell, as this is for agreements in which the desk posts only. Clear the cell, or correct "
            "collateral.",
        ],
        ["agreements:GUL-1"],
        id="a threshold of a desk that does not post",
    ),
    pytest.param(
        changed("agreements", 0, collateral="2-way"),
        [
            'error: agreements, row 2, column "collateral" (cell D2): found "2-way"; expected one of: none, '
            'two-way, one-way to desk, one-way to counterparty. Did you mean "two-way"?',
        ],
        ["agreements:GUL-1"],
        id="an unknown kind of collateral",
    ),
    pytest.param(
        changed("agreements", 1, netting_set="GUL-1"),
        [
            'error: agreements, row 3, column "netting_set" (cell A3): found "GUL-1", also in row 2; '
            "expected each netting_set once. Delete or rename one of the two rows.",
        ],
        ["agreements:GUL-1"],
        id="two agreements of one netting set",
    ),
    pytest.param(
        changed("agreements", 0, minimum_transfer_amount=-1.0, margin_period_days=2.5),
        [
            'error: agreements, row 2, column "minimum_transfer_amount" (cell G2): found -1; expected a '
            "number of at least 0. Enter the smallest transfer, in the agreement's currency, e.g. 250000, "
            "or clear the cell for none.",
            'error: agreements, row 2, column "margin_period_days" (cell J2): found 2.5; expected a whole '
            "number from 0 to 260. Enter the business days from the last collateral received to the "
            "close-out, e.g. 10, or clear the cell for none.",
        ],
        ["agreements:GUL-1"],
        id="amounts and days that cannot be",
    ),
    pytest.param(
        changed("snapshot", 0, correlation_source="history"),
        [
            'fatal: snapshot, row 2, column "correlation_source" (cell C2): found "history"; expected one '
            'of: table, price history. Did you mean "price history"?',
        ],
        None,
        id="an unknown source of correlations",
    ),
]


def held(market):
    """What a market has, each as (the key of ``Market.rejected`` that would explain its loss, what it is)."""
    return {
        *((name, "underlying") for name in market.underlyings),
        *((name, "volatility") for name in market.underlyings if market.has_volatility(name)),
        *((name, "repo") for name in market.repo),
        *((curve.curve_id, "curve") for curve in market.curves.values()),
        *(("fx_volatilities:" + "".join(pair), "volatility") for pair in market.fx.volatilities),
        *((f"credit:{name}", "hazard rates") for name in market.credit),
        *((f"agreements:{name}", "agreement") for name in market.agreements),
        *((("funding", "spreads"),) if market.funding is not None else ()),
    }


@pytest.fixture(scope="module")
def whole(tmp_path_factory):
    path = tmp_path_factory.mktemp("whole") / "market.xlsx"
    write_tables(full_market(), path)
    return held(load_market(path))


@pytest.mark.parametrize(("change", "messages", "rejected"), CASES)
def test_what_is_wrong_is_told_at_its_cell_and_costs_only_itself(tmp_path, whole, change, messages, rejected):
    tables = full_market()
    change(tables)
    write_tables(tables, tmp_path / "market.xlsx")
    if rejected is None:
        with pytest.raises(InputError) as caught:
            load_market(tmp_path / "market.xlsx")
        assert told(caught.value.issues) == messages
        return
    market = load_market(tmp_path / "market.xlsx")
    assert told(market.issues) == messages
    assert sorted(market.rejected) == rejected
    given = {row["curve"] for row in tables["curves"]}
    given |= {f"agreements:{row['netting_set']}" for row in tables["agreements"]}
    lost = {key for key, what in whole - held(market) if what not in ("curve", "agreement") or key in given}
    had = {key for key, _ in whole}
    assert lost == set(rejected) & had
