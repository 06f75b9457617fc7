"""What a model says of one unit of a trade, and what it was asked for."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.engines.problem import Reference
from pricer.engines.sampled_value import Sampled
from pricer.engines.selector import Headline

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Asked:
    """Targets for standard errors, per unit and discounted, and what keys the draws; see ``monte_carlo.sample``.

    An infinite ``delta_tolerance`` says that nobody asks for sensitivities.
    """

    group: str
    seed: int
    value_tolerance: float
    delta_tolerance: float
    delta_fraction: float

    @property
    def wants_ratios(self) -> bool:
        return math.isfinite(self.delta_tolerance)


@dataclass(frozen=True, slots=True)
class UnitRatios:
    """Sensitivities of one unit to each underlying's price, (n,) each, with standard errors.

    ``deltas`` in shares, ``gammas`` in shares per unit of currency of the price (None where not known), ``vegas`` per
    volatility point; NaN where a number is not known. ``method`` says how they were obtained.
    """

    deltas: Array
    delta_errors: Array
    gammas: Array | None
    gamma_errors: Array | None
    vegas: Array
    vega_errors: Array
    method: str


@dataclass(frozen=True, slots=True)
class Chance:
    """The probability, under the pricing measure, that something happens on ``day``, with its standard error."""

    day: date
    what: str
    probability: float
    standard_error: float


@dataclass(frozen=True, slots=True)
class Life:
    """How long a contract is expected to live and how it may end, under the pricing measure.

    ``expected_life`` in years from tonight until it is called, knocked out with a rebate, exercised or expires.
    ``ends`` : the chance of each of these by day, expiry left out. ``knocked`` : the chance that a knock-in or a
    knock-out barrier is hit before the contract ends, None without one; 1 where it has been.
    """

    expected_life: float
    expected_life_error: float
    ends: tuple[Chance, ...] = ()
    knocked: float | None = None
    knocked_error: float = 0.0


@dataclass(frozen=True, slots=True)
class ModelValue:
    """One unit under one model: the number that leads, the sample, and every reference beside it.

    Values hold all that is still to be paid, decided amounts included. ``time_steps`` of a path, 0 where levels are
    drawn at the contract's dates alone. ``is_sound`` : whether the discretisation in time is known to be fine enough
    and forwards came back. ``life`` is None for European options.
    """

    headline: Headline
    sample: Sampled
    references: tuple[Reference, ...]
    ratios: UnitRatios
    time_steps: int = 0
    is_sound: bool = True
    life: Life | None = None
