"""The right to end a contract early: the holder's exercise, the issuer's call."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.feature import Appointment, Ending, Payout, Step
from pricer.contracts.known_level import paid_at
from pricer.contracts.observation import Observation, Payment, in_order


class ExercisedBy(StrEnum):
    """Who has the right."""

    HOLDER = "holder"
    ISSUER = "issuer"


class ExerciseStyle(StrEnum):
    """When it may be used."""

    BERMUDAN = "bermudan"  # on each of the dates
    AMERICAN = "american"  # on any business day from the first to the last


@dataclass(frozen=True, slots=True)
class Exercise:
    """Whoever has the right may take ``payout`` on the day's aggregate, or a fixed amount, and the contract ends.

    ``rights`` are the dates on which it may be used, ``amounts`` (one per right) what an issuer
    redeems at; exactly one of ``payout`` and ``amounts`` is given. No fixing tells that
    a right was used: ``exercised`` is the desk's record of it.
    """

    by: ExercisedBy
    rights: tuple[Observation, ...]
    aggregate: Aggregate
    payout: Payout | None = None
    amounts: tuple[float, ...] | None = None
    style: ExerciseStyle = ExerciseStyle.BERMUDAN
    exercised: Observation | None = None

    def __post_init__(self) -> None:
        days = in_order((right.day for right in self.rights), self.label)
        if not days:
            raise ValueError("a right to exercise needs at least one date")
        if (self.payout is None) is (self.amounts is None):
            raise ValueError("a right to exercise pays either a payout or amounts")
        if self.amounts is not None and len(self.amounts) != len(days):
            raise ValueError(f"{len(days)} rights to exercise have {len(self.amounts)} amounts")
        if self.exercised is not None:
            used, bermudan = self.exercised.day, self.style is ExerciseStyle.BERMUDAN
            if used not in days if bermudan else not days[0] <= used <= days[-1]:
                raise ValueError(f"an exercise on {used}, when there was no right to it")

    @property
    def label(self) -> str:
        return "issuer-callable" if self.by is ExercisedBy.ISSUER else str(self.style)

    @property
    def dates(self) -> tuple[date, ...]:
        return () if self.exercised is None else (self.exercised.day,)

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return self.aggregate(levels)[..., np.newaxis]

    def start(self) -> None:
        return None

    def needs(self, state: None, day: date) -> bool:
        return self.payout is not None

    def observe(self, state: None, day: date, measured: Sequence[float]) -> Step[None]:
        assert self.exercised is not None  # it has no dates otherwise
        amount = self._amount(day) if self.payout is None else paid_at(self.payout, measured[0])
        return Step(None, (Payment(self.exercised.payment_date, amount, "exercise", day),), Ending.EXERCISED)

    def payout_instead(self, state: None) -> Payout | None:
        return None

    def appointments(self, state: None) -> Iterator[Appointment]:
        what = f"{self.by} may exercise"
        for right in self.rights:
            amount = None if self.amounts is None else self._amount(right.day)
            yield Appointment(right.day, what, right.payment_date, amount)

    def _amount(self, day: date) -> float:
        """The fixed amount of the last right up to ``day``."""
        assert self.amounts is not None
        return next(a for r, a in zip(reversed(self.rights), reversed(self.amounts), strict=True) if r.day <= day)
