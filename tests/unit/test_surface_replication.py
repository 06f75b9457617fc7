"""The surface's own prices of one underlying, against an integral over the surface's density."""

from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.closed_form import references
from pricer.engines.surface_replication import CALIBRATION, SmiledLevel, surface_reference
from pricer.engines.unit_terms import UnitTerms
from pricer.market.black import call
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.joint_lognormal import JointLognormal
from pricer.market.smile_quotes import SmileParameters
from pricer.market.volatility import VolatilityCurve

TODAY = date(2026, 3, 31)
YEARS = 1.0
SMILED = ImpliedSurface.from_quotes(
    TODAY, [SmileParameters(date(2026, 9, 30), 0.24, -0.18, 0.4), SmileParameters(date(2027, 9, 30), 0.23, -0.12, 0.3)]
)
FLAT = ImpliedSurface.flat(VolatilityCurve.from_quotes(TODAY, [date(2027, 9, 30)], [0.23]))


def terms(payoff: PiecewiseLinear, weight: float = 1.0, scale: float = 1.1, floor: float = 0.0) -> UnitTerms:
    one = np.ones(1)
    return UnitTerms(
        law=JointLognormal(np.array([scale]), np.array([[0.23**2 * YEARS]])),
        floors=np.array([floor]),
        aggregate=Aggregate.weighted_sum((weight,)),
        payoff=payoff,
        discount_factor=0.97,
        years=YEARS,
        unit_notional=1.0,
        random_spots=one,
        rates=one,
        vega_slopes=one,
        drifts=np.zeros(1),
        is_composite=False,
    )


def by_density(payoff: PiecewiseLinear, weight: float, scale: float, floor: float) -> float:
    """Integral of the payoff over the second differences of the surface's call prices."""
    k = np.linspace(-3.5, 2.5, 60_001)
    x = np.exp(k)
    calls = call(k, np.sqrt(SMILED.total_variance(k, YEARS)))
    slopes = np.diff(calls) / np.diff(x)
    mass = np.diff(slopes)  # of X about each inner strike
    return 0.97 * float(payoff(weight * (scale * x[1:-1] + floor)) @ mass)


CASES = [
    (Profile(ProfileKind.CALL, 1.15), 1.0, 1.1, 0.0),
    (Profile(ProfileKind.PUT, 1.0), 1.0, 1.1, 0.05),
    (Profile(ProfileKind.STRADDLE, 1.2), 0.5, 2.2, 0.0),
    (Profile(ProfileKind.CASH_DIGITAL_CALL, 1.15, 0.2), 1.0, 1.1, 0.0),
    (Profile(ProfileKind.ASSET_DIGITAL_PUT, 1.0), 1.0, 1.1, 0.1),
    (Profile(ProfileKind.CALL, 1.0, floor=0.02, cap=0.3), 1.0, 1.1, 0.0),
    (Profile(ProfileKind.CALL, -1.1), -1.0, 1.1, 0.0),
]


@pytest.mark.parametrize(("profile", "weight", "scale", "floor"), CASES)
def test_every_profile_is_worth_its_integral_over_the_surfaces_density(profile, weight, scale, floor):
    found = surface_reference(terms(profile.payoff(), weight, scale, floor), (SMILED,))
    # the grid of the integral is 1e-4 wide in log-strike
    assert found.value == pytest.approx(by_density(profile.payoff(), weight, scale, floor), abs=5e-5)


def test_a_flat_surface_gives_the_lognormal_formula():
    case = terms(Profile(ProfileKind.CALL, 1.15).payoff())
    (formula, *_) = references(case.lognormal())
    assert surface_reference(case, (FLAT,)).value == pytest.approx(formula.value, abs=1e-14)


def test_a_digital_is_the_slope_of_the_calls():
    law = SmiledLevel(0.0, 1.0, SMILED, YEARS)
    h = 1e-5
    slope = (law.option(1.05 + h, 1).value - law.option(1.05 - h, 1).value) / (2.0 * h)
    assert law.digital(1.05, 1).value == pytest.approx(-slope, abs=1e-8)
    assert law.digital(1.05, 1).value + law.digital(1.05, -1).value == pytest.approx(1.0, abs=1e-14)


def test_the_allowance_is_the_value_of_the_calibration_target_in_volatility():
    payoff = Profile(ProfileKind.CALL, 1.1).payoff()
    found = surface_reference(terms(payoff), (SMILED,))
    vega = 1.1 / np.sqrt(2.0 * np.pi) * 0.97
    assert found.allowance == pytest.approx(vega * CALIBRATION, rel=0.05)
    digital = surface_reference(terms(Profile(ProfileKind.CASH_DIGITAL_CALL, 1.1).payoff()), (SMILED,))
    assert digital.allowance > 2.0 * CALIBRATION


def test_two_underlyings_a_quanto_and_an_expiry_tonight_have_none():
    case = terms(Profile(ProfileKind.CALL, 1.1).payoff())
    assert surface_reference(case, (SMILED, SMILED)) is None
    assert surface_reference(replace(case, drifts=np.array([-0.01])), (SMILED,)) is None
    assert surface_reference(replace(case, years=0.0), (SMILED,)) is None
