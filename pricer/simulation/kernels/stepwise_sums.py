"""Sums of legs over paths in steps, and their derivatives by where each asset starts."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels.stepwise_cells import moment_between, share_between
from pricer.simulation.kernels.stepwise_legs import value_leg
from pricer.simulation.kernels.stepwise_levels import add_slopes, read, spread, walk_nodes
from pricer.simulation.kernels.vectors import OPTIONS

#: Paths that walk together.
_TOGETHER = 8


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
    together = min(_TOGETHER, n_paths)
    lanes = together * n_nodes
    rows, places = np.empty((4, lanes)), np.empty(lanes, dtype=np.int32)
    on_lanes, slopes_on = np.empty((n, n_dates, lanes)), np.empty((n, n_dates, lanes))
    at_nodes = on_lanes.reshape((n, n_dates, together, n_nodes))
    slopes_at = slopes_on.reshape((n, n_dates, together, n_nodes))
    price_slopes = np.empty((n_dates, n, n_nodes))
    prices, of_prices = np.empty((n_dates, n, n_ends)), np.empty((n_dates, n, n_ends))
    found, adjoints = np.empty((len(table), n_ends)), np.empty((len(table), n_ends))
    ranks, ends = np.empty((n, n_ends)), np.empty(n_ends)
    alive, cuts, running = np.empty((cells, 2)), np.empty((cells, 2), dtype=np.int64), np.empty(n_ends)
    missed = np.empty((len(events), cells, 2))
    missed_cuts = np.empty((len(events), cells, 2), dtype=np.int64)
    pending, of_running = np.empty(cells, dtype=np.int64), np.empty((len(events), n_ends))
    for path in range(n_paths):
        row = path if len(conversion) > 1 else 0
        place = path % together
        if place == 0:
            last = min(path + together, n_paths)
            for i in range(n):
                walk_nodes(
                    noise[path:last, i], directions[:, i], nodes, starts[i], start_slopes[i], moves[i], levels[i],
                    lowest[i], per_node[i], dates, rows, places, on_lanes[i], slopes_on[i],
                )  # fmt: skip
        for i in range(n):
            for k in range(n_dates):
                rate = conversion[row, k, i]
                spread(at_nodes[i, k, place], scales[k, i] * rate, floors[k, i] * rate, cell_weights, prices[k, i])
                if with_slopes:
                    for j in range(n_nodes):
                        price_slopes[k, i, j] = scales[k, i] * rate * slopes_at[i, k, place, j]
            spread(at_nodes[i, n_dates - 1, place], 1.0, 0.0, cell_weights, ends)
            for c in range(cells):
                share, first = share_between(mass, c, 0.0, 1.0), moment_between(moment, c, 0.0, 1.0)
                forwards[i] += ends[c] * share + (ends[c + 1] - ends[c]) * first
        read(table, references, weights, prices, ranks, found)
        if with_slopes:
            adjoints[:] = 0.0
        for leg in range(n_legs):
            values[leg] += value_leg(
                legs[leg, 0], legs[leg, 1], first_sums[leg], events, numbers, payments, profiles, found, mass, moment,
                alive, cuts, running, missed, missed_cuts, stopped, pending, with_slopes, adjoints, of_running,
            )  # fmt: skip
        if with_slopes:
            add_slopes(
                table, references, weights, prices, found, adjoints, cell_weights, price_slopes, of_prices, slopes
            )


#: Kernels import from each other: a change in any of their files renews those on disk.
_SOURCES = digest_of(Path(__file__).parent.glob("*.py"))

accumulate_steps: Callable[..., None] = njit(cache=True, **OPTIONS)(stored_under(_SOURCES, _accumulate))
