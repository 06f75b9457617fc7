"""Any payoff from calls, puts and digitals; what becomes of bounds on the way."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.closed_form.family import Estimate, Family, expectation
from pricer.engines.closed_form.lognormal import ShiftedLognormal, black, exceedance
from pricer.engines.closed_form.quadrature import gauss_legendre
from pricer.engines.problem import ReferenceKind
from tests.unit.closed_form_cases import law, problem

LAW = ShiftedLognormal(shift=0.3, coefficient=0.9, deviation=0.35)


def by_quadrature(payoff, lognormal):
    """The expectation panel by panel between the payoff's knots."""
    nodes, weights = gauss_legendre(64)
    s, c = lognormal.deviation, lognormal.coefficient
    levels = [(k - lognormal.shift) / c for k in payoff.knots]
    cuts = sorted(np.log(level) / s + 0.5 * s for level in levels if level > 0.0)
    edges = [-10.0, *(cut for cut in cuts if -10.0 < cut < 11.0), 11.0]
    total = 0.0
    for low, high in pairwise(edges):
        for left in np.linspace(low, high, 9)[:-1]:
            width = (high - low) / 8.0
            z = left + 0.5 * width * (1.0 + nodes)
            level = lognormal.shift + c * np.exp(s * z - 0.5 * s * s)
            density = np.exp(-0.5 * z * z) / np.sqrt(2.0 * np.pi)
            total += 0.5 * width * float(weights @ (payoff(level) * density))
    return total


PAYOFFS = {
    "call": Profile(ProfileKind.CALL, 1.1).payoff(),
    "put": Profile(ProfileKind.PUT, 1.1).payoff(),
    "forward": Profile(ProfileKind.FORWARD, 1.1).payoff(),
    "straddle": Profile(ProfileKind.STRADDLE, 1.1).payoff(),
    "cash digital call": Profile(ProfileKind.CASH_DIGITAL_CALL, 1.1, cash_amount=3.0).payoff(),
    "cash digital put": Profile(ProfileKind.CASH_DIGITAL_PUT, 1.1, cash_amount=3.0).payoff(),
    "asset digital call": Profile(ProfileKind.ASSET_DIGITAL_CALL, 1.1).payoff(),
    "asset digital put": Profile(ProfileKind.ASSET_DIGITAL_PUT, 1.1).payoff(),
    "capped call": Profile(ProfileKind.CALL, 1.0, cap=0.2).payoff(),
    "floored and capped forward": Profile(ProfileKind.FORWARD, 1.0, floor=-0.1, cap=0.2).payoff(),
    "capped straddle": Profile(ProfileKind.STRADDLE, 1.0, cap=0.3).payoff(),
    "call on the best of level and cash": Profile(ProfileKind.CALL, 0.9).payoff().of_floored_argument(1.05),
    "put on the worst of level and cash": Profile(ProfileKind.PUT, 1.2).payoff().of_capped_argument(1.05),
    "several jumps and bends": PiecewiseLinear(0.4, 0.5, (0.8, 1.0, 1.4), (-1.0, 2.0, -0.5), (0.2, -0.7, 0.1)),
}


@pytest.mark.parametrize("payoff", PAYOFFS.values(), ids=PAYOFFS.keys())
def test_every_payoff_is_composed_exactly(payoff):
    composed = expectation(payoff, LAW)
    assert composed.value == pytest.approx(by_quadrature(payoff, LAW), abs=2e-14)
    assert 0.0 < composed.error < 1e-14


@pytest.mark.parametrize("payoff", PAYOFFS.values(), ids=PAYOFFS.keys())
def test_a_law_with_a_negative_coefficient_is_composed_exactly(payoff):
    mirrored = ShiftedLognormal(shift=2.1, coefficient=-0.9, deviation=0.35)
    assert expectation(payoff, mirrored).value == pytest.approx(by_quadrature(payoff, mirrored), abs=2e-14)


class OnlyOptions:
    """A law with a formula for options and nothing else."""

    def mean(self):
        return None

    def option(self, strike, side):
        return Estimate(2.0 if side == 1 else 1.0, 0.01)

    def digital(self, strike, side):
        return None


def family(kind):
    return Family("test", kind, "none", lambda problem: OnlyOptions())


