"""Legs integrated cell by cell against legs followed at many values of the factor."""

import numpy as np
import pytest
from scipy.special import ndtri

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.leg import Branch, Event, Fixing, Leg, Payment, Reading, Remembered, Trigger, When
from pricer.engines.paths.plain import leg_values
from pricer.engines.stepwise.tables import LegTables
from pricer.simulation.kernels.stepwise_legs import value_leg
from pricer.simulation.kernels.stepwise_levels import add_slopes, read
from pricer.simulation.stepwise_cells import FactorCells

N_DATES, N = 6, 3
CELLS = 144
AGGREGATES = (
    Aggregate.worst_of(N),
    Aggregate.best_of(N),
    Aggregate.kth_best(2, N),
    Aggregate.rank_weighted((0.5, 0.3, 0.2)),
    Aggregate.geometric((0.3, 0.3, 0.4)),
    Aggregate.weighted_sum((0.6, 0.9, -0.5)),
)


def prices_along(w, random):
    """One path's prices as smooth functions of the factor, (n_dates, n, len(w)), and how to make them."""
    starts = random.normal(0.0, 0.15, (N_DATES, N)).cumsum(axis=0) * 0.5
    slopes = random.uniform(0.02, 0.07, (N_DATES, N)).cumsum(axis=0)
    return np.exp(starts[:, :, None] + slopes[:, :, None] * w + 0.01 * w**2)


def random_leg(random, *, memory):
    aggregate = AGGREGATES[random.integers(len(AGGREGATES))]
    events = []
    for date in range(N_DATES):
        since = int(random.integers(date)) if date > 1 and random.random() < 0.2 else None
        reading = Reading(aggregate, tuple(random.uniform(0.8, 1.2, N)), since)
        fixed = Fixing(reading, 1.0 / N_DATES)
        jump = PiecewiseLinear(0.1, 0.3, (0.9, 1.1), (-0.2, 0.5), (0.05, -0.1))
        payments = [
            Payment(jump, 0.9, random.choice(list(When)), reading),
            Payment.fixed(float(random.uniform(-1.0, 1.0)), 0.8, random.choice(list(When))),
            Payment(jump, 0.7, random.choice(list(When)), reading, averaged=True),
        ]
        coupon = Remembered(Trigger(reading, float(random.uniform(0.8, 1.1))), 0.1 * (date + 1), 0.95)
        events.append(
            Event(
                date,
                Trigger(reading, 1.25) if random.random() < 0.5 else None,
                Trigger(reading, 0.75) if random.random() < 0.5 else None,
                tuple(payments),
                fixed,
                coupon if memory and random.random() < 0.7 else None,
            )
        )
    return Leg(tuple(events), 0.1)


def along(legs, at_nodes, cells):
    """Readings of ``legs`` and what is needed to value them again on other readings."""
    tables = LegTables.of(legs)
    prices = np.ascontiguousarray(at_nodes @ cells.weights)
    readings = np.empty((len(tables.readings), prices.shape[2]))
    read(tables.readings, tables.references, tables.weights, prices, np.empty((N, prices.shape[2])), readings)
    return tables, readings, prices


def by_cells(tables, readings, cells):
    """Values of legs, probabilities of stops, and derivatives by readings of all together."""
    stopped, adjoints, values = np.zeros((tables.n_stops, 2)), np.zeros_like(readings), []
    shape = len(tables.events), CELLS, 2
    for (first, last), start in zip(tables.legs, tables.first_sums, strict=True):
        values.append(
            value_leg(
                first, last, start, tables.events, tables.numbers, tables.payments, tables.profiles, readings,
                cells.mass, cells.moment, np.empty((CELLS, 2)), np.empty((CELLS, 2), dtype=np.int64),
                np.empty(CELLS + 1), np.empty(shape), np.empty(shape, dtype=np.int64), stopped,
                np.empty(CELLS, dtype=np.int64), True, adjoints, np.empty((len(tables.events), CELLS + 1)),
            )
        )  # fmt: skip
    return np.array(values), stopped, adjoints


