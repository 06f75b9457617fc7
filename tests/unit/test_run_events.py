"""The days ahead of a book: what happens, how much it is to the desk, and what has to be entered."""

import math
from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.book import Book, Premium
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.market.correlation import checked
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.fx import FxRates
from pricer.run.events import events
from tests.unit.markets import CORRELATION, IDS, TODAY, basket, small_market, volatility

NAMES = ("ARVENNE", "BELCOR")
TOMORROW, FRIDAY, NEXT = date(2026, 12, 1), date(2026, 12, 4), date(2026, 12, 7)
PAID, LATER = date(2026, 12, 9), date(2027, 1, 4)


def note(
    *, names=NAMES, day=NEXT, paid=PAID, level=1.05, position=-2e6, conversion=None, references=(100.0, 50.0), past=()
):
    """Called on ``day`` above ``level``; a coupon on ``past`` days has been decided."""
    worst = Aggregate.worst_of(len(names))
    autocall = Autocall((Observation(day, paid),), Trigger(Direction.UP, worst), (level,), (1.08,))
    coupons = [Coupons(tuple(Coupon(each, FRIDAY, 0.02) for each in past))] if past else []
    expiry = Observation(date(2027, 12, 17), date(2027, 12, 21))
    contract = Contract(
        Levels(names, references, conversion=conversion), ExpiryLevel(expiry.day, worst), Redemption(put_strike=1.0),
        expiry, (*coupons, autocall),
    )  # fmt: skip
    return replace(basket(*names), contract=contract, position=position, counterparty="Guldmar Bank")


def found(*trades, market=None, days=7):
    return events(Book("b", trades), market or small_market(), days)


def test_a_trigger_of_the_week_is_told_with_its_distance_and_what_the_desk_pays():
    (row,) = found(note())
    assert (row.trade_id, row.day, row.last_day, row.what, row.payment_date) == ("T1", NEXT, None, "call", PAID)
    assert (row.amount, row.currency, row.counterparty, row.underlyings) == (-2.16e6, "EUR", "Guldmar Bank", NAMES)
    assert (row.level, row.current, row.met_today) == (1.05, 1.0, False)
    assert row.distance == pytest.approx(0.05)
    # Both levels are 1: the second counts as the worst, with 30 % until June.
    assert row.deviations == pytest.approx(math.log(1.05) / (0.30 * math.sqrt(7 / 365)), rel=1e-12)


def test_a_basket_moves_by_the_markets_correlation():
    half = Aggregate.weighted_sum((0.5, 0.5))
    trade = note()
    autocall = replace(trade.contract.features[0], trigger=Trigger(Direction.UP, half))
    trade = replace(trade, contract=replace(trade.contract, features=(autocall,)))
    (row,) = found(trade)
    deviation = math.sqrt(0.25 * (0.04 + 0.09 + 2 * 0.5 * 0.06))  # correlation 0.5
    assert row.deviations == pytest.approx(math.log(1.05) / (deviation * math.sqrt(7 / 365)), rel=1e-12)


def test_a_composite_moves_with_its_exchange_rate():
    ids, grown = (*IDS, "EURUSD"), np.eye(4)
    grown[:3, :3] = CORRELATION
    grown[2, 3] = grown[3, 2] = 0.25
    market = small_market(
        correlation=checked(ids, grown)[0], fx=FxRates.from_pairs({"EURUSD": 1.10}, {"EURUSD": volatility(0.08)})
    )
    trade = note(names=("CADMUS",), conversion=Conversion.COMPOSITE, references=(70.0,))
    (row,) = found(trade, market=market)
    deviation = math.sqrt(0.25**2 + 0.08**2 - 2 * 0.25 * 0.25 * 0.08)
    assert row.current == pytest.approx(80.0 / 1.10 / 70.0)
    assert row.deviations == pytest.approx(math.log(1.05 / row.current) / (deviation * math.sqrt(7 / 365)), rel=1e-12)


