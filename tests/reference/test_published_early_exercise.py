"""Early exercise on one and several assets: published and recomputed values, row by row, and QuantLib."""

from dataclasses import replace

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.early_exercise.engine import early_exercise_value
from pricer.engines.early_exercise.problem import EarlyExerciseProblem
from tests.reference.checker import read
from tests.reference.early_exercise_rows import (
    BRIEF,
    MODEST,
    SURE,
    check_brackets,
    multi_asset,
    within_recomputed,
    within_tolerance,
)

ROWS = read("early_exercise_multi_asset.csv")
BERMUDAN = [row for row in ROWS if row["style"] == "Bermudan"]
AMERICAN = [row for row in ROWS if row["style"] == "American"]


def named(*cases: str):
    return [row for row in ROWS if row["case_id"] in cases]


def test_intervals_hold_the_recomputed_values_of_dated_rows():
    """Grids and one-asset reductions good to 0.03 % (they agree with each other by that much, see the table)."""
    rows = named("EE-TV-B9", "EE-AR-3")
    check_brackets(rows, multi_asset, within_recomputed, widest=2e-2)


@pytest.mark.long
def test_fifty_dates_a_year_on_one_asset():
    check_brackets(named("EE-LS-36-0.2-1"), multi_asset, within_recomputed, widest=2e-3)


@pytest.mark.long
def test_every_dated_row_lies_in_its_interval():
    check_brackets(BERMUDAN, multi_asset, within_recomputed, replace(MODEST, rounds=2, gap=5e-3))
    check_brackets(BERMUDAN, multi_asset, within_tolerance, MODEST)


@pytest.mark.long
@pytest.mark.parametrize("row", AMERICAN, ids=lambda row: row["case_id"])
def test_continuous_exercise_is_approached_from_below(row):
    """Twelve and 24 dates, and their extrapolation, the error of the dates being close to proportional to 1/dates."""
    twelve = early_exercise_value(multi_asset(row, 12), MODEST)
    many = early_exercise_value(multi_asset(row, 24), MODEST)
    low, high = float(row["recomputed_value"]), float(row["recomputed_value"])
    assert many.lower - SURE * many.lower_error < high
    extrapolated = 2.0 * many.value - twelve.value
    noise = 2.0 * (many.upper_error + many.gap) + twelve.upper_error + twelve.gap
    assert low - SURE * noise - 3e-3 * low < extrapolated < high + SURE * noise + 3e-3 * high


def dated_by_quantlib(spot, strike, rate, dividend, volatility, years, dates, kind) -> float:
    """QuantLib's finite differences with exercise on ``dates`` equally spaced dates, whole days each."""
    today = ql.Date(1, 1, 2020)
    ql.Settings.instance().evaluationDate = today
    days = ql.Actual365Fixed()

    def flat(level):
        return ql.YieldTermStructureHandle(ql.FlatForward(today, level, days))

    process = ql.BlackScholesMertonProcess(
        ql.QuoteHandle(ql.SimpleQuote(spot)),
        flat(dividend),
        flat(rate),
        ql.BlackVolTermStructureHandle(ql.BlackConstantVol(today, ql.NullCalendar(), volatility, days)),
    )
    exercise = ql.BermudanExercise([today + round(365 * years * (j + 1) / dates) for j in range(dates)])
    option = ql.VanillaOption(ql.PlainVanillaPayoff(kind, strike), exercise)
    option.setPricingEngine(ql.FdBlackScholesVanillaEngine(process, 2000, 1000))
    return option.NPV()


@pytest.mark.parametrize(
    ("spot", "rate", "dividend", "volatility", "years", "dates", "kind"),
    [
        (95.0, 0.05, 0.0, 0.25, 1.0, 5, ProfileKind.PUT),
        (100.0, 0.02, 0.06, 0.3, 2.0, 10, ProfileKind.CALL),
    ],
)
def test_options_on_one_asset_agree_with_quantlib(spot, rate, dividend, volatility, years, dates, kind):
    problem = EarlyExerciseProblem.from_constants(
        years * np.arange(1, dates + 1) / dates,
        np.array([spot]),
        rate=rate,
        dividend_yields=np.array([dividend]),
        volatilities=np.array([volatility]),
        correlation=np.eye(1),
        aggregate=Aggregate.weighted_sum((1.0,)),
        payoff=Profile(kind, 100.0).payoff(),
    )
    value = early_exercise_value(problem, BRIEF)
    exact = dated_by_quantlib(
        spot,
        100.0,
        rate,
        dividend,
        volatility,
        years,
        dates,
        ql.Option.Put if kind is ProfileKind.PUT else ql.Option.Call,
    )
    lower, upper = value.interval(SURE)
    assert lower < exact * (1.0 + 1e-4)  # the grid's own error, seen by halving its steps
    assert upper > exact * (1.0 - 1e-4)
    assert value.relative_gap < 2e-3
