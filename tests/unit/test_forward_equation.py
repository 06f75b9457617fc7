"""Vanillas repriced from the local volatility table without simulation, and Black's formula backwards."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.linalg import solve_banded
from scipy.stats import norm

from pricer.market import forward_equation
from pricer.market.black import call, implied_deviation, vega
from pricer.market.forward_equation import model_calls, model_volatilities
from pricer.market.forward_kernel import march
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.volatility import VolatilityCurve
from tests.unit.model_smiles import model_quotes
from tests.unit.smiles import TODAY, day, smiles
from tests.unit.surface_cases import EVENTFUL, eventful_surface


def strikes(surface, time, deltas=(0.1, 0.25, 0.4, 0.5, 0.6, 0.75, 0.9)):
    """Log-strikes of these call deltas under the surface's own volatilities, by fixed point."""
    k = np.zeros(len(deltas))
    for _ in range(50):
        s = surface.volatility(k, time) * np.sqrt(time)
        k = s * (0.5 * s - norm.ppf(deltas))
    return k


def worst(surface, between=False):
    """Largest difference between model and surface of 10 to 90 delta, in volatility, over all expiries."""
    times = list(surface.times)
    if between:
        times += [0.5 * (early + late) for early, late in pairwise(times)]
    times.sort()
    k = [strikes(surface, time) for time in times]
    found = model_volatilities(LocalVolSurface.from_implied(surface), k, times)
    return max(np.abs(v - surface.volatility(x, t)).max() for v, x, t in zip(found, k, times, strict=True))


def test_constant_volatility_comes_back():
    curve = VolatilityCurve.from_quotes(TODAY, [day(7), day(365), day(1826)], [0.2, 0.2, 0.2])
    assert worst(ImpliedSurface.flat(curve)) < 5e-5


def test_a_term_structure_comes_back():
    curve = VolatilityCurve.from_quotes(TODAY, [day(7), day(30), day(365), day(1826)], [0.5, 0.4, 0.25, 0.3])
    assert worst(ImpliedSurface.flat(curve)) < 1e-4


@pytest.mark.parametrize("noise", [0.0, 0.001])
@pytest.mark.parametrize("index", [True, False])
@pytest.mark.parametrize("seed", range(4))
def test_skewed_surfaces_from_a_week_to_five_years_come_back_within_0_03_vol_points(seed, index, noise):
    assert worst(ImpliedSurface.from_quotes(TODAY, smiles(seed, index=index, noise=noise))) < 3e-4


@pytest.mark.parametrize("days", [(7,), (365,), (1826,), (91, 3652)])
def test_single_expiries_come_back_as_well(days):
    assert worst(ImpliedSurface.from_quotes(TODAY, smiles(1, days=days))) < 3e-4


@pytest.mark.parametrize(("skew", "curvature", "most"), [(-0.07, 0.045, 2e-4), (0.1, 0.06, 3e-4), (-0.17, 0.09, 5e-4)])
@pytest.mark.parametrize("name", EVENTFUL)
def test_events_after_a_quiet_time_come_back_at_expiries_and_between(name, skew, curvature, most):
    """0.7 vol points were missed where cells were cut by time alone and a row was the plain mean of its cell."""
    assert worst(eventful_surface(name, skew, curvature), between=True) < most


@pytest.mark.parametrize("name", EVENTFUL)
def test_events_without_skew_are_met_as_exactly_as_the_solver_allows(name):
    levels = EVENTFUL[name]
    curve = VolatilityCurve.from_quotes(TODAY, [day(d) for d in levels], list(levels.values()))
    assert worst(ImpliedSurface.flat(curve), between=True) < 4e-5


@pytest.mark.parametrize("model", ["merton", "mixture"])
def test_humps_and_jumps_of_short_expiries_come_back(model):
    surface = ImpliedSurface.from_quotes(TODAY, model_quotes(model, (7, 14, 30, 91, 365)))
    assert worst(surface, between=True) < 1.5e-4


@pytest.mark.parametrize("days", [(7, 14, 30, 91, 365), (30, 91, 182, 365, 730)])
def test_the_steepest_smiles_that_slices_allow_come_back_within_0_04_vol_points(days):
    """The density all but vanishes at the end of the quotes: local volatility there is ten times its middle."""
    assert worst(eventful_surface({d: 0.2 for d in days}, -0.17, 0.09), between=True) < 4e-4


@pytest.mark.parametrize("name", EVENTFUL)
def test_halving_the_solvers_grids_changes_little(name, monkeypatch):
    surface = eventful_surface(name, -0.07, 0.045)
    local, k = LocalVolSurface.from_implied(surface), [strikes(surface, time) for time in surface.times]
    own = np.array(model_volatilities(local, k, surface.times))
    for constant in ("STEPS", "FIRST_STEPS"):
        monkeypatch.setattr(forward_equation, constant, 2 * getattr(forward_equation, constant))
    monkeypatch.setattr(forward_equation, "POINTS", 2 * forward_equation.POINTS - 1)
    monkeypatch.setattr(forward_equation, "REACH", 1.25 * forward_equation.REACH)
    np.testing.assert_allclose(model_volatilities(local, k, surface.times), own, rtol=0, atol=3e-5)


