"""Tables of the path kernel: what is read when, and what every leg does with it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.common_steps import CommonSteps

Array = NDArray[np.float64]
Integers = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class PathPlan:
    """Columns of the tables: ``kernels.readings`` and ``kernels.path_legs``.

    ``starts`` : (n_readings, n) base-2 logarithm of what each asset contributes at zero noise;
    ``weights`` : (n_readings, n). ``profiles`` : flat, amounts discounted.
    """

    steps: CommonSteps
    readings: Integers  # (n_readings, 4)
    starts: Array
    weights: Array
    degrees: Array  # (n_readings,)
    legs: Integers  # (n_legs, 3), parents before their branches
    first_sums: Array  # (n_legs,)
    events: Integers  # (n_events, 6)
    event_numbers: Array  # (n_events, 6)
    payments: Integers  # (n_payments, 5)
    profiles: Array

    @property
    def n_assets(self) -> int:
        return int(self.starts.shape[1])

    @property
    def n_sums(self) -> int:
        """Sums per randomisation: legs, stops above and below per event, log-deltas per reading."""
        return len(self.legs) + 2 * len(self.events) + self.starts.size
