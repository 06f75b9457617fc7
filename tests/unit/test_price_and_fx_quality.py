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
from pricer.market.quality import gates, review
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


def test_cash_dividends_that_take_much_of_the_price_within_a_year():
    issue = only(with_cash((date(2027, 5, 12), 9.0), (date(2027, 11, 12), 9.0), (date(2028, 5, 15), 9.0)))
    assert issue.code == "implausible-dividends"
    assert str(issue) == (
        "found cash dividends of ARVENNE in the year from 2027-05-12 worth 17.8 % of its spot; expected at most 15 % "
        "in a year. Check the unit: cash dividends are amounts in the underlying's currency. They are used as given."
    )


def test_a_cash_dividend_unlike_the_others():
    issue = only(with_cash((date(2027, 5, 12), 1.2), (DAY, 12.0), (date(2028, 5, 15), 1.3)))
    assert issue.code == "outlying-dividend"
    assert str(issue) == (
        "found a cash dividend of 12 of ARVENNE on 2027-11-30, 9.2 times the next largest, 1.3; expected cash "
        "dividends below 5 times the others of the underlying. Check the decimal point, unless it is a special "
        "dividend. It is used as given."
    )


def test_interim_and_final_dividends_may_differ_much():
    assert (
        gates(with_cash((date(2027, 5, 12), 0.6), (DAY, 3.2), (date(2028, 5, 15), 0.6), (date(2028, 11, 30), 3.3)))
        == ()
    )


def with_yield(rate):
    market = with_cash((DAY, 3.0))
    share = market.underlyings["ARVENNE"]
    paid = replace(share.dividends, yield_rate=rate)
    return replace(market, underlyings={**market.underlyings, "ARVENNE": replace(share, dividends=paid)})


def test_a_yield_beside_discrete_dividends():
    issue = only(with_yield(0.025))
    assert issue.code == "yield-and-dividends"
    assert str(issue) == (
        "found a dividend yield of 2.50 % of ARVENNE beside discrete dividends from 2027-11-30 on; expected dividends "
        "given as a yield or one by one. Forwards fall by both. Clear the yield if it stands for the same dividends; "
        "enter a lending fee in the table repo."
    )
    assert gates(with_yield(0.003)) == ()  # as large as a lending fee
    assert gates(with_yield(-0.004)) == ()


def test_ex_dates_on_weekends_are_told_once():
    issue = only(with_cash((date(2027, 5, 15), 1.0), (date(2028, 5, 14), 1.0)))
    assert issue.code == "weekend-date"
    assert str(issue) == (
        "found dividends of ARVENNE on 2027-05-15, a Saturday (and 1 more on weekends); expected dates on which "
        "markets are open. Check the date; it is used as given."
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


def test_repo_rates_far_above_cash():
    high = RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, [date(2027, 6, 1)], [0.197], [0.015])
    issue = only(small_market(repo={"ARVENNE": high}))
    assert str(issue) == (
        "found a zero rate of 19.70 % for 2027-06-01 on curve repo of ARVENNE, long; expected zero rates between -5 % "
        "and 15 %. Check the unit: 2.5 % is entered as 0.025. The rate is used as given."
    )
    off = RepoCurve.from_zero_rates("ARVENNE", "EUR", TODAY, [DAY], [0.13], [0.015])
    issue = only(small_market(repo={"ARVENNE": off}))
    assert issue.code == "implausible-repo"
    assert str(issue) == (
        "found a rate of 13.00 % for 2027-11-30 on curve repo of ARVENNE, long, 11.00 % above curve EUR-STD; expected "
        "repo rates within 10 % of the currency's own. Check the unit: 2.5 % is entered as 0.025. The rate is used as "
        "given."
    )


def test_a_name_about_to_default():
    credit = HazardCurve.from_hazard_rates("NORDHAVN", TODAY, 0.4, [DAY], [0.8])
    issue = only(small_market(credit={"NORDHAVN": credit}))
    assert issue.code == "implausible-hazard-rate"
    assert issue.found == "a hazard rate of 80.0 % a year to 2027-11-30 for NORDHAVN"


def test_volatilities_of_rates_in_per_cent():
    issue = only(fx_market((0.76, 0.39, 0.39)))
    assert issue.code == "implausible-volatility"
    assert str(issue) == (
        "found a volatility of 76.00 % of EURUSD for 2027-11-30; expected volatilities at the forward between 2 % and "
        "40 %. Check the unit: 7.6 % is entered as 0.076. The volatilities are used as given."
    )


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


def rates(**changes):
    return small_market(fx=FxRates.from_pairs({"EURUSD": 1.20, "EURGBP": 0.80, "GBPUSD": 1.50} | changes))


def test_a_rate_the_wrong_way_round_is_refused_alone():
    found = review(rates(EURUSD=1 / 1.20))
    (issue,) = found.issues
    assert (issue.code, issue.severity) == ("inconsistent-fx", Severity.ERROR)
    assert str(issue) == (
        "found EURUSD quoted at 0.833333, but 1.2 through GBP; expected quotes that agree to 5 % at least. The rate "
        "looks entered the wrong way round, as 1.2 would fit: correct it, or the pair. Until then nothing is converted "
        "at EURUSD."
    )
    assert set(found.refused) == {"EURUSD"}
    assert set(review(rates(GBPUSD=1 / 1.50)).refused) == {"GBPUSD"}
    assert set(review(rates(EURGBP=1 / 0.80)).refused) == {"EURGBP"}


def test_of_three_rates_that_contradict_each_other_none_is_used():
    found = review(rates(EURUSD=1.30))
    assert found.issues[0].mend == "Check the three pairs. Until then nothing is converted at EURGBP, GBPUSD or EURUSD."
    assert set(found.refused) == {"EURUSD", "EURGBP", "GBPUSD"}
    assert found.doubts == {}


def test_a_pair_that_fits_elsewhere_is_not_suspected():
    found = review(rates(EURUSD=1.30, EURCHF=0.96, GBPCHF=1.20))
    assert set(found.refused) == {"EURUSD", "GBPUSD"}  # EURGBP closes with the two rates of CHF


def test_rates_that_miss_each_other_by_little_are_used_and_doubted():
    found = review(rates(EURUSD=1.24))
    assert found.refused == {}
    assert set(found.doubts) == {"fx:EURUSD", "fx:EURGBP", "fx:GBPUSD"}
