"""Sums of legs over paths in steps, and their derivatives by where each asset starts."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels.stepwise_legs import value_leg
from pricer.simulation.kernels.stepwise_levels import read, spread, walk_nodes
from pricer.simulation.kernels.vectors import OPTIONS

#: The start of an asset's log-level is moved by this much to differentiate legs, by first-order changes of prices:
#: legs are smooth in these, kinks in the slope aside.
BUMP = 1e-4


def _accumulate(
    noise: Any, conversion: Any, with_slopes: bool, nodes: Any, cell_weights: Any, mass: Any, moment: Any,
    directions: Any, starts: Any, start_slopes: Any, moves: Any, levels: Any, lowest: Any, per_node: Any, dates: Any,
    scales: Any, floors: Any, table: Any, references: Any, weights: Any, legs: Any, first_sums: Any, events: Any,
    numbers: Any, payments: Any, profiles: Any, values: Any, stopped: Any, slopes: Any, forwards: Any,
) -> None:  # fmt: skip
    """Add paths of ``noise`` (n_paths, n, n_steps) to ``values`` (n_legs,), ``stopped`` (n_stops, 2), ``slopes`` (n,).

    ``conversion`` (n_paths or 1, n_dates, n) multiplies prices ``scales X + floors``, (n_dates, n) each. ``directions``
    (n_steps, n) of the factor. ``legs`` (n_legs, 2) first and last event. ``forwards`` (n,) : X on the last date is
    added. Tables: ``stepwise_levels`` and ``stepwise_legs``.
    """
    n_paths, n = noise.shape[:2]
    n_dates, n_nodes, n_ends, n_legs = len(scales), len(nodes), cell_weights.shape[1], len(legs)
    cells = n_ends - 1
    rows, places = np.empty((3, n_nodes)), np.empty(n_nodes, dtype=np.int32)
    at_nodes, slopes_at = np.empty((n_dates, n_nodes)), np.empty((n_dates, n_nodes))
    prices, bumped = np.empty((n_dates, n, n_ends)), np.empty((n_dates, n, n_ends))
    kept = np.empty((n_dates, n_ends))
    found = np.empty((len(table), n_ends))
    ranks = np.empty((n, n_ends))
    alive, running = np.empty((cells, 2)), np.empty(n_ends)
    missed = np.empty((len(events), cells, 2))
    unused = np.empty_like(stopped)
    ends = np.empty(n_ends)
    for path in range(n_paths):
        row = path if len(conversion) > 1 else 0
        for i in range(n):
            walk_nodes(
                noise[path, i], directions[:, i], nodes, starts[i], start_slopes[i], moves[i], levels[i], lowest[i],
                per_node[i], dates, rows, places, at_nodes, slopes_at,
            )  # fmt: skip
            for k in range(n_dates):
                rate = conversion[row, k, i]
                spread(at_nodes[k], scales[k, i] * rate, floors[k, i] * rate, cell_weights, prices[k, i])
                if with_slopes:
                    for j in range(n_nodes):
                        slopes_at[k, j] = at_nodes[k, j] + BUMP * slopes_at[k, j]
                    spread(slopes_at[k], scales[k, i] * rate, floors[k, i] * rate, cell_weights, bumped[k, i])
            spread(at_nodes[n_dates - 1], 1.0, 0.0, cell_weights, ends)
            for c in range(cells):
                forwards[i] += ends[c] * (mass[c, 0] + mass[c, 1] + mass[c, 2] + mass[c, 3])
                forwards[i] += (ends[c + 1] - ends[c]) * (moment[c, 0] + moment[c, 1] + moment[c, 2] + moment[c, 3])
        read(table, references, weights, prices, ranks, found)
        base = 0.0
        for leg in range(n_legs):
            value = value_leg(
                legs[leg, 0], legs[leg, 1], first_sums[leg], events, numbers, payments, profiles, found, mass, moment,
                alive, running, missed, stopped,
            )  # fmt: skip
            values[leg] += value
            base += value
        if not with_slopes:
            continue
        for i in range(n):
            kept[:] = prices[:, i]
            prices[:, i] = bumped[:, i]
            read(table, references, weights, prices, ranks, found)
            prices[:, i] = kept
            moved = 0.0
            for leg in range(n_legs):
                moved += value_leg(
                    legs[leg, 0], legs[leg, 1], first_sums[leg], events, numbers, payments, profiles, found, mass,
                    moment, alive, running, missed, unused,
                )  # fmt: skip
            slopes[i] += (moved - base) / BUMP


#: Kernels import from each other: a change in any of their files renews those on disk.
_SOURCES = digest_of(Path(__file__).parent.glob("*.py"))

accumulate_steps: Callable[..., None] = njit(cache=True, **OPTIONS)(stored_under(_SOURCES, _accumulate))
