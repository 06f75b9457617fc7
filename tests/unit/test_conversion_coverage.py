"""What a quanto or a composite needs of the market is told word for word."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.option import Conversion
from pricer.core.issues import Severity
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
    assert str(issue) == (
        CURRENCY + "found a quanto trade from USD to EUR, whose rate has no volatility; expected the rate of USDEUR "
        "and its volatility, or a chain of pairs that have both. Add USDEUR to the tables fx, fx_volatilities and "
        "correlations of the market."
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
