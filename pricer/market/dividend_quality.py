"""Gates over dividends: implausible sums, amounts the price cannot pay, ex dates after the curve's end."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import timedelta

from pricer.core.issues import Issue
from pricer.market.findings import Locate, error, percent, warning
from pricer.market.market import Market, MissingMarketDataError
from pricer.market.underlying import Underlying

#: Proportional dividends of one underlying that add up to more than this within a year are reported.
PLAUSIBLE_DIVIDENDS = 0.50
#: Cash dividends to come that are worth more than this share of the spot are reported.
PLAUSIBLE_FLOOR = 0.50


def dividend_gates(market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of every underlying's dividends; ``place`` gives the cell of "dividends:UNDERLYING", or None."""
    for underlying in market.underlyings.values():
        yield from _proportional(underlying, place)
        yield from _cash(underlying, market, place)


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
    share, last = sum(price.cash_values) / underlying.spot, price.cash_dates[-1]
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