def test_halving_the_cells_changes_little():
    surface = eventful_surface("one event", -0.07, 0.045)
    local, k = LocalVolSurface.from_implied(surface), [strikes(surface, time) for time in surface.times]
    halves = np.sort(np.concatenate((local.times[1:], 0.5 * (local.times[:-1] + local.times[1:]))))
    finer = LocalVolSurface.from_implied(surface, times=halves)
    own, other = (np.array(model_volatilities(table, k, surface.times)) for table in (local, finer))
    np.testing.assert_allclose(other, own, rtol=0, atol=5e-5)


def test_compiled_steps_are_those_of_a_general_solver():
    """SciPy's banded elimination with pivots, one step after the other."""
    rng = np.random.default_rng(1)
    k = 1.2 * np.sinh(np.linspace(-2.0, 2.0, 81)) / np.sinh(2.0)
    below, above = np.diff(k)[:-1], np.diff(k)[1:]
    down, up = np.zeros(81), np.zeros(81)
    down[1:-1], up[1:-1] = (2.0 + above) / (below * (below + above)), (2.0 - below) / (above * (below + above))
    rows, lowest, spacing = rng.uniform(0.1, 0.9, (3, 7)), np.array([-0.6, -0.9, -1.5]), np.array([0.2, 0.3, 0.5])
    lengths, calls = np.array([0.1, 0.3, 0.2]), np.maximum(-np.expm1(k), 0.0)
    found = np.empty((3, 81))
    march(calls, k, down, up, rows, lowest, spacing, lengths, 5, 3, found)
    now = calls
    for piece, (steps, implicit) in enumerate([(5, 1.0), (3, 0.5), (3, 0.5)]):
        sigma = np.interp(k, lowest[piece] + spacing[piece] * np.arange(7), rows[piece])
        rate = 0.5 * sigma**2 * lengths[piece] / steps
        drift = np.diag(-rate * (down + up)) + np.diag((rate * down)[1:], -1) + np.diag((rate * up)[:-1], 1)
        left = np.eye(81) - implicit * drift
        bands = np.zeros((3, 81))
        bands[0, 1:], bands[1], bands[2, :-1] = np.diag(left, 1), np.diag(left), np.diag(left, -1)
        for _ in range(steps):
            now = solve_banded((1, 1), bands, now + (1.0 - implicit) * (drift @ now))
        np.testing.assert_allclose(found[piece], now, rtol=0, atol=1e-12)


def test_calls_fall_and_bend_upwards_in_strike():
    surface = eventful_surface("one event", -0.17, 0.09)
    x = np.linspace(0.7, 1.4, 281)
    for calls in model_calls(LocalVolSurface.from_implied(surface), [np.log(x)] * 5, surface.times):
        assert np.all(np.diff(calls) < 0.0) and np.all(np.diff(calls, 2) > -1e-9)


def test_beyond_the_last_expiry_the_extrapolated_smile_comes_back():
    surface = ImpliedSurface.from_quotes(TODAY, smiles(2, days=(91, 365)))
    k = strikes(surface, 2.0)
    found = model_volatilities(LocalVolSurface.from_implied(surface, horizon=2.0), [k], [2.0])[0]
    np.testing.assert_allclose(found, surface.volatility(k, 2.0), atol=3e-4)


def test_times_that_do_not_increase_are_refused():
    local = LocalVolSurface.from_implied(ImpliedSurface.from_quotes(TODAY, smiles(1, days=(91,))))
    for k, times in (([], []), ([[0.0]], [0.0]), ([[0.0], [0.0]], [1.0, 1.0]), ([[0.0]], [0.5, 1.0])):
        with pytest.raises(ValueError, match="increasing times above 0"):
            model_volatilities(local, k, times)


def test_implied_deviations_invert_prices_and_vega_is_their_slope():
    k = np.array([-0.5, -0.1, 0.0, 0.2, 0.6])
    deviations = np.array([0.3, 0.1, 0.02, 0.4, 0.5])
    np.testing.assert_allclose(implied_deviation(k, call(k, deviations)), deviations, rtol=1e-9)
    slope = (call(k, deviations + 1e-6) - call(k, deviations - 1e-6)) / 2e-6
    np.testing.assert_allclose(vega(k, deviations), slope, atol=1e-8)


def test_prices_outside_the_bounds_have_no_volatility():
    assert np.all(np.isnan(implied_deviation([0.0, -0.1, 0.1], [1.0, 0.05, -0.01])))
