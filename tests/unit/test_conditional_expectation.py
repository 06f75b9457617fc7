"""The plain expectation over the common factor, against quadrature and differences."""

from itertools import pairwise

import numpy as np
import pytest
from numpy.polynomial.hermite_e import hermegauss
from scipy.integrate import quad

from pricer.contracts.profile import PiecewiseLinear
from pricer.simulation.conditional import integrate_factor

BENT = PiecewiseLinear(1.0, -0.3, (60.0, 90.0, 130.0), (0.5, -1.0, 0.7), (0.0, 0.0, 0.0))
JUMPY = PiecewiseLinear(1.0, -0.3, (-20.0, 0.0, 30.0), (0.5, -1.0, 0.7), (2.0, 1.0, -3.0))


def by_quadrature(payoff, v, scaled, outside, weight=lambda w: 1.0):
    """Adaptive quadrature between the places where the aggregate meets a knot."""
    cuts = [-9.0, 9.0]
    for knot in payoff.knots:
        ratio = (knot - outside) / scaled
        if ratio > 0.0:
            cuts.append(float(np.clip(np.log(ratio) / v, -9.0, 9.0)))
    cuts.sort()

    def integrand(w):
        return weight(w) * payoff(np.array(np.exp(v * w) * scaled + outside)) * np.exp(-0.5 * w * w)

    parts = [quad(integrand, a, b, epsabs=1e-13)[0] for a, b in pairwise(cuts)]
    return sum(parts) / np.sqrt(2 * np.pi)


CASES = [
    (BENT, 0.2, 95.0, 0.0),
    (BENT, 0.35, 120.0, -30.0),
    (JUMPY, 0.2, 40.0, -25.0),
    (JUMPY, 0.5, 22.0, 4.0),
    (JUMPY, 0.3, -25.0, 0.0),  # rank weights may make the aggregate negative
    (JUMPY, 0.3, 25.0, -70.0),
]


@pytest.mark.parametrize(("payoff", "v", "scaled", "outside"), CASES)
def test_values_agree_with_quadrature(payoff, v, scaled, outside):
    got = integrate_factor(payoff, v, np.array([scaled]), np.array([outside])).value[0]
    assert got == pytest.approx(by_quadrature(payoff, v, scaled, outside), abs=1e-9)


@pytest.mark.parametrize(("payoff", "v", "scaled", "outside"), CASES)
def test_derivatives_agree_with_differences(payoff, v, scaled, outside):
    def at(s, o):
        return integrate_factor(payoff, v, np.array([s]), np.array([o]))

    h = 1e-4
    up, middle, down = at(scaled + h, outside), at(scaled, outside), at(scaled - h, outside)
    assert middle.by_scaled[0] == pytest.approx((up.value[0] - down.value[0]) / (2 * h), abs=1e-7)
    if scaled > 0.0:
        assert middle.by_scaled_twice[0] == pytest.approx((up.by_scaled[0] - down.by_scaled[0]) / (2 * h), abs=1e-6)
        up, down = at(scaled, outside + h), at(scaled, outside - h)
        assert middle.by_outside[0] == pytest.approx((up.value[0] - down.value[0]) / (2 * h), abs=1e-7)
        assert middle.by_outside_twice[0] == pytest.approx((up.by_outside[0] - down.by_outside[0]) / (2 * h), abs=1e-6)


@pytest.mark.parametrize(("payoff", "v", "scaled", "outside"), CASES)
def test_the_factor_weighted_slope_moves_the_value_with_the_factors_deviation(payoff, v, scaled, outside):
    # dV/dv = S E[w f'(A) exp(v w)], the jump densities included
    h = 1e-5
    s, o = np.array([scaled]), np.array([outside])
    difference = integrate_factor(payoff, v + h, s, o).value[0] - integrate_factor(payoff, v - h, s, o).value[0]
    assert scaled * integrate_factor(payoff, v, s, o).by_factor[0] == pytest.approx(difference / (2 * h), abs=1e-7)


def test_a_smooth_payoff_agrees_with_gauss_hermite():
    line = PiecewiseLinear(2.0, 3.0)
    nodes, weights = hermegauss(40)
    want = weights @ line(np.exp(0.4 * nodes) * 10.0 - 3.0) / np.sqrt(2 * np.pi)
    assert integrate_factor(line, 0.4, np.array([10.0]), np.array([-3.0])).value[0] == pytest.approx(want, rel=1e-12)


@pytest.mark.parametrize(
    ("scaled", "outside", "certain"), [(10.0, 1.0, True), (10.0, 0.0, True), (-10.0, 0.0, False), (0.0, 1.0, True)]
)
def test_a_threshold_that_cannot_be_met_is_certain_or_impossible(scaled, outside, certain):
    above_zero = PiecewiseLinear(0.0, 0.0, (0.0,), (0.0,), (1.0,))
    out = integrate_factor(above_zero, 0.2, np.array([scaled]), np.array([outside]))
    assert out.value[0] == pytest.approx(1.0 if certain else 0.0, abs=1e-290)
    assert out.by_scaled[0] == out.by_outside[0] == 0.0


def test_without_a_factor_the_payoff_itself_is_returned():
    a = np.array([10.0, 95.0, 200.0])
    out = integrate_factor(BENT, 0.0, a, np.zeros(3))
    assert out.value == pytest.approx(BENT(a))
    assert out.by_scaled == pytest.approx([-0.3, 0.5 - 0.3 - 1.0, 0.5 - 0.3 - 1.0 + 0.7])
