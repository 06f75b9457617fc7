"""Forward rates point at the one quote that bends them; honest curves, negative ones included, raise nothing."""

from datetime import date

import pytest

from pricer.core.issues import Severity
from pricer.core.source import Place
from pricer.market.curves import DiscountCurve
from pricer.market.quality import gates
from pricer.market.quoted_curves import QuoteKind, RateQuote
from tests.unit.markets import TODAY, small_market

DAYS = [date(2026 + n, 11, 30) for n in range(1, 6)]
DEPOSITS = [RateQuote(QuoteKind.DEPOSIT, tenor, 0.0190) for tenor in ("1D", "1W", "1M", "3M", "6M")]


def told(curve, place=lambda _: None):
    return gates(small_market(curves={("EUR", ""): curve}), None, place)


def zero(*rates):
    return DiscountCurve.from_zero_rates("EUR-STD", "EUR", "", TODAY, DAYS[: len(rates)], rates)


def swaps(**changes):
    rates = {"1Y": 0.0200, "18M": 0.0203, "2Y": 0.0207, "3Y": 0.0213, "5Y": 0.0228} | changes
    quotes = [RateQuote(QuoteKind.OVERNIGHT_SWAP, tenor, rate) for tenor, rate in rates.items()]
    return [*DEPOSITS, *quotes]


def quoted(quotes, valuation_date=TODAY):
    return DiscountCurve.from_quotes("EUR-STD", "EUR", "", valuation_date, quotes)


def test_one_swap_ten_times_too_high_is_named_at_its_own_row():
    cells = {"curve_points:EUR-STD:18M": Place("market.xlsx", "curve_points", 8, "tenor", "C8")}
    (issue,) = told(quoted(swaps(**{"18M": 0.2032})), cells.get)
    assert (issue.code, issue.severity) == ("implausible-forward-rate", Severity.WARNING)
    assert str(issue) == (
        'market.xlsx, sheet curve_points, row 8, column "tenor" (cell C8): found the 18M overnight swap at 20.32 % of '
        "curve EUR-STD, which makes forward rates of 55.24 % from 2027-12-03 to 2028-06-05 and -51.82 % from there to "
        "2028-12-05; expected forward rates that change little from one point to the next, and none below 0 while zero "
        "rates are above it. Check this point, then its neighbours. They are used as given."
    )


@pytest.mark.parametrize("bad", range(4))
def test_one_zero_rate_too_high_is_named(bad):
    rates = [0.020, 0.021, 0.022, 0.023]
    rates[bad] *= 10.0
    (issue,) = told(zero(*rates))
    assert issue.found.startswith(f"the point {DAYS[bad]} of curve EUR-STD, which makes forward rates of ")


def test_discount_factors_that_rise_while_rates_are_positive():
    rising = DiscountCurve.from_discount_factors(
        "EUR-STD", "EUR", "", TODAY, DAYS[:4], [0.98, 0.965, 0.970, 0.930]
    )  # fmt: skip
    (issue,) = told(rising)
    assert issue.found == (
        "the point 2028-11-30 of curve EUR-STD, which makes forward rates of 1.54 % from 2027-11-30 to 2028-11-30 and "
        "-0.52 % from there to 2029-11-30"
    )


def test_curves_of_negative_rates_are_ordinary():
    assert told(zero(-0.006, -0.0055, -0.004, -0.001, 0.002)) == ()
    assert told(zero(0.001, -0.002, -0.004)) == ()
    assert told(quoted([RateQuote(quote.kind, quote.tenor, -0.006) for quote in swaps()])) == ()


def test_steep_and_high_curves_are_ordinary():
    assert told(zero(0.28, 0.25, 0.23, 0.215, 0.205)) == ()
    assert told(zero(0.0, 0.0, 0.0)) == ()


def test_rounded_discount_factors_on_days_close_together_are_ordinary():
    days = [date(2031, 11, 28), date(2031, 12, 1)]
    factors = DiscountCurve.from_discount_factors("EUR-STD", "EUR", "", TODAY, days, [0.9048, 0.9046])
    assert told(factors) == ()


def test_quotes_on_a_holiday_count_from_the_next_business_day():
    christmas = date(2026, 12, 25)
    curve = quoted(swaps(), christmas)
    (issue,) = gates(small_market(valuation_date=christmas, curves={("EUR", ""): curve}))
    assert issue.code == "holiday-valuation"
    assert str(issue) == (
        "found the valuation date 2026-12-25, on which the market of curve EUR-STD's quotes is closed; expected quotes "
        "of a business day. They are taken as those of 2026-12-28, and the first rate accrues until then. Check the "
        "date."
    )
    # The same quotes on the Monday, carried back over three days at the overnight rate.
    monday = quoted(swaps(), date(2026, 12, 28))
    carried = 1.0 / (1.0 + 3 * 0.0190 / 360.0)
    for day in (date(2027, 6, 30), date(2029, 12, 31)):
        assert curve.discount_factor(day) == pytest.approx(monday.discount_factor(day) * carried, rel=1e-7)


def test_a_weekend_costs_no_curve_and_is_told_once():
    saturday = date(2026, 12, 5)
    (issue,) = gates(small_market(valuation_date=saturday, curves={("EUR", ""): quoted(swaps(), saturday)}))
    assert issue.code == "weekend-valuation"
