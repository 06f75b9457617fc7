"""Gates and coverage of cash dividends, repo and credit curves and exchange rate volatilities, word for word."""

from dataclasses import replace
from datetime import date

import numpy as np

from pricer.core.issues import Severity
from pricer.market.correlation import checked
from pricer.market.coverage import coverage
from pricer.market.credit import HazardCurve
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.findings import nowhere
from pricer.market.fx import FxRates
from pricer.market.quality import gates
from pricer.market.repo import RepoCurve
from pricer.market.volatility import VolatilityCurve
from tests.unit.markets import CORRELATION, IDS, TODAY, basket, small_market

DAY = date(2027, 11, 30)


def with_cash(*payments):
    market = small_market()
    paid = Dividends(0.0, (), tuple(CashDividend(day, amount) for day, amount in payments))
    share = replace(market.underlyings["ARVENNE"], dividends=paid)
    return replace(market, underlyings={**market.underlyings, "ARVENNE": share})


def fx_market(levels, correlations=None):
    """EURUSD, EURGBP and GBPUSD, at rates that agree."""
    pairs = {"EURUSD": 1.20, "EURGBP": 0.80, "GBPUSD": 1.50}
    curves = {
        pair: VolatilityCurve.from_quotes(TODAY, [DAY], [level]) for pair, level in zip(pairs, levels, strict=True)
    }
    market = small_market(fx=FxRates.from_pairs(pairs, curves))
    if correlations is None:
        return market
    matrix = np.eye(6)
    matrix[:3, :3] = CORRELATION
    matrix[3:, 3:] = correlations
    return replace(market, correlation=checked((*IDS, *pairs), matrix)[0])


def only(market):
    (issue,) = gates(market)
    return issue


def test_ordinary_cash_dividends_raise_nothing():
    market = with_cash((DAY, 3.0), (date(2028, 11, 30), 3.0))
    assert gates(market) == ()
    assert coverage(basket("ARVENNE", "BELCOR"), market, nowhere) == ()


def test_dividends_worth_most_of_the_price():
    issue = only(with_cash((DAY, 60.0)))
    assert issue.code == "heavy-cash-dividends"
    assert str(issue) == (
        "found cash dividends of ARVENNE to 2027-11-30 worth 58.8 % of its spot; expected cash dividends worth at most "
        "50 % of the spot. Check the unit (cash dividends are amounts in the underlying's currency), or enter the "
        "later ones as proportional. They are used as given: that share of the price moves with nothing but rates."
    )


def test_dividends_worth_more_than_the_price_keep_its_trades_from_being_priced():
    market = with_cash((DAY, 120.0))
    expected = (
        "found the cash dividends of ARVENNE to 2027-11-30 are worth 117.624 tonight, and its spot is 100: a price "
        "cannot lie below the dividends it is still to pay; expected cash dividends worth less than the spot. Correct "
        "the amounts or the spot, or enter dividends far ahead as proportional ones."
    )
    assert str(only(market)) == expected
    (issue,) = coverage(basket("ARVENNE", "BELCOR"), market, nowhere)
    assert issue.severity is Severity.ERROR
    assert issue.code == "cash-dividends-exceed-spot"
    assert expected in str(issue)
    assert coverage(basket("BELCOR"), market, nowhere) == ()


def test_volatilities_that_no_random_part_can_have():
    market = with_cash((date(2028, 5, 10), 65.0))
    (issue,) = coverage(basket("ARVENNE", "BELCOR"), market, nowhere)
    assert issue.severity is Severity.ERROR
    assert issue.code == "volatility-against-dividends"
    assert issue.found.startswith(
        'volatilities of underlying "ARVENNE" that its cash dividends do not allow: total variance falls from '
    )


def test_a_dividend_after_the_curves_end():
    issue = only(with_cash((date(2032, 5, 12), 3.0)))
    assert issue.code == "dividends-beyond-curve"
    assert issue.found == "a cash dividend of ARVENNE on 2032-05-12, after 2031-11-28, where curve EUR-STD ends"


def test_repo_rates_in_per_cent_and_a_repo_curve_that_ends_early():
    repo = RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, [date(2027, 6, 1)], [2.5], [0.015])
    market = small_market(repo={"ARVENNE": repo})
    issue = only(market)
    assert issue.code == "implausible-rate"
    assert issue.found == "a zero rate of 250.00 % for 2027-06-01 on curve repo of ARVENNE, long"
    sound = RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, [date(2027, 6, 1)], [0.025], [0.015])
    (issue,) = coverage(basket("ARVENNE", "BELCOR"), small_market(repo={"ARVENNE": sound}), nowhere)
    assert issue.severity is Severity.WARNING
    assert issue.found == "expiry date 2027-12-17, after 2027-06-01, where curve repo of ARVENNE, mid ends"


def test_negative_repo_rates_of_a_sought_after_share_are_ordinary():
    special = RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, [DAY], [0.02], [-0.03])
    assert gates(small_market(repo={"ARVENNE": special})) == ()


def test_a_name_about_to_default():
    credit = HazardCurve.from_hazard_rates("NORDHAVN", TODAY, 0.4, [DAY], [0.8])
    issue = only(small_market(credit={"NORDHAVN": credit}))
    assert issue.code == "implausible-hazard-rate"
    assert issue.found == "a hazard rate of 80.0 % a year to 2027-11-30 for NORDHAVN"


def test_a_volatility_above_the_sum_of_the_other_two():
    issue = only(fx_market((0.20, 0.07, 0.09)))
    assert issue.code == "inconsistent-fx-volatility"
    assert str(issue) == (
        "found a volatility of 20.00 % of EURUSD for 2027-11-30, above the 16.00 % of EURGBP and GBPUSD together; "
        "expected volatilities of which none exceeds the sum of the other two. Check the three pairs' volatilities; "
        "they are used as given."
    )


def consistent(levels):
    """Correlations that make log EURUSD the sum of log EURGBP and log GBPUSD."""
    total, one, other = levels
    rho = (total**2 - one**2 - other**2) / (2 * one * other)
    first, second = (one + rho * other) / total, (other + rho * one) / total
    return np.array([[1.0, first, second], [first, 1.0, rho], [second, rho, 1.0]])


def test_volatilities_and_correlations_that_keep_the_triangle_together():
    levels = (0.10, 0.07, 0.09)
    assert gates(fx_market(levels)) == ()
    assert gates(fx_market(levels, consistent(levels))) == ()


def test_correlations_that_let_the_triangle_drift_apart():
    issue = only(fx_market((0.10, 0.07, 0.09), np.eye(3)))
    assert issue.code == "inconsistent-fx-correlation"
    # Three independent rates: the root of 0.10^2 + 0.07^2 + 0.09^2.
    assert issue.found == (
        "EURUSD, EURGBP and GBPUSD, whose volatilities and correlations let them drift apart by 15.17 % a year to "
        "2027-11-30"
    )


def test_pairs_outside_the_matrix_are_not_judged_by_it():
    assert gates(replace(fx_market((0.10, 0.07, 0.09)), correlation=checked(IDS, CORRELATION)[0])) == ()
