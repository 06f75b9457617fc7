"""Local-volatility paths fused with a payoff and with the lognormal payoff on the same noise."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit, types

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels.elementary import exp2_single
from pricer.simulation.kernels.levels import log_levels, low_table, normals_of_block
from pricer.simulation.kernels.local_vol import (
    add,
    convert,
    evolve,
    geometric,
    increments,
    last_levels,
    level_free,
    look_up,
    split_factor,
    walk,
)
from pricer.simulation.kernels.payoffs import (
    BEST,
    BY_FACTOR,
    BY_OUTSIDE,
    BY_SCALED,
    GROWTH,
    OUTSIDE,
    RANKED,
    SCALED,
    SUM,
    VALUE,
    WORST,
    constant_factor,
    extreme,
    integrate_factor,
    rank_weighted,
    weighted_sum,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, SUM_OPTIONS, use_wide_vectors

_F = np.float32
_LN2 = 0.6931471805599453
_WIDEST = _F(60.0)  # base-2 log-levels are kept within this: single precision ends at 126

#: One more kind of aggregate than ``payoffs`` has: under local volatility it must be sampled.
GEOMETRIC = 4

#: Planes (n_rows, BLOCK) of single-precision scratch; rows of factors of rates are used in CONTROL and NOISE only.
STATES, TANGENTS, NOISE, STARTS, DEVIATIONS, LEVEL_SLOPES, DEVIATION_SLOPES, LEVELS, RANKS, CONTROL = range(10)
PLANES = 10

#: Sums per randomisation for n assets: see ``accumulate``.
HEAD_SUMS = 3
LEG_SUMS = 4


@njit(**OPTIONS)
def _before_last(
    share: float, levels: Any, level_slopes: Any, deviations: Any, deviation_slopes: Any, tangents: Any
) -> None:
    """Turn log-levels of the martingale into prices over forwards, in place, (BLOCK,) each.

    A price is ``share X + 1 - share`` of its forward. In: base-2 log X, deviation of log X over the last
    step, slopes of both in the coordinate, and its tangent to the first log-level. Out: price,
    elasticity to X(0), deviation of the log-price, and its derivative to log X(0). The deviation is that of a
    lognormal price of the same variance, to second order: ``log(1 + p^2 (exp(s^2) - 1))`` with p the moving part.
    """
    use_wide_vectors()
    fixed = _F(1.0 - share)
    for p in range(BLOCK):
        moving = _F(share) * exp2_single(min(max(levels[p], -_WIDEST), _WIDEST))
        price = moving + fixed
        part = moving / price
        slope = _F(_LN2) * level_slopes[p] * tangents[p]
        s = deviations[p]
        quarter = _F(0.25) * s * s
        square = part * part
        by_s = part * (_F(1.0) + _F(3.0) * (_F(1.0) - square) * quarter)
        by_part = s * (_F(1.0) + (_F(1.0) - _F(3.0) * square) * quarter)
        levels[p] = price
        level_slopes[p] = part * slope
        deviations[p] = s * part * (_F(1.0) + (_F(1.0) - square) * quarter)
        deviation_slopes[p] = deviation_slopes[p] * tangents[p] * by_s + by_part * part * (_F(1.0) - part) * slope


@njit(**OPTIONS)
def _track_control(volatilities: Any, noise: Any, logs: Any) -> None:
    """``logs += volatilities * noise`` : the lognormal levels and the exchange rates, (n_rows, BLOCK)."""
    use_wide_vectors()
    for i in range(logs.shape[0]):
        a = volatilities[i]
        for p in range(BLOCK):
            logs[i, p] += a * noise[i, p]


@njit(**OPTIONS)
def _control_before_last(deviations: Any, planes: Any, n: int) -> None:
    """The lognormal model's state before the last step into the planes of the local-volatility one."""
    use_wide_vectors()
    for i in range(n):
        deviation = deviations[i]
        for p in range(BLOCK):
            planes[STARTS, i, p] = exp2_single(min(max(planes[CONTROL, i, p], -_WIDEST), _WIDEST))
            planes[DEVIATIONS, i, p] = deviation
            planes[LEVEL_SLOPES, i, p] = _F(1.0)
            planes[DEVIATION_SLOPES, i, p] = _F(0.0)


@njit(**OPTIONS)
def _convert_starts(exposures: Any, drops: Any, planes: Any, n: int) -> None:
    """Levels before the last step times their exchange rates over forwards; the logarithm of a rate is a sum."""
    use_wide_vectors()
    for i in range(n):
        logs, converted = planes[LEVELS, i], False
        for j in range(exposures.shape[1]):
            a = exposures[i, j]
            if a == _F(0.0):
                continue
            if not converted:
                logs[:] = -drops[0, i]
                converted = True
            for p in range(BLOCK):
                logs[p] += a * planes[CONTROL, n + j, p]
        if converted:
            for p in range(BLOCK):
                planes[STARTS, i, p] *= exp2_single(min(max(logs[p], -_WIDEST), _WIDEST))


