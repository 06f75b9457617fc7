"""Whether a trade's dates fit the market's: its valuation date, the ends of its data, its business days."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from pricer.contracts.book import Trade
from pricer.contracts.feature import Appointment
from pricer.contracts.life_cycle import AsOf
from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.calendars import LAST_DAY, is_business_day, roll
from pricer.market.curves import DiscountCurve
from pricer.market.findings import Locate, error, warning, words
from pricer.market.market import Market
from pricer.market.observation_care import observation_care
from pricer.market.trade_names import names_of


def date_coverage(trade: Trade, state: AsOf | None, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the trade's dates to come; ``state`` is None for a European option still to expire.

    Of what expired before the valuation date they are its past's: see :mod:`pricer.market.past_coverage`.
    """
    if (latest := _latest(trade, state)) > LAST_DAY:
        yield _too_late(latest, place)
        return
    yield from _order(trade, market, place)
    if trade.contract.expiry_date < market.valuation_date:
        return
    yield from _curves_reach(trade, state, market, place)
    yield from _volatilities_reach(trade, market, place)
    yield from _holidays(trade, market, place)
    if state is not None:
        yield from _observations(trade, state, market, place)


def known_date_coverage(trade: Trade, state: AsOf, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the days on which known amounts and a premium are paid, once nothing else is left of the trade."""
    paid = max((payment.payment_date for payment in state.to_be_paid), default=market.valuation_date)
    due = market.valuation_date if trade.premium is None else trade.premium.payment_date
    if max(paid, due) > LAST_DAY:
        yield _too_late(max(paid, due), place)
        return
    curve = market.curves.get((trade.currency, trade.collateral))
    yield from _beyond_curve(curve, "payment date", paid, place("payment_date") or place("expiry_date"))
    yield from _beyond_curve(curve, "premium date", due, place("premium_date"))


def _latest(trade: Trade, state: AsOf | None) -> date:
    dates = [trade.contract.expiry_date, _last_payment(trade, state)]
    return max(dates if trade.premium is None else [*dates, trade.premium.payment_date])


def _last_payment(trade: Trade, state: AsOf | None) -> date:
    """The last day on which anything may be paid."""
    coming = [] if state is None else [item.payment_date for feature in _coming(state) for item in feature]
    known = [] if state is None else [payment.payment_date for payment in state.to_be_paid]
    return max([trade.contract.payment_date, *known, *(day for day in coming if day is not None)])


def _coming(state: AsOf) -> Iterator[tuple[Appointment, ...]]:
    """What each feature may still do."""
    return (state.appointments(i) for i in range(len(state.contract.features)))


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


def _curves_reach(trade: Trade, state: AsOf | None, market: Market, place: Locate) -> Iterator[Issue]:
    expiry, payment, premium = trade.contract.expiry_date, _last_payment(trade, state), trade.premium
    own, standard = (trade.currency, trade.collateral), (trade.currency, "")
    needed = [(own, "payment date", payment, place("payment_date") or place("expiry_date"))]
    if premium is not None:
        needed.append((own, "premium date", premium.payment_date, place("premium_date")))
    if own != standard:  # forwards come from the standard curve
        needed.append((standard, "expiry date", expiry, place("expiry_date")))
    reached = [(market.curves.get(key), label, day, here) for key, label, day, here in needed]
    for name in names_of(trade):
        if name in market.repo:
            reached.append((market.repo[name].mid, "expiry date", expiry, place("expiry_date")))
    for curve, label, day, here in reached:
        yield from _beyond_curve(curve, label, day, here)


def _beyond_curve(curve: DiscountCurve | None, label: str, day: date, here: Place | None) -> Iterator[Issue]:
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
    for name in names_of(trade):
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


def _observations(trade: Trade, state: AsOf, market: Market, place: Locate) -> Iterator[Issue]:
    """Observations to come on ex dates and holidays; the expiry's own are told apart."""
    features = [[item.day for item in coming] for coming in _coming(state)]
    series = [state.setting_dates_to_come, state.statistic_dates_to_come, *features]
    expiry = trade.contract.expiry_date
    days = [[day for day in dict.fromkeys(own) if day != expiry] for own in series]
    known = [market.underlyings[name] for name in trade.contract.underlyings if name in market.underlyings]
    columns = ("schedule", "barrier", "exercise", "expiry_date")
    yield from observation_care(days, known, next(filter(None, map(place, columns)), None))
