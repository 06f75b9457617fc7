"""Compiled kernels of early exercise: successors of states, what a decision looks at, and path-wise recursions.

States lie as ``[asset, lane]`` in single precision; a lane is a path or one of its inner successors. Work goes by
strips of ``STRIP`` lanes, whose rows stay in the first-level cache. The value of a lane never depends
on its neighbours, so a function evaluated on paths and on their successors is the same function to the last bit.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit, types

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels import vectors
from pricer.simulation.kernels.elementary import exp2_double, exp2_single, log_double, normal_from_bits
from pricer.simulation.kernels.levels import low_table, normals_of_block, scrambled_columns
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors

_F = np.float32
_LOG2_E = 1.4426950408889634

#: Lanes worked on together.
STRIP = 128

# Kinds of aggregate.
SUM, BEST, WORST, RANKED, GEOMETRIC = 0, 1, 2, 3, 4

_SOURCES = digest_of([Path(__file__), *Path(vectors.__file__).parent.glob("*.py")])

_U32_1, _U32_2 = types.uint32[::1], types.uint32[:, ::1]
_F32_1, _F32_2, _F32_3 = types.float32[::1], types.float32[:, ::1], types.float32[:, :, ::1]
_F64_1, _F64_2, _I64_1 = types.float64[::1], types.float64[:, ::1], types.int64[::1]


def _stored(signature: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile for exactly this signature and keep the result on disk."""

    def compile_stored(function: Callable[..., Any]) -> Any:
        return njit(signature, cache=True, **OPTIONS)(stored_under(_SOURCES, function))

    return compile_stored


