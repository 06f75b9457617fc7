"""Barriers watched continuously, one and two, inside and out, against QuantLib's analytic engines."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
import QuantLib as ql
from scipy.special import ndtr

from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, knock_in, knock_out, one_touch
from pricer.engines.closed_form.external_barrier import knock_out_by_another
from tests.unit.closed_form_cases import QuantLibMarket

SPOT, DAYS = 100.0, 365
MARKETS = [(0.05, 0.02, 0.25), (0.01, 0.06, 0.4), (-0.01, 0.0, 0.15)]
KINDS = ((ql.Option.Call, ProfileKind.CALL), (ql.Option.Put, ProfileKind.PUT))
BARRIERS = (
    (ql.Barrier.DownOut, 85.0),
    (ql.Barrier.DownIn, 85.0),
    (ql.Barrier.UpOut, 120.0),
    (ql.Barrier.UpIn, 120.0),
)


def both(market):
    rate, dividend_yield, volatility = market
    quantlib = QuantLibMarket([SPOT], [dividend_yield], [volatility], [[1.0]], rate, DAYS)
    level = WatchedLevel(SPOT, SPOT * math.exp(rate - dividend_yield), volatility)
    return quantlib, level, quantlib.discount_factor


@pytest.mark.parametrize("market", MARKETS)
@pytest.mark.parametrize("strike", [80.0, 100.0, 130.0])
def test_one_barrier_with_a_rebate_in_every_form(market, strike):
    # Haug's formulas of Reiner & Rubinstein (1991): rebate at the hit for a knock-out, at expiry for a knock-in.
    quantlib, level, discount_factor = both(market)
    for (barrier_kind, barrier), (kind, ours) in itertools.product(BARRIERS, KINDS):
        option = ql.BarrierOption(barrier_kind, barrier, 3.0, ql.PlainVanillaPayoff(kind, strike), quantlib.exercise)
        option.setPricingEngine(ql.AnalyticBarrierEngine(quantlib.processes[0]))
        corridor = Corridor(barrier) if barrier < SPOT else Corridor(0.0, barrier)
        payoff = Profile(ours, strike).payoff()
        if barrier_kind in (ql.Barrier.DownOut, ql.Barrier.UpOut):
            touched = one_touch(level, barrier, discount_factor)
            assert touched is not None
            value = discount_factor * knock_out(level, corridor, payoff).value + 3.0 * touched.value
        else:
            rebate = knock_out(level, corridor, PiecewiseLinear(3.0, 0.0)).value
            value = discount_factor * (knock_in(level, corridor, payoff).value + rebate)
        assert value == pytest.approx(option.NPV(), abs=2e-10)


@pytest.mark.parametrize("market", MARKETS)
@pytest.mark.parametrize(("lower", "upper"), [(80.0, 125.0), (92.0, 108.0), (40.0, 104.0)])
def test_two_barriers(market, lower, upper):
    quantlib, level, discount_factor = both(market)
    corridor = Corridor(lower, upper)
    for kind, ours in KINDS:
        for barrier_kind, value_of in ((ql.DoubleBarrier.KnockOut, knock_out), (ql.DoubleBarrier.KnockIn, knock_in)):
            option = ql.DoubleBarrierOption(
                barrier_kind, lower, upper, 0.0, ql.PlainVanillaPayoff(kind, 100.0), quantlib.exercise
            )
            option.setPricingEngine(ql.AnalyticDoubleBarrierEngine(quantlib.processes[0], 12))
            value = discount_factor * value_of(level, corridor, Profile(ours, 100.0).payoff()).value
            assert value == pytest.approx(option.NPV(), abs=2e-9)


@pytest.mark.parametrize("market", MARKETS)
def test_digitals_with_a_barrier(market):
    quantlib, level, discount_factor = both(market)
    for barrier_kind, barrier in BARRIERS:
        exercise = ql.AmericanExercise(quantlib.exercise.dates()[0] - DAYS, quantlib.exercise.dates()[0], True)
        option = ql.BarrierOption(
            barrier_kind, barrier, 0.0, ql.CashOrNothingPayoff(ql.Option.Call, 105.0, 10.0), exercise
        )
        option.setPricingEngine(ql.AnalyticBinaryBarrierEngine(quantlib.processes[0]))
        corridor = Corridor(barrier) if barrier < SPOT else Corridor(0.0, barrier)
        out = barrier_kind in (ql.Barrier.DownOut, ql.Barrier.UpOut)
        payoff = Profile(ProfileKind.CASH_DIGITAL_CALL, 105.0, cash_amount=10.0).payoff()
        value = discount_factor * (knock_out if out else knock_in)(level, corridor, payoff).value
        assert value == pytest.approx(option.NPV(), abs=2e-9)


@pytest.mark.parametrize("rho", [-0.6, 0.0, 0.5])
def test_a_knock_out_barrier_on_a_second_level(rho):
    # Only knock-outs: with these yields QuantLib's knock-ins and knock-outs do not add up to its own plain option.
    # Its two-dimensional normal probabilities are good to about 1e-7 (Drezner 1978), that is 2e-5 here; the quadrature
    # over the watched level, weighted with the bridge's survival, has nine digits.
    quantlib = QuantLibMarket([100.0, 95.0], [0.01, 0.03], [0.2, 0.3], [[1.0, rho], [rho, 1.0]], 0.04, DAYS)
    forward, other = quantlib.law.forwards
    w = np.linspace(-9.0, 9.0, 200_001)
    end = math.log(other / 95.0) - 0.045 + 0.3 * w
    given = forward * np.exp(rho * 0.2 * w - 0.5 * (rho * 0.2) ** 2)
    own = 0.2 * math.sqrt(1.0 - rho * rho)
    for (barrier_kind, barrier), (kind, ours) in itertools.product(BARRIERS[::2], KINDS):
        option = ql.TwoAssetBarrierOption(barrier_kind, barrier, ql.PlainVanillaPayoff(kind, 100.0), quantlib.exercise)
        option.setPricingEngine(
            ql.AnalyticTwoAssetBarrierEngine(*quantlib.processes, ql.QuoteHandle(ql.SimpleQuote(rho)))
        )
        corridor = Corridor(barrier) if barrier < 95.0 else Corridor(0.0, barrier)
        payoff = Profile(ours, 100.0).payoff()
        out = knock_out_by_another(WatchedLevel(95.0, other, 0.3), corridor, forward, 0.2, rho, payoff)
        assert out is not None
        assert quantlib.discount_factor * out.value == pytest.approx(option.NPV(), abs=3e-5), (barrier_kind, kind)
        h = math.log(barrier / 95.0)
        survival = np.where((end - h) * h < 0.0, -np.expm1(-2.0 * abs(h) * np.abs(end - h) / 0.09), 0.0)
        side = 1.0 if ours is ProfileKind.CALL else -1.0
        d1 = np.log(given / 100.0) / own + 0.5 * own
        plain = side * (given * ndtr(side * d1) - 100.0 * ndtr(side * (d1 - own)))
        integral = np.trapezoid(np.exp(-0.5 * w * w) / math.sqrt(2.0 * math.pi) * survival * plain, w)
        assert out.value == pytest.approx(integral, abs=5e-9), (barrier_kind, kind)


def test_a_negative_rate_too_large_for_the_touch_formula_is_told():
    assert one_touch(WatchedLevel(100.0, 100.0 * math.exp(0.5 * 0.01), 0.1), 90.0, math.exp(0.05)) is None
    assert np.isfinite(one_touch(WatchedLevel(100.0, 100.0, 0.4), 90.0, math.exp(0.005)).value)
