"""Implausible or inconsistent market data is used and told, word for word."""

from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.core.issues import Severity
from pricer.core.source import Place
from pricer.market.correlation import checked
from pricer.market.dividends import Dividends, ProportionalDividend
from pricer.market.fx import FxRates
from pricer.market.quality import gates
from tests.unit.markets import IDS, curve, small_market


def only(market, repair=None):
    (issue,) = gates(market, repair)
    assert issue.severity is Severity.WARNING
    return issue


def test_a_good_market_raises_nothing():
    assert gates(small_market()) == ()


def test_a_repair_of_the_correlations():
    kept, repair = checked(IDS, np.array([[1.0, 0.9, 0.7], [0.9, 1.0, 0.3], [0.7, 0.3, 1.0]]))
    issue = only(small_market(correlation=kept), repair)
    assert issue.code == "correlation-repaired"
    assert str(issue) == (
        "found correlations that contradict each other (smallest eigenvalue -0.00735); expected a positive "
        "semi-definite matrix. The nearest correlation matrix is used instead, at distance 0.00973; its largest change "
        "is ARVENNE / BELCOR from 0.900000 to 0.894575. Review the correlations of this pair."
    )


def test_a_repair_points_at_the_cell_of_the_pair():
    kept, repair = checked(IDS, np.array([[1.0, 0.9, 0.7], [0.9, 1.0, 0.3], [0.7, 0.3, 1.0]]))
    cells = {"correlation:BELCOR:ARVENNE": Place("market.xlsx", "correlations", 3, "ARVENNE", "B3")}
    (issue,) = gates(small_market(correlation=kept), repair, cells.get)
    assert issue.place() == 'market.xlsx, sheet correlations, row 3, column "ARVENNE" (cell B3)'


def test_zero_rates_in_per_cent():
    market = small_market(curves={("EUR", ""): curve(rate=2.0)})
    issue = only(market)
    assert issue.code == "implausible-rate"
    assert str(issue) == (
        "found a zero rate of 200.50 % for 2031-11-28 on curve EUR-STD; expected zero rates between -5 % and 30 %. "
        "Check the unit: 2.5 % is entered as 0.025. The rate is used as given."
    )


def test_dividends_that_eat_the_price_within_a_year():
    market = small_market()

    def paying(*payments):
        dividends = Dividends(0.0, tuple(ProportionalDividend(*payment) for payment in payments))
        return replace(market, underlyings={"ARVENNE": replace(market.underlyings["ARVENNE"], dividends=dividends)})

    issue = only(paying((date(2028, 5, 9), 0.3), (date(2027, 5, 12), 0.3)))
    assert issue.code == "implausible-dividends"
    assert str(issue) == (
        "found proportional dividends of ARVENNE that add up to 60.0 % of its price in the year from 2027-05-12; "
        "expected at most 50 % in a year. Check the unit: a dividend of 2 % of the price is entered as 0.02. "
        "The dividends are used as given."
    )
    assert gates(paying((date(2027, 5, 12), 0.3), (date(2028, 5, 11), 0.3))) == ()


@pytest.mark.parametrize("rate", [0.26, -0.06])
def test_an_implausible_dividend_yield(rate):
    market = small_market()
    strange = replace(market.underlyings["ARVENNE"], dividends=Dividends(rate))
    issue = only(replace(market, underlyings={"ARVENNE": strange}))
    assert issue.code == "implausible-dividend-yield"
    assert str(issue) == (
        f"found a dividend yield of {100 * rate:.1f} % for ARVENNE; expected dividend yields between -5 % and 25 %. "
        "Check the unit: 2.1 % is entered as 0.021. The yield is used as given."
    )


@pytest.mark.parametrize("rate", [0.25, 0.0, -0.05])
def test_a_plausible_dividend_yield(rate):
    market = small_market()
    assert gates(replace(market, underlyings={
        "ARVENNE": replace(market.underlyings["ARVENNE"], dividends=Dividends(rate))
    })) == ()  # fmt: skip


@pytest.mark.parametrize(("day", "name"), [(date(2026, 11, 28), "Saturday"), (date(2026, 11, 29), "Sunday")])
def test_a_valuation_date_on_a_weekend(day, name):
    issue = only(small_market(valuation_date=day))
    assert issue.code == "weekend-valuation"
    assert str(issue) == (
        f"found the valuation date {day}, a {name}; expected a day on which markets close. Check the date; the book is "
        "valued to it as given."
    )
    assert gates(small_market(valuation_date=date(2026, 11, 27))) == ()


def test_exchange_rates_that_disagree_with_their_cross():
    issue = only(small_market(fx=FxRates.from_pairs({"EURUSD": 1.10, "EURGBP": 0.85, "GBPUSD": 1.32})))
    assert issue.code == "inconsistent-fx"
    assert str(issue) == (
        "found EURUSD quoted at 1.1, but 1.122 through GBP; expected quotes that agree to 1 %. Check the three pairs; "
        "each conversion uses the direct quote where there is one."
    )
    assert gates(small_market(fx=FxRates.from_pairs({"EURUSD": 1.10, "EURGBP": 0.85, "GBPUSD": 1.30}))) == ()
