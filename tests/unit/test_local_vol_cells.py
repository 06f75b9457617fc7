"""Cells in time: they end at expiries and are as short as total variance grows fast."""

import numpy as np
import pytest

from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_cells import FIRST_CELLS, GROWTH, LONGEST_CELL, cell_ends
from pricer.market.svi import SviSlice
from pricer.market.volatility import VolatilityCurve
from tests.unit.smiles import TODAY, day, smiles

SURFACE = ImpliedSurface.from_quotes(TODAY, smiles(3))


def flat(days, volatilities):
    curve = VolatilityCurve.from_quotes(TODAY, [day(d) for d in days], volatilities)
    return ImpliedSurface.flat(curve)


def growth(surface, ends):
    """By how much of itself total variance at the forward grows in each cell but the first."""
    variance = surface.total_variance(0.0, ends)
    return np.diff(variance) / variance[:-1]


def test_every_expiry_ends_a_cell_and_time_grows_slowly_from_one_to_the_next():
    ends = cell_ends(SURFACE)
    assert set(SURFACE.times) <= set(ends.tolist())
    lengths = np.diff(ends, prepend=0.0)
    assert lengths.max() <= LONGEST_CELL * (1.0 + 1e-9)
    late = ends[:-1] > SURFACE.times[0]
    assert np.all(lengths[1:][late] <= GROWTH * ends[:-1][late] * (1.0 + 1e-9))
    np.testing.assert_allclose(lengths[:FIRST_CELLS], SURFACE.times[0] / FIRST_CELLS)


def test_after_a_quiet_week_cells_are_as_short_as_the_event_asks_for():
    surface = flat((7, 10, 30), (0.10, 0.45, 0.30))
    ends = cell_ends(surface)
    late = growth(surface, ends)[FIRST_CELLS - 1 :]
    assert late.max() <= GROWTH * (1.0 + 1e-9)
    # total variance grows 29-fold in three days
    quiet, event = surface.times[:2]
    assert np.count_nonzero((ends > quiet) & (ends <= event)) >= np.log(28.9) / np.log1p(GROWTH)


def test_wings_that_rise_where_the_forward_does_not_are_seen():
    """At the forward total variance stands still, 1.5 deviations down it doubles."""
    first = SviSlice.flat(0.01)
    later = SviSlice.from_forward(0.01, -0.03, 0.6)
    surface = ImpliedSurface(TODAY, (day(91), day(100)), (91 / 365, 100 / 365), (first, later))
    assert np.count_nonzero(cell_ends(surface) > 91.5 / 365) >= 3
    assert np.count_nonzero(cell_ends(flat((91, 100), (0.2, 0.2))) > 91.5 / 365) == 1


@pytest.mark.parametrize("volatilities", [(0.0, 0.3), (1e-6, 0.3), (0.0, 0.0)])
def test_variance_out_of_nothing_takes_a_bounded_number_of_cells(volatilities):
    assert cell_ends(flat((30, 91), volatilities)).size < 80


@pytest.mark.parametrize("horizon", [0.01, 0.5, 5.0, 7.5])
def test_cells_end_at_the_horizon(horizon):
    ends = cell_ends(SURFACE, horizon)
    assert ends[-1] == horizon and np.all(np.diff(ends, prepend=0.0) > 0.0)
    assert {time for time in SURFACE.times if time < horizon} <= set(ends.tolist())
