"""Hazard curves: what they answer and what they refuse."""

import math
from dataclasses import replace
from datetime import date

import pytest
import QuantLib as ql

from pricer.market.calendars import to_quantlib
from pricer.market.credit import HazardCurve
from pricer.market.evaluation_date import evaluation_date
from tests.unit.markets import TODAY, curve

DATES = [date(2027, 11, 30), date(2029, 11, 29)]  # one and three years of ACT/365F
TENORS, SPREADS = ["6M", "1Y", "3Y", "5Y", "7Y", "10Y"], [0.006, 0.008, 0.011, 0.014, 0.015, 0.016]


def refused(*args, **kwargs):
    with pytest.raises(ValueError) as caught:
        HazardCurve.from_cds_spreads("NORDHAVN", curve(), *args, **kwargs)
    return str(caught.value)


def test_survival_by_hand():
    credit = HazardCurve.from_hazard_rates("NORDHAVN", TODAY, 0.4, DATES, [0.02, 0.05])
    assert credit.survival_probability(TODAY) == 1.0
    assert credit.survival_probability(DATES[0]) == pytest.approx(math.exp(-0.02), rel=1e-15)
    assert credit.survival_probability(date(2028, 11, 29)) == pytest.approx(math.exp(-0.07), rel=1e-15)
    assert credit.survival_probability(date(2030, 11, 29)) == pytest.approx(math.exp(-0.17), rel=1e-15)
    assert [credit.hazard_rate(day) for day in (TODAY, DATES[0], date(2027, 12, 1), date(2040, 1, 1))] == [
        0.02, 0.02, 0.05, 0.05,
    ]  # fmt: skip
    assert credit.is_extrapolated(date(2029, 11, 30)) and not credit.is_extrapolated(DATES[1])


def test_every_spread_is_that_of_a_swap_worth_nothing():
    """Swaps built one by one on our survival probabilities and discount factors, and valued by QuantLib."""
    credit = HazardCurve.from_cds_spreads("NORDHAVN", curve(), 0.35, TENORS, SPREADS)
    with evaluation_date(TODAY):
        days = [to_quantlib(day) for day in (TODAY, *credit.dates)]
        hazards = ql.HazardRateCurve(days, [credit.hazard_rates[0], *credit.hazard_rates], ql.Actual365Fixed())
        hazards.enableExtrapolation()
        nodes = [TODAY, *curve().dates]
        rates = ql.DiscountCurve(
            [to_quantlib(day) for day in nodes], [curve().discount_factor(day) for day in nodes], ql.Actual365Fixed()
        )
        rates.enableExtrapolation()
        engine = ql.IsdaCdsEngine(
            ql.DefaultProbabilityTermStructureHandle(hazards), 0.35, ql.YieldTermStructureHandle(rates)
        )
        for tenor, spread in zip(TENORS, SPREADS, strict=True):
            swap = ql.MakeCreditDefaultSwap(ql.Period(tenor), spread)
            swap.setPricingEngine(engine)
            assert swap.fairSpread() == pytest.approx(spread, rel=1e-7), tenor
        for day in (date(2027, 3, 1), date(2033, 5, 5), date(2040, 1, 2)):
            assert credit.survival_probability(day) == pytest.approx(
                hazards.survivalProbability(to_quantlib(day)), rel=1e-13
            )


def test_the_order_of_the_tenors_does_not_matter():
    ahead, back = (HazardCurve.from_cds_spreads("N", curve(), 0.4, TENORS[::step], SPREADS[::step]) for step in (1, -1))
    assert ahead == back


def test_spreads_that_contradict_each_other_are_told():
    assert refused(0.4, ["1Y", "2Y"], [0.02, 0.005]) == (
        "credit NORDHAVN: no hazard rate between 0 and 1 a year satisfies the spread 50 bp of 2Y after the spreads "
        "before it"
    )
    assert refused(0.4, ["1Y", "12M"], [0.02, 0.02]) == ("credit NORDHAVN: 1Y and 12M both end on 2027-12-21: keep one")


def test_impossible_terms_are_refused():
    assert refused(1.0, ["1Y"], [0.01]).endswith("the recovery must be a fraction from 0 to below 1; got 1.0")
    assert refused(0.4, ["1Y"], [0.0]).endswith("the spread of 1Y must be above 0; got 0.0")
    assert refused(0.4, ["1Y"], []).endswith("1 tenors for 0 spreads")
    assert '"soon" is not a tenor' in refused(0.4, ["soon"], [0.01])
    for rates, message in (([0.02, -0.01], "must be a number from 0 up"), ([0.02], "2 dates for 1 hazard rates")):
        with pytest.raises(ValueError, match=message):
            HazardCurve.from_hazard_rates("N", TODAY, 0.4, DATES, rates)
    with pytest.raises(ValueError, match="dates must increase"):
        HazardCurve.from_hazard_rates("N", TODAY, 0.4, DATES[::-1], [0.01, 0.01])
    sound = HazardCurve.from_hazard_rates("N", TODAY, 0.4, DATES, [0.01, 0.01])
    with pytest.raises(ValueError, match="lies before the valuation date"):
        replace(sound, name="M").survival_probability(date(2026, 11, 29))


@pytest.mark.parametrize("tenor", ["1M", "20M", "10W"])
def test_tenors_that_no_quarterly_premium_fits_are_refused(tenor):
    assert refused(0.4, [tenor], [0.01]) == (
        f"credit NORDHAVN: premiums are paid each quarter, which {tenor} does not hold"
    )