def test_what_is_known_of_a_price_does_not_move():
    market = small_market()
    paying = replace(
        market.underlyings["ARVENNE"], dividends=Dividends(0.0, (), (CashDividend(date(2027, 3, 2), 20.0),))
    )
    market = replace(market, underlyings={**market.underlyings, "ARVENNE": paying})
    (plain,) = found(note(names=("ARVENNE",), references=(100.0,)))
    (row,) = found(note(names=("ARVENNE",), references=(100.0,)), market=market)
    # About 20 of 100 are riskless until March; the volatility quoted for June is of a price that has no such part left.
    assert row.deviations == pytest.approx(plain.deviations / 0.8, rel=0.005)


def test_without_volatilities_the_distance_is_told_alone():
    (row,) = found(note(), market=small_market(correlation=None))
    assert (row.distance, row.deviations) == (pytest.approx(0.05), None)


def test_a_european_expiry_is_an_event_with_its_strike():
    (row,) = found(basket(*NAMES, expiry=FRIDAY, payment=PAID))
    assert (row.day, row.what, row.amount, row.payment_date) == (FRIDAY, "expiry", None, PAID)
    assert (row.level, row.current, row.met_today) == (60.0, 75.0, True)
    assert row.distance == pytest.approx(-0.2)
    assert row.deviations < -5.0


def test_payments_of_the_week_are_signed_for_the_desk():
    day = date(2026, 11, 24)
    market = small_market(fixings=Fixings.from_rows([Fixing("ARVENNE", day, 90.0), Fixing("BELCOR", day, 60.0)]))
    expired = basket(*NAMES, expiry=day, payment=TOMORROW)
    rows = found(note(past=(day,), day=LATER, paid=LATER), expired, market=market)
    assert [(row.day, row.what, row.amount) for row in rows] == [
        (TOMORROW, "payment: final payoff", pytest.approx(100.0 * 15.0)),
        (FRIDAY, "payment: coupon", pytest.approx(-2e6 * 0.02)),
    ]


@pytest.mark.parametrize(("position", "amount"), [(100.0, -1000.0), (-100.0, 1000.0)])
def test_a_premium_to_be_paid_is_an_event(position, amount):
    trade = replace(basket("ARVENNE", premium=FRIDAY), position=position)
    (row,) = found(trade)
    assert (row.day, row.what, row.amount, row.payment_date) == (FRIDAY, "payment: premium", amount, FRIDAY)
    assert found(replace(trade, premium=Premium(1000.0, TODAY))) == ()


def test_todays_fixing_is_due_until_it_is_entered():
    trade = note(day=TODAY, level=0.9)
    rows = found(trade)
    assert [(row.day, row.what, row.amount) for row in rows] == [(TODAY, "fixing due: ARVENNE, BELCOR", None)]
    assert found(trade, days=9)[1].what == "payment: call"
    fixings = Fixings.from_rows([Fixing("ARVENNE", TODAY, 100.0), Fixing("BELCOR", TODAY, 50.0)])
    assert found(trade, market=small_market(fixings=fixings)) == ()


def test_a_past_day_without_its_fixing_stands_first():
    rows = found(note(), replace(note(day=date(2026, 11, 26)), trade_id="T0"), basket("ARVENNE", expiry=TODAY))
    assert [(row.trade_id, row.day, row.what) for row in rows] == [
        ("T0", date(2026, 11, 26), "fixing missing"),
        ("T1", TODAY, "fixing due: ARVENNE"),
        ("T1", NEXT, "call"),
    ]


def test_beyond_the_days_asked_for_nothing_is_told():
    assert found(note(), basket(*NAMES, expiry=NEXT), days=6) == ()
    assert len(found(note(), basket(*NAMES, expiry=NEXT), days=7)) == 2


def test_what_the_market_cannot_price_has_its_events_all_the_same():
    (row,) = found(basket("NOBODY", expiry=FRIDAY))
    assert (row.what, row.current, row.deviations) == ("expiry", None, None)
    assert found(basket("ARVENNE", expiry=NEXT, payment=FRIDAY)) == ()  # paid before it expires
