"""Local-volatility paths fused with a payoff and with the lognormal payoff on the same noise."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit, types

from pricer.simulation.kernels.elementary import exp2_single
from pricer.simulation.kernels.levels import log_levels, low_table, normals_of_block
from pricer.simulation.kernels.local_vol import (
    add,
    binary_logs,
    evolve,
    increments,
    last_levels,
    look_up,
    split_factor,
    walk,
)
from pricer.simulation.kernels.payoffs import (
    BEST,
    BY_FACTOR,
    BY_OUTSIDE,
    BY_SCALED,
    GEOMETRIC,
    RANKED,
    SUM,
    VALUE,
    WORST,
    constant_factor,
    extreme,
    geometric,
    integrate_factor,
    level_free,
    rank_weighted,
    weighted_sum,
)
from pricer.simulation.kernels.sources import digest
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, SUM_OPTIONS, use_wide_vectors

_F = np.float32
_LN2 = 0.6931471805599453
_LOG2_E = 1.4426950408889634
_WIDEST = _F(60.0)  # base-2 log-levels are kept within this: single precision ends at 126

#: Planes (n, BLOCK) of single-precision scratch.
STATES, TANGENTS, NOISE, STARTS, DEVIATIONS, LEVEL_SLOPES, DEVIATION_SLOPES, LEVELS, LOGS = range(9)
PLANES = 9


@njit(**OPTIONS)
def _before_last(
    share: float, levels: Any, level_slopes: Any, deviations: Any, deviation_slopes: Any, tangents: Any
) -> None:
    """Turn log-levels of the martingale into prices over forwards, in place, (BLOCK,) each.

    A price is ``share X + 1 - share`` of its forward. In: base-2 log X, deviation of log X over the last
    step, slopes of both in the coordinate, and its tangent to the first log-level. Out: price,
    elasticity to X(0), deviation of the log-price, and its derivative to log X(0).
    """
    use_wide_vectors()
    fixed = _F(1.0 - share)
    for p in range(BLOCK):
        moving = _F(share) * exp2_single(min(max(levels[p], -_WIDEST), _WIDEST))
        price = moving + fixed
        part = moving / price
        slope = _F(_LN2) * level_slopes[p] * tangents[p]
        s = deviations[p]
        levels[p] = price
        level_slopes[p] = part * slope
        deviations[p] = s * part
        deviation_slopes[p] = deviation_slopes[p] * tangents[p] * part + s * part * (_F(1.0) - part) * slope


@njit(**OPTIONS)
def _lognormal_before_last(
    walks: Any,
    dims: int,
    time: int,
    drives: Any,
    loadings: Any,
    widths: Any,
    volatilities: Any,
    years: float,
    last_length: float,
    planes: Any,
) -> None:
    """The lognormal model's state before the last step, on the Brownian motions at ``time``."""
    use_wide_vectors()
    increments(walks, dims, -1, time, drives)
    log_levels(loadings, widths, drives, planes[STARTS])
    for i in range(volatilities.shape[0]):
        a = volatilities[i]
        whole = _F(a * _LOG2_E)
        drop = _F(0.5 * a * a * (years - last_length) * _LOG2_E)
        deviation = _F(a * np.sqrt(last_length))
        for p in range(BLOCK):
            planes[STARTS, i, p] = exp2_single(whole * planes[STARTS, i, p] - drop)
            planes[DEVIATIONS, i, p] = deviation
            planes[LEVEL_SLOPES, i, p] = _F(1.0)
            planes[DEVIATION_SLOPES, i, p] = _F(0.0)


@njit(**SUM_OPTIONS)
def _add_value(paths: Any, m: int, sums: Any, place: int) -> None:
    use_wide_vectors()
    total = 0.0
    for p in range(m):
        total += paths[VALUE + p]
    sums[place] += total


@njit(**SUM_OPTIONS)
def _add_rows(rows: Any, m: int, sums: Any, place: int) -> None:
    use_wide_vectors()
    for i in range(rows.shape[0]):
        total = 0.0
        for p in range(m):
            total += float(rows[i, p])
        sums[place + i] += total


