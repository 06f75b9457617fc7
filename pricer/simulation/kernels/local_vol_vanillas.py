"""Vanilla options on one asset's local-volatility paths at many expiries, one block of paths at a time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numba import njit, types

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels.elementary import exp2_double, normal_density, normal_distribution
from pricer.simulation.kernels.levels import low_table, normals_of_block
from pricer.simulation.kernels.local_vol import evolve, increments, look_up, walk
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, SUM_OPTIONS, use_wide_vectors

_F = np.float32
_LOG2_E = 1.4426950408889634
_LN2 = 0.6931471805599453
_FAR = 37.0
_WIDEST = 60.0

# Planes (1, BLOCK) of single-precision scratch.
_STATE, _NOISE, _LOG, _DEVIATION, _SLOPE, _AFTER_NOISE, _WALK = range(7)
PLANES = 7


@njit(**SUM_OPTIONS)
def _add_options(logs: Any, deviations: Any, log_strikes: Any, rows: Any, sums: Any, place: int) -> None:
    """Sums over paths of the level before the last step and of each option, from ``place`` on.

    A level is lognormal of mean ``exp(logs)`` and deviation ``deviations`` (BLOCK,): Black (1976) path by path.
    Options are puts for log-strikes below 0, else calls. ``rows`` : (5, BLOCK) double, scratch.
    """
    use_wide_vectors()
    total = 0.0
    for p in range(BLOCK):
        log = min(max(float(logs[p]), -_WIDEST), _WIDEST)
        v = max(float(deviations[p]), 1e-12)
        level = exp2_double(_LOG2_E * log)
        rows[0, p] = log
        rows[1, p] = v
        rows[2, p] = 1.0 / v
        rows[3, p] = level
        rows[4, p] = 1.0 / level
        total += level
    sums[place] += total
    for j in range(log_strikes.shape[0]):
        k = log_strikes[j]
        side = 1.0 if k >= 0.0 else -1.0
        strike = np.exp(k)
        total = 0.0
        for p in range(BLOCK):
            v, level = rows[1, p], rows[3, p]
            d = (rows[0, p] - k) * rows[2, p] - 0.5 * v
            near = min(max(d, -_FAR), _FAR)
            density = normal_density(near)
            above = normal_distribution(side * near, density)
            # phi(d + v) = phi(d) strike / level
            weighted = normal_distribution(side * (near + v), density * strike * rows[4, p])
            total += level * weighted - strike * above
        sums[place + 1 + j] += side * total


_SINGLE = {d: types.Array(types.float32, d, "C") for d in (1, 2, 3)}
_DOUBLE = {d: types.Array(types.float64, d, "C") for d in (1, 2)}
_WORDS = {d: types.Array(types.uint32, d, "C") for d in (1, 2, 3)}
_PLACES = types.Array(types.int64, 1, "C")
_TABLES = {d: types.Array(types.uint64, d, "C") for d in (1, 2, 3)}
_ACCUMULATE = types.void(
    types.int64,
    types.int64,
    _WORDS[3],
    _WORDS[3],
    _PLACES,
    _PLACES,
    _PLACES,
    _SINGLE[2],
    _PLACES,
    _SINGLE[2],
    _PLACES,
    _PLACES,
    _TABLES[3],
    _TABLES[2],
    _TABLES[2],
    _SINGLE[2],
    _SINGLE[2],
    types.float64,
    types.float64,
    _DOUBLE[2],
    _DOUBLE[2],
    _WORDS[2],
    _SINGLE[2],
    _SINGLE[2],
    _WORDS[1],
    _TABLES[1],
    _SINGLE[3],
    _DOUBLE[2],
    _DOUBLE[2],
)


def _accumulate(
    first: int,
    last: int,
    columns: Any,
    words: Any,
    at: Any,
    left: Any,
    right: Any,
    weights: Any,
    uses: Any,
    loadings: Any,
    widths: Any,
    dates: Any,
    moves: Any,
    before: Any,
    deviations: Any,
    lowest: Any,
    per_node: Any,
    start: float,
    first_deviation: float,
    control: Any,
    log_strikes: Any,
    table: Any,
    walks: Any,
    drives: Any,
    places: Any,
    fetched: Any,
    planes: Any,
    rows: Any,
    sums: Any,
) -> None:
    """Add points ``first`` to ``last``, both multiples of ``BLOCK``, of every randomisation to ``sums``.

    Points, bridge and ``uses`` as in ``local_vol_paths.accumulate``, of one asset. ``dates`` : (n_dates,) steps done
    at each. ``moves`` : (n_steps - 1, 1, n_nodes). ``before``, ``deviations`` : (n_dates, n_nodes) base-2
    log-level before the step that ends at each date, and its deviation, by the coordinate of the step before that;
    where there is none, the level is 1 and the deviation ``first_deviation``. ``lowest``, ``per_node`` :
    (n_steps, 1). ``control`` : (n_dates, 3) of a lognormal level per date: volatility per unit of the Brownian
    motion, log-level before the last step but for it, deviation of the last step.
    ``log_strikes`` : (n_dates, n_strikes).
    Scratch: as in ``local_vol_paths``; ``planes`` (PLANES, 1, BLOCK), ``rows`` (5, BLOCK).
    ``sums`` : (randomisations, n_dates * 2 * (1 + n_strikes)): by date, for local volatility and then for the
    lognormal level, the level before the last step and each option.
    """
    n_strikes = log_strikes.shape[1]
    state, noise = planes[_STATE], planes[_NOISE]
    for r in range(columns.shape[0]):
        low_table(columns[r], table)
        for begin in range(first, last, BLOCK):
            normals_of_block(begin // BLOCK, columns[r], words[r], table, walks)
            walk(at, left, right, weights, 1, walks)
            for p in range(BLOCK):
                state[0, p] = _F(start)
                planes[_WALK, 0, p] = _F(0.0)
            previous = -1
            date = 0
            for s in range(uses.shape[0]):
                if dates[date] == s + 1:
                    log, slope, deviation = planes[_LOG, 0], planes[_SLOPE, 0], planes[_DEVIATION, 0]
                    if s > 0:
                        low, scale = lowest[s - 1, 0], per_node[s - 1, 0]
                        # where the state was after the noise of the step before
                        look_up(before[date], low, scale, planes[_AFTER_NOISE, 0], log, slope, places, fetched)
                        look_up(
                            deviations[date], low, scale, planes[_AFTER_NOISE, 0], deviation, slope, places, fetched
                        )
                        for p in range(BLOCK):
                            log[p] *= _F(_LN2)
                    else:
                        for p in range(BLOCK):
                            log[p] = _F(0.0)
                            deviation[p] = _F(first_deviation)
                    place = date * 2 * (1 + n_strikes)
                    _add_options(log, deviation, log_strikes[date], rows, sums[r], place)
                    for p in range(BLOCK):
                        log[p] = _F(control[date, 0]) * planes[_WALK, 0, p] + _F(control[date, 1])
                        deviation[p] = _F(control[date, 2])
                    place += 1 + n_strikes
                    _add_options(log, deviation, log_strikes[date], rows, sums[r], place)
                    date += 1
                increments(walks, 1, previous, uses[s], drives)
                previous = uses[s]
                scale = loadings[0, 0]
                for p in range(BLOCK):
                    noise[0, p] = scale * drives[0, p]
                    planes[_WALK, 0, p] = scale * walks[uses[s], p]
                    planes[_AFTER_NOISE, 0, p] = state[0, p] + noise[0, p]
                if s < uses.shape[0] - 1:
                    evolve(moves[s], lowest[s], per_node[s], noise, state, planes[_SLOPE], False, places, fetched)


accumulate: Any = njit(_ACCUMULATE, cache=True, **OPTIONS)(
    stored_under(digest_of(Path(__file__).parent.glob("*.py")), _accumulate)
)
