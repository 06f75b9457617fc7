"""Terms of a contract agree with the market at every date, whatever the currencies."""

import time
from datetime import date, timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.fixings import Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.contract_terms import ContractTerms
from tests.unit.markets import IDS, TODAY
from tests.unit.smiled_markets import real_market


def asian(conversion, days, names=IDS):
    levels = Levels(names, (100.0,) * len(names), conversion=conversion)
    average = Average(days, Aggregate.worst_of(len(names)))
    return Contract(levels, average, Profile(ProfileKind.CALL, 1.0), Observation(days[-1], days[-1]))


def terms(contract, market, currency="EUR"):
    stands = as_of(contract, market.valuation_date, Fixings.from_rows(()), {})
    return ContractTerms.of(Trade("T", contract, 1.0, currency), stands, market)


DAYS = tuple(TODAY + timedelta(days=k) for k in (1, 30, 109, 110, 200, 365, 500, 745, 900))


@pytest.mark.parametrize("conversion", [Conversion.QUANTO, Conversion.COMPOSITE])
@pytest.mark.parametrize("smiles", [False, True])
def test_terms_have_the_laws_of_the_market_at_every_date(conversion, smiles):
    market = real_market(smiles=smiles)
    found = terms(asian(conversion, DAYS), market)
    total = np.cumsum(found.covariances, axis=0)
    for k, day in enumerate(DAYS):
        law = market.joint_lognormal(IDS, day, payment_currency="EUR", conversion=conversion, pure=True)
        scales, floors = market.affine_levels(IDS, day)
        np.testing.assert_allclose(found.forwards[k], law.forwards, rtol=1e-12)
        np.testing.assert_allclose(total[k], law.covariance, rtol=1e-11)
        converted = law.forwards / scales if conversion is Conversion.COMPOSITE else 1.0
        np.testing.assert_allclose(found.floors[k], floors * converted, rtol=1e-12)


def test_a_moved_volatility_moves_variances_correlations_stay_and_quanto_forwards_follow():
    market = real_market(smiles=False)
    days = DAYS[-2:]
    plain = terms(asian(Conversion.QUANTO, days), market)
    moved = plain.with_volatility_moved(2, 0.01)
    before, after = (np.cumsum(t.covariances, axis=0) for t in (plain, moved))
    volatilities = np.sqrt(np.diagonal(after, axis1=1, axis2=2) / plain.times[:, None])
    expected = np.sqrt(np.diagonal(before, axis1=1, axis2=2) / plain.times[:, None])
    expected[:, 2] += 0.01
    np.testing.assert_allclose(volatilities, expected, rtol=1e-12)
    steps = plain.covariances, moved.covariances
    correlations = [s / np.sqrt(np.einsum("tii,tjj->tij", s, s)) for s in steps]
    np.testing.assert_allclose(*correlations, rtol=1e-12)
    # CADMUS is quoted in USD: its drift by minus the covariance with the rate grows with each step's deviation
    ratio = np.sqrt(moved.covariances[:, 2, 2] / plain.covariances[:, 2, 2])
    drift = np.diff(plain.factors.drifts[:, 2], prepend=0.0)
    np.testing.assert_allclose(np.diff(moved.factors.drifts[:, 2], prepend=0.0), drift * ratio, rtol=1e-12)
    np.testing.assert_allclose(np.log(moved.forwards / plain.forwards)[:, 2], np.cumsum(drift * (ratio - 1.0)))
    np.testing.assert_allclose(moved.forwards[:, :2], plain.forwards[:, :2], rtol=1e-15)


def test_terms_of_a_daily_schedule_are_quick():
    market = real_market()
    days = tuple(TODAY + timedelta(days=k) for k in range(1, 751))
    contract = asian(Conversion.QUANTO, days)
    terms(contract, market)
    stands = as_of(contract, market.valuation_date, Fixings.from_rows(()), {})
    started = time.perf_counter()
    ContractTerms.of(Trade("T", contract, 1.0, "EUR"), stands, market)
    assert time.perf_counter() - started < 0.5  # about 0.05 s alone on one core


def test_a_contract_without_dates_to_come_has_empty_terms():
    market = real_market()
    contract = asian(Conversion.QUANTO, (date(2026, 11, 2),))
    found = terms(contract, market)
    assert found.forwards.shape == (0, 3)
    assert found.years == 0.0
