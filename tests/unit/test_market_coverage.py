"""What a market lacks for a trade is told word for word, at the trade's own cell."""

from dataclasses import replace
from datetime import date

import pytest

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.profile import Profile, ProfileKind
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.coverage import coverage
from pricer.market.fx import FxRates
from tests.unit.markets import TODAY, basket, cell, curve, small_market

AT = "book.xlsx, sheet trades, row 7, column "
CONSTITUENT = 'book.xlsx, sheet constituents, row 9, column "underlying" (cell B9): '


def told(trade, market=None, place=cell):
    return [(issue.code, str(issue.severity), str(issue)) for issue in coverage(trade, market or small_market(), place)]


def only(trade, market=None):
    (issue,) = coverage(trade, market or small_market(), cell)
    return issue


def without(market, *names):
    return {name: u for name, u in market.underlyings.items() if name not in names}


def test_a_covered_trade_raises_nothing():
    assert told(basket("ARVENNE", "BELCOR")) == []
    assert told(basket("ARVENNE", "BELCOR", collateral="USD", payment=date(2027, 12, 21))) == []
    assert told(basket("CADMUS", currency="USD")) == []


def test_every_issue_carries_the_trade():
    issues = coverage(basket("NOBODY", currency="XXX", expiry=date(2026, 1, 5)), small_market(), lambda _: None)
    assert len(issues) == 3
    assert {issue.trade_id for issue in issues} == {"T1"}
    assert all(str(issue).startswith("trade T1: found ") for issue in issues)


def test_a_misspelt_underlying():
    issue = only(basket("Arvene", "BELCOR"))
    assert (issue.code, issue.severity) == ("unknown-underlying", Severity.ERROR)
    assert str(issue) == (
        CONSTITUENT + 'found underlying "Arvene"; expected an underlying of the market. '
        'Did you mean "ARVENNE"? Correct the name, or add it to the underlyings table of the market.'
    )


def test_an_underlying_like_no_other():
    assert only(basket("ZZZ")).mend == "Correct the name, or add it to the underlyings table of the market."


def test_an_underlying_that_the_market_refused():
    why = Issue("bad-spot", "-3", "a price above 0", "Enter it.", file="market.xlsx", sheet="underlyings", row=4,
                column="spot", cell="C4")  # fmt: skip
    market = small_market(rejected={"BELCOR": (why, why)})
    issue = only(basket("ARVENNE", "BELCOR"), replace(market, underlyings=without(market, "BELCOR")))
    assert issue.code == "rejected-underlying"
    assert str(issue) == (
        CONSTITUENT
        + 'found underlying "BELCOR", which the market lists but could not use; expected an underlying with '
        'usable market data. Mend the market first: market.xlsx, sheet underlyings, row 4, column "spot" (cell C4): '
        "found -3; expected a price above 0 (and 1 more)."
    )


def test_an_underlying_without_volatility():
    market = small_market()
    bare = {**market.underlyings, "BELCOR": replace(market.underlyings["BELCOR"], volatility=None)}
    issue = only(basket("BELCOR"), replace(market, underlyings=bare))
    assert issue.code == "no-volatility"
    assert str(issue) == (
        CONSTITUENT + 'found underlying "BELCOR", which has no usable volatility; expected an underlying with at least '
        'one volatility. Add "BELCOR" to the volatilities table of the market.'
    )
    why = Issue("calendar-arbitrage", "total variance falling", "total variance that grows", "Mend.")
    issue = only(basket("BELCOR"), replace(market, underlyings=bare, rejected={"BELCOR": (why,)}))
    assert issue.mend == "Mend the market first: found total variance falling; expected total variance that grows."


def test_an_underlying_in_another_currency():
    issue = only(basket("ARVENNE", "CADMUS"))
    assert issue.code == "other-currency"
    assert str(issue) == (
        CONSTITUENT + 'found underlying "CADMUS", quoted in USD, in a trade in EUR; expected underlyings quoted in the '
        "trade's currency, or a conversion. Correct the trade's currency if it is USD, or set its conversion to "
        "quanto or composite."
    )


