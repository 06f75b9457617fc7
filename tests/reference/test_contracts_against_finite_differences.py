"""Contracts on two and three assets, through the whole tool, against finite differences written for that alone.

Nothing of the engines is in the reference: flat inputs, the terms written out below, and the grid of
:mod:`tests.reference.finite_differences`, whose error is measured by halving it. A value may differ by that and
4 standard errors (32 randomisations: one case in some 2 700); one that may be ended early by that beyond its interval.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from datetime import date
from functools import reduce

import numpy as np
import pytest
from scipy.stats import multivariate_normal

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.appraisal import AppraisalSettings, appraise
from pricer.engines.contract_value import ContractSettings
from pricer.engines.model_value import ModelValue
from pricer.engines.selector import Interval
from pricer.market.correlation import checked
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import Dividends
from pricer.market.fx import FxRates
from pricer.market.market import Market
from pricer.market.underlying import Underlying
from pricer.market.volatility import VolatilityCurve
from tests.reference import finite_differences as grids
from tests.reference.finite_differences import Array, Decision, Fineness

TODAY = date(2026, 11, 30)
NAMES = ("ARVENNE", "BELCOR", "CASTELL")
SPOTS, REFERENCES = (100.0, 50.0, 80.0), (105.0, 50.0, 76.0)
RATE, YIELDS, VOLATILITIES = 0.03, (0.02, 0.0, 0.04), (0.25, 0.35, 0.2)
CORRELATION = np.array([[1.0, 0.5, 0.3], [0.5, 1.0, -0.2], [0.3, -0.2, 1.0]])
OBSERVED = (date(2027, 3, 15), date(2027, 7, 15), date(2027, 11, 15))
EXPIRY = date(2028, 3, 15)
DAYS = (*OBSERVED, EXPIRY)

#: Barriers at powers of this ratio lie on the faces of cells.
RATIO = 0.8
TWO_ASSETS = Fineness(-math.log(RATIO), cells=4, steps=18)
THREE_ASSETS = Fineness(-math.log(RATIO), cells=2, steps=9, deviations=4.0)
#: A call grows towards the edges: at 4 deviations they would cost 0.1 basis points.
THREE_ASSETS_CALL = replace(THREE_ASSETS, deviations=4.5)

SURE = 4.0
SETTINGS = AppraisalSettings(
    seed=5,
    precision_bp=0.4,
    delta_precision_bp=10.0,
    contract_delta_precision_bp=20.0,
    contract=ContractSettings(with_checks=False),
)


def market(n: int) -> Market:
    far = [date(2027, 12, 1), date(2031, 11, 28)]
    underlyings = {
        name: Underlying(
            name, "EUR", spot, "TARGET", 1.0, Dividends(carry), VolatilityCurve.from_quotes(TODAY, far, [vol, vol])
        )
        for name, spot, carry, vol in zip(NAMES[:n], SPOTS, YIELDS, VOLATILITIES, strict=False)
    }
    curve = DiscountCurve.from_zero_rates("EUR-STD", "EUR", "", TODAY, far, [RATE, RATE])
    correlation = checked(NAMES[:n], CORRELATION[:n, :n])[0]
    return Market("flat", TODAY, "EUR", underlyings, {("EUR", ""): curve}, correlation, FxRates.from_pairs({}))


def paid(day: date) -> Observation:
    return Observation(day, date.fromordinal(day.toordinal() + 2))


def years(day: date) -> float:
    return (day - TODAY).days / 365.0


def worth(day: date) -> float:
    """Tonight, of 1 that is decided on the day and paid two days later."""
    return math.exp(-RATE * (years(day) + 2.0 / 365.0))


def levels(n: int) -> grids.Levels:
    vols = np.array(VOLATILITIES[:n])
    start = np.log(np.array(SPOTS[:n]) / np.array(REFERENCES[:n]))
    return grids.Levels(start, RATE - np.array(YIELDS[:n]) - 0.5 * vols**2, np.outer(vols, vols) * CORRELATION[:n, :n])


def worst(prices: Sequence[Array]) -> Array:
    return reduce(np.minimum, prices)


def best(prices: Sequence[Array]) -> Array:
    return reduce(np.maximum, prices)


def contract(n: int, aggregate: Aggregate, payout, *features) -> Contract:
    return Contract(Levels(NAMES[:n], REFERENCES[:n]), ExpiryLevel(EXPIRY, aggregate), payout, paid(EXPIRY), features)


# A worst-of note: conditional coupons, calls that step down and rise in amount, a put knocked in at expiry alone.
CALLS, AMOUNTS, COUPON, COUPON_LEVEL, KNOCK_IN = (1.0, 1.0, RATIO), (1.01, 1.02, 1.04), 0.02, RATIO, RATIO**2


def note(n: int) -> Contract:
    aggregate = Aggregate.worst_of(n)
    above, below = Trigger(Direction.UP, aggregate), Trigger(Direction.DOWN, aggregate)
    coupons = Coupons(tuple(Coupon(day, paid(day).payment_date, COUPON, COUPON_LEVEL) for day in DAYS), above)
    calls = Autocall(tuple(map(paid, OBSERVED)), above, CALLS, AMOUNTS)
    barrier = Barrier(BarrierKind.IN, below, (paid(EXPIRY),), (KNOCK_IN,), Redemption())
    return contract(n, aggregate, Redemption(put_strike=1.0), coupons, calls, barrier)


def note_decisions(knock_in: float = KNOCK_IN) -> list[tuple[float, Decision]]:
    def at_call(day: date, level: float, amount: float) -> Decision:
        def decide(prices: Sequence[Array], alive: Array) -> Array:
            low = worst(prices)
            return worth(day) * COUPON * (low >= COUPON_LEVEL) + np.where(low >= level, worth(day) * amount, alive)

        return decide

    def at_expiry(prices: Sequence[Array], _: Array) -> Array:
        low = worst(prices)
        redeemed = np.where(low <= knock_in, np.minimum(low, 1.0), 1.0)
        return worth(EXPIRY) * (COUPON * (low >= COUPON_LEVEL) + redeemed)

    calls = zip(OBSERVED, CALLS, AMOUNTS, strict=True)
    return [*((years(day), at_call(day, level, amount)) for day, level, amount in calls), (years(EXPIRY), at_expiry)]


# A put on the worst, knocked out on any of four dates, expiry included, with a rebate.
REBATE = 0.02


def knock_out_put(n: int) -> Contract:
    aggregate = Aggregate.worst_of(n)
    trigger = Trigger(Direction.DOWN, aggregate)
    barrier = Barrier(BarrierKind.OUT, trigger, tuple(map(paid, DAYS)), (RATIO**2,) * len(DAYS), rebate_at_hit=REBATE)
    return contract(n, aggregate, Profile(ProfileKind.PUT, 1.0), barrier)


def knock_out_decisions() -> list[tuple[float, Decision]]:
    def on(day: date) -> Decision:
        def decide(prices: Sequence[Array], alive: Array) -> Array:
            low = worst(prices)
            kept = worth(day) * np.maximum(1.0 - low, 0.0) if day == EXPIRY else alive
            return np.where(low <= RATIO**2, worth(day) * REBATE, kept)

        return decide

    return [(years(day), on(day)) for day in DAYS]


# Rights on four dates, the last of them expiry.
def bermudan(n: int, aggregate: Aggregate, payout: Profile) -> Contract:
    right = Exercise(ExercisedBy.HOLDER, tuple(map(paid, DAYS)), aggregate, payout)
    return contract(n, aggregate, payout, right)


def put_on_the_worst(prices: Sequence[Array]) -> Array:
    return np.maximum(1.0 - worst(prices), 0.0)


def call_on_the_best(prices: Sequence[Array]) -> Array:
    return np.maximum(best(prices) - 1.0, 0.0)


def exercise_decisions(payoff) -> list[tuple[float, Decision]]:
    def on(day: date) -> Decision:
        return lambda prices, kept: np.maximum(worth(day) * payoff(prices), kept)

    return [(years(day), on(day)) for day in DAYS]


def found(deal: Contract, on: Market | None = None) -> ModelValue:
    on = market(len(deal.underlyings)) if on is None else on
    return appraise(Trade("GRID", deal, 1.0, "EUR"), on, SETTINGS).leading


def agrees(deal: Contract, decisions: list[tuple[float, Decision]], fineness: Fineness) -> None:
    """Value and deltas of the tool are the grid's; a contract with a right has an interval around the grid's value."""
    n = len(deal.underlyings)
    wanted, doubt = grids.extrapolated(levels(n), decisions, fineness)
    value = found(deal)
    top, ratios, spots = value.headline, value.ratios, np.array(SPOTS[:n])
    assert doubt[0] < 0.5e-4, "half a basis point of the notional of 1: else the grid proves little"
    if top.interval is Interval.CERTIFIED:
        assert top.lower - doubt[0] <= wanted[0] <= top.upper + doubt[0]
        assert top.upper - top.lower < 5e-4
    else:
        assert abs(top.value - wanted[0]) <= doubt[0] + SURE * top.standard_error
        assert top.standard_error < 0.5e-4
    assert np.all(np.abs(ratios.deltas * spots - wanted[1:]) <= doubt[1:] + SURE * ratios.delta_errors * spots)
    assert np.all(doubt[1:] + SURE * ratios.delta_errors * spots < 1e-2)


def test_two_assets_worst_of_autocallable_knocked_in_at_expiry():
    agrees(note(2), note_decisions(), TWO_ASSETS)


def test_two_assets_dated_worst_of_knock_out_put():
    agrees(knock_out_put(2), knock_out_decisions(), TWO_ASSETS)


def test_two_assets_bermudan_put_on_the_minimum():
    deal = bermudan(2, Aggregate.worst_of(2), Profile(ProfileKind.PUT, 1.0))
    agrees(deal, exercise_decisions(put_on_the_worst), TWO_ASSETS)


@pytest.mark.long
def test_three_assets_worst_of_autocallable_knocked_in_at_expiry():
    agrees(note(3), note_decisions(), THREE_ASSETS)


@pytest.mark.long
def test_three_assets_dated_worst_of_knock_out_put():
    agrees(knock_out_put(3), knock_out_decisions(), THREE_ASSETS)


@pytest.mark.long
def test_three_assets_bermudan_call_on_the_maximum():
    deal = bermudan(3, Aggregate.best_of(3), Profile(ProfileKind.CALL, 1.0))
    agrees(deal, exercise_decisions(call_on_the_best), THREE_ASSETS_CALL)


def test_wrong_readings_of_the_note_are_noticed():
    deal, plain = note(2), market(2)
    coupons, calls, barrier = deal.features
    wanted, doubt = grids.extrapolated(levels(2), note_decisions(), TWO_ASSETS)
    weaker = checked(NAMES[:2], np.array([[1.0, 0.49], [0.49, 1.0]]))[0]
    wrong = {
        "coupon of the call date lost": (replace(deal, features=(calls, coupons, barrier)), plain),
        "coupons in memory": (replace(deal, features=(replace(coupons, memory=True), calls, barrier)), plain),
        "calls that do not step down": (
            replace(deal, features=(coupons, replace(calls, levels=(1.0,) * 3), barrier)),
            plain,
        ),
        "knock-in 1 % higher": (
            replace(deal, features=(coupons, calls, replace(barrier, levels=(1.01 * KNOCK_IN,)))),
            plain,
        ),
        "knock-in on any date": (
            replace(
                deal,
                features=(coupons, calls, replace(barrier, schedule=tuple(map(paid, DAYS)), levels=(KNOCK_IN,) * 4)),
            ),
            plain,
        ),
        "correlation lower by 0.01": (deal, replace(plain, correlation=weaker)),
    }
    for reading, (other, on) in wrong.items():
        top = found(other, on).headline
        assert abs(top.value - wanted[0]) > doubt[0] + SURE * top.standard_error, reading


def survival(n: int) -> tuple[list[tuple[float, Decision]], float]:
    """Pays 1 if the worst is above a barrier on two dates: the grid's decisions, and a normal probability."""
    times, law = (0.5, 1.0), levels(n)
    means = np.concatenate([law.start + law.drifts * t for t in times]) - math.log(RATIO)
    covariance = np.block([[min(t, u) * law.covariance for t in times] for u in times])
    exact = multivariate_normal(np.zeros(2 * n), covariance, seed=3, abseps=1e-6, releps=1e-6, maxpts=2_000_000)

    def first(prices: Sequence[Array], alive: Array) -> Array:
        return np.where(worst(prices) > RATIO, alive, 0.0)

    def last(prices: Sequence[Array], alive: Array) -> Array:
        return np.where(worst(prices) > RATIO, np.ones_like(alive), 0.0)

    return [(times[0], first), (times[1], last)], float(exact.cdf(means))


def test_the_grid_converges_by_the_square_of_its_spacings():
    decisions, exact = survival(2)
    by_halving = [TWO_ASSETS, TWO_ASSETS.halved(), TWO_ASSETS.halved().halved()]
    errors = np.array([grids.value(levels(2), decisions, grid)[0] - exact for grid in by_halving])
    assert np.all(np.abs(errors[:-1] / errors[1:] - 4.0) < 0.5)


@pytest.mark.parametrize(
    ("n", "fineness", "most"), [(2, TWO_ASSETS, 2e-5), pytest.param(3, THREE_ASSETS, 2e-4, marks=pytest.mark.long)]
)
def test_the_grid_finds_a_probability_within_the_error_that_it_states(n, fineness, most):
    decisions, exact = survival(n)
    value, doubt = grids.extrapolated(levels(n), decisions, fineness)
    assert abs(value[0] - exact) <= doubt[0] + 2e-6
    assert doubt[0] < most


def test_the_grids_edges_do_not_matter():
    decisions = exercise_decisions(call_on_the_best)
    near, far = (grids.value(levels(3), decisions, replace(THREE_ASSETS_CALL, deviations=d)) for d in (4.5, 6.0))
    assert abs(near[0] - far[0]) < 5e-6
