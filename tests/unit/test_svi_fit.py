"""Fitting one expiry: planted slices, few quotes, outliers, bounds, and the kernel against SciPy."""

import numpy as np
import pytest
from scipy.optimize import least_squares

from pricer.market import svi_kernel
from pricer.market.checked_surface import VolatilityQuote
from pricer.market.dividends import CashDividend
from pricer.market.slice_fit import fit_slice
from pricer.market.slice_order import RANGE, excess, is_admissible, lifted
from pricer.market.smile_quotes import SmileParameters, SmileQuotes
from pricer.market.svi import SviSlice
from pricer.market.svi_fit import GRID
from pricer.market.svi_repair import is_butterfly_free
from tests.unit.smiles import day, smiles
from tests.unit.surface_cases import built

T = 0.5


def quotes(k, volatilities):
    return SmileQuotes.of(day(182), k, volatilities)


def errors(smile, given, time=T):
    return np.sqrt(smile.total_variance(given.log_moneyness) / time) - given.volatilities


def sampled(smile, k, time=T):
    return quotes(k, np.sqrt(smile.total_variance(k) / time))


@pytest.mark.parametrize(
    "planted",
    [
        SviSlice(0.004, 0.05, -0.5, 0.02, 0.12),
        SviSlice(0.0, 0.1, -0.3, -0.02, 0.2),
        SviSlice(0.02, 0.06, 0.2, 0.1, 0.3),
        SviSlice.from_forward(0.02, -0.02, 0.05),
    ],
)
def test_a_planted_slice_is_recovered_from_nine_of_its_volatilities(planted):
    s = float(np.sqrt(planted.total_variance(0.0)))
    given = sampled(planted, np.linspace(-2.0, 2.0, 9) * s)
    # The weak pull towards the three-parameter shape costs less than 0.002 vol points.
    assert np.abs(errors(fit_slice(given, T), given)).max() < 2e-5


def test_one_quote_gives_a_flat_slice():
    assert fit_slice(quotes([0.05], [0.2]), T) == SviSlice.flat(0.2**2 * T)


def test_equal_quotes_give_an_exactly_flat_slice():
    smile = fit_slice(quotes([-0.1, 0.0, 0.1], [0.2] * 3), T)
    assert smile.b == 0.0 and smile.a == pytest.approx(0.02, rel=1e-15)


@pytest.mark.parametrize(
    ("k", "volatilities"),
    [
        ([-0.1, 0.1], [0.24, 0.20]),
        ([-0.3, -0.2], [0.30, 0.26]),
        ([0.1, 0.2], [0.20, 0.21]),
        ([-0.1, 0.0, 0.1], [0.24, 0.20, 0.19]),
        ([-0.3, -0.2, -0.1], [0.30, 0.26, 0.23]),
        ([-0.2, -0.1, 0.0, 0.1], [0.28, 0.24, 0.20, 0.19]),
    ],
)
def test_two_three_and_four_quotes_are_met_by_a_sound_slice(k, volatilities):
    given = quotes(k, volatilities)
    smile = fit_slice(given, T)
    assert np.abs(errors(smile, given)).max() < 2e-5
    assert is_butterfly_free(smile, RANGE * float(np.sqrt(smile.total_variance(0.0))))


def test_quotes_that_bend_the_wrong_way_get_the_nearest_sound_slice():
    """Half the error up, half down: total variance convex in k cannot do better than flat here."""
    smile = fit_slice(quotes([-0.1, 0.0, 0.1], [0.20, 0.22, 0.20]), T)
    level = np.sqrt(smile.total_variance(np.array([-0.1, 0.0, 0.1])) / T)
    np.testing.assert_allclose(level, level[1], atol=1e-5)
    assert 0.205 < level[1] < 0.215


def test_one_mistyped_quote_among_nine_does_not_bend_the_smile():
    k = np.linspace(-0.2, 0.2, 9)
    clean = 0.2 - 0.1 * k + 0.2 * k * k
    wrong = clean.copy()
    wrong[6] += 0.05
    smile = fit_slice(quotes(k, wrong), T)
    others = np.arange(9) != 6
    assert np.abs(errors(smile, quotes(k, clean)))[others].max() < 2e-4
    assert errors(smile, quotes(k, wrong))[6] == pytest.approx(-0.05, abs=3e-4)


