"""The automatic early redemption of a note."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.feature import Appointment, Ending, Payout, Step
from pricer.contracts.observation import Observation, Payment, in_order
from pricer.contracts.trigger import Trigger


@dataclass(frozen=True, slots=True)
class Autocall:
    """On the first date whose ``trigger`` meets its level the contract ends and pays that date's amount.

    ``levels`` (a step-down is levels that fall) and ``amounts`` have one number per observation.
    Coupons of the same day are paid besides, if they are observed first. Its only state is the
    number of observations passed.
    """

    schedule: tuple[Observation, ...]
    trigger: Trigger
    levels: tuple[float, ...]
    amounts: tuple[float, ...]

    def __post_init__(self) -> None:
        in_order(self.dates, self.label)
        if not len(self.schedule) == len(self.levels) == len(self.amounts):
            raise ValueError(
                f"an autocall needs one level and one amount per observation; got {len(self.schedule)} observations, "
                f"{len(self.levels)} levels and {len(self.amounts)} amounts"
            )

    @property
    def label(self) -> str:
        return "autocallable"

    @property
    def dates(self) -> tuple[date, ...]:
        return tuple(observation.day for observation in self.schedule)

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return self.trigger.measure(levels)

    def start(self) -> int:
        return 0

    def needs(self, state: int, day: date) -> bool:
        return True

    def observe(self, state: int, day: date, measured: Sequence[float]) -> Step[int]:
        if not self.trigger.met(measured[0], self.levels[state]):
            return Step(state + 1)
        payment = Payment(self.schedule[state].payment_date, self.amounts[state], "call", day)
        return Step(state + 1, (payment,), Ending.CALLED)

    def payout_instead(self, state: int) -> Payout | None:
        return None

    def appointments(self, state: int) -> Iterator[Appointment]:
        for observation, level, amount in list(zip(self.schedule, self.levels, self.amounts, strict=True))[state:]:
            yield Appointment(observation.day, "call", observation.payment_date, amount, self.trigger, level)
