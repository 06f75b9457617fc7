"""Slips of unit in volatilities and in strikes are told word for word; ordinary smiles raise nothing."""

from dataclasses import replace
from datetime import date

import pytest

from pricer.core.issues import Severity
from pricer.core.source import Place
from pricer.market.checked_surface import UnusableQuotesError, VolatilityQuote, build_surface
from pricer.market.coverage import coverage
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.findings import nowhere
from pricer.market.quality import gates, review
from pricer.market.volatility import VolatilityCurve
from tests.unit.markets import TODAY, basket, small_market

EXPIRIES = (date(2027, 3, 19), date(2027, 12, 17))
STRIKES = (85.0, 90.0, 95.0, 100.0, 105.0, 110.0, 115.0)


def smiled(quotes, spot=100.0, cash=()):
    market = small_market()
    dividends = Dividends(0.02, (), tuple(CashDividend(day, amount) for day, amount in cash))
    if cash:
        dividends = replace(dividends, yield_rate=0.0)
    share = replace(market.underlyings["ARVENNE"], spot=spot, volatility=None, dividends=dividends)
    market = replace(market, underlyings={"ARVENNE": share})
    return replace(
        market, surfaces={"ARVENNE": build_surface("ARVENNE", market.affine_price("ARVENNE"), TODAY, quotes)}
    )


def flat(strikes, level=0.2, days=EXPIRIES):
    return [VolatilityQuote(day, level, strike) for day in days for strike in strikes]


def told(market, code):
    return [issue for issue in gates(market) if issue.code == code]


def test_ordinary_quotes_raise_nothing():
    assert gates(smiled(flat(STRIKES))) == ()


def test_all_volatilities_ten_times_too_low():
    (issue,) = gates(smiled(flat(STRIKES, 0.02)))
    assert (issue.code, issue.severity) == ("implausible-volatility", Severity.WARNING)
    assert str(issue) == (
        "found a volatility of 2.00 % of ARVENNE for 2027-03-19 (and on 1 more of its expiries); expected volatilities "
        "at the forward between 4 % and 150 %. Check the unit: 21.5 % is entered as 0.215. The volatilities are used "
        "as given."
    )


def test_the_warning_stands_at_the_quote_next_to_the_forward():
    asked = []

    def place(key):
        asked.append(key)
        return Place("market.xlsx", "volatilities", 5, "volatility_decimal", "C5") if key.endswith(":100.0") else None

    issues = gates(smiled(flat(STRIKES, 1.6, EXPIRIES[:1])), None, place)
    (issue,) = [issue for issue in issues if issue.code == "implausible-volatility"]
    assert issue.cell == "C5"
    assert "volatility:ARVENNE:2027-03-19:100.0" in asked


@pytest.mark.parametrize(("level", "warnings"), [(0.035, 1), (0.04, 0), (1.5, 0), (1.6, 1)])
def test_volatilities_without_strikes_are_judged_too(level, warnings):
    market = small_market()
    curve = VolatilityCurve.from_quotes(TODAY, [EXPIRIES[1]], [level])
    share = replace(market.underlyings["ARVENNE"], volatility=curve)
    assert len(gates(replace(market, underlyings={"ARVENNE": share}))) == warnings


def test_strikes_in_per_cent_of_the_forward():
    market = smiled(flat(STRIKES), spot=60.0)
    (issue,) = told(market, "strikes-beside-forward")
    assert issue.severity is Severity.WARNING
    assert str(issue) == (
        "found quotes of ARVENNE for 2027-03-19 at strikes from 85 to 115, which do not reach the forward 60 (nor do "
        "those of 1 more of its expiries); expected strikes around the forward. The strikes look like per cent of the "
        "forward: enter them in strike_of_forward_decimal (95 % as 0.95), or correct the spot. The quotes are used as "
        "given."
    )


def test_strikes_in_per_cent_whose_range_holds_the_forward():
    (issue,) = told(smiled(flat((70.0, 85.0, 100.0, 115.0, 130.0)), spot=84.0), "strikes-beside-forward")
    assert issue.found == (
        "quotes of ARVENNE for 2027-03-19 at strikes from 70 to 130, which centre on 100 as on most expiries, while "
        "the forward is 84"
    )


