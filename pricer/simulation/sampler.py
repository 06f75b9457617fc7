"""Runs the fused kernel on a design and keeps the sums of every randomisation."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.simulation import sobol
from pricer.simulation.design import Design
from pricer.simulation.kernels import fused, payoffs
from pricer.simulation.kernels.elementary import NORMAL_VARIANCE_EXCESS
from pricer.simulation.kernels.vectors import BLOCK, aligned

KINDS = {
    AggregateKind.WEIGHTED_SUM: payoffs.SUM,
    AggregateKind.BEST_OF: payoffs.BEST,
    AggregateKind.WORST_OF: payoffs.WORST,
    AggregateKind.KTH_BEST: payoffs.RANKED,
    AggregateKind.RANK_WEIGHTED: payoffs.RANKED,
}


class Sampler:
    """Sums over scrambled Sobol paths, one row per randomisation, that only ever grow.

    Points are in single precision up to the relative levels, everything after in double:
    rounding moves a value by a few 1e-8 of the level, far below any sampling error of use.
    One instance belongs to one thread; the work itself holds no interpreter lock.
    """

    def __init__(
        self, design: Design, stream: np.random.Generator, randomisations: int, *, with_ratios: bool = True
    ) -> None:
        """``stream`` scrambles all randomisations; ``with_ratios`` also sums sensitivities."""
        n, dims = design.loadings.shape
        padded = -(-dims // 4) * 4
        self._design = design
        self._with_ratios = with_ratios
        self._words = sobol.random_words(stream, randomisations, dims)
        self._columns = np.empty((randomisations, dims, sobol.BITS), dtype=np.uint32)
        fused.scramble(sobol.directions(dims), self._words, self._columns)
        self._loadings = aligned((n, padded), np.float32)
        self._loadings[:, :dims] = design.loadings / np.sqrt(1.0 + NORMAL_VARIANCE_EXCESS)
        self._loadings[:, dims:] = 0.0
        self._widths = rows_in_use(self._loadings)
        f = design.payoff
        self._profile = np.array([f.intercept, f.slope, *f.knots, *f.bends, *f.jumps], dtype=float)
        self._rank_weights = design.rank_weights.astype(np.float32)
        self._table = np.empty((dims, BLOCK), dtype=np.uint32)
        self._normals = aligned((max(n, padded), BLOCK), np.float32)
        self._normals[:] = 0.0
        self._logs = aligned((n, BLOCK), np.float32)
        self._levels = aligned((n, BLOCK), np.float32)
        self._paths = aligned((payoffs.PATH_ROWS * BLOCK,), np.float64)
        self.points = 0
        self.sums = np.zeros((randomisations, fused.HEAD_SUMS + fused.LEG_SUMS * n))

    def extend(self, points: int) -> NDArray[np.float64]:
        """Go on to ``points`` per randomisation; the sums so far (randomisations, 3 + 5 n).

        ``points`` is a power of two, or a multiple of 256.
        """
        design = self._design
        if self.points % BLOCK:  # a short first block cannot be continued, and costs nothing to repeat
            self.points = 0
            self.sums[:] = 0.0
        fused.accumulate(
            self.points,
            points,
            self._columns,
            self._words,
            self._loadings,
            self._widths,
            design.scales,
            self._rank_weights,
            KINDS[design.kind],
            design.n_common,
            design.factor_deviation,
            self._profile,
            self._with_ratios,
            self._table,
            self._normals,
            self._logs,
            self._levels,
            self._paths,
            self.sums,
        )
        self.points = points
        return self.sums


def rows_in_use(loadings: NDArray[np.float32]) -> NDArray[np.int64]:
    """Columns in use up to each row: multiples of 4, at least 4, never decreasing, (n,)."""
    used = loadings != 0.0
    last = np.where(used.any(axis=1), loadings.shape[1] - np.argmax(used[:, ::-1], axis=1), 1)
    return np.maximum.accumulate(-(-last // 4) * 4).astype(np.int64)
