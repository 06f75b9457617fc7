"""The local volatility table: exact where it must be, readable without searching, clipped in the open."""

import numpy as np
import pytest

from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import CAP, GROWTH, LONGEST_CELL, LocalVolSurface, cell_ends
from pricer.market.svi import SviSlice
from pricer.market.volatility import VolatilityCurve
from tests.unit.smiles import TODAY, day, smiles

SURFACE = ImpliedSurface.from_quotes(TODAY, smiles(3))
LOCAL = LocalVolSurface.from_implied(SURFACE)


def test_a_flat_surface_gives_exactly_its_forward_volatilities():
    curve = VolatilityCurve.from_quotes(TODAY, [day(30), day(365), day(730)], [0.30, 0.20, 0.25])
    local = LocalVolSurface.from_implied(ImpliedSurface.flat(curve), horizon=4.0)
    for row, start, end in zip(local.values, local.times[:-1], local.times[1:], strict=True):
        forward = np.sqrt((curve.variance_at(float(end)) - curve.variance_at(float(start))) / (end - start))
        np.testing.assert_allclose(row, forward, rtol=1e-9)
    assert local.clipping.falling == local.clipping.thin == local.clipping.capped == 0


def test_no_variance_and_no_forward_variance_are_zero_local_volatility():
    curve = VolatilityCurve.from_quotes(TODAY, [day(365), day(730)], [0.2, 0.2 / np.sqrt(2.0)])
    local = LocalVolSurface.from_implied(ImpliedSurface.flat(curve))
    np.testing.assert_allclose(local.values[local.times[1:] > 1.0], 0.0, atol=1e-7)
    nothing = VolatilityCurve.from_quotes(TODAY, [day(365)], [0.0])
    assert np.all(LocalVolSurface.from_implied(ImpliedSurface.flat(nothing)).values == 0.0)


def test_every_expiry_ends_a_cell_and_cells_grow_slowly():
    ends = cell_ends(SURFACE.times)
    assert set(SURFACE.times) <= set(ends.tolist())
    lengths = np.diff(np.concatenate(([0.0], ends)))
    assert lengths.max() <= LONGEST_CELL * (1.0 + 1e-9)
    late = ends[:-1] > SURFACE.times[0]
    assert np.all(lengths[1:][late] <= (GROWTH - 1.0) * ends[:-1][late] * (1.0 + 1e-9))
    assert lengths[0] == pytest.approx(SURFACE.times[0] / 8.0)


@pytest.mark.parametrize("horizon", [0.01, 0.5, 5.0, 7.5])
def test_the_table_ends_at_the_horizon(horizon):
    local = LocalVolSurface.from_implied(SURFACE, horizon=horizon)
    assert local.times[-1] == horizon and np.all(np.diff(local.times) > 0.0)
    assert np.all(np.isfinite(local.values))


def test_a_node_is_found_by_arithmetic():
    k, cell = 0.07, 20
    x = (k - LOCAL.lowest[cell]) / LOCAL.spacing[cell]
    j = int(x)
    wanted = LOCAL.values[cell, j] + (x - j) * (LOCAL.values[cell, j + 1] - LOCAL.values[cell, j])
    time = float(0.5 * (LOCAL.times[cell] + LOCAL.times[cell + 1]))
    assert LOCAL.volatility(k, time) == pytest.approx(wanted, rel=1e-12)
    np.testing.assert_allclose(LOCAL.nodes(cell)[[0, -1]], [LOCAL.lowest[cell], -LOCAL.lowest[cell]], rtol=1e-12)


def test_a_cell_ends_at_its_time_and_the_last_one_holds_ever_after():
    times = LOCAL.times
    assert int(LOCAL.cell(times[5])) == 4 and int(LOCAL.cell(times[5] + 1e-9)) == 5
    assert int(LOCAL.cell(times[-1])) == int(LOCAL.cell(99.0)) == times.size - 2 and int(LOCAL.cell(0.0)) == 0
    np.testing.assert_array_equal(LOCAL.cell(times[1:]), np.arange(times.size - 1))


def test_beyond_the_nodes_the_volatility_is_constant():
    edge = LOCAL.nodes(10)[-1]
    time = float(LOCAL.times[11])
    assert LOCAL.volatility(10.0, time) == LOCAL.volatility(edge, time) == LOCAL.values[10, -1]


def test_near_time_zero_the_local_volatility_is_the_limit_of_short_time():
    """``sigma(k) = implied(k) / (1 - k w'/(2w))`` as t falls to 0 (Berestycki, Busca & Florent 2002)."""
    ends = np.array([1e-5, SURFACE.times[0]])
    local = LocalVolSurface.from_implied(SURFACE, times=ends)
    k = local.nodes(0)
    at = SURFACE.derivatives(k, SURFACE.times[0])
    limit = SURFACE.volatility(k, SURFACE.times[0]) / (1.0 - 0.5 * k * at.slope / at.variance)
    np.testing.assert_allclose(local.values[0], limit, rtol=2e-3)


def test_a_row_holds_the_mean_of_dupires_quotient_over_its_cell():
    cell = 30
    start, end = LOCAL.times[cell : cell + 2]
    k = LOCAL.nodes(cell)[30:51]
    moments = start + (np.arange(200)[:, None] + 0.5) / 200 * (end - start)
    at, g = SURFACE.derivatives(k, moments), SURFACE.butterfly(k, moments)
    np.testing.assert_allclose(LOCAL.volatility(k, float(end)), np.sqrt(np.mean(at.speed / g, axis=0)), rtol=3e-3)


def test_clipped_nodes_are_counted_and_those_near_the_forward_apart():
    falling = ImpliedSurface(TODAY, (day(182), day(365)), (182 / 365, 1.0), (SviSlice.flat(0.03), SviSlice.flat(0.02)))
    clipping = LocalVolSurface.from_implied(falling, times=[182 / 365, 1.0]).clipping
    assert (clipping.nodes, clipping.falling, clipping.thin, clipping.capped) == (242, 121, 0, 0)
    assert clipping.central == 45  # within three deviations, 2/15 apart
    vogt = ImpliedSurface(TODAY, (day(365),), (1.0,), (SviSlice(-0.041, 0.1331, 0.306, 0.3586, 0.4153),))
    local = LocalVolSurface.from_implied(vogt)
    assert local.clipping.thin > 0
    assert local.values.max() <= CAP * float(vogt.volatility(0.0, 1.0)) * (1.0 + 1.0 / 6.0)


@pytest.mark.parametrize("times", [(), (0.5, 0.5), (0.0, 1.0)])
def test_times_that_do_not_increase_from_zero_are_refused(times):
    with pytest.raises(ValueError, match="must increase from 0"):
        LocalVolSurface.from_implied(SURFACE, times=times)