@njit(**SUM_OPTIONS)
def _add_value(paths: Any, m: int, sums: Any, place: int) -> None:
    use_wide_vectors()
    total = 0.0
    for p in range(m):
        total += paths[VALUE + p]
    sums[place] += total


@njit(**SUM_OPTIONS)
def _add_aggregate(paths: Any, m: int, sums: Any, place: int) -> None:
    use_wide_vectors()
    total = 0.0
    for p in range(m):
        total += paths[GROWTH + p] * paths[SCALED + p] + paths[OUTSIDE + p]
    sums[place] += total


@njit(**SUM_OPTIONS)
def _add_rows(rows: Any, n: int, m: int, sums: Any, place: int) -> None:
    use_wide_vectors()
    for i in range(n):
        total = 0.0
        for p in range(m):
            total += float(rows[i, p])
        sums[place + i] += total


@njit(**SUM_OPTIONS)
def _add_deltas(
    paths: Any, planes: Any, drifts: Any, rows: Any, n: int, n_common: int, m: int, sums: Any, place: int
) -> None:
    """Derivatives of the value to log X(0) of each asset, over its ``scales``.

    ``d log S = B'/B + (g - drift - s) s'`` with ``g = g_rest + (c / s) w``: see ``estimates.estimates``.
    """
    use_wide_vectors()
    for i in range(n):
        total = 0.0
        drift = float(drifts[i])
        if i < n_common:
            for p in range(m):
                s = float(planes[DEVIATIONS, i, p])
                turn = float(planes[DEVIATION_SLOPES, i, p])
                u = turn / s
                rest = float(planes[LEVEL_SLOPES, i, p]) + turn * (float(planes[NOISE, i, p]) - drift - s)
                rest -= u * rows[0, p]
                factor = paths[BY_FACTOR + p] * u * rows[1, p]
                total += float(planes[LEVELS, i, p]) * (paths[BY_SCALED + p] * rest + factor)
        else:
            for p in range(m):
                s = float(planes[DEVIATIONS, i, p])
                turn = float(planes[DEVIATION_SLOPES, i, p])
                rest = float(planes[LEVEL_SLOPES, i, p]) + turn * (float(planes[NOISE, i, p]) - drift - s)
                total += float(planes[LEVELS, i, p]) * paths[BY_OUTSIDE + p] * rest
        sums[place + i] += total


@njit(**SUM_OPTIONS)
def _add_level_deltas(paths: Any, levels: Any, n: int, n_common: int, m: int, sums: Any, place: int) -> None:
    """Derivatives of the value to the logarithm of each level at expiry, over its ``scales``."""
    use_wide_vectors()
    for i in range(n):
        total = 0.0
        if i < n_common:
            for p in range(m):
                total += float(levels[i, p]) * paths[BY_SCALED + p]
        else:
            for p in range(m):
                total += float(levels[i, p]) * paths[BY_OUTSIDE + p]
        sums[place + i] += total


@njit(**OPTIONS)
def _levels_and_factor(
    smooth: bool,
    inverse: Any,
    n: int,
    n_common: int,
    degree: float,
    kind: int,
    scales: Any,
    log2_scale: float,
    rank_weights: Any,
    drifts: Any,
    exposures: Any,
    drops: Any,
    deviations: Any,
    planes: Any,
    precisions: Any,
    rows: Any,
    paths: Any,
) -> None:
    """From the state before the last step to the parts of the aggregate and the common factor's size."""
    use_wide_vectors()
    noise, levels = planes[NOISE], planes[LEVELS][:n]
    if smooth:
        for i in range(n_common):
            for p in range(BLOCK):
                precisions[i, p] = 1.0 / float(planes[DEVIATIONS, i, p])
        split_factor(inverse, n_common, degree, noise, precisions, rows, paths)
    last_levels(planes[DEVIATIONS], noise, drifts, rows[0], n_common, planes[STARTS], levels)
    for i in range(n):
        convert(exposures[i], drops[1, i], deviations[n:], noise[n:], planes[RANKS, i], levels[i])
    if kind == GEOMETRIC:
        geometric(levels, scales, log2_scale, paths)
    elif kind == SUM:
        weighted_sum(levels, scales, n_common, paths)
    elif kind == BEST:
        extreme(levels, scales, 1.0, paths)
    elif kind == WORST:
        extreme(levels, scales, -1.0, paths)
    elif kind == RANKED:
        rank_weighted(levels, scales, rank_weights, planes[RANKS], paths)


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
    _SINGLE[1],
    _SINGLE[2],
    _SINGLE[1],
    _SINGLE[1],
    _SINGLE[2],
    _SINGLE[2],
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

