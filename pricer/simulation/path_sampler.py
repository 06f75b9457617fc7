"""Runs the path kernel on a plan and keeps the sums of every randomisation."""

from __future__ import annotations

from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from pricer.simulation.kernels import fused, path_memory, path_payments, path_sums, path_tables, payoffs, readings
from pricer.simulation.kernels.elementary import NORMAL_VARIANCE_EXCESS
from pricer.simulation.kernels.vectors import BLOCK, aligned
from pricer.simulation.path_plan import PathPlan

Array = NDArray[np.float64]


class Order(StrEnum):
    """What the first, the best, coordinates of a point decide."""

    BRIDGE = "bridge"  # where a path ends, then where it is half-way
    TIME = "time"  # the first step, then the second


class Method(StrEnum):
    """What is done with a point."""

    SMOOTH = "smooth"
    SMOOTH_WITH_RATIOS = "smooth with ratios"
    PLAIN = "plain"  # nothing is integrated: the yardstick


_MODES = {
    Method.SMOOTH: path_sums.SMOOTH,
    Method.SMOOTH_WITH_RATIOS: path_sums.SMOOTH_WITH_RATIOS,
    Method.PLAIN: path_sums.PLAIN,
}


def in_time_order(times: Array) -> Bridge:
    """The moves of a path made one after the other."""
    m = len(times)
    before = np.arange(m) - 1
    none = np.where(before < 0, 0.0, 1.0)
    return Bridge(np.arange(m), before, before, none, np.zeros(m), np.sqrt(np.diff(times, prepend=0.0)))


class PathSampler:
    """Sums over paths, one row per randomisation, that only ever grow.

    One instance belongs to one thread; the work itself holds no interpreter lock.
    """

    def __init__(
        self,
        plan: PathPlan,
        stream: np.random.Generator,
        randomisations: int,
        *,
        method: Method = Method.SMOOTH_WITH_RATIOS,
        order: Order = Order.BRIDGE,
        independent: bool = False,
    ) -> None:
        """``stream`` scrambles all randomisations; ``independent`` points are pseudo-random, not Sobol's."""
        n_steps, n, n_rest = plan.steps.rest.shape
        n_factors, padded = n_rest + 1, max(-(-n_rest // 4) * 4, 4)
        total = n_steps * n_factors
        sizes = plan.steps.sizes
        if order is Order.BRIDGE:
            bridge = Bridge.over(np.concatenate([[0.0], plan.steps.times]))
            coordinates = bridge.coordinates(sizes).ravel()
        else:
            bridge = in_time_order(plan.steps.times)
            rank = np.argsort(np.argsort(-sizes, kind="stable"))
            coordinates = (n_factors * np.arange(n_steps)[:, None] + rank).ravel()
        directions = np.ascontiguousarray(sobol.extended_directions(total)[coordinates])
        words = sobol.random_words(stream, randomisations, total)
        columns = np.empty((randomisations, total, sobol.BITS), dtype=np.uint32)
        fused.scramble(directions, words, columns)
        unit = 1.0 / np.sqrt(1.0 + NORMAL_VARIANCE_EXCESS)
        loadings = np.zeros((n_steps, n, padded), dtype=np.float32)
        loadings[:, :, :n_rest] = plan.steps.rest * (unit / np.log(2.0))
        n_shares = int(plan.readings[:, readings.FIRST_SHARE].max(initial=0)) + n
        drives = aligned((padded, BLOCK), np.float32)
        drives[:] = 0.0
        n_events = len(plan.events)
        n_remembering = n_events if np.any(plan.events[:, path_tables.COUPON] >= 0) else 1
        self._mode = _MODES[method]
        self._seed = np.uint64(int(stream.integers(1, 2**63)) if independent else 0)
        self._arguments = (
            columns,
            words,
            bridge.at,
            bridge.left,
            bridge.right,
            np.stack([bridge.before, bridge.after, bridge.deviation], axis=1).astype(np.float32),
            loadings,
            plan.steps.common * unit,
            plan.steps.projection,
            plan.steps.shifts,
            plan.readings,
            plan.starts.astype(np.float32),
            plan.weights.astype(np.float32),
            plan.degrees,
            plan.legs,
            plan.first_sums,
            plan.events,
            plan.event_numbers,
            plan.payments,
            plan.profiles,
            np.empty((total, BLOCK), dtype=np.uint32),
            aligned((total, BLOCK), np.float32),
            drives,
            aligned((n_steps * n, BLOCK), np.float32),
            aligned((n_steps, BLOCK), np.float64),
            aligned((n, BLOCK), np.float32),
            aligned((n, BLOCK), np.float32),
            aligned((payoffs.PATH_ROWS * BLOCK,), np.float64),
            aligned((len(plan.readings), BLOCK), np.float64),
            aligned((n_shares, BLOCK), np.float32),
            aligned((path_payments.N_ROWS * BLOCK,), np.float64),
            aligned((n_events, path_tables.N_KEPT, BLOCK), np.float32),
            aligned((n_events, path_tables.N_HELD, BLOCK), np.float64),
            aligned((n_remembering, path_memory.N_MEMORY, BLOCK), np.float64),
            aligned((len(plan.readings), BLOCK), np.float64),
        )
        self.points = 0
        self.sums = np.zeros((randomisations, plan.n_sums))

    def extend(self, points: int) -> Array:
        """Go on to ``points`` per randomisation, a power of two or a multiple of 256; the sums so far."""
        if self.points % BLOCK:  # a short first block cannot be continued, and costs nothing to repeat
            self.points = 0
            self.sums[:] = 0.0
        path_sums.accumulate_paths(self.points, points, self._mode, self._seed, *self._arguments, self.sums)
        self.points = points
        return self.sums
