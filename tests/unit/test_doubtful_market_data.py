"""Levels against their own history, and trades that are priced from what the market doubts."""

from dataclasses import replace
from datetime import date

import pytest

from pricer.contracts.option import Conversion
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.coverage import coverage
from pricer.market.fx import FxRates
from pricer.market.market_quotes import MarketQuotes
from pricer.market.quality import gates, review
from tests.unit.markets import TODAY, basket, cell, curve, small_market, volatility

CONSTITUENT = 'book.xlsx, sheet constituents, row 9, column "underlying" (cell B9): '
CURRENCY = 'book.xlsx, sheet trades, row 7, column "currency" (cell F7): '
DOUBT = Issue("odd", "a volatility of 2.10 %", "more", "Check it.", Severity.WARNING, sheet="volatilities", row=5)


def with_levels(day=date(2026, 11, 27), **levels):
    return small_market(quotes=MarketQuotes(last_levels={name: (day, level) for name, level in levels.items()}))


def test_levels_that_moved_little_raise_nothing():
    assert gates(with_levels(ARVENNE=112.0, BELCOR=44.0, EURUSD=1.18, NOBODY=5.0, XXXYYY=3.0)) == ()


def test_a_spot_far_from_its_history():
    (issue,) = gates(with_levels(ARVENNE=10.02))
    assert (issue.code, issue.severity) == ("level-against-history", Severity.WARNING)
    assert str(issue) == (
        "found spot 100 of ARVENNE, where the price history has 10.02 on 2026-11-27; expected a level within 15 % of "
        "the history's last. Check the spot's unit and day, and whether the share was split. The spot is used as given."
    )


def test_a_rate_far_from_its_history():
    (issue,) = gates(with_levels(EURUSD=1.25))
    assert str(issue) == (
        "found EURUSD quoted at 1.1, where the price history has 1.25 on 2026-11-27; expected a level within 10 % of "
        "the history's last. Check the rate and its day. The rate is used as given."
    )


def test_a_rate_that_fits_its_history_the_other_way_round():
    (issue,) = gates(with_levels(EURUSD=0.909))
    assert issue.mend == "One of the two looks entered the wrong way round. The rate is used as given."
    assert gates(with_levels(USDEUR=0.909)) == ()  # the same pair, named the other way round


def test_an_old_or_future_history_says_nothing():
    assert gates(with_levels(date(2026, 11, 20), ARVENNE=10.0)) == ()
    assert gates(with_levels(date(2026, 12, 1), ARVENNE=10.0)) == ()
    assert review(with_levels(TODAY, ARVENNE=10.0, EURUSD=2.0)).doubts.keys() == {"ARVENNE", "fx:EURUSD"}


def test_a_trade_on_a_doubted_underlying():
    market = small_market(doubts={"ARVENNE": (DOUBT, DOUBT)})
    (issue,) = coverage(basket("ARVENNE", "BELCOR"), market, cell)
    assert (issue.code, issue.severity, issue.trade_id) == ("doubtful-market-data", Severity.WARNING, "T1")
    assert str(issue) == (
        CONSTITUENT + 'found underlying "ARVENNE", of which the market warns: a volatility of 2.10 % (and 1 more); '
        "expected more. The trade is priced from it as given: see the market's own warning (sheet volatilities, row 5) "
        "before using the value."
    )
    assert coverage(basket("BELCOR"), market, cell) == ()


def test_doubts_about_repo_count_for_the_underlying():
    market = small_market(doubts={"repo:ARVENNE": (DOUBT,)})
    (issue,) = coverage(basket("ARVENNE", "BELCOR"), market, cell)
    assert issue.found == 'underlying "ARVENNE", of which the market warns: a volatility of 2.10 %'


def test_a_refused_trade_is_not_said_to_be_priced():
    market = small_market(doubts={"ARVENNE": (DOUBT,)})
    assert [issue.code for issue in coverage(basket("ARVENNE", "ZZZ"), market, cell)] == ["unknown-underlying"]


def in_dollars(**changes):
    return basket("CADMUS", currency="USD", **changes)


def test_a_trade_converted_at_a_doubted_rate():
    market = small_market(doubts={"fx:EURUSD": (DOUBT,)})
    (issue,) = coverage(in_dollars(), market, cell)
    assert issue.place() == 'book.xlsx, sheet trades, row 7, column "currency" (cell F7)'
    assert issue.found == "the rate EURUSD, of which the market warns: a volatility of 2.10 %"
    assert coverage(basket("ARVENNE", "BELCOR"), market, cell) == ()


def test_a_trade_converted_at_a_refused_rate():
    why = Issue("inconsistent-fx", "EURUSD quoted at 0.9", "quotes that agree", "Check.", sheet="fx", row=2)
    market = small_market(rejected={"EURUSD": (why,)})
    (issue,) = coverage(in_dollars(), market, cell)
    assert (issue.code, issue.severity) == ("refused-fx-rate", Severity.ERROR)
    assert str(issue) == (
        CURRENCY + "found a conversion at EURUSD, which the market quotes but which cannot be trusted; expected "
        "exchange rates that agree with each other. Mend the market first: sheet fx, row 2: found EURUSD quoted at "
        "0.9; expected quotes that agree."
    )
    assert coverage(basket("ARVENNE", "BELCOR"), market, cell) == ()


@pytest.mark.parametrize(
    ("conversion", "codes"), [(Conversion.QUANTO, set()), (Conversion.COMPOSITE, {"refused-fx-rate"})]
)
def test_only_a_composite_needs_the_level_of_its_rate(conversion, codes):
    why = Issue("inconsistent-fx", "EURUSD quoted at 0.9", "quotes that agree", "Check.")
    market = small_market(
        fx=FxRates.from_pairs({"EURUSD": 1.10}, {"EURUSD": volatility(0.09)}), rejected={"EURUSD": (why,)}
    )
    trade = basket("ARVENNE", "CADMUS")
    trade = replace(trade, contract=replace(trade.contract, conversion=conversion))
    found = {issue.code for issue in coverage(trade, market, cell)} - {"no-fx-correlation"}
    assert found == codes


def test_a_trade_with_a_doubted_volatility_of_its_rate():
    def place(column):
        return Place("book.xlsx", "trades", 7, column, "T7") if column == "conversion" else cell(column)

    market = small_market(
        fx=FxRates.from_pairs({"EURUSD": 1.10}, {"EURUSD": volatility(0.09)}),
        doubts={"fx_volatilities:EURUSD": (DOUBT,)},
        curves={("EUR", ""): curve(), ("USD", ""): curve("USD-STD", "USD")},
    )
    trade = basket("CADMUS")
    trade = replace(trade, contract=replace(trade.contract, conversion=Conversion.QUANTO))
    issues = [issue for issue in coverage(trade, market, place) if issue.code == "doubtful-market-data"]
    # Its missing correlation refuses it, and a refused trade is not priced from anything.
    assert issues == []
    from tests.unit.test_conversion_coverage import with_rates

    known = with_rates(doubts={"fx_volatilities:EURUSD": (DOUBT,)})
    (issue,) = coverage(trade, known, place)
    assert issue.cell == "T7"
    assert issue.found == "the volatility of EURUSD, of which the market warns: a volatility of 2.10 %"