@njit(**SUM_OPTIONS)
def _add_deltas(
    paths: Any,
    levels: Any,
    level_slopes: Any,
    deviations: Any,
    deviation_slopes: Any,
    noise: Any,
    rows: Any,
    n_common: int,
    m: int,
    sums: Any,
    place: int,
) -> None:
    """Derivatives of the value to log X(0) of each asset, over its ``scales``.

    ``d log S = B'/B + (g - s) s'`` with ``g = g_rest + (c / s) w``: see ``estimates.estimates``.
    """
    use_wide_vectors()
    for i in range(levels.shape[0]):
        total = 0.0
        if i < n_common:
            for p in range(m):
                s = float(deviations[i, p])
                turn = float(deviation_slopes[i, p])
                u = turn / s
                rest = float(level_slopes[i, p]) + turn * (float(noise[i, p]) - s) - u * rows[0, p]
                total += float(levels[i, p]) * (paths[BY_SCALED + p] * rest + paths[BY_FACTOR + p] * u * rows[1, p])
        else:
            for p in range(m):
                s = float(deviations[i, p])
                turn = float(deviation_slopes[i, p])
                rest = float(level_slopes[i, p]) + turn * (float(noise[i, p]) - s)
                total += float(levels[i, p]) * paths[BY_OUTSIDE + p] * rest
        sums[place + i] += total


@njit(**OPTIONS)
def _finish(
    smooth: bool,
    inverse: Any,
    n_common: int,
    degree: float,
    kind: int,
    scales: Any,
    log2_scale: float,
    rank_weights: Any,
    profile: Any,
    with_ratios: bool,
    planes: Any,
    precisions: Any,
    rows: Any,
    paths: Any,
    m: int,
    sums: Any,
    place: int,
) -> None:
    """From the state before the last step to the payoff: 1 + n sums from ``place`` on."""
    use_wide_vectors()
    noise, deviations, levels, logs = planes[NOISE], planes[DEVIATIONS], planes[LEVELS], planes[LOGS]
    if smooth:
        for i in range(n_common):
            for p in range(BLOCK):
                precisions[i, p] = 1.0 / float(deviations[i, p])
        split_factor(inverse, n_common, degree, noise, precisions, rows, paths)
    last_levels(deviations, noise, rows[0], n_common, planes[STARTS], levels)
    if kind == GEOMETRIC:
        binary_logs(levels, logs)
        geometric(logs, scales, log2_scale, paths)
    elif kind == SUM:
        weighted_sum(levels, scales, n_common, paths)
    elif kind == BEST:
        extreme(levels, scales, 1.0, paths)
    elif kind == WORST:
        extreme(levels, scales, -1.0, paths)
    elif kind == RANKED:
        rank_weighted(levels, scales, rank_weights, logs, paths)
    integrate_factor(profile, smooth, with_ratios, paths)
    _add_value(paths, m, sums, place)
    if with_ratios:
        if kind == GEOMETRIC:
            level_free(levels, paths)
        slopes, turns = planes[LEVEL_SLOPES], planes[DEVIATION_SLOPES]
        _add_deltas(paths, levels, slopes, deviations, turns, noise, rows, n_common, m, sums, place + 1)


_SINGLE = {d: types.Array(types.float32, d, "C") for d in (1, 2, 3, 4)}
_DOUBLE = {d: types.Array(types.float64, d, "C") for d in (1, 2)}
_WORDS = {d: types.Array(types.uint32, d, "C") for d in (1, 2, 3)}
_PLACES = types.Array(types.int64, 1, "C")
_TABLES = {d: types.Array(types.uint64, d, "C") for d in (1, 2, 3)}

