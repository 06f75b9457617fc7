"""Contracts on paths in steps: against the engines that know the same numbers another way."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.levels import Levels
from pricer.contracts.notes import autocallable, knock_in
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.smooth import smooth_value
from pricer.engines.contract_walk.engine import walk_reference
from pricer.engines.local_vol_model import local_vol_value, lognormal_value_by_paths
from pricer.engines.local_vol_monte_carlo import LocalVolSettings
from pricer.engines.model_value import Asked
from pricer.engines.paths.sample import PathSettings
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.engines.stepwise.value import stepwise_value
from pricer.engines.unit_terms import UnitTerms
from tests.unit.smiled_markets import LEVELS, real_market
from tests.unit.walk_cases import CALL, SPOTS, contract, euro_market, paid_at_once, performances, quarter, terms_of

ASKED = Asked("T1", 3, 2e-4, 3e-3, 1e-3)
FEW = StepwiseSettings(maximum_points=512)
TWO = ("ARVENNE", "BELCOR")


def note(names, spots, last=5):
    """Called quarterly at 100 %, coupons in memory above 70 %, a put knocked in below 60 % at expiry."""
    worst = Aggregate.worst_of(len(names))
    seen = [paid_at_once(quarter(k)) for k in range(1, last + 1)]
    coupons = Coupons(
        tuple(Coupon(o.day, o.payment_date, 0.02, 0.7) for o in seen), Trigger(Direction.UP, worst), memory=True
    )
    levels = replace(performances(*names), references=tuple(spots[name] for name in names))
    redemption, barrier = Redemption(put_strike=1.0), knock_in(worst, [seen[-1]], 0.6)
    calls = [1.0] * (last - 1)
    return autocallable(levels, worst, seen[-1], seen[:-1], calls, calls, redemption, coupons, barrier)


def stepped(found, market, *, smiled, settings=FEW, asked=ASKED):
    trade, terms, _ = terms_of(found, market)
    return stepwise_value(trade, terms, contract_legs(terms), market, asked, settings, smiled=smiled)


def agree(one, value, error, most=4.0, allowance=0.0):
    both = np.hypot(one.sample.standard_error, error)
    assert abs(one.sample.value - value) < most * both + allowance


@pytest.mark.parametrize("smiled", [False, True], ids=["exact steps", "many steps"])
def test_without_smiles_a_note_is_worth_what_the_lognormal_engine_says(smiled):
    market = euro_market()
    found = note(TWO, SPOTS)
    _, terms, _ = terms_of(found, market)
    legs = contract_legs(terms)
    known = smooth_value(terms, legs, ASKED, PathSettings(), ())
    value = stepped(found, market, smiled=smiled)
    agree(value, known.sample.value, known.sample.standard_error)
    assert value.is_sound and value.sample.standard_error < 4e-4
    deltas, errors = value.ratios.deltas, np.hypot(value.ratios.delta_errors, known.ratios.delta_errors)
    assert np.all(np.abs(deltas - known.ratios.deltas) < 4.0 * errors)
    vega_errors = np.hypot(value.ratios.vega_errors, known.ratios.vega_errors)
    assert np.all(np.abs(value.ratios.vegas - known.ratios.vegas) < 4.0 * vega_errors)
    assert abs(value.life.knocked - known.life.knocked) < 4.0 * np.hypot(
        value.life.knocked_error, known.life.knocked_error
    )
    assert value.life.expected_life == pytest.approx(known.life.expected_life, abs=0.01)


@pytest.mark.parametrize("smiled", [False, True], ids=["lognormal", "smiles"])
@pytest.mark.parametrize("conversion", [Conversion.QUANTO, Conversion.COMPOSITE])
def test_a_european_contract_is_worth_what_its_own_engine_says(conversion, smiled):
    """On the worst of a payer of cash dividends and a level in another currency."""
    market = real_market(smiles=smiled)
    names = ("ARVENNE", "CADMUS")
    levels = Levels(names, tuple(LEVELS[name] for name in names), conversion=conversion)
    found = contract(names=names, levels=levels, last=quarter(5), payout=CALL)
    value = stepped(found, market, smiled=smiled)
    plain = Trade("T1", found.as_european(), 1.0, "EUR")
    engine = local_vol_value if smiled else lognormal_value_by_paths
    known = engine(plain, UnitTerms.of(plain, market), market, ASKED, LocalVolSettings())
    agree(value, known.sample.value, known.sample.standard_error)
    errors = np.hypot(value.ratios.delta_errors, known.ratios.delta_errors)
    assert np.all(np.abs(value.ratios.deltas - known.ratios.deltas) < 4.0 * errors)


@pytest.mark.parametrize("smiled", [False, True], ids=["lognormal", "smiles"])
def test_legs_agree_with_the_walk_where_dividends_are_paid(smiled):
    """Memory coupons, calls and a knock-in; a barrier on a spread; an average."""
    market = real_market(smiles=smiled)
    spread = Aggregate.weighted_sum((1.0, -1.0))
    seen = tuple(paid_at_once(quarter(k)) for k in range(1, 5))
    out = Barrier(BarrierKind.OUT, Trigger(Direction.UP, spread), seen, (0.25,) * 4)
    levels = Levels(TWO, tuple(LEVELS[name] for name in TWO))
    put = Profile(ProfileKind.PUT, 0.0)
    average = Average(tuple(o.day for o in seen), Aggregate.weighted_sum((0.5, 0.5)))
    for found in (
        note(TWO, LEVELS),
        contract(out, names=TWO, levels=levels, payout=put, aggregate=spread),
        contract(names=TWO, levels=levels, payout=CALL, statistic=average),
    ):
        trade, terms, _ = terms_of(found, market)
        value = stepped(found, market, smiled=smiled)
        walked = walk_reference(trade, terms, market, ASKED, smiled=smiled)
        agree(value, walked.value, walked.error, allowance=walked.allowance)


def test_deltas_are_those_of_moved_spots():
    """Flat volatilities move with no spot, so that spots can be moved alone."""
    market = euro_market()
    found = note(TWO, SPOTS)
    value = stepped(found, market, smiled=True)
    for place, name in enumerate(TWO):
        moved = []
        for sign in (1.0, -1.0):
            underlying = replace(market.underlyings[name], spot=SPOTS[name] * (1.0 + 0.002 * sign))
            other = replace(market, underlyings={**market.underlyings, name: underlying})
            moved.append(stepped(found, other, smiled=True).sample.value)
        bumped = (moved[0] - moved[1]) / (0.004 * SPOTS[name])
        assert bumped == pytest.approx(value.ratios.deltas[place], abs=2.5 * value.ratios.delta_errors[place])


def test_the_same_seed_gives_the_same_digits():
    market = real_market()
    few = replace(FEW, maximum_points=64)
    one, two = (stepped(note(TWO, LEVELS), market, smiled=True, settings=few) for _ in range(2))
    assert one.sample.value == two.sample.value
    assert np.array_equal(one.ratios.deltas, two.ratios.deltas)


def test_dense_dates_say_that_their_bias_was_measured_on_few_paths():
    market = real_market()
    seen = tuple(paid_at_once(quarter(1).fromordinal(quarter(1).toordinal() + k)) for k in range(30))
    out = Barrier(BarrierKind.OUT, Trigger(Direction.DOWN, Aggregate.worst_of(1)), seen, (0.8,) * 30)
    found = contract(out, last=quarter(2))
    value = stepped(found, market, smiled=True, settings=replace(FEW, dense=20, maximum_points=64))
    assert "bias was measured on few paths" in value.sample.ending
