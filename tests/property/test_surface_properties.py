"""Whatever is quoted: slices without butterflies, ordered in time, and a local volatility that exists."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.market.arbitrage import ArbitrageKind, surface_violations
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.slice_order import RANGE
from pricer.market.smile_quotes import SmileQuotes
from pricer.market.svi import SviSlice
from pricer.market.volatility import VolatilityCurve
from tests.unit.smiles import TODAY, day, smiles

REPEATABLE = settings(max_examples=25, deadline=None, derandomize=True)
DAYS = (7, 30, 91, 365, 1095)


@st.composite
def ordered_slices(draw):
    """SSVI with one rho: phi falls and theta phi rises with theta (Gatheral & Jacquier 2014, theorems 4.1 and 4.2)."""
    volatility, rho = draw(st.floats(0.08, 0.6)), draw(st.floats(-0.9, 0.6))
    power, eta = draw(st.floats(0.1, 0.5)), draw(st.floats(0.1, 1.0))
    slices = []
    for days in DAYS:
        theta = volatility**2 * days / 365
        # phi = eta theta^-power (1 + theta)^(power - 1): no butterflies for eta (1 + |rho|) <= 2.
        phi = eta * theta**-power * (1.0 + theta) ** (power - 1.0)
        root = np.sqrt(1.0 - rho * rho)
        slices.append(SviSlice(0.5 * theta * root**2, 0.5 * theta * phi, rho, -rho / phi, root / phi))
    return tuple(slices)


def surface_of(slices):
    return ImpliedSurface(TODAY, tuple(day(d) for d in DAYS), tuple(d / 365 for d in DAYS), slices)


@REPEATABLE
@given(ordered_slices())
def test_slices_that_theory_says_are_sound_are_found_sound(slices):
    surface = surface_of(slices)
    violations = [v for v in surface_violations(surface) if v.later_date is None or v.kind is ArbitrageKind.CALENDAR]
    assert violations == []


@REPEATABLE
@given(ordered_slices())
def test_quotes_read_off_sound_slices_are_met_without_arbitrage(slices):
    quotes = []
    for days, smile in zip(DAYS, slices, strict=True):
        k = np.linspace(-1.8, 1.8, 9) * float(np.sqrt(smile.total_variance(0.0)))
        quotes.append(SmileQuotes.of(day(days), k, np.sqrt(smile.total_variance(k) / (days / 365))))
    surface = ImpliedSurface.from_quotes(TODAY, quotes)
    level = quotes[-1].volatilities[4]
    assert max(np.abs(errors).max() for errors in surface.fit_errors()) < 2e-3 * level + 5e-5
    check_order_and_density(surface)


@REPEATABLE
@given(st.integers(0, 10**6), st.booleans(), st.sampled_from([0.0, 0.001, 0.003]), st.integers(1, 9))
def test_noisy_quotes_in_any_number_give_an_ordered_surface_without_butterflies(seed, index, noise, n):
    surface = ImpliedSurface.from_quotes(TODAY, smiles(seed, index=index, noise=noise, n=n, days=DAYS))
    check_order_and_density(surface)
    local = LocalVolSurface.from_implied(surface)
    assert np.all(np.isfinite(local.values)) and np.all(local.values >= 0.0)
    assert local.clipping.falling == 0


def check_order_and_density(surface):
    """g >= 0 on each slice, and total variance that never falls, on a grid of the test's own."""
    for i, (time, smile) in enumerate(zip(surface.times, surface.slices, strict=True)):
        k = np.linspace(-RANGE, RANGE, 1601) * float(np.sqrt(surface.total_variance(0.0, time)))
        assert smile.butterfly(k).min() >= -1e-9
        if i:
            fall = surface.slices[i - 1].total_variance(k) - smile.total_variance(k)
            assert fall.max() <= 1e-9 + 1e-7 * float(smile.total_variance(0.0))


@REPEATABLE
@given(st.lists(st.floats(0.05, 1.0), min_size=5, max_size=5))
def test_without_skew_the_local_volatility_is_the_forward_volatility(rises):
    variances = np.cumsum(np.array(rises) ** 2 * np.diff((0, *DAYS)) / 365)
    volatilities = np.sqrt(variances / (np.array(DAYS) / 365))
    curve = VolatilityCurve.from_quotes(TODAY, [day(d) for d in DAYS], volatilities.tolist())
    quoted = ImpliedSurface.from_quotes(
        TODAY,
        [SmileQuotes.of(day(d), [-0.1, 0.0, 0.1], [v] * 3) for d, v in zip(DAYS, volatilities, strict=True)],
    )
    for surface in (ImpliedSurface.flat(curve), quoted):
        local = LocalVolSurface.from_implied(surface)
        wanted = np.array(rises)[np.searchsorted(surface.times, local.times[1:] - 1e-12)]
        np.testing.assert_allclose(local.values, wanted[:, None] + np.zeros(local.values.shape), rtol=1e-6)