def reference(kind, profile, **terms):
    joint = law([1.0], [0.2], np.eye(1))
    return family(kind).reference(problem(joint, Aggregate.weighted_sum((1.0,)), profile, 1.0, 0.5, **terms))


def test_calls_and_puts_need_no_mean():
    call, put = (reference(ReferenceKind.EXACT, kind) for kind in (ProfileKind.CALL, ProfileKind.PUT))
    assert (call.value, put.value) == (1.0, 0.5)
    assert call.error == pytest.approx(0.005)


def test_a_missing_formula_makes_the_family_not_applicable():
    assert reference(ReferenceKind.EXACT, ProfileKind.CASH_DIGITAL_CALL) is None
    assert reference(ReferenceKind.EXACT, ProfileKind.FORWARD) is None


@pytest.mark.parametrize(
    ("profile", "terms", "kept", "turned"),
    [
        (ProfileKind.CALL, {}, True, False),
        (ProfileKind.PUT, {}, True, False),
        (ProfileKind.ASSET_DIGITAL_CALL, {}, False, False),
        (ProfileKind.CALL, {"cap": 0.3}, False, False),
        (ProfileKind.CASH_DIGITAL_CALL, {}, False, False),
    ],
)
def test_bounds_survive_only_bends_of_one_sign(profile, terms, kept, turned):
    bound = reference(ReferenceKind.LOWER_BOUND, profile, **terms)
    assert (bound is not None) == (kept or turned)
    if kept:
        assert bound.kind is ReferenceKind.LOWER_BOUND


def test_a_concave_payoff_turns_a_lower_bound_into_an_upper_bound():
    joint = law([1.0], [0.2], np.eye(1))
    short_put = problem(joint, Aggregate.weighted_sum((1.0,)), ProfileKind.FORWARD, 1.0, cap=0.0)
    assert family(ReferenceKind.LOWER_BOUND).reference(short_put).kind is ReferenceKind.UPPER_BOUND
    assert family(ReferenceKind.UPPER_BOUND).reference(short_put).kind is ReferenceKind.LOWER_BOUND


def test_a_linear_payoff_leaves_nothing_to_bound_or_to_approximate():
    for kind in (ReferenceKind.LOWER_BOUND, ReferenceKind.UPPER_BOUND, ReferenceKind.APPROXIMATION):
        assert reference(kind, ProfileKind.FORWARD) is None


def test_a_number_that_is_not_finite_is_not_given():
    broken = Family("test", ReferenceKind.EXACT, "none", lambda problem: ShiftedLognormal(np.nan, 1.0, 0.2))
    joint = law([1.0], [0.2], np.eye(1))
    assert broken.reference(problem(joint, Aggregate.weighted_sum((1.0,)), ProfileKind.CALL, 1.0)) is None


@pytest.mark.parametrize("strike", [-2.0, 0.0, 1e-3, 0.7, 1.0, 1.6, 40.0])
@pytest.mark.parametrize("deviation", [0.0, 1e-4, 0.3, 5.0])
def test_black_calls_and_puts_are_in_parity_and_not_negative(strike, deviation):
    call, put = black(1.2, strike, deviation, 1), black(1.2, strike, deviation, -1)
    assert float(call - put) == pytest.approx(1.2 - strike, abs=1e-14)
    assert min(float(call), float(put)) >= 0.0
    above, below = exceedance(1.2, strike, deviation, 1), exceedance(1.2, strike, deviation, -1)
    assert float(above + below) == pytest.approx(1.0, abs=1e-15)


def test_a_digital_is_the_slope_of_the_call_in_its_strike():
    step = 1e-5
    slope = (black(1.2, 1.0 - step, 0.3, 1) - black(1.2, 1.0 + step, 0.3, 1)) / (2.0 * step)
    assert float(exceedance(1.2, 1.0, 0.3, 1)) == pytest.approx(float(slope), abs=1e-9)


@pytest.mark.parametrize("strike", [0.2, 0.8, 1.0, 1.3, 11.0])
def test_black_agrees_with_quantlib_far_in_and_out_of_the_money(strike):
    for side, kind in ((1, ql.Option.Call), (-1, ql.Option.Put)):
        wanted = ql.blackFormula(kind, strike, 1.0, 0.2)
        assert float(black(1.0, strike, 0.2, side)) == pytest.approx(wanted, rel=1e-9, abs=1e-60)
