"""What paths are paid: amounts with the date of payment, discounted and added up."""

from __future__ import annotations

from collections.abc import Callable
from datetime import date
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


class Ledger(Protocol):
    """Told of every payment as the walk decides it."""

    def pay(self, observed_on: date, payment_date: date, amounts: Array | float, where: Mask) -> None:
        """``amounts`` (n_paths,), or one for all, are paid on the paths of ``where`` (n_paths,)."""


class DiscountedSum:
    """The value tonight of all that each path is paid, ``values`` (n_paths,)."""

    def __init__(self, paths: int, discount: Callable[[date], float]) -> None:
        self.values: Array = np.zeros(paths)
        self._discount = discount

    def pay(self, observed_on: date, payment_date: date, amounts: Array | float, where: Mask) -> None:
        self.values += self._discount(payment_date) * np.where(where, amounts, 0.0)
