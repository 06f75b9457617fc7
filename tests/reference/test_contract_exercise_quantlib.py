"""American contracts on one and two assets against QuantLib's finite differences: inside the interval shown."""

from datetime import date

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.exercise import ExerciseStyle
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.contract_exercise import ExerciseSettings
from tests.unit.exercise_cases import END, HALF_YEARS, RATE, SURE, VOLATILITY, YIELD, flat_market, trade, value_of
from tests.unit.markets import TODAY

#: The grids' own errors, relative, seen by halving their steps: 5.2e-4 at most of the two-asset values.
ONE_ASSET, TWO_ASSETS = 1e-4, 6e-4


def process(spot: float, dividend: float = YIELD) -> ql.BlackScholesMertonProcess:
    today = ql.Date(TODAY.day, TODAY.month, TODAY.year)
    ql.Settings.instance().evaluationDate = today
    days = ql.Actual365Fixed()
    volatility = ql.BlackConstantVol(today, ql.NullCalendar(), VOLATILITY, days)
    curves = [ql.YieldTermStructureHandle(ql.FlatForward(today, rate, days)) for rate in (dividend, RATE)]
    return ql.BlackScholesMertonProcess(
        ql.QuoteHandle(ql.SimpleQuote(spot)), *curves, ql.BlackVolTermStructureHandle(volatility)
    )


def day_of(day: date) -> ql.Date:
    return ql.Date(day.day, day.month, day.year)


def exercise(style: ExerciseStyle):
    if style is ExerciseStyle.AMERICAN:
        return ql.AmericanExercise(day_of(TODAY), day_of(END))
    return ql.BermudanExercise([day_of(day) for day in HALF_YEARS])


def one_asset(kind, strike: float, style: ExerciseStyle) -> tuple[float, float]:
    """Value and delta of one option on a share at 100."""
    option = ql.VanillaOption(ql.PlainVanillaPayoff(kind, strike), exercise(style))
    option.setPricingEngine(ql.FdBlackScholesVanillaEngine(process(100.0), 1000, 1000))
    return option.NPV(), option.delta()


def two_assets(payoff, style: ExerciseStyle, cells: int = 150, steps: int = 100) -> float:
    """On two performances from 1, correlated by one half."""
    option = ql.BasketOption(payoff, exercise(style))
    option.setPricingEngine(ql.Fd2dBlackScholesVanillaEngine(process(1.0), process(1.0), 0.5, cells, cells, steps))
    return option.NPV()


def rights(style: ExerciseStyle):
    return (TODAY, END) if style is ExerciseStyle.AMERICAN else HALF_YEARS


@pytest.mark.parametrize("style", ExerciseStyle)
@pytest.mark.parametrize(("kind", "strike"), [(ProfileKind.PUT, 1.1), (ProfileKind.CALL, 1.0)])
def test_one_asset_lies_in_the_interval_with_its_delta(kind, strike, style):
    deal = trade(Aggregate.weighted_sum((1.0,)), Profile(kind, strike), rights=rights(style), style=style)
    found = value_of(deal)
    wanted, delta = one_asset(ql.Option.Put if kind is ProfileKind.PUT else ql.Option.Call, 100.0 * strike, style)
    headline = found.headline
    assert headline.lower - ONE_ASSET * wanted / 100.0 <= wanted / 100.0 <= headline.upper + ONE_ASSET * wanted / 100.0
    assert headline.upper - headline.lower < 0.02 * headline.value
    noise = SURE * found.ratios.delta_errors[0] + 5e-5  # bumps of 0.2 %, and fewer days than the grid's
    assert found.ratios.deltas[0] == pytest.approx(delta / 100.0, abs=noise)


CASES = [
    (Aggregate.worst_of(2), Profile(ProfileKind.PUT, 1.0), lambda p: ql.MinBasketPayoff(p), ql.Option.Put),
    (Aggregate.best_of(2), Profile(ProfileKind.CALL, 1.0), lambda p: ql.MaxBasketPayoff(p), ql.Option.Call),
    (
        Aggregate.weighted_sum((0.5, 0.5)),
        Profile(ProfileKind.PUT, 1.0),
        lambda p: ql.AverageBasketPayoff(p, 2),
        ql.Option.Put,
    ),
]


@pytest.mark.parametrize(
    ("aggregate", "profile", "basket", "kind", "style"),
    [(*CASES[0], ExerciseStyle.BERMUDAN), (*CASES[2], ExerciseStyle.AMERICAN)],
    ids=[
        "worst of",
        "basket",
    ],
)
def test_two_assets_lie_in_the_interval(aggregate, profile, basket, kind, style):
    deal = trade(aggregate, profile, rights=rights(style), style=style)
    headline = value_of(deal, flat_market()).headline
    wanted = two_assets(basket(ql.PlainVanillaPayoff(kind, 1.0)), style)
    assert headline.lower <= wanted * (1.0 + TWO_ASSETS)
    assert wanted * (1.0 - TWO_ASSETS) <= headline.upper
    assert headline.upper - headline.lower < 0.03 * headline.value


@pytest.mark.long
@pytest.mark.parametrize("style", ExerciseStyle)
@pytest.mark.parametrize(("aggregate", "profile", "basket", "kind"), CASES, ids=lambda x: str(getattr(x, "kind", "")))
def test_a_desk_run_is_narrow(aggregate, profile, basket, kind, style):
    deal = trade(aggregate, profile, rights=rights(style), style=style)
    headline = value_of(deal, flat_market(), ExerciseSettings(threads=2)).headline
    wanted = two_assets(basket(ql.PlainVanillaPayoff(kind, 1.0)), style, 300, 200)
    assert headline.lower <= wanted * (1.0 + TWO_ASSETS)
    assert wanted * (1.0 - TWO_ASSETS) <= headline.upper
    assert headline.upper - headline.lower < 0.006 * headline.value
    assert np.isfinite(headline.standard_error)
