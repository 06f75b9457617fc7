"""Corrections on SVI slices: the spline itself, smiles that are not SVI-shaped, and the bounds that are kept."""

import numpy as np
import pytest
from scipy.interpolate import BSpline

from pricer.market.arbitrage import surface_violations
from pricer.market.corrected_slice import CorrectedSlice, base_of
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.slice_correction import is_material
from pricer.market.slice_fit import fit_slice
from pricer.market.slice_order import RANGE, excess
from pricer.market.smile_quotes import SmileQuotes, rounding_of
from pricer.market.svi import SviSlice
from pricer.market.svi_fit import fit_svi
from pricer.market.svi_repair import is_butterfly_free
from tests.unit.model_smiles import MODELS, model_quotes
from tests.unit.smiles import TODAY, day, smiles

DAYS = (7, 30, 91, 182, 365, 1095)
BASE = SviSlice(0.004, 0.05, -0.5, 0.02, 0.12)
STEEP = {"volatility": 0.1142, "rate": 0.5407, "mean": -0.0736}
COEFFICIENTS = np.array([0.001, -0.002, 0.0005, 0.003, 0.001])
SLICE = CorrectedSlice(BASE, -0.3, 0.1, COEFFICIENTS)


def middle(quote, time):
    """Quotes within 1.3 standard deviations: 10 to 90 delta and a little more."""
    return np.abs(quote.log_moneyness) <= 1.3 * quote.volatilities * np.sqrt(time)


def test_the_correction_is_the_b_spline_of_its_coefficients():
    knots = -0.3 + 0.1 * np.arange(-3, 12)  # three more on either side: SciPy's splines begin after the third knot
    spline = BSpline(knots, np.pad(COEFFICIENTS, 3), 3, extrapolate=False)
    k = np.linspace(-0.6, 0.8, 701)
    for order, (found, base) in enumerate(zip(SLICE.derivatives(k), BASE.derivatives(k), strict=True)):
        wanted = np.nan_to_num(spline.derivative(order)(k) if order else spline(k))
        np.testing.assert_allclose(found - base, wanted, atol=1e-12 * 100**order)


def test_outside_its_cells_the_slice_is_its_base():
    assert pytest.approx(0.5) == SLICE.end
    k = np.array([-9.0, -0.31, 0.51, 9.0])
    np.testing.assert_array_equal(SLICE.total_variance(k), BASE.total_variance(k))
    np.testing.assert_array_equal(SLICE.butterfly(k), BASE.butterfly(k))
    assert SLICE.wings == BASE.wings


@pytest.mark.parametrize("bad", [dict(width=0.0), dict(coefficients=np.array([np.nan])), dict(coefficients=np.eye(2))])
def test_a_correction_without_width_or_numbers_is_refused(bad):
    with pytest.raises(ValueError, match="a correction needs a width"):
        CorrectedSlice(**{"base": BASE, "start": 0.0, "width": 0.1, "coefficients": COEFFICIENTS, **bad})


def test_a_surface_reads_corrected_slices_as_they_are():
    flat = SviSlice.flat(0.2)
    surface = ImpliedSurface(TODAY, (day(182), day(365), day(730)), (0.5, 1.0, 2.0), (SLICE, flat, SviSlice.flat(0.4)))
    k = np.linspace(-0.6, 0.8, 57)
    for found, wanted in zip(surface.derivatives(k, 0.5), SLICE.derivatives(k), strict=False):
        np.testing.assert_allclose(found, wanted, rtol=1e-14, atol=1e-15)
    half = surface.derivatives(k[:, None], np.array([0.25, 0.5, 0.75, 1.0]))
    np.testing.assert_allclose(half.variance[:, 0], 0.5 * SLICE.total_variance(k), rtol=1e-14)
    np.testing.assert_allclose(half.variance[:, 2], 0.5 * (SLICE.total_variance(k) + 0.2), rtol=1e-14)
    np.testing.assert_allclose(half.slope[:, 2], 0.5 * SLICE.derivatives(k)[1], atol=1e-14)


def test_quotes_from_an_svi_slice_need_no_correction():
    k = np.linspace(-0.25, 0.25, 9)
    given = SmileQuotes.of(day(182), k, np.sqrt(BASE.total_variance(k) / 0.5))
    assert isinstance(fit_slice(given, 0.5), SviSlice)


@pytest.mark.parametrize("model", MODELS)
def test_smiles_of_other_models_are_met_to_a_hundredth_of_a_vol_point(model):
    quotes = model_quotes(model, DAYS)
    surface = ImpliedSurface.from_quotes(TODAY, quotes)
    for quote, time, errors in zip(quotes, surface.times, surface.fit_errors(), strict=True):
        assert np.abs(errors[middle(quote, time)]).max() < 1e-4
    assert surface_violations(surface) == ()