def test_no_correlation_matrix_at_all():
    issue = only(basket("ARVENNE", "BELCOR"), small_market(correlation=None))
    assert issue.code == "no-correlations"
    assert str(issue) == (
        AT
        + '"trade_id" (cell A7): found no usable correlation matrix; expected correlations among ARVENNE and BELCOR. '
        "Add the correlations of the trade's underlyings to the correlations table of the market."
    )
    why = Issue(
        "correlation", "correlations that contradict each other", "a possible matrix", "Mend.", sheet="correlations"
    )
    issue = only(basket("ARVENNE", "BELCOR"), small_market(correlation=None, rejected={"correlations": (why,)}))
    assert issue.mend == (
        "Mend the market first: sheet correlations: found correlations that contradict each other; expected a possible "
        "matrix."
    )
    assert told(basket("ARVENNE"), small_market(correlation=None)) == []


def test_an_underlying_missing_from_the_correlations():
    market = small_market()
    new = replace(market.underlyings["ARVENNE"], underlying_id="DORNACH")
    twin = replace(new, underlying_id="ELVERUM")
    market = replace(market, underlyings={**market.underlyings, "DORNACH": new, "ELVERUM": twin})
    issues = coverage(basket("ARVENNE", "DORNACH", "BELCOR", "ELVERUM"), market, cell)
    assert [issue.code for issue in issues] == ["missing-correlation"] * 2
    assert str(issues[0]) == (
        CONSTITUENT + 'found no correlation of underlying "DORNACH" with ARVENNE, BELCOR and ELVERUM; expected a '
        'correlation for every pair of the trade\'s underlyings. Add a row and a column "DORNACH" to the correlations '
        "table of the market."
    )
    assert issues[1].found == 'no correlation of underlying "ELVERUM" with ARVENNE and BELCOR'


def test_correlations_that_the_market_refused_are_to_be_mended_there():
    market = small_market()
    new = replace(market.underlyings["ARVENNE"], underlying_id="DORNACH")
    why = Issue("not-symmetric", "0.5, but 0.6 in cell E2", "the same correlation in both cells", "Correct.",
                file="market.xlsx", sheet="correlations", row=5, column="ARVENNE", cell="B5")  # fmt: skip
    market = replace(
        market, underlyings={**market.underlyings, "DORNACH": new}, rejected={"correlations:DORNACH": (why,)}
    )
    issue = only(basket("ARVENNE", "DORNACH"), market)
    assert str(issue) == (
        CONSTITUENT
        + 'found no correlation of underlying "DORNACH" with ARVENNE; expected a correlation for every pair '
        "of the trade's underlyings. Mend the market first: market.xlsx, sheet correlations, row 5, column "
        '"ARVENNE" (cell B5): found 0.5, but 0.6 in cell E2; expected the same correlation in both cells.'
    )


def test_an_unknown_currency_is_told_once():
    issue = only(basket("ARVENNE", currency="EUX"))
    assert issue.code == "unknown-currency"
    assert str(issue) == (
        AT + '"currency" (cell F7): found currency "EUX"; expected a currency of the market: EUR, NOK, SEK or USD. '
        'Did you mean "EUR"? Correct the currency, or add its curve to the curves table and its rate to the fx table '
        "of the market."
    )


def test_a_currency_without_a_way_to_the_reporting_currency():
    market = small_market()
    underlyings = {**market.underlyings, "FJORD": replace(market.underlyings["ARVENNE"], currency="NOK")}
    market = replace(market, underlyings=underlyings, curves={**market.curves, ("NOK", ""): curve("NOK-STD", "NOK")})
    issue = only(basket("FJORD", currency="NOK"), market)
    assert issue.code == "no-fx-route"
    assert str(issue) == (
        AT + '"currency" (cell F7): found currency NOK, which no quoted pairs link to the reporting currency EUR; '
        "expected a chain of exchange rates from NOK to EUR. Add the pair EURNOK or NOKEUR to the fx table of the "
        "market."
    )


REFUSED = Issue("out-of-range", "0", "a number above 0", "Enter it.", file="market.xlsx", sheet="fx", row=3,
                column="spot", cell="B3")  # fmt: skip
MEND = (
    'Mend the market first: market.xlsx, sheet fx, row 3, column "spot" (cell B3): found 0; expected a number above 0.'
)


