"""Where a trade stands by the fixings, spots and exchange rates of a market."""

from dataclasses import replace
from datetime import date

import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.contract import Contract
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import Status
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.market.fx import FxRates
from pricer.market.standing import missing_days, price_record, standing
from tests.unit.markets import TODAY, basket, small_market

EXPIRED, PAID = date(2026, 11, 23), date(2026, 12, 1)


def fixed(*rows):
    return Fixings.from_rows(Fixing(name, date.fromisoformat(day), level) for name, day, level in rows)


def converted(*names, currency="EUR", days=(EXPIRED, date(2026, 12, 17)), conversion=Conversion.COMPOSITE):
    """The mean of two days of the basket's price, converted."""
    n = len(names)
    statistic = Average(tuple(days), Aggregate.weighted_sum((1.0 / n,) * n))
    contract = Contract(
        Levels.of_prices(names, conversion), statistic, Profile(ProfileKind.CALL, 60.0), Observation(days[-1], days[-1])
    )
    return replace(basket(*names, currency=currency), contract=contract)


def test_an_expired_option_is_worth_its_payoff_at_its_fixings():
    trade = basket("ARVENNE", "BELCOR", expiry=EXPIRED, payment=PAID)
    state = standing(
        trade, small_market(fixings=fixed(("ARVENNE", "2026-11-23", 99.0), ("BELCOR", "2026-11-23", 51.0)))
    )
    assert state.status is Status.TO_BE_PAID
    assert [(p.payment_date, p.amount) for p in state.to_be_paid] == [(PAID, pytest.approx(75.0 - 60.0))]


def test_an_expired_option_that_was_paid_is_settled():
    trade = basket("ARVENNE", expiry=EXPIRED)
    assert standing(trade, small_market(fixings=fixed(("ARVENNE", "2026-11-23", 99.0)))).status is Status.SETTLED


def test_an_option_to_come_is_live_whatever_the_fixings():
    state = standing(basket("ARVENNE", "BELCOR"), small_market())
    assert (state.status, state.levels, state.issues) == (Status.LIVE, (100.0, 50.0), ())


def test_a_composite_is_converted_at_the_days_own_rate_and_tonights_spot():
    fixings = fixed(("CADMUS", "2026-11-23", 77.0), ("EURUSD", "2026-11-23", 1.25))
    state = standing(converted("CADMUS"), small_market(fixings=fixings))
    assert state.progress.statistic.sums == (pytest.approx(77.0 / 1.25),)
    assert state.levels == (pytest.approx(80.0 / 1.10),)


def test_a_pair_without_fixings_of_its_own_is_multiplied_from_those_on_the_way():
    # As official reference rates are given: all against one currency.
    fx = FxRates.from_pairs({"EURUSD": 1.10, "EURGBP": 0.85})
    fixings = fixed(
        ("CADMUS", "2026-11-23", 77.0), ("EURUSD", "2026-11-23", 1.25), ("EURGBP", "2026-11-23", 0.80),
        ("EURGBP", "2026-11-20", 0.81),
    )  # fmt: skip
    market = small_market(fixings=fixings, fx=fx)
    trade = converted("CADMUS", currency="GBP")
    assert standing(trade, market).progress.statistic.sums == (pytest.approx(77.0 / 1.25 * 0.80),)
    direct = small_market(fixings=fixed(("CADMUS", "2026-11-23", 77.0), ("GBPUSD", "2026-11-23", 1.60)), fx=fx)
    assert standing(trade, direct).progress.statistic.sums == (pytest.approx(77.0 / 1.60),)


def test_a_quanto_needs_no_rates():
    state = standing(
        converted("CADMUS", conversion=Conversion.QUANTO), small_market(fixings=fixed(("CADMUS", "2026-11-23", 77.0)))
    )
    assert (state.status, state.progress.statistic.sums) == (Status.LIVE, (77.0,))


def test_a_missing_rate_is_missing_by_its_own_name():
    market = small_market(fixings=fixed(("CADMUS", "2026-11-23", 77.0)))
    state = standing(converted("CADMUS"), market)
    assert (state.status, [issue.found for issue in state.issues]) == (
        Status.UNDETERMINED,
        ["no fixing of USDEUR on 2026-11-23"],
    )
    assert missing_days(price_record(converted("CADMUS"), market)) == (EXPIRED,)


def test_an_underlying_that_the_market_does_not_know_has_no_price_tonight():
    assert standing(basket("NOBODY"), small_market()).levels is None
    assert standing(basket("NOBODY", expiry=TODAY), small_market()).status is Status.UNDETERMINED