def test_noise_on_every_quote_is_no_outlier():
    """Half a vol point on each of nine: the fit may not be worse than noise less four or five fitted numbers."""
    rng = np.random.default_rng(5)
    k = np.linspace(-0.2, 0.2, 9)
    given = quotes(k, 0.2 - 0.1 * k + 0.2 * k * k + 0.005 * rng.normal(size=9))
    assert np.sqrt(np.mean(errors(fit_slice(given, T), given) ** 2)) < 0.006


def test_the_slice_lies_above_the_expiry_before_even_where_its_quotes_do_not():
    before = fit_slice(quotes([-0.1, 0.0, 0.1], [0.26, 0.24, 0.23]), 0.5)
    low = quotes([-0.1, 0.0, 0.1], [0.20, 0.16, 0.155])  # total variance falls at and above the forward
    smile = fit_slice(low, 1.0, before)
    k = np.linspace(-RANGE, RANGE, 2001) * float(np.sqrt(smile.total_variance(0.0)))
    assert np.min(smile.total_variance(k) - before.total_variance(k)) >= -1e-12
    assert is_butterfly_free(smile, RANGE * float(np.sqrt(smile.total_variance(0.0))))


def test_a_short_expiry_leaves_room_for_the_quotes_of_later_ones():
    """Steep short quotes would run above next month's far put; their wing is free to bend, so it does."""
    short = quotes([-0.04, -0.02, 0.0, 0.02], [0.42, 0.28, 0.20, 0.19])
    far = (np.array([-0.5]), np.array([0.34**2 * 91 / 365]))
    free, bound = fit_slice(short, 7 / 365), fit_slice(short, 7 / 365, None, [far])
    assert free.total_variance(-0.5) > far[1][0]
    assert bound.total_variance(-0.5) <= far[1][0] * 1.01


def test_a_slice_must_be_sound_as_far_out_as_the_next_expiry_reaches():
    """This wing's density ends between nine and twelve of its own deviations of 0.36; the next expiry's is 0.54."""
    planted = SviSlice(-0.6728, 0.4778, -0.8, -2.0, 2.6)
    assert planted.butterfly(-8.4 * 0.36) > 0.0 > planted.butterfly(-8.0 * 0.54)
    assert is_admissible(planted, None)
    assert not is_admissible(planted, None, 0.54)


def test_a_steep_wing_has_a_density_wherever_the_next_expiry_matters():
    """With noise of 0.2 vol points: two years' wing, alone, has none at twelve deviations, eight of the five years'."""
    quotes_ = smiles(28, index=True, noise=0.002)
    priced = [
        VolatilityQuote(q.expiry_date, float(v), relative_strike=float(np.exp(k)))
        for q in quotes_
        for k, v in zip(q.log_moneyness, q.volatilities, strict=True)
    ]
    surface = built(priced, [CashDividend(day(150 + 365 * i), 2.0) for i in range(5)])
    assert [v for v in surface.violations if not v.quoted] == []
    two_years, five_years = surface.surface.slices[-2:]
    k = np.linspace(-RANGE, RANGE, 801) * float(np.sqrt(five_years.total_variance(0.0)))
    assert two_years.butterfly(k).min() >= 0.0


def test_lifting_closes_a_gap_between_the_points_of_the_grid():
    before, later = SviSlice(0.01, 0.1, -0.3, 0.013, 0.01), SviSlice(0.0115, 0.1, -0.3, 0.013, 0.008)
    smile = lifted(later, SviSlice(before.a + 0.002, before.b, before.rho, before.m, before.sigma))
    assert smile is not None
    assert excess(SviSlice(before.a + 0.002, before.b, before.rho, before.m, before.sigma), smile)[1] <= 0.0


def test_the_kernel_ends_where_scipy_does_on_the_same_residuals():
    rng = np.random.default_rng(11)
    x = np.linspace(-2.0, 2.0, 9)
    roots = np.sqrt(1.0 - 0.3 * x + 0.1 * x * x) + 0.005 * rng.normal(size=9)
    weights = np.full(9, 1.0 / 3.0)
    start = np.array([-0.2, -1.0, -1.0, 0.0, 0.0])
    nothing, floor = np.empty(0), np.zeros(GRID.size)
    args = (x, roots, weights, GRID, floor, nothing, nothing, 0.04, 2.5, np.zeros(2), start, 1e-3, 1.0)
    out = np.empty(9 + 2 * GRID.size + 7)

    def residuals(p):
        """The kernel's own quotes and ridge, from the slice in NumPy; the bounds do not bind at the answer."""
        smile = SviSlice(*svi_kernel.scaled_slice(p, 2.5))
        fitted = weights * (np.sqrt(smile.total_variance(x)) - roots)
        return np.concatenate([fitted, 1e-3 * (p - start)])

    p, cost = svi_kernel.fit(start, *args)
    reference = least_squares(residuals, start, xtol=1e-14, ftol=1e-14, gtol=1e-14)
    assert svi_kernel.residuals(p, *args, out) == pytest.approx(cost, rel=1e-12)
    assert np.all(out[9 : 9 + 2 * GRID.size] == 0.0)
    assert cost == pytest.approx(2.0 * reference.cost, rel=1e-4)