@_stored(types.void(_U32_2, _U32_2, _F32_2))
def sobol_normals(directions: Any, words: Any, normals: Any) -> None:
    """Normals of the first points of one randomisation, (dims, points).

    ``directions`` : (dims, bits), ``words`` : (dims, bits + 1) random; points a multiple of ``BLOCK`` or below it.
    """
    dims, bits = directions.shape
    columns = np.empty((dims, bits), dtype=np.uint32)
    table = np.empty((dims, BLOCK), dtype=np.uint32)
    block_normals = np.empty((dims, BLOCK), dtype=np.float32)
    scrambled_columns(directions, words, columns)
    low_table(columns, table)
    for start in range(0, normals.shape[1], BLOCK):
        normals_of_block(start // BLOCK, columns, words, table, block_normals)
        m = min(BLOCK, normals.shape[1] - start)
        for j in range(dims):
            for p in range(m):
                normals[j, start + p] = block_normals[j, p]


@_stored(types.void(_U32_2, _U32_2))
def sobol_points(directions: Any, points: Any) -> None:
    """The first points without scramble, (dims, at most ``BLOCK``) 32-bit fractions."""
    table = np.empty((directions.shape[0], BLOCK), dtype=np.uint32)
    low_table(directions, table)
    for j in range(points.shape[0]):
        for p in range(points.shape[1]):
            points[j, p] = table[j, p]


@_stored(types.void(_U32_2, _U32_1, _F32_2, _F32_1, _F32_2, _F32_2))
def mirrored_growth(points: Any, shift: Any, loadings: Any, drifts: Any, normals: Any, growth: Any) -> None:
    """Growth factors of one step at shifted points and at their mirror images.

    ``points`` : (dims, >= m) uint32 fractions, ``shift`` : (dims,) digital shift. ``loadings`` : (n, dims) and
    ``drifts`` : (n,) base-2 logarithms. ``normals`` : (dims, m) scratch. ``growth`` : (n, 2 m), result.
    """
    use_wide_vectors()
    dims, m = normals.shape
    for j in range(dims):
        for k in range(m):
            normals[j, k] = normal_from_bits(np.uint32(points[j, k] ^ shift[j]))
    row = np.empty(m, dtype=np.float32)
    for i in range(loadings.shape[0]):
        for k in range(m):
            row[k] = _F(0.0)
        for j in range(dims):
            a = loadings[i, j]
            if a != _F(0.0):
                for k in range(m):
                    row[k] += a * normals[j, k]
        drift = drifts[i]
        up, down = growth[i, :m], growth[i, m:]
        for k in range(m):
            up[k] = exp2_single(drift + row[k])
            down[k] = exp2_single(drift - row[k])


@_stored(types.void(types.float32[:, :], _F32_2, types.int64, _F32_2))
def grown(states: Any, growth: Any, first: int, levels: Any) -> None:
    """``levels[i, first + p K + k] = states[i, p] growth[i, k]``: (n, P), (n, K) and (n, at least first + P K)."""
    use_wide_vectors()
    n, paths = states.shape
    inner = growth.shape[1]
    for i in range(n):
        for p in range(paths):
            level = states[i, p]
            row = levels[i, first + p * inner : first + (p + 1) * inner]
            factors = growth[i]
            for k in range(inner):
                row[k] = level * factors[k]


@njit(**OPTIONS)
def _insert(value: Any, depth: int, ranked: Any) -> None:
    """Sort ``value`` (STRIP,) into ``ranked`` (>= depth, STRIP), best first, lane by lane."""
    for r in range(depth):
        for p in range(STRIP):
            best = ranked[r, p]
            v = value[p]
            ranked[r, p] = max(best, v)
            value[p] = min(best, v)


@njit(**OPTIONS)
def _copy_in(source: Any, start: int, strip: Any) -> None:
    """Columns ``start`` and following into a strip: inside it the compiler sees that indices are not negative."""
    for i in range(strip.shape[0]):
        row = source[i, start : start + STRIP]
        for p in range(STRIP):
            strip[i, p] = row[p]


@njit(**OPTIONS)
def _copy_out(strip: Any, start: int, target: Any) -> None:
    for i in range(strip.shape[0]):
        row = target[i, start : start + STRIP]
        for p in range(STRIP):
            row[p] = strip[i, p]


@njit(**OPTIONS)
def _power_means(strip: Any, weights: Any, least: bool, top: Any, ratio: Any, inverse: Any, out: Any, at: int) -> None:
    """Logs of ``sum_i weights[k, i] r_i^(2^k)``, r_i the level over the best one, or the worst one over the level.

    With weights that are expectations of the growth to the power 2^k the 2^k-th root bounds the expected
    maximum of later levels: smooth and blind to labels, as the best of many is. ``top`` : (STRIP,) best or worst.
    """
    use_wide_vectors()
    n, count = strip.shape[0], weights.shape[0]
    for k in range(count):
        for p in range(STRIP):
            out[at + k, p] = _F(0.0)
    for p in range(STRIP):
        inverse[p] = _F(1.0) / top[p]
    for i in range(n):
        if least:
            for p in range(STRIP):
                ratio[p] = top[p] / strip[i, p]
        else:
            for p in range(STRIP):
                ratio[p] = strip[i, p] * inverse[p]
        for k in range(count):
            w = weights[k, i]
            for p in range(STRIP):
                out[at + k, p] += w * ratio[p]
                ratio[p] *= ratio[p]
    for k in range(count):
        for p in range(STRIP):
            out[at + k, p] = _F(log_double(float(out[at + k, p])))


@njit(**OPTIONS)
def _extreme(levels: Any, factors: Any, floors: Any, greatest: bool, out: Any) -> None:
    """The greatest (least) of ``levels[i] factors[i] + floors[i]`` on a strip."""
    use_wide_vectors()
    n = levels.shape[0]
    f, b = factors[0], floors[0]
    for p in range(STRIP):
        out[p] = levels[0, p] * f + b
    i = 1
    if greatest:
        while i + 3 < n:
            a, b, c, d = factors[i], factors[i + 1], factors[i + 2], factors[i + 3]
            e, f, g, h = floors[i], floors[i + 1], floors[i + 2], floors[i + 3]
            for p in range(STRIP):
                one = max(levels[i, p] * a + e, levels[i + 1, p] * b + f)
                two = max(levels[i + 2, p] * c + g, levels[i + 3, p] * d + h)
                out[p] = max(out[p], max(one, two))
            i += 4
        while i < n:
            a, b = factors[i], floors[i]
            for p in range(STRIP):
                out[p] = max(out[p], levels[i, p] * a + b)
            i += 1
    else:
        while i < n:
            a, b = factors[i], floors[i]
            for p in range(STRIP):
                out[p] = min(out[p], levels[i, p] * a + b)
            i += 1


@njit(**OPTIONS)
def _aggregate(
    kind: int, weights: Any, levels: Any, factors: Any, floors: Any, value: Any, ranked: Any, out: Any
) -> None:
    """The aggregate of ``levels[i] factors[i] + floors[i]`` on a strip; ``value`` and ``ranked`` are scratch."""
    use_wide_vectors()
    n = levels.shape[0]
    if kind == BEST:
        _extreme(levels, factors, floors, True, out)
    elif kind == WORST:
        _extreme(levels, factors, floors, False, out)
    elif kind == RANKED:
        for r in range(n):
            for p in range(STRIP):
                ranked[r, p] = _F(-1.0)
        for i in range(n):
            f, b = factors[i], floors[i]
            for p in range(STRIP):
                value[p] = levels[i, p] * f + b
            _insert(value, i + 1, ranked)
        for p in range(STRIP):
            out[p] = _F(0.0)
        for r in range(n):
            w = weights[r]
            if w != _F(0.0):
                for p in range(STRIP):
                    out[p] += w * ranked[r, p]
    else:
        for p in range(STRIP):
            out[p] = _F(0.0)
        for i in range(n):
            f, b = factors[i] * weights[i], floors[i] * weights[i]
            for p in range(STRIP):
                out[p] += f * levels[i, p] + b


@njit(**OPTIONS)
def _add_payoff(profile: Any, aggregate: Any, scale: Any, out: Any) -> None:
    """Add ``scale`` times a piecewise linear payoff; ``profile``: intercept, slope, count, then knot, bend, jump."""
    intercept, slope, count = profile[0] * scale, profile[1] * scale, int(profile[2])
    for p in range(STRIP):
        out[p] += intercept + slope * aggregate[p]
    for j in range(count):
        knot, bend, jump = profile[3 + 3 * j], profile[4 + 3 * j] * scale, profile[5 + 3 * j] * scale
        for p in range(STRIP):
            out[p] += bend * max(aggregate[p] - knot, _F(0.0))
        if jump != _F(0.0):
            for p in range(STRIP):
                out[p] += jump if aggregate[p] > knot else _F(0.0)


@_stored(
    types.void(_F32_2, types.int64, _F32_1, types.int64, types.int64, _F32_2, _F32_2, _F32_3, _F32_2, _F32_2, _F32_2)
)
def decision_inputs(
    levels: Any,
    kind: int,
    weights: Any,
    first_rank: int,
    n_ranks: int,
    scores: Any,
    powers: Any,
    shocks: Any,
    profiles: Any,
    floors: Any,
    out: Any,
) -> None:
    """What is paid now, and what a continuation value is made of.

    ``levels`` : (n, lanes), lanes a multiple of ``STRIP``. ``kind``, ``weights`` : of the aggregate.
    ``scores`` : (n_scores, n) loadings of log-levels. ``powers`` : (n_powers, n), see ``_power_means``.
    ``shocks`` : (horizons, m, n) growth factors, (.., 1) of the aggregate itself where it is geometric.
    ``profiles`` : (2 + horizons, width), of payoff and income now and of later payoffs. ``floors`` : (1 + horizons, n)
    added to levels now and, moved by a shock, to later ones; none for a geometric aggregate.
    ``out`` : (3 + n_ranks + n_scores + n_powers + horizons, lanes): payoff and income now, aggregate, logs of the
    levels ranked ``first_rank`` and following, scores, log power means, payoffs averaged over each horizon's shocks.
    """
    use_wide_vectors()
    n, lanes = levels.shape
    n_scores, horizons, m = scores.shape[0], shocks.shape[0], shocks.shape[1]
    ones = np.ones(n, dtype=np.float32)
    none = np.zeros(n, dtype=np.float32)
    strip = np.empty((n, STRIP), dtype=np.float32)
    full = np.empty((n, STRIP), dtype=np.float32)
    result = np.empty((out.shape[0], STRIP), dtype=np.float32)
    value = np.empty(STRIP, dtype=np.float32)
    aggregate = np.empty(STRIP, dtype=np.float32)
    moved = np.empty(STRIP, dtype=np.float32)
    ranked = np.empty((n, STRIP), dtype=np.float32)
    logs = np.empty((n, STRIP), dtype=np.float64)
    wide = np.empty(STRIP, dtype=np.float64)
    share = _F(1.0 / m)
    for start in range(0, lanes, STRIP):
        _copy_in(levels, start, strip)
        for i in range(n):
            b = floors[0, i]
            for p in range(STRIP):
                full[i, p] = strip[i, p] + b
        if n_scores > 0 or kind == GEOMETRIC:
            for i in range(n):
                for p in range(STRIP):
                    logs[i, p] = log_double(float(full[i, p]))
        if kind == GEOMETRIC:
            for p in range(STRIP):
                wide[p] = 0.0
            for i in range(n):
                w = float(weights[i])
                for p in range(STRIP):
                    wide[p] += w * logs[i, p]
            for p in range(STRIP):
                aggregate[p] = _F(exp2_double(_LOG2_E * wide[p]))
        else:
            _aggregate(kind, weights, full, ones, none, value, ranked, aggregate)
        for row in range(result.shape[0]):
            for p in range(STRIP):
                result[row, p] = _F(0.0)
        _add_payoff(profiles[0], aggregate, _F(1.0), result[0])
        _add_payoff(profiles[1], aggregate, _F(1.0), result[1])
        for p in range(STRIP):
            result[2, p] = aggregate[p]
        at = 3
        if n_ranks > 0:
            depth = first_rank + n_ranks
            for r in range(depth):
                for p in range(STRIP):
                    ranked[r, p] = _F(-1.0)
            for i in range(n):
                for p in range(STRIP):
                    value[p] = full[i, p]
                _insert(value, min(i + 1, depth), ranked)
            for r in range(n_ranks):
                for p in range(STRIP):
                    result[at + r, p] = _F(log_double(float(ranked[first_rank + r, p])))
        at += n_ranks
        for s in range(n_scores):
            for p in range(STRIP):
                wide[p] = 0.0
            for i in range(n):
                a = float(scores[s, i])
                for p in range(STRIP):
                    wide[p] += a * logs[i, p]
            for p in range(STRIP):
                result[at + s, p] = _F(wide[p])
        at += n_scores
        if len(powers) > 0:
            _power_means(full, powers, kind == WORST, aggregate, value, moved, result, at)
        at += len(powers)
        for h in range(horizons):
            for s in range(m):
                if kind == GEOMETRIC:
                    f = shocks[h, s, 0]
                    for p in range(STRIP):
                        moved[p] = aggregate[p] * f
                else:
                    _aggregate(kind, weights, strip, shocks[h, s], floors[1 + h], value, ranked, moved)
                _add_payoff(profiles[2 + h], moved, share, result[at + h])
        _copy_out(result, start, out)


@_stored(types.void(_F32_2, types.int64, types.float64, types.float64, types.float64, _F32_1))
def hold(inputs: Any, horizons: int, floor: float, least: float, most: float, out: Any) -> None:
    """Hold ``out`` (lanes,) at ``floor`` or more, and within ``least`` and ``most`` of the largest horizon's average.

    ``inputs`` : (n_inputs, lanes), the last ``horizons`` rows the averages.
    """
    use_wide_vectors()
    first = inputs.shape[0] - horizons
    for p in range(inputs.shape[1]):
        anchor = inputs[first, p]
        for h in range(1, horizons):
            anchor = max(anchor, inputs[first + h, p])
        held = min(max(out[p], anchor + _F(least)), anchor + _F(most))
        out[p] = max(held, _F(floor))