@pytest.mark.parametrize("pair", ["EURNOK", "SEKEUR"])
def test_a_refused_exchange_rate_that_may_be_the_missing_link_is_to_be_mended_in_the_market(pair):
    # NOK is linked to SEK: either of the two pairs would lead on to EUR.
    market = small_market()
    underlyings = {**market.underlyings, "FJORD": replace(market.underlyings["ARVENNE"], currency="NOK")}
    curves = {**market.curves, ("NOK", ""): curve("NOK-STD", "NOK")}
    market = replace(market, underlyings=underlyings, curves=curves, rejected={"ZZZ": (), pair: (REFUSED,)})
    issue = only(basket("FJORD", currency="NOK"), market)
    assert (issue.code, issue.mend) == ("no-fx-route", MEND)


def test_a_currency_known_from_a_refused_exchange_rate_only_is_to_be_mended_in_the_market():
    issue = only(basket("ARVENNE", currency="CHF"), small_market(rejected={"EURCHF": (REFUSED,)}))
    assert (issue.code, issue.mend) == ("unknown-currency", MEND)
    issue = only(basket("ARVENNE", currency="CHF"), small_market(rejected={"EURDKK": (REFUSED,)}))
    assert "Correct the currency" in issue.mend


def test_the_reporting_currency_needs_no_exchange_rates():
    assert told(basket("ARVENNE"), small_market(fx=FxRates.from_pairs({}))) == []


def test_no_standard_curve():
    market = small_market()
    market = replace(market, curves={k: v for k, v in market.curves.items() if k != ("EUR", "")})
    issue = only(basket("ARVENNE", collateral="USD"), market)
    assert issue.code == "no-standard-curve"
    assert str(issue) == (
        AT + '"currency" (cell F7): found currency EUR, which has no standard discount curve; expected a curve of EUR '
        "with empty collateral, from which discount factors and forwards come. Add a curve of EUR with empty "
        "collateral to the curves table."
    )
    why = Issue("dates", "one date twice", "dates that increase", "Mend.", sheet="curve_points", row=3)
    issue = only(basket("ARVENNE", collateral="USD"), replace(market, rejected={"EUR-STD": (why,)}))
    assert issue.mend == (
        'Curve "EUR-STD" could not be used. Mend the market first: sheet curve_points, row 3: found one date twice; '
        "expected dates that increase."
    )


def test_no_curve_for_the_collateral():
    issue = only(basket("ARVENNE", collateral="GBP"))
    assert issue.code == "no-collateral-curve"
    assert str(issue) == (
        AT
        + '"collateral" (cell G7): found collateral "GBP", for which EUR has no discount curve; expected a collateral '
        'with a discount curve in EUR, or none for the standard curve. Add a curve of EUR with collateral "GBP" to the '
        "curves table, or use a collateral that has one (USD)."
    )


@pytest.mark.parametrize(
    ("payment", "else_"),
    [(date(2026, 11, 25), " Or remove the trade: it was paid on 2026-11-25."), (date(2026, 12, 1), "")],
)
def test_an_expired_option_without_its_fixing_says_which_row_to_add(payment, else_):
    issue = only(basket("ARVENNE", expiry=date(2026, 11, 23), payment=payment))
    assert (issue.code, issue.severity) == ("missing-fixing", Severity.ERROR)
    assert str(issue) == (
        AT + '"expiry_date" (cell H7): found no fixing of ARVENNE on 2026-11-23; expected a fixing for every '
        "observation up to now. Add a row to the market's fixings table: underlying ARVENNE, date 2026-11-23, and the "
        f"official level; where a day itself had none, the one that the trade's terms fall back on.{else_}"
    )


def test_an_expired_option_with_its_fixing_is_a_known_amount():
    fixings = Fixings.from_rows([Fixing("ARVENNE", date(2026, 11, 23), 66.0)])
    trade = basket("ARVENNE", expiry=date(2026, 11, 23), payment=date(2026, 12, 1))
    assert told(trade, small_market(fixings=fixings)) == []


def test_an_option_that_expires_today_is_allowed_with_a_warning():
    issue = only(basket("ARVENNE", expiry=TODAY, payment=date(2026, 12, 2)))
    assert (issue.code, issue.severity) == ("spot-for-fixing", Severity.WARNING)
    assert str(issue) == (
        AT + '"expiry_date" (cell H7): found an observation today, 2026-11-30, without a fixing of ARVENNE; expected '
        "today's fixings. Today's spots stand in for them; enter the fixings once they are published."
    )


