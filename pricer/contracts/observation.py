"""Days on which a contract looks at the market, and the amounts that follow from it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date
from itertools import pairwise


@dataclass(frozen=True, slots=True)
class Observation:
    """An observation on ``day``; what it decides is paid on ``payment_date``."""

    day: date
    payment_date: date

    def __post_init__(self) -> None:
        if self.payment_date < self.day:
            raise ValueError(f"the payment date {self.payment_date} lies before its observation on {self.day}")


@dataclass(frozen=True, slots=True)
class Payment:
    """A known ``amount`` per unit of the contract, in the trade's currency; ``reason`` names what it is paid for."""

    payment_date: date
    amount: float
    reason: str
    observed_on: date


def in_order(dates: Iterable[date], owner: str) -> tuple[date, ...]:
    """The dates as a tuple; raises ValueError unless they increase strictly."""
    found = tuple(dates)
    for first, second in pairwise(found):
        if second <= first:
            raise ValueError(f"{owner}: dates must increase strictly; {second} follows {first}")
    return found
