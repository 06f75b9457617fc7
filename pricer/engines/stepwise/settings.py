"""How much the stepwise engine draws, and how finely it cuts."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class StepwiseSettings:
    """Settings of legs on paths in steps.

    ``randomisations`` of Sobol points, each starting with ``initial_points``, are doubled until errors are within
    tolerance, up to ``maximum_points`` or ``maximum_work``: paths times dates times assets, as much again for deltas
    and twice that with a control variate. ``steps`` of a path under local volatility besides those that dates and
    quoted expiries ask for; contracts with more than ``dense`` dates get one step a date. ``cells`` of the factor
    that is integrated, an even number; they are doubled where half of them would do badly.
    """

    randomisations: int = 16
    initial_points: int = 64
    maximum_points: int = 2**14
    maximum_work: float = 3e7
    steps: int = 32
    dense: int = 100
    cells: int = 24

    def __post_init__(self) -> None:
        if self.randomisations < 8:
            raise ValueError(f"at least 8 randomisations are needed to tell an error; got {self.randomisations}")
        for points in (self.initial_points, self.maximum_points):
            if points < 16 or points & (points - 1):
                raise ValueError(f"points must be a power of two from 16; got {points}")
        if self.cells < 4 or self.cells % 2:
            raise ValueError(f"cells must be an even number from 4; got {self.cells}")
