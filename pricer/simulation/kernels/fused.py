"""The fused kernel: points, normals, levels, payoff and sums in one pass over cache-sized blocks."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

from numba import njit, types

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels.levels import (
    log_levels,
    low_table,
    normals_of_block,
    powers,
    scrambled_columns,
)
from pricer.simulation.kernels.payoffs import (
    BEST,
    BY_FACTOR,
    BY_OUTSIDE,
    BY_OUTSIDE_TWICE,
    BY_SCALED,
    BY_SCALED_TWICE,
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

#: Sums per randomisation: three of the aggregate, then ``LEG_SUMS`` per asset.
HEAD_SUMS = 3
LEG_SUMS = 5


@njit(**SUM_OPTIONS)
def _add_head(paths: Any, m: int, sums: Any) -> None:
    use_wide_vectors()
    s0 = s1 = s2 = 0.0
    for p in range(m):
        s0 += paths[VALUE + p]
        s1 += paths[SCALED + p]
        s2 += paths[OUTSIDE + p]
    sums[0] += s0
    sums[1] += s1
    sums[2] += s2


@njit(**SUM_OPTIONS)
def _add_legs(paths: Any, levels: Any, logs: Any, n_common: int, m: int, sums: Any) -> None:
    """Per asset: sums of by-level, by-level times log, by-factor, second derivative, level."""
    use_wide_vectors()
    for i in range(levels.shape[0]):
        s0 = s1 = s2 = s3 = s4 = 0.0
        if i < n_common:
            for p in range(m):
                level = float(levels[i, p])
                part = paths[BY_SCALED + p] * level
                s0 += part
                s1 += part * float(logs[i, p])
                s2 += paths[BY_FACTOR + p] * level
                s3 += paths[BY_SCALED_TWICE + p] * level * level
                s4 += level
        else:
            for p in range(m):
                level = float(levels[i, p])
                part = paths[BY_OUTSIDE + p] * level
                s0 += part
                s1 += part * float(logs[i, p])
                s3 += paths[BY_OUTSIDE_TWICE + p] * level * level
                s4 += level
        k = HEAD_SUMS + LEG_SUMS * i
        sums[k] += s0
        sums[k + 1] += s1
        sums[k + 2] += s2
        sums[k + 3] += s3
        sums[k + 4] += s4


_SCRAMBLE = types.void(types.uint32[:, ::1], types.uint32[:, :, ::1], types.uint32[:, :, ::1])

_ACCUMULATE = types.void(
    types.int64,
    types.int64,
    types.uint32[:, :, ::1],
    types.uint32[:, :, ::1],
    types.float32[:, ::1],
    types.int64[::1],
    types.float64[::1],
    types.float32[::1],
    types.int64,
    types.int64,
    types.float64,
    types.float64[::1],
    types.boolean,
    types.uint32[:, ::1],
    types.float32[:, ::1],
    types.float32[:, ::1],
    types.float32[:, ::1],
    types.float64[::1],
    types.float64[:, ::1],
)


#: Kernels import from each other: a change in any of their files renews those on disk.
_SOURCES = digest_of(Path(__file__).parent.glob("*.py"))


def _stored(signature: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile for exactly this signature and keep the result on disk."""

    def compile_stored(function: Callable[..., Any]) -> Any:
        return njit(signature, cache=True, **OPTIONS)(stored_under(_SOURCES, function))

    return compile_stored


@_stored(_SCRAMBLE)
def scramble(directions: Any, words: Any, columns: Any) -> None:
    """Scrambled direction numbers of every randomisation.

    ``directions`` : (dims, bits); ``words`` : (randomisations, dims, bits + 1) random;
    ``columns`` : (randomisations, dims, bits), result. All uint32.
    """
    for r in range(words.shape[0]):
        scrambled_columns(directions, words[r], columns[r])


@_stored(_ACCUMULATE)
def accumulate(
    first: int,
    last: int,
    columns: Any,
    words: Any,
    loadings: Any,
    widths: Any,
    scales: Any,
    rank_weights: Any,
    kind: int,
    n_common: int,
    v: float,
    profile: Any,
    with_ratios: bool,
    table: Any,
    normals: Any,
    logs: Any,
    levels: Any,
    paths: Any,
    sums: Any,
) -> None:
    """Add points ``first`` to ``last`` of every randomisation to ``sums``.

    ``first`` is a multiple of ``BLOCK``; ``last`` is one too, or lies in the first block.
    ``columns`` : (randomisations, dims, bits) scrambled direction numbers; ``words`` : the last
    one is the digital shift. ``loadings`` : (n, dims padded to 4) float32, base-2 log-levels per
    normal; ``widths`` : (n,) as in ``log_levels``. ``scales`` : (n,) level of each asset at
    zero normals times its weight. ``rank_weights`` : (n,) float32. ``kind``, ``n_common``,
    ``v``, ``profile``: see ``payoffs``.
    Scratch: ``table`` (dims, BLOCK), ``normals`` (dims padded, BLOCK; padding 0), ``logs`` and
    ``levels`` (n, BLOCK), ``paths`` (PATH_ROWS * BLOCK,).
    ``sums`` : (randomisations, HEAD_SUMS + LEG_SUMS n): value, scaled part, outside part; per
    asset the sums of ``_add_legs``. Blocks are added in order.
    """
    constant_factor(v, paths)
    for r in range(columns.shape[0]):
        low_table(columns[r], table)
        for start in range(first, last, BLOCK):
            normals_of_block(start // BLOCK, columns[r], words[r], table, normals)
            log_levels(loadings, widths, normals, logs)
            powers(logs, levels)
            if kind == SUM:
                weighted_sum(levels, scales, n_common, paths)
            elif kind == BEST:
                extreme(levels, scales, 1.0, paths)
            elif kind == WORST:
                extreme(levels, scales, -1.0, paths)
            elif kind == RANKED:
                # normals are no longer needed: their rows hold the ranks
                rank_weighted(levels, scales, rank_weights, normals, paths)
            integrate_factor(profile, v > 0.0, with_ratios, paths)
            m = min(BLOCK, last - start)
            _add_head(paths, m, sums[r])
            if with_ratios:
                _add_legs(paths, levels, logs, n_common, m, sums[r])
