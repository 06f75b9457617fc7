"""Sums of legs over the paths of one law, randomisation by randomisation."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.engines.contract_walk.noise import Noise
from pricer.engines.stepwise.law import StepwiseLaw
from pricer.engines.stepwise.tables import LegTables
from pricer.simulation.stepwise_cells import FactorCells

Array = NDArray[np.float64]

#: Increments held at a time: 8 MB an array.
_CELLS = 2**20


class StepwiseSampler:
    """Sums that only ever grow: of ``points`` of each of R randomisations, slopes of the first ``slope_points``.

    ``values`` (R, n_legs) discounted; ``stopped`` (R, n_stops, 2) above and below; ``forwards`` (R, n) of X on the last
    date; ``slopes`` (R, n) of the value by the logarithm of each X at the start.
    """

    def __init__(self, law: StepwiseLaw, noise: Noise, tables: LegTables, cells: int) -> None:
        self._law, self._noise, self._tables = law, noise, tables
        n, r = len(law.starts), noise.randomisations
        self.cells = cells
        self.points = self.slope_points = 0
        self.values = np.zeros((r, len(tables.legs)))
        self.stopped = np.zeros((r, tables.n_stops, 2))
        self.slopes, self.forwards = np.zeros((r, n)), np.zeros((r, n))

    def with_cells(self, cells: int) -> StepwiseSampler:
        """The same paths, none drawn yet, integrated on ``cells`` of the factor."""
        return StepwiseSampler(self._law, self._noise, self._tables, cells)

    def extend(self, points: int, *, with_slopes: bool = False) -> None:
        """Up to ``points``, a power of two, of every randomisation; slopes only if there are those of all before."""
        from pricer.simulation.kernels.stepwise_sums import accumulate_steps  # compiles: only when needed

        law, tables, cells = self._law, self._tables, FactorCells.of(self.cells)
        room = max(_CELLS // max(self._noise.cells, 1), 16)
        block = min(1 << (room.bit_length() - 1), points, self.points or points)
        with_slopes = with_slopes and self.slope_points == self.points
        directions = law.directions
        for r in range(self._noise.randomisations):
            for first in range(self.points, points, block):
                noise, conversion = law.noise(self._noise.walks(r, first, block))
                accumulate_steps(
                    noise, conversion, with_slopes, cells.nodes, cells.weights, cells.mass, cells.moment, directions,
                    law.starts, law.start_slopes, law.moves, law.levels, law.lowest, law.per_node, law.dates,
                    law.scales, law.floors, tables.readings, tables.references, tables.weights, tables.legs,
                    tables.first_sums, tables.events, tables.numbers, tables.payments, tables.profiles,
                    self.values[r], self.stopped[r], self.slopes[r], self.forwards[r],
                )  # fmt: skip
        self.points = points
        if with_slopes:
            self.slope_points = points
