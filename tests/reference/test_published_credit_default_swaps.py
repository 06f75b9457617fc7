"""Hazard rates against published and recomputed credit default swaps; each row has its source."""

from __future__ import annotations

from datetime import date, timedelta
from itertools import pairwise

import numpy as np
import QuantLib as ql

from pricer.market.calendars import to_quantlib, year_fraction
from pricer.market.credit import HazardCurve
from pricer.market.curves import DiscountCurve
from pricer.market.evaluation_date import evaluation_date
from tests.reference.checker import check, numbers, read
from tests.reference.isda_curve import TRADE_DATE, discount_curve

ROWS = read("credit_default_swaps.csv")


def of_kind(kind):
    return [row for row in ROWS if row["kind"] == kind]


def inputs(row):
    return dict(part.split("=", 1) for part in row["inputs"].split(";") if "=" in part)


def test_upfronts_from_the_bootstrapped_hazard_rates_are_those_of_the_standard_model():
    rates = discount_curve()
    tenors = {"2010": "1Y", "2011": "2Y", "2012": "3Y", "2016": "7Y", "2019": "10Y"}

    def upfront(row):
        terms = inputs(row)
        recovery, year = float(terms["recovery"]), terms["maturity"][-4:]
        spread = float(terms["quoted_spread"])
        hazard = HazardCurve.from_cds_spreads("N", rates, recovery, [tenors[year]], [spread]).hazard_rates[0]
        with evaluation_date(TRADE_DATE):
            today = to_quantlib(TRADE_DATE)
            flat = ql.FlatHazardRate(today, ql.QuoteHandle(ql.SimpleQuote(hazard)), ql.Actual365Fixed())
            days = [TRADE_DATE, *rates.dates]
            discount = ql.DiscountCurve(
                [to_quantlib(day) for day in days], [rates.discount_factor(day) for day in days], ql.Actual365Fixed()
            )
            swap = ql.MakeCreditDefaultSwap(ql.Date(20, 6, int(year)), float(terms["running_coupon"]))
            swap.setPricingEngine(
                ql.IsdaCdsEngine(
                    ql.DefaultProbabilityTermStructureHandle(flat), recovery, ql.YieldTermStructureHandle(discount)
                )
            )
            return float(terms["notional"]) * swap.fairUpfront()

    check(of_kind("isda_cds_upfront"), upfront)


def test_a_seasoned_swap_by_the_mid_point_rule_has_the_published_value():
    """Default in the middle of each premium period, accrued premium paid then: a loop of our own on our curves."""
    for row in of_kind("cds"):
        terms = inputs(row)
        today = date.fromisoformat(terms["valuation_date"])
        days = [date.fromisoformat(day) for day in terms["coupon_dates"].split("|")]
        end = [days[-1]]
        # Rates and hazards on ACT/360, of which a day of ACT/365F is 365/360.
        hazard = HazardCurve.from_hazard_rates("N", today, 0.4, end, [0.01234 * 365 / 360])
        rates = DiscountCurve.from_zero_rates("C", "USD", "", today, end, [0.06], "ACT/360")
        protection = premium = 0.0
        for start, stop in pairwise(days):
            if stop <= today:
                continue
            begin = max(start, today)
            middle = begin + timedelta(days=(stop - begin).days // 2)
            survived = hazard.survival_probability(stop)
            lost = hazard.survival_probability(begin) - survived
            protection += 0.6 * lost * rates.discount_factor(middle)
            premium += survived * year_fraction(start, stop, "ACT/360") * rates.discount_factor(stop)
            premium += lost * year_fraction(start, middle, "ACT/360") * rates.discount_factor(middle)
        value = {"NPV": 1e4 * (0.012 * premium - protection), "fair spread": protection / premium}[row["measure"]]
        assert abs(value - float(row["value"])) <= float(row["tolerance"]), row["case_id"]


def test_the_par_spread_of_equal_quarters():
    """Constructed rows: exact quarters and mid-period default, with survival between dates from the hazard rates."""

    def par_spread(row):
        terms = inputs(row)
        hazard, recovery, years = float(terms["hazard"]), float(terms["recovery"]), int(terms["maturity"])
        rate = float(terms["r"].split()[0])
        # A day stands for an eighth of a year, so that quarters and their middles fall on days.
        today, scale = date(2026, 1, 1), 365.0 / 8.0
        end = today + timedelta(days=8 * years)
        credit = HazardCurve.from_hazard_rates("N", today, recovery, [end], [hazard * scale])
        rates = DiscountCurve.from_zero_rates("C", "USD", "", today, [end], [rate * scale])
        protection = premium = 0.0
        for quarter in range(4 * years):
            start, middle, stop = (today + timedelta(days=2 * quarter + half) for half in (0, 1, 2))
            lost = credit.survival_probability(start) - credit.survival_probability(stop)
            protection += (1.0 - recovery) * lost * rates.discount_factor(middle)
            premium += 0.25 * credit.survival_probability(stop) * rates.discount_factor(stop)
            premium += 0.125 * lost * rates.discount_factor(middle)
        return protection / premium

    check(of_kind("cds_par_spread_discrete"), par_spread)


def test_survival_under_piecewise_hazard_rates():
    (row,) = of_kind("hazard_bootstrap_continuous_premium")
    years = [int(year) for year in inputs(row)["maturities"].split("|")]
    hazards = numbers(inputs(row)["piecewise_hazards"])
    today = date(2026, 1, 1)
    days = [today + timedelta(days=365 * year) for year in years]
    credit = HazardCurve.from_hazard_rates("N", today, 0.4, days, hazards)
    assert row["notes"] == "survival probability to 1y = 0.9900498337"
    assert abs(credit.survival_probability(days[0]) - 0.9900498337) < 1e-10
    lost = np.cumsum(hazards * [1, 2, 2, 2, 3])
    found = [credit.survival_probability(day) for day in days]
    np.testing.assert_allclose(found, np.exp(-lost), rtol=1e-14)