#: Points, bridge, loadings.
_NOISE_TYPES = (
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
)
_ACCUMULATE = types.void(
    *_NOISE_TYPES,
    types.float64,
    _TABLES[3],
    _TABLES[2],
    _TABLES[2],
    _SINGLE[2],
    _SINGLE[2],
    _SINGLE[1],
    _SINGLE[1],
    _DOUBLE[1],
    _DOUBLE[1],
    types.float64,
    types.boolean,
    _DOUBLE[2],
    types.int64,
    types.float64,
    types.int64,
    _DOUBLE[1],
    types.float64,
    _SINGLE[1],
    _DOUBLE[1],
    types.boolean,
    _WORDS[2],
    _SINGLE[2],
    _SINGLE[2],
    _WORDS[1],
    _TABLES[1],
    _SINGLE[3],
    _DOUBLE[2],
    _DOUBLE[2],
    _DOUBLE[1],
    _DOUBLE[2],
)
_RECORD = types.void(
    *_NOISE_TYPES,
    _PLACES,
    _TABLES[3],
    _TABLES[3],
    _SINGLE[2],
    _SINGLE[2],
    _SINGLE[1],
    _WORDS[2],
    _SINGLE[2],
    _SINGLE[2],
    _WORDS[1],
    _TABLES[1],
    _SINGLE[3],
    _SINGLE[4],
)