#: Kernels import from each other: a change in any of their files renews those on disk.
_SOURCES = digest_of(Path(__file__).parent.glob("*.py"))


def _stored(signature: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile for exactly this signature and keep the result on disk."""

    def compile_stored(function: Callable[..., Any]) -> Any:
        return njit(signature, cache=True, **OPTIONS)(stored_under(_SOURCES, function))

    return compile_stored


@_stored(_ACCUMULATE)
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
    control_starts: Any,
    volatilities: Any,
    deviations: Any,
    drifts: Any,
    exposures: Any,
    drops: Any,
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
    ``loadings`` : (n_rows, dims padded to 4) of n assets and of factors of exchange rates after them; ``widths`` :
    (n_rows,) as in ``log_levels``. Tables: see ``LocalVolTables``. ``shares`` : (n,) moving part of the forward.
    Lognormal levels and factors: base-2 logs ``control_starts`` (n_rows,) before any noise,
    ``volatilities`` (n_steps - 1, n_rows) per unit of noise in each step, ``deviations`` (n_rows,) natural,
    of the last step. ``drifts`` : (n,) taken off the unit noise of the last step. The logarithm of
    the exchange rate that converts a level is the sum of the factors' times ``exposures`` (n, n_rows - n), all 0 for
    none, or without columns, less ``drops`` (2, n) base-2: up to the last step, and over it.
    ``smooth``, ``inverse``, ``n_common``, ``degree`` : see ``split_factor``.
    ``kind`` to ``profile`` as in ``fused.accumulate``, but ``scales`` are per level over forward.
    Scratch: ``table`` (n_times dims, BLOCK), ``walks`` likewise, ``drives`` (dims padded, BLOCK;
    padding 0), ``places`` and ``fetched`` (BLOCK,), ``planes`` (PLANES, n_rows, BLOCK), ``precisions``
    (n, BLOCK), ``rows`` (3, BLOCK; 0), ``paths``.
    ``sums`` : (randomisations, 3 + 4 n): value under local volatility, under lognormal prices, mean of the aggregate;
    then (n,) each: derivatives of the first to log X(0), the same of the second, prices over forwards before
    the last step, derivatives of the first to the logarithms of the levels at expiry.
    """
    n = scales.shape[0]
    n_rows = loadings.shape[0]
    n_steps = uses.shape[0]
    dims = columns.shape[1] // at.shape[0]
    per_root = _F(1.0 / np.sqrt(last_length))
    states, tangents, noise = planes[STATES][:n], planes[TANGENTS], planes[NOISE]
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
            for i in range(n_rows):
                for p in range(BLOCK):
                    planes[CONTROL, i, p] = control_starts[i]
            previous = -1
            for s in range(n_steps - 1):
                increments(walks, dims, previous, uses[s], drives)
                log_levels(loadings, widths, drives, noise)
                _track_control(volatilities[s], noise, planes[CONTROL])
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
            for i in range(n_rows):
                for p in range(BLOCK):
                    noise[i, p] *= per_root
            for model in range(2):
                if model == 1:
                    _control_before_last(deviations, planes, n)
                _convert_starts(exposures, drops, planes, n)
                if model == 0:
                    _add_rows(planes[STARTS], n, m, sums[r], HEAD_SUMS + 2 * n)
                _levels_and_factor(
                    smooth,
                    inverse,
                    n,
                    n_common,
                    degree,
                    kind,
                    scales,
                    log2_scale,
                    rank_weights,
                    drifts,
                    exposures,
                    drops,
                    deviations,
                    planes,
                    precisions,
                    rows,
                    paths,
                )
                integrate_factor(profile, smooth, with_ratios, paths)
                _add_value(paths, m, sums[r], model)
                if model == 0:
                    _add_aggregate(paths, m, sums[r], 2)
                if with_ratios:
                    if kind == GEOMETRIC:
                        level_free(planes[LEVELS], paths)
                    _add_deltas(paths, planes, drifts, rows, n, n_common, m, sums[r], HEAD_SUMS + n * model)
                    if model == 0:
                        _add_level_deltas(paths, planes[LEVELS], n, n_common, m, sums[r], HEAD_SUMS + 3 * n)


@_stored(_RECORD)
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
                            planes[RANKS, i, p] = states[i, p] + noise[i, p]
                        log, slope = planes[LEVELS, i], planes[LEVEL_SLOPES, i]
                        low, scale = lowest[s, i], per_node[s, i]
                        look_up(levels[date, i], low, scale, planes[RANKS, i], log, slope, places, fetched)
                        for p in range(BLOCK):
                            out[r, date, i, start - first + p] = exp2_single(min(max(log[p], -_WIDEST), _WIDEST))
                    date += 1
                if s < uses.shape[0] - 1:
                    evolve(moves[s], lowest[s], per_node[s], noise, states, tangents, False, places, fetched)