@pytest.mark.parametrize(("unit", "most"), [(1e-4, 1e-4), (5e-4, 2.2e-4)])
@pytest.mark.parametrize("model", MODELS)
def test_rounded_quotes_are_met_to_their_rounding_and_local_volatility_stays_smooth(model, unit, most):
    """Within 3 deviations the local volatility of rounded quotes is that of exact ones to 4 % of itself."""
    quotes = model_quotes(model, DAYS, rounding=unit)
    surface = ImpliedSurface.from_quotes(TODAY, quotes)
    for quote, time, errors in zip(quotes, surface.times, surface.fit_errors(), strict=True):
        assert np.abs(errors[middle(quote, time)]).max() < most
    local, exact = (
        LocalVolSurface.from_implied(s) for s in (surface, ImpliedSurface.from_quotes(TODAY, model_quotes(model, DAYS)))
    )
    inner = np.abs(np.linspace(-local.reach, local.reach, local.values.shape[1])) <= 2.0  # where quotes are
    spread = np.abs(local.values / exact.values - 1.0)[:, inner]
    assert np.sqrt(np.mean(spread**2)) < (0.01 if unit == 1e-4 else 0.04)


def test_bounds_at_one_strike_on_and_between_expiries_do_not_forbid_a_correction():
    """A steep put wing: g is bounded at its end on this slice and three quarters of the way to it, not both at once."""
    level = float(MODELS["merton"](np.zeros(1), 7 / 365, **STEEP)[0])
    quotes = []
    for days in (7, 30, 91):
        k = np.linspace(-2.4, 2.19, 14) * level * np.sqrt(days / 365)
        quotes.append(SmileQuotes.of(day(days), k, MODELS["merton"](k, days / 365, **STEEP)))
    surface = ImpliedSurface.from_quotes(TODAY, quotes)
    assert max(np.abs(errors).max() for errors in surface.fit_errors()) < 6e-5
    assert surface_violations(surface) == ()


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("noise", [0.002, 0.02])
def test_whatever_the_noise_corrected_slices_stay_sound(seed, noise):
    quotes = smiles(seed, index=seed % 2 == 0, noise=noise, n=15)
    surface = ImpliedSurface.from_quotes(TODAY, quotes)
    assert any(isinstance(smile, CorrectedSlice) for smile in surface.slices)
    before = None
    for smile in surface.slices:
        assert is_butterfly_free(smile, RANGE * float(np.sqrt(smile.total_variance(0.0))))
        assert before is None or excess(before, smile)[1] <= 0.0
        before = smile


@pytest.mark.parametrize("seed", [8, 20, 36, 44])
def test_bounds_on_a_rippling_spline_do_not_throw_it_off_the_quotes(seed):
    """Noise of 0.2 vol points: where bounds bend the correction most, it is still nearer to all quotes than SVI."""
    surface = ImpliedSurface.from_quotes(TODAY, smiles(seed, index=True, noise=0.002))
    for smile, quote, time in zip(surface.slices, surface.quotes, surface.times, strict=True):
        near, far = (
            np.linalg.norm(np.sqrt(s.total_variance(quote.log_moneyness) / time) - quote.volatilities)
            for s in (smile, base_of(smile))
        )
        assert near <= far


def test_a_quote_left_out_of_the_slice_is_left_out_of_the_correction():
    k = np.linspace(-0.2, 0.2, 9)
    volatilities = 0.2 - 0.1 * k + 0.2 * k * k
    volatilities[6] += 0.05
    given = SmileQuotes.of(day(182), k, volatilities)
    assert fit_svi(given, 0.5)[1][6] == 0.0
    assert np.sqrt(float(fit_slice(given, 0.5).total_variance(k[6])) / 0.5) - volatilities[6] < -0.045


def test_an_odd_quote_that_contradicts_nothing_is_met_up_to_a_vol_point():
    """Off a smooth smile at one of nine strikes three quarters of a deviation apart: SVI alone leaves it out."""
    k = np.linspace(-0.42, 0.42, 9)
    for off, met in ((0.007, True), (0.02, False)):
        volatilities = 0.2000012345 - 0.1 * k + 0.2 * k * k
        volatilities[5] += off
        given = SmileQuotes.of(day(182), k, volatilities)
        assert fit_svi(given, 0.5)[1][5] == 0.0
        missed = given.volatilities[5] - np.sqrt(float(fit_slice(given, 0.5).total_variance(k[5])) / 0.5)
        assert missed == pytest.approx(0.0 if met else off, abs=4e-4 if not met else 5e-5)


@pytest.mark.parametrize(
    ("volatilities", "unit"),
    [
        ([0.2, 0.21], 1e-3),
        ([0.2005, 0.21], 5e-4),
        ([0.2013, 0.21], 1e-4),
        ([0.20131, 0.21], 1e-5),
        ([0.2013127, 0.2], 0.0),
    ],
)
def test_the_rounding_of_quotes_is_seen(volatilities, unit):
    assert rounding_of(np.array(volatilities)) == unit


def test_an_allowance_is_half_the_rounding_within_limits():
    allowances = [SmileQuotes.of(day(30), 0.0, 0.2, rounding).allowance for rounding in (0.0, 1e-5, 1e-4, 5e-4, 1e-3)]
    assert allowances == [2.5e-5, 2.5e-5, 5e-5, 2e-4, 2e-4]


def test_strikes_matter_up_to_four_deviations_and_a_tenth_of_a_basis_point():
    """With a deviation of 1: the call at 3.9 is worth 7e-5, at 4.1 still 4e-5; the put at -3.0 8e-5, at -3.9 5e-6."""
    k = np.array([-3.9, -3.0, 0.0, 3.9, 4.1])
    assert is_material(k, np.ones(5)).tolist() == [False, True, True, True, False]
