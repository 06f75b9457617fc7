"""Whether a trade's dates fit the market's: its valuation date, the ends of its data, its business days."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.market.calendars import LAST_DAY, is_business_day, roll
from pricer.market.findings import Locate, error, warning, words
from pricer.market.market import Market


def date_coverage(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the trade's dates; those of an option that has expired end with that."""
    if trade.contract.expiry_date < market.valuation_date:
        yield _expired(trade, market, place)
        return
    if (latest := _latest(trade)) > LAST_DAY:
        yield _too_late(latest, place)
        return
    yield from _order(trade, market, place)
    yield from _curves_reach(trade, market, place)
    yield from _volatilities_reach(trade, market, place)
    yield from _holidays(trade, market, place)


def _expired(trade: Trade, market: Market, place: Locate) -> Issue:
    expiry, payment, today = trade.contract.expiry_date, trade.contract.payment_date, market.valuation_date
    mend = (
        f"It was paid on {payment}: remove the settled trade from the book."
        if payment < today
        else f"Its known amount is still to be paid, on {payment}: carry it outside this book; options after expiry "
        "are not valued by this version."
    )
    found = f"expiry date {expiry}, before the valuation date {today}"
    return error(place("expiry_date"), "expired", found, "an expiry on or after the valuation date", mend)


def _latest(trade: Trade) -> date:
    dates = [trade.contract.expiry_date, trade.contract.payment_date]
    return max(dates if trade.premium is None else [*dates, trade.premium.payment_date])


def _too_late(latest: date, place: Locate) -> Issue:
    return error(
        place("expiry_date"),
        "date-too-late",
        f"date {latest} among the trade's expiry, payment and premium dates",
        f"dates up to {LAST_DAY}, where the calendars end",
        "Correct the year.",
    )


def _order(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    expiry, payment = trade.contract.expiry_date, trade.contract.payment_date
    if expiry == market.valuation_date:
        yield warning(
            place("expiry_date"),
            "expires-today",
            f"expiry date {expiry}, which is the valuation date",
            "an expiry after the valuation date",
            "The option is valued at the market's spots; compare them with the official fixings.",
        )
    if trade.trade_date is not None and trade.trade_date > market.valuation_date:
        yield warning(
            place("trade_date"),
            "traded-later",
            f"trade date {trade.trade_date}, after the valuation date {market.valuation_date}",
            "a trade date on or before the valuation date",
            "The trade is valued all the same; correct the date, or take the trade out until it is done.",
        )
    if trade.premium is not None and trade.premium.payment_date > payment:
        yield warning(
            place("premium_date"),
            "premium-after-payment",
            f"premium date {trade.premium.payment_date}, after the payment date {payment}",
            "a premium paid before the payoff, or with it",
            "The premium is discounted from its date as given; correct the date if it is wrong.",
        )
    if payment < expiry:
        yield error(
            place("payment_date") or place("expiry_date"),
            "payment-before-expiry",
            f"payment date {payment}, before the expiry date {expiry}",
            "a payment on or after expiry",
            "Correct the payment date or the expiry date.",
        )


def _curves_reach(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    expiry, payment, premium = trade.contract.expiry_date, trade.contract.payment_date, trade.premium
    own, standard = (trade.currency, trade.collateral), (trade.currency, "")
    needed = [(own, "payment date", payment, place("payment_date") or place("expiry_date"))]
    if premium is not None:
        needed.append((own, "premium date", premium.payment_date, place("premium_date")))
    if own != standard:  # forwards come from the standard curve
        needed.append((standard, "expiry date", expiry, place("expiry_date")))
    reached = [(market.curves.get(key), label, day, here) for key, label, day, here in needed]
    for name in dict.fromkeys(trade.contract.underlyings):
        if name in market.repo:
            reached.append((market.repo[name].mid, "expiry date", expiry, place("expiry_date")))
    for curve, label, day, here in reached:
        if curve is not None and curve.is_extrapolated(day):
            yield warning(
                here,
                "beyond-curve",
                f"{label} {day}, after {curve.last_date}, where curve {curve.curve_id} ends",
                f"a curve that reaches the {label}",
                "The curve's last forward rate is used beyond its end; add a later point to the curve.",
            )


def _volatilities_reach(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    expiry = trade.contract.expiry_date
    for name in dict.fromkeys(trade.contract.underlyings):
        last = _last_volatility(name, market)
        if last is not None and expiry > last:
            smile = "The smile keeps its shape in standard deviations beyond that date"
            kept = smile if name in market.surfaces else "The last volatility is used beyond its date"
            yield warning(
                place("expiry_date"),
                "beyond-volatility",
                f'expiry date {expiry}, after {last}, the last volatility date of underlying "{name}"',
                "volatilities that reach the expiry date",
                f"{kept}; add a later expiry to the volatilities table.",
            )


def _last_volatility(name: str, market: Market) -> date | None:
    if name in market.surfaces:
        return market.surfaces[name].surface.last_date
    underlying = market.underlyings.get(name)
    return underlying.volatility.last_date if underlying is not None and underlying.volatility is not None else None


def _holidays(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    expiry = trade.contract.expiry_date
    closed: dict[str, list[str]] = {}
    for name in dict.fromkeys(trade.contract.underlyings):
        underlying = market.underlyings.get(name)
        if underlying is not None and not is_business_day(underlying.calendar, expiry):
            closed.setdefault(underlying.calendar, []).append(name)
    for calendar, names in closed.items():
        before, after = (roll(calendar, expiry, convention) for convention in ("preceding", "following"))
        yield warning(
            place("expiry_date"),
            "expiry-on-holiday",
            f"expiry date {expiry}, not a business day of calendar {calendar} ({words(names)})",
            "a business day of every underlying",
            f"The option is valued to {expiry}; if its terms move the date, enter {before} or {after}.",
        )
