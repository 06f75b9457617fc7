"""What cells of the factor and single steps a date leave is measured, and stands in the error."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_walk.engine import walk_reference
from pricer.engines.model_value import Asked
from pricer.engines.stepwise.estimates import controlled
from pricer.engines.stepwise.run import Run
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.engines.stepwise.value import stepwise_value
from tests.unit.smiled_markets import LEVELS, real_market
from tests.unit.walk_cases import contract, euro_market, paid_at_once, performances, quarter, terms_of

ASKED = Asked("T1", 3, 2e-4, 5e-3, 5e-3)
TWO = ("ARVENNE", "BELCOR")
FINEST = 96


def ended():
    """A put on a spread, with coupons, both ended by a barrier on a performance weighted by rank."""
    seen = tuple(paid_at_once(quarter(k)) for k in range(1, 5))
    ranked = Trigger(Direction.UP, Aggregate.rank_weighted((0.8, 0.2)))
    coupons = Coupons(tuple(Coupon(o.day, o.payment_date, 0.05, 0.9) for o in seen), ranked)
    out = Barrier(BarrierKind.OUT, ranked, seen, (1.15,) * 4)
    put, spread = Profile(ProfileKind.PUT, 0.0), Aggregate.weighted_sum((1.0, -1.0))
    return contract(coupons, out, names=TWO, payout=put, aggregate=spread)


def forward_start():
    """A call on a basket of performances from a day to come."""
    levels = Levels(TWO, None, (quarter(1),))
    return contract(names=TWO, levels=levels, statistic=ExpiryLevel(quarter(4), Aggregate.weighted_sum((0.5, 0.5))))


def run_of(found, market, settings, *, smiled=False):
    trade, terms, _ = terms_of(found, market)
    return Run.of(trade, terms, contract_legs(terms), market, ASKED, settings, smiled=smiled)


@pytest.mark.parametrize("found", [ended(), forward_start()], ids=["ended", "forward start"])
def test_what_cells_leave_is_what_far_more_cells_change(found):
    """On common draws. Four times as many leave a sixteenth."""
    for cells in (12, 24):
        run, finest = (run_of(found, euro_market(), StepwiseSettings(cells=c)) for c in (cells, FINEST))
        for each in (run, finest):
            each.extend(128, with_slopes=True)
        left = abs(run.value()[0] - finest.value()[0])
        assert left > 1e-5
        assert left / 2.0 < run.cell_bias < 2.0 * left + 2e-6


def test_cells_are_doubled_until_what_they_leave_is_within_tolerance():
    found, market = ended(), euro_market()
    trade, terms, _ = terms_of(found, market)
    walked = walk_reference(trade, terms, market, ASKED, smiled=False)
    few = StepwiseSettings(cells=8, maximum_points=512)
    crude = run_of(found, market, few)
    crude.extend(512, with_slopes=False)
    assert abs(crude.value()[0] - walked.value) > 4.0 * np.hypot(crude.value()[1], walked.error)
    value = stepwise_value(trade, terms, contract_legs(terms), market, ASKED, few, smiled=False)
    assert abs(value.sample.value - walked.value) < 3.0 * np.hypot(value.sample.standard_error, walked.error)
    assert value.is_sound and "cells" not in value.sample.ending


def test_cells_that_cannot_be_doubled_enough_are_told(monkeypatch):
    monkeypatch.setattr("pricer.engines.stepwise.value._MOST_CELLS", 8)
    found, market = ended(), euro_market()
    trade, terms, _ = terms_of(found, market)
    few = StepwiseSettings(cells=8, maximum_points=64)
    value = stepwise_value(trade, terms, contract_legs(terms), market, ASKED, few, smiled=False)
    run = run_of(found, market, few)
    run.extend(64, with_slopes=False)
    assert not value.is_sound and "8 cells of the factor leave a bias" in value.sample.ending
    assert value.sample.standard_error == pytest.approx(np.hypot(run.value()[1], run.cell_bias))


def test_what_single_steps_leave_is_measured_where_they_cannot_be_halved():
    """One date and two quoted expiries before it: three steps of up to a year under a smile, a bias that is seen."""
    market, name = real_market(), "BELCOR"
    out = Barrier(BarrierKind.OUT, Trigger(Direction.DOWN, Aggregate.worst_of(1)), (paid_at_once(quarter(8)),), (0.9,))
    found = contract(out, names=(name,), levels=performances(name), last=quarter(8))
    single = run_of(found, market, StepwiseSettings(dense=0), smiled=True)
    many = run_of(found, market, StepwiseSettings(), smiled=True)
    for run in (single, many):
        run.extend(4096, with_slopes=False)
    assert single.steps == 3 and single.cut is not None and many.cut is None
    left, noise = abs(single.value()[0] - many.value()[0]), np.hypot(single.value()[1], many.value()[1])
    said = abs(single.step_bias[0])
    assert left > 3.0 * noise
    assert left / 1.5 < said < 4.0 * left
    assert abs(many.step_bias[0]) < 0.05 * said


def test_a_control_that_is_rounding_or_badly_known_is_left_out():
    random = np.random.default_rng(4)
    means = 0.2 + 1e-3 * random.standard_normal((16, 3))
    others = means - 0.2
    others[:, 0] *= 1e-16
    plain, plain_errors = means.mean(axis=0), means.std(axis=0, ddof=1) / 4.0
    estimates, errors = controlled(means, others, np.zeros(3), np.array([1e-5, 1e-2, 1e-6]))
    assert estimates[:2] == pytest.approx(plain[:2], rel=1e-12)
    assert np.all(errors[:2] >= 0.99 * plain_errors[:2]) and np.all(errors[:2] < 2.0 * plain_errors[:2])
    assert errors[2] < 0.1 * plain_errors[2] and estimates[2] == pytest.approx(0.2, abs=3e-5)


def test_deltas_of_a_start_to_come_are_not_lost_in_rounding():
    """Under lognormal levels they are 0, and a control of 0 once made them noise of hundreds of basis points."""
    market = real_market()
    levels = Levels(("BELCOR",), None, (quarter(1),))
    found = contract(names=("BELCOR",), levels=levels)
    trade, terms, _ = terms_of(found, market)
    few = StepwiseSettings(maximum_points=512)
    value = stepwise_value(trade, terms, contract_legs(terms), market, ASKED, few, smiled=True)
    assert np.all(value.ratios.delta_errors * LEVELS["BELCOR"] < 2e-3)
