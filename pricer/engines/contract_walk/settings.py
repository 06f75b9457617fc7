"""How many paths are walked, and how finely time is cut."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class WalkSettings:
    """Settings of walks.

    ``randomisations`` of Sobol points, each starting with ``initial_points``, are doubled until the standard error is
    within tolerance, or a value that leads has taken ``maximum_cells`` normals. A reference beside another engine's
    value takes about ``reference_cells`` at once: some tenths of a second. ``steps`` of a path under local volatility,
    besides those that dates and quoted expiries ask for; contracts with more than ``dense`` dates get one step a date.
    """

    randomisations: int = 16
    initial_points: int = 128
    maximum_cells: float = 1.2e8
    reference_cells: float = 1.2e7
    steps: int = 48
    dense: int = 100

    def __post_init__(self) -> None:
        if self.randomisations < 8:
            raise ValueError(f"at least 8 randomisations are needed to tell an error; got {self.randomisations}")
        if self.initial_points < 16 or self.initial_points & (self.initial_points - 1):
            raise ValueError(f"initial points must be a power of two from 16; got {self.initial_points}")
