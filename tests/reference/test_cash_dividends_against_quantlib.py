"""Cash dividends by the floor-and-random-part decomposition against QuantLib's escrowed-dividend engine."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form.black_scholes import BLACK_SCHOLES
from pricer.engines.problem import EuropeanProblem
from pricer.market.calendars import to_quantlib
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.evaluation_date import evaluation_date
from pricer.market.volatility import VolatilityCurve
from tests.reference.checker import value_by
from tests.unit.markets import TODAY, small_market

PAID = (CashDividend(date(2027, 5, 12), 3.0), CashDividend(date(2028, 5, 10), 3.5))


@pytest.mark.parametrize("expiry", [date(2028, 5, 10), date(2029, 11, 29)])
@pytest.mark.parametrize("kind", [ProfileKind.CALL, ProfileKind.PUT])
def test_options_after_the_last_ex_date_are_those_of_escrowed_dividends(expiry, kind):
    """With no dividend after expiry the decomposition is the escrowed model: spot less the value of the dividends."""
    market = small_market()
    flat = VolatilityCurve.from_quotes(TODAY, [expiry], [0.22])
    share = replace(market.underlyings["ARVENNE"], dividends=Dividends(0.01, (), PAID), volatility=flat)
    market = replace(market, underlyings={"ARVENNE": share})
    law = market.joint_lognormal(("ARVENNE",), expiry)
    payoff = Profile(kind, 98.0).payoff()
    problem = EuropeanProblem(law, Aggregate.weighted_sum((1.0,)), payoff, market.discount_factor("EUR", "", expiry))
    assert value_by(BLACK_SCHOLES, problem) == pytest.approx(escrowed(market, expiry, kind), rel=1e-10)


def escrowed(market, expiry, kind):
    with evaluation_date(TODAY):
        start, count = to_quantlib(TODAY), ql.Actual365Fixed()
        curve = market.curves["EUR", ""]
        days = [TODAY, *curve.dates]
        rates = ql.DiscountCurve([to_quantlib(d) for d in days], [curve.discount_factor(d) for d in days], count)
        process = ql.BlackScholesMertonProcess(
            ql.QuoteHandle(ql.SimpleQuote(100.0)),
            ql.YieldTermStructureHandle(ql.FlatForward(start, 0.01, count)),
            ql.YieldTermStructureHandle(rates),
            ql.BlackVolTermStructureHandle(ql.BlackConstantVol(start, ql.NullCalendar(), 0.22, count)),
        )
        side = ql.Option.Call if kind is ProfileKind.CALL else ql.Option.Put
        option = ql.VanillaOption(ql.PlainVanillaPayoff(side, 98.0), ql.EuropeanExercise(to_quantlib(expiry)))
        paid = ql.DividendVector([to_quantlib(d.ex_date) for d in PAID], [d.amount for d in PAID])
        option.setPricingEngine(ql.AnalyticDividendEuropeanEngine(process, paid))
        return option.NPV()