def test_an_option_that_expires_today_with_its_fixing_is_a_known_amount():
    fixings = Fixings.from_rows([Fixing("ARVENNE", TODAY, 66.0)])
    assert told(basket("ARVENNE", expiry=TODAY, payment=date(2026, 12, 2)), small_market(fixings=fixings)) == []


def test_a_payment_before_expiry():
    issue = only(basket("ARVENNE", payment=date(2027, 12, 16)))
    assert (issue.code, issue.severity) == ("payment-before-expiry", Severity.ERROR)
    assert issue.found == "payment date 2027-12-16, before the expiry date 2027-12-17"


def test_data_that_end_before_the_trade():
    issues = coverage(
        basket(
            "ARVENNE", expiry=date(2031, 12, 1), payment=date(2031, 12, 3), collateral="USD", premium=date(2032, 1, 5)
        ),
        small_market(),
        cell,
    )
    assert {issue.severity for issue in issues} == {Severity.WARNING}
    assert [(issue.code, issue.found) for issue in issues] == [
        ("premium-after-payment", "premium date 2032-01-05, after the payment date 2031-12-03"),
        ("beyond-curve", "payment date 2031-12-03, after 2031-11-28, where curve EUR-USD ends"),
        ("beyond-curve", "premium date 2032-01-05, after 2031-11-28, where curve EUR-USD ends"),
        ("beyond-curve", "expiry date 2031-12-01, after 2031-11-28, where curve EUR-STD ends"),
        (
            "beyond-volatility",
            'expiry date 2031-12-01, after 2028-12-15, the last volatility date of underlying "ARVENNE"',
        ),
    ]
    assert issues[1].mend == "The curve's last forward rate is used beyond its end; add a later point to the curve."
    assert issues[4].mend == (
        "The last volatility is used beyond its date; add a later expiry to the volatilities table."
    )


def test_a_premium_already_paid_needs_no_curve():
    assert told(basket("ARVENNE", premium=TODAY)) == []


def test_a_trade_date_after_the_valuation_date():
    trade = replace(basket("ARVENNE"), trade_date=date(2026, 12, 1))
    issue = only(trade)
    assert (issue.code, issue.severity) == ("traded-later", Severity.WARNING)
    assert str(issue) == (
        "trade T1: found trade date 2026-12-01, after the valuation date 2026-11-30; expected a trade date on or "
        "before the valuation date. The trade is valued all the same; correct the date, or take the trade out until it "
        "is done."
    )
    assert told(replace(trade, trade_date=TODAY)) == []


def test_a_premium_after_the_payment():
    issue = only(basket("ARVENNE", payment=date(2027, 12, 21), premium=date(2027, 12, 22)))
    assert (issue.code, issue.severity) == ("premium-after-payment", Severity.WARNING)
    assert str(issue) == (
        "trade T1: found premium date 2027-12-22, after the payment date 2027-12-21; expected a premium paid before "
        "the payoff, or with it. The premium is discounted from its date as given; correct the date if it is wrong."
    )
    assert told(basket("ARVENNE", payment=date(2027, 12, 21), premium=date(2027, 12, 21))) == []


def on_performance(*fixings, names=("ARVENNE", "BELCOR")):
    trade = basket(*names)
    option = replace(
        trade.contract, reference_levels=fixings, on_performance=True, profile=Profile(ProfileKind.CALL, 1.0)
    )
    return replace(trade, contract=option)


def test_an_initial_fixing_far_from_spot():
    issue = only(on_performance(98.0, 5200.0))
    assert (issue.code, issue.severity) == ("fixing-far-from-spot", Severity.WARNING)
    assert str(issue) == (
        CONSTITUENT + 'found initial fixing 5200 of underlying "BELCOR", whose spot is 50; expected a fixing within a '
        "factor of 5 of the spot. Pence against pounds, or a split? Check both; they are used as given."
    )
    assert only(on_performance(19.9, 50.0)).code == "fixing-far-from-spot"
    assert told(on_performance(20.0, 250.0)) == []


def test_an_initial_fixing_is_told_at_its_own_cell_where_that_is_known():
    place = Place("book.xlsx", "constituents", 9, "initial_fixing", "D9")
    (issue,) = coverage(on_performance(100.0, 0.5), small_market(), {"initial_fixing:BELCOR": place}.get)
    assert issue.cell == "D9"


