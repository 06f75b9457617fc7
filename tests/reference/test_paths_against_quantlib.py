"""Path-dependent trades beside QuantLib: averages, also seasoned, and a barrier on another asset."""

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Event, Fixing, Leg, Payment, Reading, Trigger, When
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings, sample_paths
from tests.unit.barrier_legs import knocked_out

TODAY = ql.Date(2, 1, 2025)
DAYS = ql.Actual365Fixed()


def flat(rate):
    return ql.YieldTermStructureHandle(ql.FlatForward(TODAY, rate, DAYS))


def process(spot, rate, dividend_yield, volatility):
    surface = ql.BlackVolTermStructureHandle(ql.BlackConstantVol(TODAY, ql.NullCalendar(), volatility, DAYS))
    quote = ql.QuoteHandle(ql.SimpleQuote(spot))
    return ql.BlackScholesMertonProcess(quote, flat(dividend_yield), flat(rate), surface)


def sample(law, legs, tolerance, points=2**14):
    settings = PathSettings(maximum_points=points)
    return sample_paths(PathProblem(law, legs), group="ql", seed=4, value_tolerance=tolerance, settings=settings)


@pytest.mark.parametrize(("strike", "past"), [(90.0, ()), (100.0, ()), (115.0, ()), (100.0, (104.0, 108.0, 99.0))])
def test_call_on_an_average_of_monthly_fixings(strike, past):
    """QuantLib's engine of Choi (2018), a quadrature that is exact up to its grid."""
    ql.Settings.instance().evaluationDate = TODAY
    days = [round(365 * k / 12) for k in range(1, 13)]
    dates = [TODAY + d for d in days]
    payoff = ql.PlainVanillaPayoff(ql.Option.Call, strike)
    option = ql.DiscreteAveragingAsianOption(
        ql.Average().Arithmetic, float(sum(past)), len(past), dates, payoff, ql.EuropeanExercise(dates[-1])
    )
    option.setPricingEngine(ql.ChoiAsianEngine(process(100.0, 0.03, 0.02, 0.25)))
    times = np.array(days) / 365.0
    law = PathLaw.constant(times, np.array([100.0]), np.array([0.01]), np.array([0.25]), np.eye(1))
    price = Reading(Aggregate.weighted_sum((1.0,)), (1.0,))
    total = len(days) + len(past)
    call = Profile(ProfileKind.CALL, strike).payoff()
    events = []
    for j in range(12):
        pays = (Payment(call, float(np.exp(-0.03 * times[-1])), When.ALIVE, price, averaged=True),) if j == 11 else ()
        events.append(Event(j, payments=pays, fixing=Fixing(price, 1.0 / total)))
    found = sample(law, (Leg(tuple(events), sum_so_far=sum(past) / total),), 3e-5, 2**16)
    # Choi's default grid is good to about 1e-4 here
    assert found.value == pytest.approx(option.NPV(), abs=2e-4 + 4.0 * found.standard_error)


def test_call_knocked_out_by_another_asset():
    """Continuous barrier of Heynen & Kat (1994), shifted for daily observation (Broadie, Glasserman & Kou 1997)."""
    ql.Settings.instance().evaluationDate = TODAY
    years, barrier, dates = 0.5, 95.0, 182
    end = TODAY + dates
    option = ql.TwoAssetBarrierOption(
        ql.Barrier.DownOut, barrier, ql.PlainVanillaPayoff(ql.Option.Call, 90.0), ql.EuropeanExercise(end)
    )
    years = DAYS.yearFraction(TODAY, end)
    first, second = process(100.0, 0.08, 0.0, 0.2), process(100.0, 0.08, 0.0, 0.2)
    option.setPricingEngine(ql.AnalyticTwoAssetBarrierEngine(first, second, ql.QuoteHandle(ql.SimpleQuote(0.5))))
    law = PathLaw.constant(
        years * np.arange(1, dates + 1) / dates,
        np.full(2, 100.0),
        np.full(2, 0.08),
        np.full(2, 0.2),
        np.array([[1.0, 0.5], [0.5, 1.0]]),
    )
    paid = Reading(Aggregate.weighted_sum((1.0, 0.0)), (1.0, 1.0))
    watched = Reading(Aggregate.weighted_sum((0.0, 1.0)), (1.0, 1.0))
    shifted = barrier * np.exp(
        0.5826 * 0.2 * np.sqrt(years / dates)
    )  # watched by the day, it acts as the other all the time
    pays = Payment(Profile(ProfileKind.CALL, 90.0).payoff(), float(np.exp(-0.08 * years)), When.SURVIVING, paid)
    leg = knocked_out(pays, dates - 1, range(dates), below=Trigger(watched, shifted))
    found = sample(law, (leg,), 2e-3, 2**11)
    # the shift leaves an error of smaller order than the root of the step
    assert found.value == pytest.approx(option.NPV(), abs=5e-3 + 4.0 * found.standard_error)
