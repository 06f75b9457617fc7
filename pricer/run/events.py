"""What the book's trades do in the days ahead: observations, decisions, expiries and payments."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from datetime import date, timedelta

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Book, Trade
from pricer.contracts.events import Event
from pricer.contracts.events import events as contract_events
from pricer.contracts.life_cycle import AsOf, Status
from pricer.contracts.option import EuropeanOption
from pricer.market.market import Market
from pricer.market.standing import missing_days, price_record, standing
from pricer.run.outcome import EventRow

#: Volatilities by underlying and their correlations.
_Law = tuple[Mapping[str, float], NDArray[np.float64]]


def events(book: Book, market: Market, days: int = 7) -> tuple[EventRow, ...]:
    """The events of the ``days`` after the valuation date of all trades that could be read, priced or not, by day.

    Before them stand the days up to the valuation date whose fixings are missing: today's, which spots stand in
    for, and those without which a trade cannot be priced. Payments dated on the valuation date count as made.
    Standard deviations are those of lognormal levels at the at-the-forward volatilities until the last of the days.
    """
    until = market.valuation_date + timedelta(days=days)
    found = [row for trade in book.trades for row in _events(trade, market, until)]
    return tuple(sorted(found, key=lambda row: (row.day, row.trade_id)))


def _events(trade: Trade, market: Market, until: date) -> Iterator[EventRow]:
    yield from _premium(trade, market.valuation_date, until)
    if _is_quiet(trade, market.valuation_date, until):
        return
    state = standing(trade, market)
    yield from _fixings_due(trade, state, market)
    if state.status is Status.UNDETERMINED:  # what comes of it nobody knows yet
        return
    law = _law(trade, market, until) if state.status is Status.LIVE else None
    for event in contract_events(state, until, *(law or ())):
        yield _row(trade, event)


def _is_quiet(trade: Trade, today: date, until: date) -> bool:
    """Whether a European option has nothing to tell: a large book is full of them."""
    contract = trade.contract
    if not isinstance(contract, EuropeanOption):
        return False
    faulty = contract.payment_date < contract.expiry_date
    settled = contract.payment_date <= today and contract.expiry_date < today
    return faulty or settled or contract.expiry_date > until


def _premium(trade: Trade, today: date, until: date) -> Iterator[EventRow]:
    premium = trade.premium
    if premium is not None and today < premium.payment_date <= until:
        amount = -math.copysign(1.0, trade.position) * premium.amount
        yield _row(trade, Event(premium.payment_date, "payment: premium", None, premium.payment_date), amount)


def _fixings_due(trade: Trade, state: AsOf, market: Market) -> Iterator[EventRow]:
    """The days, today or before, whose fixings have to be entered."""
    if state.assumed:
        yield _row(trade, Event(state.valuation_date, f"fixing due: {', '.join(state.assumed)}"))
    if any(issue.code == "missing-fixing" for issue in state.issues):
        missing = missing_days(price_record(trade, market))
        if missing:
            last = missing[-1] if len(missing) > 1 else None
            yield _row(trade, Event(missing[0], "fixing missing", last_day=last))


def _row(trade: Trade, event: Event, amount: float | None = None) -> EventRow:
    return EventRow(
        trade_id=trade.trade_id,
        product=trade.contract.product,
        day=event.day,
        last_day=event.last_day,
        what=event.what,
        amount=amount if event.amount is None else trade.position * event.amount,
        payment_date=event.payment_date,
        level=event.level,
        current=event.current,
        distance=event.distance,
        deviations=event.deviations,
        met_today=event.met_today,
        underlyings=trade.contract.underlyings,
        counterparty=trade.counterparty,
        currency=trade.currency,
    )


def _law(trade: Trade, market: Market, until: date) -> _Law | None:
    """Annual volatilities and correlations of the prices as the trade sees them; None where the market lacks any."""
    contract = trade.contract
    names = tuple(dict.fromkeys(contract.underlyings))
    if len(names) < len(contract.underlyings):
        return None
    try:
        law = market.joint_lognormal(
            names, until, payment_currency=trade.currency, conversion=contract.conversion, pure=True
        )
        scales, floors = market.affine_levels(names, until)
    except (LookupError, ValueError):  # told with the trade
        return None
    # Only the part of a price above the cash dividends to come is random.
    deviations = np.sqrt(np.diag(law.covariance))
    spread = np.outer(deviations, deviations)
    correlations = np.divide(law.covariance, spread, out=np.eye(len(names)), where=spread > 0.0)
    years = (until - market.valuation_date).days / 365.0
    sizes = deviations * scales / (scales + floors) / math.sqrt(years)
    return dict(zip(names, sizes.tolist(), strict=True)), correlations
