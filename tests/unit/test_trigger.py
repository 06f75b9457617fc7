"""When a trigger is met."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.trigger import Direction, Trigger

UP, DOWN = Direction.UP, Direction.DOWN


def met(trigger, levels, level):
    return trigger.met(float(trigger.measure(np.array(levels))[0]), level)


@pytest.mark.parametrize("levels", [(1.1, 0.9), (1.1, 1.2), (0.9, 0.8), (1.0, 1.1)])
def test_any_and_every_underlying_are_the_best_or_the_worst_of_them(levels):
    assert met(Trigger.any_underlying(UP, 2), levels, 1.0) == any(x >= 1.0 for x in levels)
    assert met(Trigger.any_underlying(DOWN, 2), levels, 1.0) == any(x <= 1.0 for x in levels)
    assert met(Trigger.every_underlying(UP, 2), levels, 1.0) == all(x >= 1.0 for x in levels)
    assert met(Trigger.every_underlying(DOWN, 2), levels, 1.0) == all(x <= 1.0 for x in levels)


def test_barrier_prices_that_differ_by_underlying_divide_the_levels():
    trigger = Trigger.any_underlying(DOWN, 2, scales=(60.0, 8.0))
    assert not met(trigger, (61.0, 8.5), 1.0)
    assert met(trigger, (61.0, 7.9), 1.0)
    assert met(trigger, (59.0, 8.5), 1.0)


@pytest.mark.parametrize("direction", Direction)
def test_a_level_exactly_met_counts_only_if_it_should_whatever_the_rounding(direction):
    aggregate = Aggregate.weighted_sum((0.1, 0.2))  # 0.1 + 0.2 exceeds 0.3 by rounding
    assert met(Trigger(direction, aggregate), (1.0, 1.0), 0.3)
    assert not met(Trigger(direction, aggregate, at_level_counts=False), (1.0, 1.0), 0.3)


def test_scales_must_fit_the_underlyings():
    with pytest.raises(ValueError, match="one scale above 0 per underlying"):
        Trigger.any_underlying(UP, 2, scales=(1.0,))
