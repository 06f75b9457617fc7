"""What every feature and every statistic of a contract can do: be observed day by day, and remember.

A feature never knows what day it is. It starts with a state, is shown the levels of its dates in
order, and answers with the next state, the payments that this decides, and whether the
contract ends there. The same few methods age a live trade and value a simulated path.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum
from typing import Generic, Protocol, TypeVar

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.observation import Payment
from pricer.contracts.profile import PiecewiseLinear
from pricer.contracts.trigger import Trigger

S = TypeVar("S")


class Payout(Protocol):
    """Something paid as a function of one level: a profile, a redemption."""

    def payoff(self) -> PiecewiseLinear: ...


class Ending(StrEnum):
    """How a contract ended."""

    CALLED = "called"
    KNOCKED_OUT = "knocked out"
    EXERCISED = "exercised"
    EXPIRED = "expired"


@dataclass(frozen=True, slots=True)
class Step(Generic[S]):
    """What one observation led to."""

    state: S
    payments: tuple[Payment, ...] = ()
    ending: Ending | None = None


@dataclass(frozen=True, slots=True)
class Appointment:
    """Something that may happen on ``day``: ``trigger`` meets ``level`` (None: it needs no trigger)."""

    day: date
    what: str
    payment_date: date | None = None
    amount: float | None = None
    trigger: Trigger | None = None
    level: float | None = None


class Observed(Protocol[S]):
    """Shown the levels of its dates, in order."""

    @property
    def label(self) -> str:
        """Its name in a product's name; may be empty."""

    @property
    def dates(self) -> tuple[date, ...]:
        """The days on which it is observed, increasing."""

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        """The numbers it looks at, of levels (..., n_assets): an array (..., k)."""

    def start(self) -> S:
        """The state before the first date."""

    def needs(self, state: S, day: date) -> bool:
        """Whether the levels of ``day``, one of its dates, still matter."""


class Statistic(Observed[S], Protocol[S]):
    """Makes one level of the whole path, on which the payout is paid."""

    def observe(self, state: S, day: date, measured: Sequence[float]) -> S:
        """The state after ``day``, whose numbers are ``measured`` (k)."""

    def value(self, state: S) -> float:
        """The level after the last date."""


class Feature(Observed[S], Protocol[S]):
    """Pays, ends the contract, or changes what is paid at its end."""

    def observe(self, state: S, day: date, measured: Sequence[float]) -> Step[S]:
        """What ``day`` leads to; ``measured`` (k) means nothing where :meth:`needs` said no."""

    def payout_instead(self, state: S) -> Payout | None:
        """What is paid at expiry in place of the contract's payout; None to leave it as it is."""

    def appointments(self, state: S) -> Iterator[Appointment]:
        """All that may still happen in this state; rights that passed unused may be among it."""
