"""Walked contracts: single rules of the walk, what the engine says beside the value, and repeats."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.ageing import start, walk
from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.fixings import Fixing
from pricer.contracts.levels import Levels
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.core.randomness import Purpose
from pricer.engines.contract_walk.engine import METHOD, walk_reference, walk_value
from pricer.engines.contract_walk.ledger import DiscountedSum
from pricer.engines.contract_walk.noise import Noise, clock_of
from pricer.engines.contract_walk.run import Run
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.contract_walk.walker import walk_paths
from pricer.engines.problem import ReferenceKind
from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from tests.unit.markets import TODAY
from tests.unit.smiled_markets import real_market as smiled_market
from tests.unit.walk_cases import (
    ASKED,
    CALL,
    SPOTS,
    contract,
    paid_at_once,
    quarter,
    terms_of,
)

SMALL = WalkSettings(maximum_cells=4e5, reference_cells=1e5)
QUARTERS = tuple(quarter(k) for k in range(1, 5))
DOWN = Trigger(Direction.DOWN, Aggregate.worst_of(1))


def down_barrier(kind=BarrierKind.IN, days=QUARTERS, level=0.8, **changes):
    schedule = tuple(paid_at_once(day) for day in days)
    return Barrier(kind, DOWN, schedule, (level,) * len(days), **changes)


def autocall(level=1.0):
    schedule = tuple(paid_at_once(day) for day in QUARTERS[:-1])
    return Autocall(schedule, Trigger(Direction.UP, Aggregate.worst_of(1)), (level,) * 3, (1.02, 1.04, 1.06))


def walked(found, prices):
    """Undiscounted sums of what each path is paid, and its ends."""
    ledger = DiscountedSum(prices.shape[2], lambda day: 1.0)
    ends = walk_paths(found, start(found), found.dates, prices, ledger)
    return ledger.values, ends


def test_points_made_by_doubling_are_the_sequence_itself():
    stream = np.random.default_rng(1)
    clock = clock_of(np.full(5, 0.2))
    noise = Noise(clock, np.array([2.0, 1.0]), stream, 3)
    words = sobol.random_words(np.random.default_rng(1), 3, 10)
    bridge = Bridge.over(clock)
    coordinates = bridge.coordinates(np.array([2.0, 1.0]))
    from scipy.special import ndtri

    for first, count in ((0, 16), (16, 16), (32, 32), (96, 32)):
        numbers = sobol.directions(10)[coordinates.ravel()]
        points = sobol.scrambled_points(numbers, words[2], first, first + count)
        expected = bridge.walk(ndtri((points + 0.5) / 2.0**32).reshape(5, 2, count))
        np.testing.assert_array_equal(noise.walks(2, first, count), expected)


@pytest.mark.parametrize(("first", "count"), [(0, 24), (16, 32)])
def test_blocks_that_are_no_power_of_two_or_start_amiss_are_refused(first, count):
    noise = Noise(clock_of(np.ones(2)), np.ones(1), np.random.default_rng(1), 8)
    with pytest.raises(ValueError, match="blocks of a power of two"):
        noise.walks(0, first, count)


@pytest.mark.parametrize("smiled", [False, True])
def test_sampling_in_several_goes_is_sampling_at_once(smiled):
    trade, terms, market = terms_of(contract(down_barrier()), smiled_market() if smiled else None)
    totals = []
    for goes in ((1024,), (128, 256, 1024)):
        run = Run.of(trade, terms, market, ASKED, SMALL, Purpose.PRICE, smiled=smiled)
        for points in goes:
            run.extend(points)
        totals.append(run.sampler.sums.values)
    np.testing.assert_allclose(*totals, rtol=1e-12)


@pytest.mark.parametrize("kind", BarrierKind)
def test_a_recorded_hit_to_come_counts_whatever_prices_do(kind):
    hit = Observation(QUARTERS[1], QUARTERS[2])
    found = contract(down_barrier(kind, recorded_hit=hit, instead=Redemption(capital=0.3)), payout=Redemption())
    prices = np.full((len(found.dates), 1, 4), 120.0)
    values, ends = walked(found, prices)
    expected = walk(found, start(found), found.dates, prices[:, :, 0]).progress.payments
    assert values == pytest.approx([sum(payment.amount for payment in expected)] * 4)
    assert ends.hit.all()


def test_levels_are_divided_by_a_trigger_s_scales_and_compete_with_cash():
    names = ("ARVENNE", "BELCOR")
    scaled = Trigger(Direction.DOWN, Aggregate.worst_of(2, cash=0.95), scales=(0.9, 0.6))
    barrier = Barrier(BarrierKind.IN, scaled, (paid_at_once(QUARTERS[0]),), (0.9,))
    found = contract(barrier, names=names, payout=Redemption())
    prices = np.ones((len(found.dates), 2, 3)) * np.array([100.0, 50.0])[:, None]
    prices[0, :, 1] = (82.0, 50.0)  # 0.82 / 0.9 = 0.911
    prices[0, :, 2] = (100.0, 26.5)  # 0.53 / 0.6 = 0.883
    values, _ = walked(found, prices)
    assert values.tolist() == [0.0, 0.0, 1.0]


def test_equal_levels_leave_in_the_order_of_the_underlyings():
    names = ("ARVENNE", "BELCOR", "CADMUS")
    found = contract(
        names=names, statistic=LockedIn(QUARTERS[:3], 3), payout=Profile(ProfileKind.FORWARD), last=QUARTERS[3]
    )
    prices = np.ones((len(found.dates), 3, 1)) * np.array([[100.0], [50.0], [80.0]])
    prices[1] *= np.array([[3.0], [1.0], [1.0]])  # ARVENNE has left by then
    assert walked(found, prices)[0].tolist() == [1.0]


def test_a_right_to_exercise_is_refused_with_its_reason():
    right = Exercise(ExercisedBy.HOLDER, (paid_at_once(QUARTERS[0]),), Aggregate.worst_of(1), CALL)
    trade, terms, market = terms_of(contract(right))
    with pytest.raises(TypeError, match="cannot tell when a right is best exercised"):
        walk_value(trade, terms, market, ASKED, SMALL, smiled=False)


def test_a_correlation_of_what_never_moves_is_refused():
    statistic = RealisedCorrelation(QUARTERS[:3], (0.5, 0.5))
    found = contract(names=("ARVENNE", "BELCOR"), statistic=statistic)
    with pytest.raises(ValueError, match="never moved"):
        walked(found, np.ones((len(found.dates), 2, 2)))


def test_the_same_seed_gives_the_same_number_and_another_purpose_another_sample():
    trade, terms, market = terms_of(contract(autocall(), down_barrier(), payout=Redemption(put_strike=1.0)))
    first, second = (walk_value(trade, terms, market, ASKED, SMALL, smiled=False) for _ in range(2))
    assert first.headline == second.headline
    other = walk_value(trade, terms, market, replace(ASKED, seed=8), SMALL, smiled=False)
    assert first.sample.value != other.sample.value
    reference = walk_reference(trade, terms, market, ASKED, SMALL, smiled=False)
    assert reference.kind is ReferenceKind.SAMPLE and reference.method == METHOD
    assert reference.value != first.sample.value
    assert abs(reference.value - first.sample.value) < 5.0 * np.hypot(reference.error, first.sample.standard_error)


def test_life_adds_up_and_ratios_are_missing_where_the_contract_jumps():
    trade, terms, market = terms_of(contract(autocall(), down_barrier(), payout=Redemption(put_strike=1.0)))
    found = walk_value(trade, terms, market, ASKED, SMALL, smiled=False)
    called = sum(chance.probability for chance in found.life.ends)
    assert [chance.day for chance in found.life.ends] == list(QUARTERS[:-1])
    assert {chance.what for chance in found.life.ends} == {"called"}
    years = [terms.as_of.years_to(day) for day in QUARTERS]
    expected = sum(c.probability * t for c, t in zip(found.life.ends, years, strict=False)) + (1.0 - called) * years[-1]
    assert found.life.expected_life == pytest.approx(expected, rel=1e-12)
    assert 0.0 < found.life.knocked < 1.0 - found.life.ends[0].probability
    assert np.all(np.isnan(found.ratios.deltas)) and "jumps" in found.ratios.method


def test_a_barrier_hit_in_the_past_is_a_certainty():
    days = (TODAY, *QUARTERS)
    found = contract(down_barrier(days=days), payout=Redemption(put_strike=1.0))
    trade, terms, market = terms_of(found, fixings=[Fixing("ARVENNE", TODAY, 70.0)])
    value = walk_value(trade, terms, market, ASKED, SMALL, smiled=False)
    assert value.life.knocked == 1.0
    assert np.all(np.isfinite(value.ratios.deltas))


def test_a_memory_brought_along_is_paid_by_the_next_coupon():
    days = (TODAY, *QUARTERS)
    coupons = Coupons(
        tuple(Coupon(day, day, 0.05, 2.0 if day == TODAY else 0.0) for day in days),
        Trigger(Direction.UP, Aggregate.worst_of(1)),
        memory=True,
    )
    fixing = [Fixing("ARVENNE", TODAY, 100.0)]
    trade, terms, market = terms_of(contract(coupons, payout=Redemption(capital=0.0)), fixings=fixing)
    value = walk_value(trade, terms, market, ASKED, SMALL, smiled=False).headline.value
    amounts = (0.10, 0.05, 0.05, 0.05)
    assert value == pytest.approx(sum(a * terms.discount(d) for a, d in zip(amounts, QUARTERS, strict=True)), rel=1e-12)


def test_known_amounts_to_be_paid_are_part_of_the_value():
    days = (TODAY, *QUARTERS)
    coupons = Coupons(tuple(Coupon(day, max(day, QUARTERS[0]), 0.05) for day in days))
    fixing = [Fixing("ARVENNE", TODAY, 100.0)]
    trade, terms, market = terms_of(contract(coupons, payout=Redemption(capital=0.0)), fixings=fixing)
    assert terms.known_value == pytest.approx(0.05 * terms.discount(QUARTERS[0]))
    value = walk_value(trade, terms, market, ASKED, SMALL, smiled=False)
    expected = terms.known_value + sum(0.05 * terms.discount(day) for day in QUARTERS)
    assert value.headline.value == pytest.approx(expected, rel=1e-12)


def test_references_set_by_dates_to_come_are_each_path_s_own():
    """A forward start has no delta but that of its notional: none at all for a fixed one (Rubinstein 1990)."""
    levels = Levels(("ARVENNE",), None, (QUARTERS[0],))
    trade, terms, market = terms_of(contract(levels=levels))
    value = walk_value(trade, terms, market, ASKED, SMALL, smiled=False)
    assert value.ratios.deltas[0] * 100.0 == pytest.approx(0.0, abs=1e-10)


def test_volatility_zero_is_walked_without_noise():
    found = contract(statistic=Average(QUARTERS, Aggregate.weighted_sum((1.0,))), payout=Profile(ProfileKind.FORWARD))
    trade, terms, market = terms_of(found)
    still = replace(terms, covariances=np.zeros_like(terms.covariances))
    value = walk_value(trade, still, market, ASKED, SMALL, smiled=False)
    mean = terms.forwards[:, 0].mean() / SPOTS["ARVENNE"]
    assert value.headline.value == pytest.approx(mean * terms.discount(QUARTERS[-1]), rel=1e-12)
    assert value.sample.standard_error == 0.0


def test_settings_refuse_what_cannot_tell_an_error():
    with pytest.raises(ValueError, match="at least 8 randomisations"):
        WalkSettings(randomisations=4)
    with pytest.raises(ValueError, match="power of two"):
        WalkSettings(initial_points=100)