def test_strikes_as_parts_of_the_forward_on_one_expiry():
    quotes = [*flat((1.5, 2.0, 2.5), days=EXPIRIES[:1]), *flat((0.9, 1.0, 1.1), days=EXPIRIES[1:])]
    (issue,) = told(smiled(quotes, spot=2.0), "strikes-beside-forward")
    assert issue.found == (
        "quotes of ARVENNE for 2027-12-17 at strikes from 0.9 to 1.1, which do not reach the forward 2.00058"
    )
    assert issue.mend == (
        "The strikes look like parts of the forward: enter them in strike_of_forward_decimal (e.g. 0.95), or correct "
        "the spot. The quotes are used as given."
    )


def test_strikes_on_one_side_of_the_forward():
    (issue,) = told(smiled(flat((40.0, 45.0, 50.0), days=EXPIRIES[:1]), spot=60.0), "strikes-beside-forward")
    assert issue.mend == "Check the strikes, the spot and the dividends. The quotes are used as given."


def test_a_share_that_has_moved_within_its_listed_strikes_is_ordinary():
    assert told(smiled(flat(STRIKES), spot=91.0), "strikes-beside-forward") == []


def test_a_surface_in_doubt_is_remembered_for_its_trades():
    assert set(review(smiled(flat(STRIKES, 0.02))).doubts) == {"ARVENNE"}


def test_expiries_on_weekends_are_told_once_and_put_nothing_in_doubt():
    found = review(smiled(flat(STRIKES, days=(date(2027, 3, 20), date(2027, 12, 18)))))
    (issue,) = found.issues
    assert issue.code == "weekend-date"
    assert str(issue) == (
        "found volatilities of ARVENNE for 2027-03-20, a Saturday (and 1 more on weekends); expected dates on which "
        "markets are open. Check the date; it is used as given."
    )
    assert found.doubts == {}


def unusable(quotes, cash=()):
    with pytest.raises(UnusableQuotesError) as caught:
        smiled(quotes, cash=cash)
    return caught.value.faults


def test_a_strike_of_another_unit_names_strike_and_spot_first():
    quotes = [*flat(STRIKES, days=EXPIRIES[:1]), VolatilityQuote(EXPIRIES[0], 0.2, 8500.0)]
    (fault,) = unusable(quotes, cash=[(date(2027, 5, 12), 2.0)])
    assert str(fault) == (
        "found strike 8500 for 2027-03-19, where the spot is 100 and the forward 100.599; expected a strike where an "
        "option at a volatility of 20.00 % is worth more than nothing. Check the strike and the spot: pence against "
        "pounds, a split, or per cent of the forward in the column of absolute strikes?"
    )
    (issue,) = gates(smiled(quotes))  # without dividends the quote is possible, and says nothing
    assert issue.code == "quote-far-from-forward"
    assert str(issue) == (
        "found strike 8500 of ARVENNE for 2027-03-19, where the forward is 100; expected strikes within a factor of 5 "
        "of the forward, or options worth more than nothing. Check the strike and the spot: pence against pounds, or a "
        "split? The quotes are used as given."
    )


def test_a_lone_quote_far_from_the_forward_says_nothing_about_it():
    (fault,) = unusable([VolatilityQuote(EXPIRIES[1], 0.2, 70.0)])
    assert str(fault) == (
        "found a single volatility for 2027-12-17, at strike 70, where the forward is 100.029; expected at least three "
        "strikes, or one volatility at the forward. Add quotes at other strikes, or clear the strike if it is the "
        "volatility at the forward."
    )


@pytest.mark.parametrize("strike", [95.0, 100.0, 108.0])
def test_a_lone_quote_near_the_forward_stands_for_it(strike):
    assert gates(smiled([VolatilityQuote(EXPIRIES[1], 0.2, strike)])) == ()


def test_beyond_the_last_smile_its_shape_is_kept_and_said_to_be():
    late = coverage(basket("ARVENNE", expiry=date(2028, 12, 15)), smiled(flat(STRIKES)), nowhere)
    (issue,) = [issue for issue in late if issue.code == "beyond-volatility"]
    assert issue.mend == (
        "The smile keeps its shape in standard deviations beyond that date; add a later expiry to the volatilities "
        "table."
    )
