"""Notes put together from parts are worth what independent programs found for their terms.

The values were made for this project by two methods each, an antithetic Monte Carlo simulation of the payoff
written out by hand and a grid method, which agree (tolerances are theirs). Here each path is
walked through the contract itself, in plain Python, so that the check is of the terms rather than of an engine:
4 standard errors of 8 independent randomisations (a random t with 7 degrees of freedom exceeds 4 in 1 case of 200;
the seed is fixed). The last test shows which wrong readings of the terms that notices.
"""

from dataclasses import replace
from datetime import date, timedelta

import numpy as np
import pytest
from scipy.special import ndtri
from scipy.stats import qmc

from pricer.contracts.ageing import start, walk
from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.notes import autocallable, knock_in, reverse_convertible
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger

TODAY = date(2026, 1, 1)
RANDOMISATIONS, PATHS = 8, 512


def dates(n, years):
    days = [TODAY + timedelta(days=round(365 * years * (k + 1) / n)) for k in range(n)]
    return [Observation(day, day) for day in days]


def levels(n):
    return Levels(("A", "B", "C")[:n], (100.0,) * n)


def snowball(n, schedule, level, step, knock_in_level):
    amounts = [1.0 + step * (j + 1) for j in range(len(schedule))]
    worst = Aggregate.worst_of(n)
    barrier = knock_in(worst, schedule[-1:], knock_in_level)
    called_at = [level] * len(schedule)
    return autocallable(
        levels(n), worst, schedule[-1], schedule, called_at, amounts, Redemption(put_strike=1.0), barrier=barrier
    )


def phoenix():
    schedule, worst = dates(4, 2.0), Aggregate.worst_of(2)
    paid = tuple(Coupon(o.day, o.payment_date, 0.03, 0.70) for o in schedule)
    coupons = Coupons(paid, Trigger(Direction.UP, worst), memory=True)
    put, barrier = Redemption(put_strike=1.0), knock_in(worst, schedule[-1:], 0.60)
    calls = schedule[:3]
    return autocallable(levels(2), worst, schedule[-1], calls, [1.0] * 3, [1.0] * 3, put, coupons, barrier)


def convertible():
    schedule, one = dates(12, 1.0), Aggregate.worst_of(1)
    coupons = Coupons(tuple(Coupon(o.day, o.payment_date, 0.008) for o in schedule))
    put, barrier = Redemption(put_strike=1.0), knock_in(one, schedule, 0.70)
    return reverse_convertible(levels(1), one, schedule[-1], put, coupons, barrier)


def down_and_in_put():
    schedule, worst = dates(12, 1.0), Aggregate.worst_of(2)
    trigger = Trigger(Direction.DOWN, worst, at_level_counts=False)
    barrier = Barrier(BarrierKind.IN, trigger, tuple(schedule), (0.75,) * 12)
    put = Profile(ProfileKind.PUT, 1.0)
    return Contract(levels(2), ExpiryLevel(schedule[-1].day, worst), put, schedule[-1], (barrier,))


CASES = {
    # name: contract, rate, dividend yields, volatilities, correlations above the diagonal, value, its tolerance
    "snowball on 2": (snowball(2, dates(4, 2.0), 0.95, 0.04, 0.70), 0.02, (0, 0.04), (0.2, 0.4), (-0.2,), 82.519, 0.02),
    "snowball on 3": (
        snowball(3, dates(3, 3.0), 1.0, 0.10, 0.60),
        0.03,
        (0.02, 0, 0.03),
        (0.2, 0.3, 0.25),
        (0.6, 0.4, 0.5),
        84.3338,
        0.04,
    ),
    "memory coupons on 2": (phoenix(), 0.02, (0.02, 0.03), (0.3, 0.25), (0.6,), 94.0862, 0.02),
    "reverse convertible": (convertible(), 0.02, (0.02,), (0.3,), (), 100.3449, 0.01),
    "down-and-in put": (down_and_in_put(), 0.03, (0, 0.01), (0.25, 0.35), (0.5,), 12.7372, 0.02),
}


def simulated(contract, rate, yields, volatilities, upper, rng):
    """Present value of 100 of notional by ``PATHS`` scrambled Sobol paths, each walked through the contract."""
    n, days = len(yields), contract.dates
    steps = np.diff([0.0, *((day - TODAY).days / 365 for day in days)])
    correlation = np.eye(n)
    correlation[np.triu_indices(n, 1)] = upper
    factor = np.linalg.cholesky(np.triu(correlation, 1).T + np.triu(correlation, 1) + np.eye(n))
    drift, sizes = rate - np.array(yields) - 0.5 * np.square(volatilities), np.array(volatilities)
    uniforms = qmc.Sobol(len(days) * n, rng=rng).random(PATHS)
    normals = ndtri(np.clip(uniforms, 1e-12, 1 - 1e-12)).reshape(PATHS, len(days), n) @ factor.T
    moves = drift * steps[:, None] + sizes * np.sqrt(steps)[:, None] * normals
    total = 0.0
    for prices in 100.0 * np.exp(np.cumsum(moves, axis=1)):
        for payment in walk(contract, start(contract), days, prices).progress.payments:
            total += payment.amount * np.exp(-rate * (payment.payment_date - TODAY).days / 365)
    return 100.0 * total / PATHS


@pytest.mark.parametrize("name", CASES)
def test_a_composed_note_is_worth_what_its_terms_are(name):
    contract, rate, yields, volatilities, upper, value, tolerance = CASES[name]
    seeds = np.random.SeedSequence(11).spawn(RANDOMISATIONS)
    found = [simulated(contract, rate, yields, volatilities, upper, np.random.default_rng(seed)) for seed in seeds]
    error = np.std(found, ddof=1) / np.sqrt(RANDOMISATIONS)
    assert error < 0.4
    assert np.mean(found) == pytest.approx(value, abs=4 * error + tolerance)


def without_memory(contract):
    coupons, call, barrier = contract.features
    return (replace(coupons, memory=False), call, barrier)


def knocked_in_on_any_date(contract):
    coupons, call, barrier = contract.features
    return (coupons, call, knock_in(barrier.trigger.aggregate, [Observation(d, d) for d in contract.dates], 0.60))


def call_before_coupon(contract):
    coupons, call, barrier = contract.features
    return (call, coupons, barrier)


@pytest.mark.parametrize("misread", [without_memory, knocked_in_on_any_date, call_before_coupon])
def test_terms_misread_are_noticed(misread):
    contract, rate, yields, volatilities, upper, value, tolerance = CASES["memory coupons on 2"]
    wrong = replace(contract, features=misread(contract))
    seeds = np.random.SeedSequence(11).spawn(RANDOMISATIONS)
    found = [simulated(wrong, rate, yields, volatilities, upper, np.random.default_rng(seed)) for seed in seeds]
    error = np.std(found, ddof=1) / np.sqrt(RANDOMISATIONS)
    assert abs(np.mean(found) - value) > 4 * error + tolerance
