"""Gates over dividends: implausible sums, amounts the price cannot pay, ex dates after the curve's end."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date, timedelta

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.findings import Locate, error, percent, warning
from pricer.market.market import Market, MissingMarketDataError
from pricer.market.underlying import Underlying
from pricer.market.volatility_quality import weekend_warning

#: Proportional dividends of one underlying that add up to more than this within a year are reported.
PLAUSIBLE_DIVIDENDS = 0.50
#: Cash dividends of one underlying worth more than this share of its spot within a year are reported.
PLAUSIBLE_CASH_DIVIDENDS = 0.15
#: A cash dividend this many times as large as any other of its underlying is reported.
OUTLYING_FACTOR = 5.0
#: A dividend yield above this beside discrete dividends looks like the same dividends counted twice; a smaller one may
#: be the fee of lending the share.
YIELD_BESIDE_DIVIDENDS = 0.005
#: Cash dividends to come that are worth more than this share of the spot are reported.
PLAUSIBLE_FLOOR = 0.50


def dividend_gates(underlying: Underlying, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of an underlying's dividends.

    ``place`` gives the cell of "dividends:UNDERLYING:EX_DATE", "dividends:UNDERLYING" or "dividend_yield:UNDERLYING",
    or None.
    """
    yield from _proportional(underlying, place)
    yield from _cash(underlying, market, place)
    yield from _outlier(underlying, market, place)
    yield from _counted_twice(underlying, market, place)


def weekend_ex_dates(underlying: Underlying, market: Market, place: Locate) -> Iterator[Issue]:
    """One warning where ex dates to come lie on Saturdays or Sundays."""
    name = underlying.underlying_id
    weekends = [day for day in _ex_dates(underlying, market.valuation_date) if day.weekday() >= 5]
    if weekends:
        yield weekend_warning(_place(name, weekends[0], place), f"dividends of {name} on", weekends)


def _place(name: str, day: date, place: Locate) -> Place | None:
    return place(f"dividends:{name}:{day}") or place(f"dividends:{name}")


def _ex_dates(underlying: Underlying, today: date) -> list[date]:
    """Ex dates of discrete dividends to come, in order."""
    dividends = underlying.dividends
    days = {*(d.ex_date for d in dividends.cash), *(d.ex_date for d in dividends.proportional)}
    return sorted(day for day in days if day > today)


def _outlier(underlying: Underlying, market: Market, place: Locate) -> Iterator[Issue]:
    name = underlying.underlying_id
    coming = sorted((d for d in underlying.dividends.cash if d.ex_date > market.valuation_date), key=lambda d: d.amount)
    if len(coming) < 2:
        return
    other, largest = coming[-2:]
    if largest.amount >= OUTLYING_FACTOR * other.amount > 0.0:
        yield warning(
            _place(name, largest.ex_date, place),
            "outlying-dividend",
            f"a cash dividend of {largest.amount:g} of {name} on {largest.ex_date}, "
            f"{largest.amount / other.amount:.1f} times the next largest, {other.amount:g}",
            f"cash dividends below {OUTLYING_FACTOR:g} times the others of the underlying",
            "Check the decimal point, unless it is a special dividend. It is used as given.",
        )


def _counted_twice(underlying: Underlying, market: Market, place: Locate) -> Iterator[Issue]:
    name, rate = underlying.underlying_id, underlying.dividends.yield_rate
    coming = _ex_dates(underlying, market.valuation_date)
    if coming and rate > YIELD_BESIDE_DIVIDENDS:
        yield warning(
            place(f"dividend_yield:{name}"),
            "yield-and-dividends",
            f"a dividend yield of {percent(rate, 2)} of {name} beside discrete dividends from {coming[0]} on",
            "dividends given as a yield or one by one",
            "Forwards fall by both. Clear the yield if it stands for the same dividends; enter a lending fee in the "
            "table repo.",
        )


def _proportional(underlying: Underlying, place: Locate) -> Iterator[Issue]:
    payments = sorted((d.ex_date, d.fraction) for d in underlying.dividends.proportional)
    sums = [
        (sum(fraction for day, fraction in payments if first <= day < first + timedelta(days=365)), first)
        for first, _ in payments
    ]
    if sums and max(sums)[0] > PLAUSIBLE_DIVIDENDS:
        total, first = max(sums)
        yield warning(
            place(f"dividends:{underlying.underlying_id}"),
            "implausible-dividends",
            f"proportional dividends of {underlying.underlying_id} that add up to {percent(total, 1)} of its price "
            f"in the year from {first}",
            f"at most {percent(PLAUSIBLE_DIVIDENDS)} in a year",
            "Check the unit: a dividend of 2 % of the price is entered as 0.02. The dividends are used as given.",
        )


def _cash(underlying: Underlying, market: Market, place: Locate) -> Iterator[Issue]:
    if not underlying.dividends.cash:
        return
    name = underlying.underlying_id
    here = place(f"dividends:{name}")
    try:
        price = market.affine_price(name)
    except MissingMarketDataError:
        return  # without a curve nothing is priced on it, and the trades say so
    except ValueError as refused:
        yield error(here, "cash-dividends-exceed-spot", str(refused), *EXCEEDED)
        return
    if not price.has_floor:
        return
    spot = underlying.spot
    share, last = sum(price.cash_values) / spot, price.cash_dates[-1]
    paid = list(zip(price.cash_dates, price.cash_values, strict=True))
    within, first = max(
        (sum(value for day, value in paid if first <= day < first + timedelta(days=365)), first) for first, _ in paid
    )
    if PLAUSIBLE_CASH_DIVIDENDS * spot < within and share <= PLAUSIBLE_FLOOR:
        yield warning(
            _place(name, first, place),
            "implausible-dividends",
            f"cash dividends of {name} in the year from {first} worth {percent(within / spot, 1)} of its spot",
            f"at most {percent(PLAUSIBLE_CASH_DIVIDENDS)} in a year",
            "Check the unit: cash dividends are amounts in the underlying's currency. They are used as given.",
        )
    if share > PLAUSIBLE_FLOOR:
        yield warning(
            here,
            "heavy-cash-dividends",
            f"cash dividends of {name} to {last} worth {percent(share, 1)} of its spot",
            f"cash dividends worth at most {percent(PLAUSIBLE_FLOOR)} of the spot",
            "Check the unit (cash dividends are amounts in the underlying's currency), or enter the later ones as "
            "proportional. They are used as given: that share of the price moves with nothing but rates.",
        )
    if price.growth_curve.is_extrapolated(last):
        yield warning(
            here,
            "dividends-beyond-curve",
            f"a cash dividend of {name} on {last}, after {price.growth_curve.last_date}, where curve "
            f"{price.growth_curve.curve_id} ends",
            "a curve that reaches the last cash dividend",
            "The curve's last forward rate is used beyond its end; add a later point to the curve.",
        )


#: What is expected of cash dividends, and how to mend them, where they exceed the spot.
EXCEEDED = (
    "cash dividends worth less than the spot",
    "Correct the amounts or the spot, or enter dividends far ahead as proportional ones.",
)