def test_the_kernels_bounds_are_g_and_total_variance_of_the_slice():
    """With bounds that bind, term by term against NumPy."""
    p = np.array([-1.0, 1.5, -2.0, 0.4, 0.3])
    s, floor = 0.3, np.full(GRID.size, 1.2)
    later_x, later_roots = np.array([-1.0, 0.5]), np.array([0.9, 0.4])
    x, roots, weights = np.array([0.0]), np.array([1.0]), np.array([1.0])
    out = np.empty(1 + 2 * GRID.size + 2 + 7)
    least = np.array([2.4, 0.1])
    svi_kernel.residuals(
        p, x, roots, weights, GRID, floor, later_x, later_roots, s * s, 2.5, least, np.zeros(5), 0.5, 3.0, out
    )
    scaled = SviSlice(*svi_kernel.scaled_slice(p, 2.5))
    smile = SviSlice(s * s * scaled.a, s * scaled.b, scaled.rho, s * scaled.m, s * scaled.sigma)
    g = smile.butterfly(s * GRID)
    root = np.sqrt(smile.total_variance(s * GRID)) / s
    later = np.sqrt(smile.total_variance(s * later_x)) / s
    n = GRID.size
    np.testing.assert_allclose(out[1 : 1 + n], 3.0 * np.maximum(svi_kernel.LEAST_BUTTERFLY - g, 0.0), atol=1e-12)
    np.testing.assert_allclose(out[1 + n : 1 + 2 * n], 3.0 * np.maximum(1.2 - root, 0.0), atol=1e-12)
    np.testing.assert_allclose(out[1 + 2 * n : 3 + 2 * n], 3.0 * np.maximum(later - later_roots, 0.0), atol=1e-12)
    np.testing.assert_allclose(
        out[3 + 2 * n : 5 + 2 * n], 3.0 * np.maximum(least - np.array(scaled.wings), 0.0), atol=1e-12
    )
    np.testing.assert_allclose(out[5 + 2 * n :], 0.5 * p, atol=1e-15)
    assert np.any(out[1 : 1 + n] > 0.0) and np.any(out[1 + n : 1 + 2 * n] > 0.0)


def test_quotes_are_sorted_and_checked():
    given = SmileQuotes.of(day(30), [0.1, -0.1], [0.2, 0.25])
    np.testing.assert_array_equal(given.log_moneyness, [-0.1, 0.1])
    np.testing.assert_array_equal(given.volatilities, [0.25, 0.2])
    bad = [
        ([0.0, 0.0], [0.2, 0.2]),
        ([], []),
        ([0.0, 0.1], [0.2]),
        *(([0.0], [v]) for v in (0.0, 1e-300, 11.0, np.nan)),
    ]
    for k, volatilities in bad:
        with pytest.raises(ValueError, match=r"two volatilities|from 1e-06 to 10|do not fit"):
            SmileQuotes.of(day(30), k, volatilities)


def test_parameters_are_the_volatility_and_its_derivatives_at_the_forward():
    smile, h = SmileParameters(day(182), 0.2, -0.1, 0.3).slice(T), 1e-4
    low, mid, high = np.sqrt(smile.total_variance(np.array([-h, 0.0, h])) / T)
    assert mid == pytest.approx(0.2, rel=1e-12)
    assert (high - low) / (2 * h) == pytest.approx(-0.1, rel=1e-6)
    assert (high - 2 * mid + low) / h**2 == pytest.approx(0.3, rel=1e-5)
    for wrong in ({"volatility": 0.0}, {"volatility": 0.2, "skew": np.inf}):
        with pytest.raises(ValueError, match="must be from 1e-06 to 10"):
            SmileParameters(day(182), **wrong)