def struck(strike, *weights, kind=AggregateKind.WEIGHTED_SUM, profile=ProfileKind.CALL):
    trade = basket("ARVENNE", "BELCOR")
    option = replace(trade.contract, aggregate=Aggregate(kind, weights), profile=Profile(profile, strike))
    return replace(trade, contract=option)


def test_a_strike_far_from_the_aggregate_of_the_forwards():
    market = small_market()
    expiry = basket("ARVENNE").contract.expiry_date
    level = market.forward("ARVENNE", expiry) + market.forward("BELCOR", expiry)
    issue = only(struck(15000.0, 1.0, 1.0))
    assert (issue.code, issue.severity) == ("strike-far-from-forward", Severity.WARNING)
    assert str(issue) == (
        AT + f'"trade_id" (cell A7): found strike 15000, where the aggregate of the forwards is {level:g}; expected a '
        "strike within a factor of 5 of the aggregate at forwards. Pence against pounds, or a split? Check the strike, "
        "the weights and the spots; they are used as given."
    )
    assert [code for code, *_ in told(struck(0.199 * level, 1.0, 1.0))] == ["strike-far-from-forward"]
    assert told(struck(0.201 * level, 1.0, 1.0)) == told(struck(4.99 * level, 1.0, 1.0)) == []


@pytest.mark.parametrize(
    "trade",
    [
        struck(0.0, 1.0, 1.0, profile=ProfileKind.FORWARD),
        struck(2.0, 1.0, -2.0),
        struck(-40.0, 1.0, -2.0),
        struck(500.0, 1.0, -2.0, profile=ProfileKind.CASH_DIGITAL_CALL),
        struck(1.0, 1.0, -1.0, kind=AggregateKind.RANK_WEIGHTED),
    ],
)
def test_a_strike_of_zero_and_the_strike_of_a_spread_are_not_compared(trade):
    assert told(trade) == []


def test_a_strike_is_not_compared_where_the_forwards_are_unknown():
    market = small_market(curves={("EUR", "USD"): curve("EUR-USD", "EUR", "USD")})
    assert only(struck(15000.0, 1.0, 1.0), market).code == "no-standard-curve"
    assert only(replace(basket("ARVENNE", expiry=date(2026, 11, 23)))).code == "missing-fixing"


def test_an_expiry_on_a_holiday():
    issue = only(basket("ARVENNE", "BELCOR", expiry=date(2027, 3, 26)))  # Good Friday
    assert (issue.code, issue.severity) == ("expiry-on-holiday", Severity.WARNING)
    assert str(issue) == (
        AT
        + '"expiry_date" (cell H7): found expiry date 2027-03-26, not a business day of calendar TARGET (ARVENNE and '
        "BELCOR); expected a business day of every underlying. The option is valued to 2027-03-26; if its terms move "
        "the date, enter 2027-03-25 or 2027-03-30."
    )


def test_a_date_beyond_the_calendars_is_told_not_crashed_on():
    issue = only(basket("ARVENNE", expiry=date(2297, 12, 17)))
    assert (issue.code, issue.severity) == ("date-too-late", Severity.ERROR)
    assert issue.expected == "dates up to 2199-12-31, where the calendars end"


def test_a_pair_of_which_the_matrix_gave_no_number_costs_the_trades_that_hold_both():
    why = Issue("blank-cell", "a blank cell, and so is its mirror image", "the correlation in at least one of the two",
                "Enter it.", file="market.xlsx", sheet="correlations", row=3, column="ARVENNE", cell="B3")  # fmt: skip
    market = small_market(rejected={"correlations:BELCOR:ARVENNE": (why,)})
    assert str(only(basket("ARVENNE", "BELCOR"), market)) == (
        CONSTITUENT.replace("row 8", "row 7") + "found no correlation of ARVENNE with BELCOR; expected a correlation "
        "for every pair that the trade depends on. Mend the market first: market.xlsx, sheet correlations, row 3, "
        'column "ARVENNE" (cell B3): found a blank cell, and so is its mirror image; expected the correlation in at '
        "least one of the two."
    )
    assert told(basket("ARVENNE"), market) == told(basket("BELCOR"), market) == []
