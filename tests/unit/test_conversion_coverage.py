"""What a quanto or a composite needs of the market is told word for word."""

from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.option import Conversion
from pricer.core.issues import Issue, Severity
from pricer.market.correlation import checked
from pricer.market.coverage import coverage, failing_surfaces
from pricer.market.fx import FxRates
from tests.unit.markets import CORRELATION, IDS, basket, cell, small_market, volatility

CONSTITUENT = 'book.xlsx, sheet constituents, row 9, column "underlying" (cell B9): '
CURRENCY = 'book.xlsx, sheet trades, row 7, column "currency" (cell F7): '


def converted(*names, how=Conversion.QUANTO, **terms):
    trade = basket(*names, **terms)
    return replace(trade, contract=replace(trade.contract, conversion=how))


def with_rates(**changes):
    correlation = np.eye(4)
    correlation[:3, :3] = CORRELATION
    return small_market(
        fx=FxRates.from_pairs({"EURUSD": 1.10, "NOKSEK": 0.98}, {"EURUSD": volatility(0.09)}),
        correlation=checked((*IDS, "EURUSD"), correlation)[0],
        **changes,
    )


def issues(trade, market):
    return [(issue.code, str(issue.severity)) for issue in coverage(trade, market, cell)]


@pytest.mark.parametrize("how", list(Conversion))
def test_a_market_with_the_rates_volatility_and_correlations_covers_both(how):
    assert issues(converted("ARVENNE", "CADMUS", how=how), with_rates()) == []


def test_a_rate_without_volatility():
    (issue,) = coverage(converted("ARVENNE", "CADMUS"), small_market(), cell)
    assert issue.code == "no-fx-volatility"
    # The pair the way round in which it is quoted, and both tables that lack it.
    assert str(issue) == (
        CURRENCY + "found a quanto trade from USD to EUR, whose rate has no volatility; expected volatilities of "
        "EURUSD, or of a chain of pairs. Add EURUSD to the table fx_volatilities of the market, and a row and a column "
        "of that name to the table correlations."
    )


def test_a_rate_that_lacks_its_volatility_only():
    market = with_rates()
    market = replace(market, fx=FxRates.from_pairs({"EURUSD": 1.10}))
    (issue,) = coverage(converted("ARVENNE", "CADMUS"), market, cell)
    assert issue.mend == "Add EURUSD to the table fx_volatilities of the market."


def test_a_volatility_that_the_market_refused():
    why = Issue("not-a-decimal", "9.1", "a decimal number", "Did you mean 0.091?", sheet="fx_volatilities", row=4)
    market = small_market(rejected={"fx_volatilities:EURUSD": (why,)})
    (issue,) = coverage(converted("ARVENNE", "CADMUS"), market, cell)
    assert issue.mend == ("Mend the market first: sheet fx_volatilities, row 4: found 9.1; expected a decimal number.")


def test_a_currency_that_no_rate_links():
    market = small_market(fx=FxRates.from_pairs({"NOKSEK": 0.98}))
    (issue,) = coverage(converted("ARVENNE", "CADMUS"), market, cell)
    assert issue.code == "no-fx-rate"
    assert issue.mend == "Add USDEUR to the tables fx, fx_volatilities and correlations of the market."


def test_an_expiry_after_the_last_volatility_of_the_rate():
    late = converted("ARVENNE", "CADMUS", expiry=date(2029, 1, 19))
    found = {issue.found: issue for issue in coverage(late, with_rates(), cell) if issue.code == "beyond-volatility"}
    issue = found["expiry date 2029-01-19, after 2028-12-15, the last volatility date of the rate EURUSD"]
    assert issue.severity is Severity.WARNING
    assert issue.mend == (
        "The last volatility is used beyond its date; add a later expiry to the table fx_volatilities."
    )


def test_a_rate_without_correlations():
    market = replace(with_rates(), correlation=small_market().correlation)
    (issue,) = coverage(converted("ARVENNE", "CADMUS"), market, cell)
    assert (issue.code, issue.severity) == ("no-fx-correlation", Severity.ERROR)
    assert str(issue) == (
        CURRENCY + "found a quanto trade from USD to EUR, and no correlations of EURUSD; expected the exchange rate's "
        'correlations with the trade\'s underlyings. Add a row and a column "EURUSD" to the correlations table of the '
        "market."
    )


def test_a_foreign_currency_without_a_curve():
    market = with_rates()
    (issue,) = coverage(
        converted("ARVENNE", "CADMUS"),
        replace(market, curves={key: curve for key, curve in market.curves.items() if key[0] == "EUR"}),
        cell,
    )
    assert issue.code == "no-standard-curve"
    assert "currency USD of an underlying, which has no standard discount curve" in issue.found


def test_a_conversion_that_changes_nothing_is_a_warning():
    (issue,) = coverage(converted("ARVENNE", "BELCOR"), small_market(), cell)
    assert (issue.code, issue.severity) == ("idle-conversion", Severity.WARNING)
    assert issue.mend == "It changes nothing. Clear the cell, or correct the trade's currency."


def test_no_surface_fails_where_there_are_none():
    assert failing_surfaces(basket("ARVENNE", "BELCOR"), small_market()) == ()
