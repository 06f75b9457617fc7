"""Payoff profiles in their one form: piecewise linear with jumps."""

import numpy as np
import pytest

from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind

LEVELS = np.linspace(-3.0, 5.0, 1601) + 1e-4  # off the knots
K, C = 1.2, 0.6

PLAIN = {
    ProfileKind.CALL: np.maximum(LEVELS - K, 0.0),
    ProfileKind.PUT: np.maximum(K - LEVELS, 0.0),
    ProfileKind.FORWARD: LEVELS - K,
    ProfileKind.STRADDLE: np.abs(LEVELS - K),
    ProfileKind.CASH_DIGITAL_CALL: C * (LEVELS > K),
    ProfileKind.CASH_DIGITAL_PUT: C * (LEVELS <= K),
    ProfileKind.ASSET_DIGITAL_CALL: LEVELS * (LEVELS > K),
    ProfileKind.ASSET_DIGITAL_PUT: LEVELS * (LEVELS <= K),
    ProfileKind.EXCHANGE: np.maximum(LEVELS, 0.0),
}
LIMITS = [(None, None), (0.1, None), (None, 0.5), (0.1, 0.7), (-0.3, 0.2)]


@pytest.mark.parametrize("kind", ProfileKind)
@pytest.mark.parametrize(("floor", "cap"), LIMITS)
def test_a_profile_pays_what_its_name_says_within_its_limits(kind, floor, cap):
    paid = Profile(kind, K, C, floor, cap).payoff()(LEVELS)
    want = PLAIN[kind]
    want = want if floor is None else np.maximum(want, floor)
    want = want if cap is None else np.minimum(want, cap)
    np.testing.assert_allclose(paid, want, atol=1e-12)


@pytest.mark.parametrize("kind", ProfileKind)
@pytest.mark.parametrize(("floor", "cap"), LIMITS)
@pytest.mark.parametrize("level", [-1.0, 0.4, K, 2.0])
def test_a_cash_level_becomes_part_of_the_profile(kind, floor, cap, level):
    payoff = Profile(kind, K, C, floor, cap).payoff()
    np.testing.assert_allclose(payoff.of_floored_argument(level)(LEVELS), payoff(np.maximum(LEVELS, level)), atol=1e-12)
    np.testing.assert_allclose(payoff.of_capped_argument(level)(LEVELS), payoff(np.minimum(LEVELS, level)), atol=1e-12)


def test_pieces_and_knots_describe_the_same_function():
    payoff = Profile(ProfileKind.ASSET_DIGITAL_CALL, 1.0, cap=2.0).payoff()
    intercepts, slopes = payoff.pieces()
    assert PiecewiseLinear.from_pieces(payoff.knots, tuple(intercepts), tuple(slopes)) == payoff


def test_knots_out_of_order_are_refused():
    with pytest.raises(ValueError, match="increase strictly"):
        PiecewiseLinear(0.0, 0.0, (1.0, 1.0), (1.0, 1.0), (0.0, 0.0))


def test_knots_bends_and_jumps_of_different_length_are_refused():
    with pytest.raises(ValueError, match="one length"):
        PiecewiseLinear(0.0, 0.0, (1.0,), (), (0.0,))
