"""The local volatility table: exact where it must be, readable without searching, clipped in the open."""

import numpy as np
import pytest

from pricer.market.black import call
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import CAP, FAR_REACH, REACH, LocalVolSurface
from pricer.market.svi import SviSlice
from pricer.market.volatility import VolatilityCurve
from tests.unit.smiles import TODAY, day, smiles
from tests.unit.surface_cases import eventful_surface

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


@pytest.mark.parametrize("place", [10, 30, 55])
def test_a_row_lifts_calls_as_much_as_the_surface_does_in_its_cell(place):
    """``c_T - c_0 = sigma^2 / 2 times the integral of c_kk - c_k``, prices and derivatives by Black's formula alone."""
    start, end = LOCAL.times[place : place + 2]
    k = LOCAL.nodes(place)[38:83]  # three standard deviations, at nodes: no interpolation
    h = 1e-3 * float(LOCAL.widths[place])

    def calls(x, t):
        return call(x, np.sqrt(SURFACE.total_variance(x, t)))

    moments = start + (np.arange(200)[:, None] + 0.5) / 200 * (end - start)
    here, left, right = (calls(k + shift, moments) for shift in (0.0, -h, h))
    density = np.mean((left - 2.0 * here + right) / h**2 - (right - left) / (2.0 * h), axis=0)
    wanted = np.sqrt(2.0 * (calls(k, end) - calls(k, start)) / (end - start) / density)
    # Nodes are moved a little for the chords between them; the rest is the Gauss rule.
    np.testing.assert_allclose(LOCAL.values[place][38:83], wanted, rtol=3e-3)


def test_the_bound_on_local_volatility_follows_the_forward_one_after_a_quiet_time():
    """Forward volatility is ten times the implied one of the first day after: wings are not cut by the latter."""
    quiet = SviSlice.from_forward(0.06**2 * 0.02, -0.05 * 0.06 * 0.02**0.5, 0.5)
    loud = SviSlice.from_forward(0.60**2 * 0.04, -0.30 * 0.60 * 0.04**0.5, 0.5)
    surface = ImpliedSurface(TODAY, (day(7), day(15)), (0.02, 0.04), (quiet, loud))
    local = LocalVolSurface.from_implied(surface)
    first = int(np.searchsorted(local.times, 0.02))
    assert local.clipping.capped == 0
    assert local.values[first].max() > CAP * np.sqrt(float(surface.total_variance(0.0, local.times[first + 1]))) / 2


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


def test_steep_wings_get_nodes_further_out_unless_total_variance_falls_there():
    steep = eventful_surface("one event", -0.17, 0.09)
    local = LocalVolSurface.from_implied(steep)
    assert local.reach == FAR_REACH and LOCAL.reach == REACH
    assert local.spacing[-1] / local.widths[-1] == pytest.approx(LOCAL.spacing[-1] / LOCAL.widths[-1])
    crossing = ImpliedSurface.from_quotes(TODAY, smiles(1206, index=False, n=5, days=(7, 30, 91, 365, 1095)))
    assert LocalVolSurface.from_implied(crossing, reach=FAR_REACH).clipping.falling > 0
    assert LocalVolSurface.from_implied(crossing).reach == REACH
