"""What a run may be told; everything has a default."""

from __future__ import annotations

import os
from dataclasses import dataclass, field

from pricer.engines.monte_carlo import SamplingSettings


def available_cores() -> int:
    """Cores this process may use, at least 1."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@dataclass(frozen=True, slots=True)
class Settings:
    """Settings of a run.

    ``seed`` : whole number >= 0; the same seed gives the same numbers to the last bit.
    ``precision_bp`` : target standard error of each value, in basis points of notional.
    ``delta_precision_bp`` : the same for each cash delta (delta times spot), of the trade's
    notional or of its gross cash delta, whichever is larger.
    ``workers`` : threads that price trades side by side; no number depends on it.
    """

    seed: int = 20_000
    precision_bp: float = 1.0
    delta_precision_bp: float = 1.0
    workers: int = field(default_factory=available_cores)
    sampling: SamplingSettings = field(default_factory=SamplingSettings)

    def __post_init__(self) -> None:
        if self.seed < 0:
            raise ValueError(f"the seed must be a whole number from 0; got {self.seed}")
        if not self.precision_bp > 0.0 or not self.delta_precision_bp > 0.0:
            raise ValueError(f"the precision must be above 0 basis points; got {self.precision_bp}")
        if self.workers < 1:
            raise ValueError(f"the number of workers must be at least 1; got {self.workers}")