@pytest.mark.parametrize("memory", [False, True], ids=["plain", "coupons in memory"])
def test_a_leg_is_worth_the_mean_over_its_factor(memory):
    """24 random legs of some 20 jumps each; one of 20,000 midpoints on the wrong side of a jump of 1 is 5e-5."""
    cells = FactorCells.of(CELLS)
    nodes = ndtri((np.arange(20_000) + 0.5) / 20_000)
    for seed in range(24):
        random = np.random.default_rng(seed)
        leg = random_leg(random, memory=memory)
        state = random.bit_generator.state
        followed = leg_values(leg, (leg,), prices_along(nodes, random)).mean()
        random.bit_generator.state = state
        tables, readings, _ = along((leg,), prices_along(cells.nodes, random), cells)
        (found,), _, _ = by_cells(tables, readings, cells)
        assert found == pytest.approx(followed, abs=3e-4)


@pytest.mark.parametrize("memory", [False, True], ids=["plain", "coupons in memory"])
def test_derivatives_by_readings_are_those_of_moved_readings(memory):
    cells = FactorCells.of(CELLS)
    for seed in range(20):
        random = np.random.default_rng(seed)
        leg = random_leg(random, memory=memory)
        tables, readings, _ = along((leg,), prices_along(cells.nodes, random), cells)
        (_,), _, adjoints = by_cells(tables, readings, cells)
        way = random.uniform(-1.0, 1.0, (len(readings), 1)) * readings
        up, down = (by_cells(tables, readings + sign * 1e-6 * way, cells)[0][0] for sign in (1.0, -1.0))
        assert (adjoints * way).sum() == pytest.approx((up - down) / 2e-6, rel=1e-4, abs=1e-4)


def test_derivatives_go_on_to_the_prices_that_readings_are_made_of():
    """One reading of each kind, and one over an earlier date; price slopes 1 at one node of one asset and date."""
    cells, random = FactorCells.of(CELLS), np.random.default_rng(3)
    references = (1.1, 0.9, 1.0)
    paid = tuple(
        Payment(PiecewiseLinear(0.0, 1.0), 1.0 + 0.1 * k, When.ALIVE, Reading(aggregate, references, k % 2 or None))
        for k, aggregate in enumerate(AGGREGATES)
    )
    leg = Leg((Event(4, payments=paid),))
    at_nodes = prices_along(cells.nodes, random)
    tables, readings, prices = along((leg,), at_nodes, cells)
    _, _, adjoints = by_cells(tables, readings, cells)
    for date, asset, node in ((4, 0, 4), (4, 1, 3), (4, 2, 5), (1, 0, 4), (1, 1, 5), (2, 1, 4)):
        way, slopes = np.zeros((N_DATES, N, len(cells.nodes))), np.zeros(N)
        way[date, asset, node] = 1.0
        add_slopes(
            tables.readings, tables.references, tables.weights, prices, readings, adjoints, cells.weights, way,
            np.empty_like(prices), slopes,
        )  # fmt: skip
        moved = [by_cells(*along((leg,), at_nodes + sign * 1e-6 * way, cells)[:2], cells)[0][0] for sign in (1.0, -1.0)]
        assert slopes[asset] == pytest.approx((moved[0] - moved[1]) / 2e-6, rel=1e-5, abs=1e-7)
        assert abs(slopes).sum() == abs(slopes[asset])


def test_a_branch_follows_its_parent_first():
    cells, random = FactorCells.of(CELLS), np.random.default_rng(5)
    reading = Reading(Aggregate.worst_of(N), (1.0,) * N)
    one = Payment.fixed(1.0, 1.0, When.SURVIVING)
    parent = Leg((Event(0, Trigger(reading, 1.05)), Event(1, None, Trigger(reading, 0.9)), Event(4, payments=(one,))))
    child = Leg((Event(3, Trigger(reading, 1.2)), Event(4, payments=(one,))), branch=Branch(0, 2))
    nodes = ndtri((np.arange(20_000) + 0.5) / 20_000)
    state = random.bit_generator.state
    levels = prices_along(nodes, random)
    random.bit_generator.state = state
    tables, readings, _ = along((parent, child), prices_along(cells.nodes, random), cells)
    values, stopped, _ = by_cells(tables, readings, cells)
    expected = [leg_values(leg, (parent, child), levels).mean() for leg in (parent, child)]
    assert values == pytest.approx(expected, abs=3e-4)
    assert 1.0 - stopped[:3].sum() == pytest.approx(expected[0], abs=3e-4)
