"""Barriers under local volatility against QuantLib's finite differences on the same local volatilities."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.core.randomness import Purpose, stream
from pricer.engines.contract_walk.noise import Noise
from pricer.engines.path_inputs import Drivers
from pricer.engines.paths.leg import Event, Leg, Payment, Reading, Trigger, When
from pricer.engines.stepwise.law import StepwiseLaw
from pricer.engines.stepwise.sampler import StepwiseSampler
from pricer.engines.stepwise.tables import LegTables
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.time_grid import TimeGrid
from tests.reference.quantlib_local_vol import TODAY, process
from tests.unit.local_vol_cases import power, tabulated

VOLATILITY, DAYS, DATES, POINTS = 0.25, 365, 200, 512
ONE = Aggregate.worst_of(1)

#: -zeta(1/2) / sqrt(2 pi) : a barrier seen every h acts like one watched at all times that lies sigma sqrt(h) times
#: this further out (Broadie, Glasserman & Kou 1997).
OVERSHOOT = 0.5825971579390107


def watched_at_all_times(exponent, kind, barrier, option, strike):
    """Value, delta and half of what the last refinement of the grid changed, spot 100, no rates."""
    ql.Settings.instance().evaluationDate = TODAY
    found = []
    for size in (400, 800):
        levels = process(100.0, 0.0, 0.0, VOLATILITY, exponent, 1.0, DAYS / 365)
        engine = ql.FdBlackScholesBarrierEngine(levels, size, size, 0, ql.FdmSchemeDesc.Douglas(), True)
        payoff = ql.PlainVanillaPayoff(option, strike)
        contract = ql.BarrierOption(kind, barrier, 0.0, payoff, ql.EuropeanExercise(TODAY + DAYS))
        contract.setPricingEngine(engine)
        found.append((contract.NPV(), contract.delta()))
    return (*found[1], abs(found[1][0] - found[0][0]))


def seen_on_dates(exponent, *, above, barrier, payoff):
    """The same with the barrier seen ``DATES`` times and moved in by its overshoot: value and delta with errors."""
    times = np.arange(1, DATES + 1) / DATES
    local = min(VOLATILITY * (barrier / 100.0) ** (exponent - 1.0), 1.0)
    moved = barrier * np.exp(OVERSHOOT * local * np.sqrt(1.0 / DATES) * (-1.0 if above else 1.0))
    reading = Reading(ONE, (1.0,))
    stop = Trigger(reading, moved)
    events = [Event(k, stop if above else None, None if above else stop) for k in range(DATES)]
    events[-1] = replace(events[-1], payments=(Payment(payoff, 1.0, When.SURVIVING, reading),))
    grid = TimeGrid.of(times, steps=DATES, least=1, cuts=0)
    clock = np.array([0.0, 1.0])
    drivers = Drivers(np.eye(1), np.zeros((1, 0)), clock, VOLATILITY**2 * clock[None])
    surfaces = [tabulated(power(VOLATILITY, exponent, cap=1.0), VOLATILITY, 1.0)]
    scales = np.full((DATES, 1), 100.0)
    law = StepwiseLaw.of(grid, drivers, surfaces, np.ones(1), scales, 0.0 * scales, composite=False)
    noise = Noise(grid.times, law.factor.sizes, stream(5, "barrier", Purpose.PRICE, 0), 16)
    sampler = StepwiseSampler(law, noise, LegTables.of((Leg(tuple(events)),)), 24)
    sampler.extend(POINTS, with_slopes=True)
    value, error = batch_estimate(sampler.values / POINTS)
    slope, slope_error = batch_estimate(sampler.slopes / POINTS)
    return value[0], error[0], slope[0] / 100.0, slope_error[0] / 100.0


@pytest.mark.parametrize("exponent", [pytest.param(1.0, marks=pytest.mark.long), 0.4])
@pytest.mark.parametrize(
    ("above", "barrier", "option", "strike"), [(False, 85.0, ql.Option.Call, 95.0), (True, 125.0, ql.Option.Put, 105.0)]
)
def test_a_knock_out_is_worth_what_finite_differences_say(exponent, above, barrier, option, strike):
    """The moved barrier is good to o(h^1/2): 2e-4 of the spot is allowed for it, and 1.5e-3 of a share."""
    kind = ql.Barrier.UpOut if above else ql.Barrier.DownOut
    known, delta, unresolved = watched_at_all_times(exponent, kind, barrier, option, strike)
    assert unresolved < 0.01
    intercept, slope = (0.0, 0.0) if option == ql.Option.Call else (strike, -1.0)
    payoff = PiecewiseLinear(intercept, slope, (strike,), (1.0,), (0.0,))
    value, error, slope, slope_error = seen_on_dates(exponent, above=above, barrier=barrier, payoff=payoff)
    assert abs(value - known) < 3.5 * error + unresolved + 0.02
    assert error < 0.03
    assert abs(slope - delta) < 3.5 * slope_error + 1.5e-3
