"""Contracts on realised variance, valued as trades: lognormal levels and strips of options."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_variance import RealisedVariance
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from pricer.engines.problem import ReferenceKind
from pricer.engines.variance_products import variance_references, variance_value
from pricer.market.dividends import CashDividend, Dividends
from tests.unit.markets import TODAY, small_market

ASKED = Asked("T1", 7, 1e-4, 1e-4, 1e-4)
FORWARD = Profile(ProfileKind.FORWARD, 0.04)
ONE = Aggregate.weighted_sum((1.0,))
ALONE, PAIR = Levels(("ARVENNE",), (100.0,)), Levels(("ARVENNE", "BELCOR"), (100.0, 50.0))


def weekdays(first, last):
    days = (TODAY + timedelta(days=d) for d in range(first, last + 1))
    return tuple(day for day in days if day.weekday() < 5)


def trade(days, levels=ALONE, aggregate=ONE, weights=(1.0, 0.0), payout=FORWARD, **more):
    statistic = RealisedVariance(days, aggregate, weights, **more)
    contract = Contract(levels, statistic, payout, Observation(days[-1], days[-1] + timedelta(days=2)))
    return Trade("T1", contract, 1.0, "EUR")


def terms_of(wanted, on, past=()):
    spots = {name: underlying.spot for name, underlying in on.underlyings.items()}
    return ContractTerms.of(wanted, as_of(wanted.contract, TODAY, Fixings.from_rows(past), spots), on)


def value(wanted, on=None, past=(), *, smiled=False):
    on = on or small_market()
    return variance_value(wanted, terms_of(wanted, on, past), on, ASKED, smiled=smiled)


#: Half-way: twenty days counted, the last fixing 2 % below today's spot of 100.
PAST = tuple(
    Fixing("ARVENNE", day, 98.0 + 2.0 * (k % 2)) for k, day in enumerate(weekdays(-28, -1))
)  # alternating: a large variance so far


def test_a_variance_swap_to_come_is_worth_its_variance_and_squared_drifts():
    days = weekdays(1, 365)
    found = value(trade(days))
    terms = terms_of(trade(days), small_market())
    growth = np.diff(np.log(terms.forwards[:, 0]))
    steps = terms.covariances[1:, 0, 0]
    expected = 252.0 / len(growth) * float(np.sum(steps + (growth - 0.5 * steps) ** 2))
    assert found.headline.value == pytest.approx((expected - 0.04) * terms.discount(days[-1] + timedelta(days=2)))
    assert found.ratios.deltas == pytest.approx([0.0], abs=1e-12)


def test_the_delta_half_way_is_that_of_the_return_that_has_begun():
    days = (*weekdays(-28, -1), *weekdays(1, 200))
    assert PAST[-1].level in (98.0, 100.0)
    past = (*PAST[:-1], Fixing("ARVENNE", PAST[-1].day, 97.0))
    wanted, on = trade(days), small_market()
    found = value(wanted, on, past)
    moved = []
    for spot in (100.05, 99.95):
        underlying = replace(on.underlyings["ARVENNE"], spot=spot)
        moved.append(value(wanted, replace(on, underlyings={**on.underlyings, "ARVENNE": underlying}), past))
    slope = (moved[0].headline.value - moved[1].headline.value) / 0.1
    assert found.ratios.deltas[0] == pytest.approx(slope, rel=1e-5)
    assert slope > 0.0


def test_the_vega_of_a_variance_swap_is_twice_the_volatility_per_unit_of_variance():
    days = weekdays(1, 365)
    found = value(trade(days))
    terms = terms_of(trade(days), small_market())
    volatility = math.sqrt(float(terms.covariances.sum()) / terms.years)
    per_year = 252.0 / (len(days) - 1) * terms.years  # of returns, as the contract counts them
    expected = 2.0 * volatility * 0.01 * terms.discount(days[-1]) * per_year
    assert found.ratios.vegas[0] == pytest.approx(expected, rel=0.01)  # drifts and the first day, which is not counted


def test_a_flat_surface_gives_by_strips_what_lognormal_levels_give():
    days = (*weekdays(-28, -1), *weekdays(1, 120))
    wanted, on = trade(days), small_market()
    terms = terms_of(wanted, on, PAST)
    (strip,) = variance_references(terms, on)
    lognormal = value(wanted, on, PAST)
    assert strip.kind is ReferenceKind.EXACT
    assert strip.value == pytest.approx(lognormal.headline.value, abs=1e-11 + strip.error)
    assert 0.0 < strip.allowance < 2e-4


def test_weighted_single_variances_add_up_by_strips_but_the_basket_has_none():
    days = weekdays(1, 90)
    on = small_market()
    pair = Aggregate.weighted_sum((0.5, 0.5))
    singles = trade(days, PAIR, pair, (0.7, 0.3, 0.0))
    (strip,) = variance_references(terms_of(singles, on), on)
    assert strip.value == pytest.approx(value(singles, on).headline.value, abs=1e-10 + strip.error)
    dispersion = trade(days, PAIR, pair, (0.5, 0.5, -1.0))
    assert variance_references(terms_of(dispersion, on), on) == ()
    assert value(dispersion, on) is None


def test_a_volatility_swap_is_worth_less_than_the_root_of_the_variance():
    days = weekdays(1, 120)
    nothing = Profile(ProfileKind.FORWARD, 0.0)
    volatility = value(trade(days, payout=nothing, as_volatility=True)).headline.value
    variance = value(trade(days, payout=nothing)).headline.value
    terms = terms_of(trade(days), small_market())
    discount, steps = terms.discount(days[-1] + timedelta(days=2)), terms.covariances[1:, 0, 0]
    convexity = math.sqrt(variance / discount) - volatility / discount
    # Of second order: an eighth of the variance of the sum, relative to its square; a square has variance 2 v^2.
    spread = float(np.sum(steps**2)) / float(np.sum(steps)) ** 2
    assert convexity == pytest.approx(0.25 * spread * math.sqrt(variance / discount), rel=0.02)


def test_paths_lead_under_a_smile_and_where_cash_is_known():
    days = weekdays(1, 120)
    assert value(trade(days), smiled=True) is None
    on = small_market()
    paying = replace(on.underlyings["ARVENNE"], dividends=Dividends(0.0, (), (CashDividend(days[40], 2.0),)))
    rich = replace(on, underlyings={**on.underlyings, "ARVENNE": paying})
    wanted = trade(days)
    terms = terms_of(wanted, rich)
    assert terms.has_floors
    assert value(wanted, rich) is None
    assert variance_references(terms, rich) == ()