def _compiled(sources: int) -> tuple[Any, Any]:
    @njit(_ACCUMULATE, cache=True, **OPTIONS)
    def accumulate(
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
        last_length: float,
        moves: Any,
        before_last: Any,
        deviation_tables: Any,
        lowest: Any,
        per_node: Any,
        starts: Any,
        start_slopes: Any,
        shares: Any,
        lognormal_volatilities: Any,
        years: float,
        smooth: bool,
        inverse: Any,
        n_common: int,
        degree: float,
        kind: int,
        scales: Any,
        log2_scale: float,
        rank_weights: Any,
        profile: Any,
        with_ratios: bool,
        table: Any,
        walks: Any,
        drives: Any,
        places: Any,
        fetched: Any,
        planes: Any,
        precisions: Any,
        rows: Any,
        paths: Any,
        sums: Any,
    ) -> None:
        """Add points ``first`` to ``last`` of every randomisation to ``sums``.

        Points: ``first``, ``last``, ``columns``, ``words`` as in ``fused.accumulate``, coordinate
        ``t * dims + j`` drives factor j at time t of the bridge ``at``, ``left``, ``right``, ``weights``.
        Steps end at times ``uses`` (n_steps,) of the bridge, the last of ``last_length`` years.
        ``loadings`` : (n, dims padded to 4), ``widths`` : (n,) as in ``log_levels``. Tables: see
        ``LocalVolTables``. ``shares`` : (n,) moving part of the forward. ``lognormal_volatilities`` : (n,),
        over ``years``. ``smooth``, ``inverse``, ``n_common``, ``degree`` : see ``split_factor``.
        ``kind`` to ``profile`` as in ``fused.accumulate``, but ``scales`` are per level over forward.
        Scratch: ``table`` (n_times dims, BLOCK), ``walks`` likewise, ``drives`` (dims padded, BLOCK;
        padding 0), ``places`` and ``fetched`` (BLOCK,), ``planes`` (PLANES, n, BLOCK), ``precisions``
        (n, BLOCK), ``rows`` (3, BLOCK; 0), ``paths``.
        ``sums`` : (randomisations, 2 + 3 n): value and derivatives to log X(0) under local volatility,
        then the same under lognormal prices, then prices over forwards before the last step.
        """
        if sources == 0:
            return
        n = loadings.shape[0]
        n_steps = uses.shape[0]
        dims = columns.shape[1] // at.shape[0]
        per_root = _F(1.0 / np.sqrt(last_length))
        states, tangents, noise = planes[STATES], planes[TANGENTS], planes[NOISE]
        if not smooth:
            constant_factor(0.0, paths)
        for r in range(columns.shape[0]):
            low_table(columns[r], table)
            for start in range(first, last, BLOCK):
                m = min(BLOCK, last - start)
                normals_of_block(start // BLOCK, columns[r], words[r], table, walks)
                walk(at, left, right, weights, dims, walks)
                for i in range(n):
                    for p in range(BLOCK):
                        states[i, p] = starts[i]
                        tangents[i, p] = start_slopes[i]
                previous = -1
                for s in range(n_steps - 1):
                    increments(walks, dims, previous, uses[s], drives)
                    log_levels(loadings, widths, drives, noise)
                    if s < n_steps - 2:
                        evolve(moves[s], lowest[s], per_node[s], noise, states, tangents, with_ratios, places, fetched)
                    else:
                        add(noise, states)
                    previous = uses[s]
                for i in range(n):
                    low, scale = lowest[n_steps - 2, i], per_node[n_steps - 2, i]
                    price, slope = planes[STARTS, i], planes[LEVEL_SLOPES, i]
                    deviation, turn = planes[DEVIATIONS, i], planes[DEVIATION_SLOPES, i]
                    look_up(before_last[i], low, scale, states[i], price, slope, places, fetched)
                    look_up(deviation_tables[i], low, scale, states[i], deviation, turn, places, fetched)
                    _before_last(shares[i], price, slope, deviation, turn, tangents[i])
                increments(walks, dims, previous, uses[n_steps - 1], drives)
                log_levels(loadings, widths, drives, noise)
                for i in range(n):
                    for p in range(BLOCK):
                        noise[i, p] *= per_root
                _add_rows(planes[STARTS], m, sums[r], 2 + 2 * n)
                for place in (0, 1 + n):
                    if place > 0:
                        _lognormal_before_last(
                            walks,
                            dims,
                            previous,
                            drives,
                            loadings,
                            widths,
                            lognormal_volatilities,
                            years,
                            last_length,
                            planes,
                        )
                    _finish(
                        smooth,
                        inverse,
                        n_common,
                        degree,
                        kind,
                        scales,
                        log2_scale,
                        rank_weights,
                        profile,
                        with_ratios,
                        planes,
                        precisions,
                        rows,
                        paths,
                        m,
                        sums[r],
                        place,
                    )

    @njit(_RECORD, cache=True, **OPTIONS)
    def record(
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
        levels: Any,
        lowest: Any,
        per_node: Any,
        starts: Any,
        table: Any,
        walks: Any,
        drives: Any,
        places: Any,
        fetched: Any,
        planes: Any,
        out: Any,
    ) -> None:
        """Levels of the martingales at dates: ``out`` (randomisations, n_dates, n, points) float32.

        ``dates`` : (n_dates,) steps done at each; ``levels`` : (n_dates, n, n_nodes), see
        ``LocalVolTables``; all else as in ``accumulate``. ``last - first`` is a multiple of ``BLOCK``.
        """
        if sources == 0:
            return
        n = loadings.shape[0]
        dims = columns.shape[1] // at.shape[0]
        states, tangents, noise = planes[STATES], planes[TANGENTS], planes[NOISE]
        for r in range(columns.shape[0]):
            low_table(columns[r], table)
            for start in range(first, last, BLOCK):
                normals_of_block(start // BLOCK, columns[r], words[r], table, walks)
                walk(at, left, right, weights, dims, walks)
                for i in range(n):
                    for p in range(BLOCK):
                        states[i, p] = starts[i]
                previous = -1
                date = 0
                for s in range(uses.shape[0]):
                    increments(walks, dims, previous, uses[s], drives)
                    log_levels(loadings, widths, drives, noise)
                    previous = uses[s]
                    if dates[date] == s + 1:
                        for i in range(n):
                            for p in range(BLOCK):
                                planes[LOGS, i, p] = states[i, p] + noise[i, p]
                            log, slope = planes[LEVELS, i], planes[LEVEL_SLOPES, i]
                            low, scale = lowest[s, i], per_node[s, i]
                            look_up(levels[date, i], low, scale, planes[LOGS, i], log, slope, places, fetched)
                            for p in range(BLOCK):
                                out[r, date, i, start - first + p] = exp2_single(min(max(log[p], -_WIDEST), _WIDEST))
                        date += 1
                    if s < uses.shape[0] - 1:
                        evolve(moves[s], lowest[s], per_node[s], noise, states, tangents, False, places, fetched)

    return accumulate, record


accumulate, record = _compiled(digest())
