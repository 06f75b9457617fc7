"""How trades on a path are put down: terms, underlyings, and the rows of all tables that belong to them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from datetime import date
from typing import Any

from saltmarsh.facts import UNDERLYINGS, Row
from saltmarsh.history import fixing

#: Underlyings with their weights, or without any for a ranked aggregate.
Legs = Mapping[str, float] | Iterable[str]


@dataclass(frozen=True, slots=True)
class Booked:
    """One trade: its row of the table trades, those of its constituents, and further rows by table."""

    terms: Row
    legs: tuple[Row, ...]
    rows: tuple[tuple[str, Row], ...] = field(default=())

    def having(self, table: str, **row: Any) -> Booked:
        """With a row of another table."""
        return replace(self, rows=(*self.rows, (table, row)))

    def rule(self, purpose: str, frequency: str, **row: Any) -> Booked:
        """With a series of dates by rule."""
        return self.having("schedule_rules", purpose=purpose, frequency=frequency, **row)

    def dates(self, purpose: str, *days: date, **row: Any) -> Booked:
        """With dates written out."""
        booked = self
        for day in days:
            booked = booked.having("schedules", purpose=purpose, date=day, **row)
        return booked

    def barrier(self, kind: str, direction: str, level: float | None, monitoring: str, **row: Any) -> Booked:
        """With a barrier; its level is None where the underlyings have their own."""
        return self.having("barriers", kind=kind, direction=direction, level=level, monitoring=monitoring, **row)

    def own_levels(self, column: str, *values: float) -> Booked:
        """With a number of each underlying's own: a barrier level, or the weight of its variance."""
        legs = (leg | {column: value} for leg, value in zip(self.legs, values, strict=True))
        return replace(self, legs=tuple(legs))


def option(
    strategy: str, profile: str, notional: float, legs: Legs, traded: date, expiry: date, **terms: Any
) -> Booked:  # fmt: skip
    """On performance from the fixings of the trade date; ``are_set`` False: dates of purpose reference set them."""
    own = {"product": "option", "profile": profile, "underlying_level": "performance", "notional": notional}
    return _booked(own, strategy, legs, traded, expiry, **terms)


def price_option(
    strategy: str, profile: str, quantity: float, legs: Legs, traded: date, expiry: date, **terms: Any
) -> Booked:  # fmt: skip
    """On prices."""
    own = {"product": "option", "profile": profile, "underlying_level": "price", "quantity": quantity}
    return _booked(own, strategy, legs, traded, expiry, are_set=False, **terms)


def note(strategy: str, notional: float, legs: Legs, traded: date, expiry: date, **terms: Any) -> Booked:
    """A note that the desk has sold."""
    own = {"product": "note", "direction": "short", "underlying_level": "performance", "notional": notional}
    return _booked(own, strategy, legs, traded, expiry, settlement_lag_days=3, **terms)


def _booked(
    own: Row, strategy: str, legs: Legs, traded: date, expiry: date, *, are_set: bool = True, **terms: Any
) -> Booked:
    weights: dict[str, float | None] = dict(legs) if isinstance(legs, Mapping) else dict.fromkeys(legs)
    home = UNDERLYINGS[next(iter(weights))][0]
    currency, conversion = terms.get("currency", home), terms.get("conversion")
    calendars = dict.fromkeys(UNDERLYINGS[name][2] for name in weights)
    row = {
        **own,
        "strategy": strategy,
        "aggregate": "weighted sum" if None not in weights.values() else "worst of",
        "currency": currency,
        "trade_date": traded,
        "expiry_date": expiry,
        "observation_calendar": "+".join([*calendars, *(["TARGET"] if conversion == "composite" else [])]),
        **terms,
    }
    pays_in = currency if conversion == "composite" else None
    return Booked(
        row,
        tuple(
            {
                "underlying": name,
                "weight": weight,
                "initial_fixing": _first(name, traded, pays_in) if are_set else None,
            }
            for name, weight in weights.items()
        ),
    )


def _first(name: str, day: date, currency: str | None) -> float:
    """The fixing of that day, for a composite at the day's exchange rate."""
    level, own = fixing(name, day), UNDERLYINGS[name][0]
    if currency is None or currency == own:
        return level
    return round(level * _to_euros(own, day) / _to_euros(currency, day), 4)


def _to_euros(currency: str, day: date) -> float:
    return 1.0 if currency == "EUR" else 1.0 / fixing(f"EUR{currency}", day)
