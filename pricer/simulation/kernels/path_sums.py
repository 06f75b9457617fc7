"""The fused path kernel: points, Brownian motions, readings, legs and sums in one pass over blocks."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numba import njit, types

from pricer.core.stored_code import digest_of, stored_under
from pricer.simulation.kernels.elementary import normal_from_bits
from pricer.simulation.kernels.levels import low_table, normals_of_block
from pricer.simulation.kernels.local_vol import walk
from pricer.simulation.kernels.path_legs import backward, forward
from pricer.simulation.kernels.path_plain import plain
from pricer.simulation.kernels.readings import add_deltas, path_logs, project, read
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors

# What is done with points.
SMOOTH, SMOOTH_WITH_RATIOS, PLAIN = 0, 1, 2

_L = np.uint64
_U = np.uint32


@njit(**OPTIONS)
def _pseudo_normals(block: int, randomisation: int, seed: Any, bits: Any, normals: Any) -> None:
    """Independent normals: hashed counters, 64 bits between rows (Steele, Lea & Flood 2014), 32 along them."""
    use_wide_vectors()
    rows = normals.shape[0]
    for j in range(rows):
        z = _L(seed + _L(((randomisation << 24) + block) * rows + j) * _L(0x9E3779B97F4A7C15))
        z = _L((z ^ (z >> _L(30))) * _L(0xBF58476D1CE4E5B9))
        z = _L((z ^ (z >> _L(27))) * _L(0x94D049BB133111EB))
        z = _L(z ^ (z >> _L(31)))
        key, start = _U(z), _U(z >> _L(32))
        for p in range(BLOCK):
            x = _U(_U(start + _U(p)) * _U(0x9E3779B1))
            x = _U(x ^ key)
            x = _U(_U(x ^ _U(x >> _U(16))) * _U(0x85EBCA6B))
            x = _U(_U(x ^ _U(x >> _U(13))) * _U(0xC2B2AE35))
            bits[j, p] = _U(x ^ _U(x >> _U(16)))
        for p in range(BLOCK):
            normals[j, p] = normal_from_bits(bits[j, p])


_ACCUMULATE = types.void(
    types.int64,  # first
    types.int64,  # last
    types.int64,  # mode
    types.uint64,  # pseudo-random seed
    types.uint32[:, :, ::1],  # columns
    types.uint32[:, :, ::1],  # words
    types.int64[::1],  # at
    types.int64[::1],  # left
    types.int64[::1],  # right
    types.float32[:, ::1],  # bridge weights
    types.float32[:, :, ::1],  # loadings
    types.float64[::1],  # common loadings
    types.float64[::1],  # projection
    types.float64[::1],  # shifts
    types.int64[:, ::1],  # readings
    types.float32[:, ::1],  # starts
    types.float32[:, ::1],  # weights
    types.float64[::1],  # degrees
    types.int64[:, ::1],  # legs
    types.float64[::1],  # first sums
    types.int64[:, ::1],  # events
    types.float64[:, ::1],  # event numbers
    types.int64[:, ::1],  # payments
    types.float64[::1],  # profiles
    types.uint32[:, ::1],  # table
    types.float32[:, ::1],  # walks
    types.float32[:, ::1],  # drives
    types.float32[:, ::1],  # logs
    types.float64[:, ::1],  # common
    types.float32[:, ::1],  # levels
    types.float32[:, ::1],  # ranks
    types.float64[::1],  # paths
    types.float64[:, ::1],  # heights
    types.float32[:, ::1],  # shares
    types.float64[::1],  # scratch
    types.float32[:, :, ::1],  # kept
    types.float64[:, :, ::1],  # held
    types.float64[:, :, ::1],  # memory
    types.float64[:, ::1],  # adjoints
    types.float64[:, ::1],  # sums
)

#: Kernels import from each other: a change in any of their files renews those on disk.
_SOURCES = digest_of(Path(__file__).parent.glob("*.py"))


def _stored(signature: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile for exactly this signature and keep the result on disk."""

    def compile_stored(function: Callable[..., Any]) -> Any:
        return njit(signature, cache=True, **OPTIONS)(stored_under(_SOURCES, function))

    return compile_stored


@_stored(_ACCUMULATE)
def accumulate_paths(
    first: int, last: int, mode: int, seed: Any, columns: Any, words: Any, at: Any, left: Any, right: Any,
    bridge_weights: Any, loadings: Any, loadings_common: Any, projection: Any, shifts: Any, readings: Any, starts: Any,
    weights: Any, degrees: Any, legs: Any, first_sums: Any, events: Any, event_numbers: Any, payments: Any,
    profiles: Any, table: Any, walks: Any, drives: Any, logs: Any, common: Any, levels: Any, ranks: Any, paths: Any,
    heights: Any, shares: Any, scratch: Any, kept: Any, held_rows: Any, memory: Any, adjoints: Any,
    sums: Any,
) -> None:  # fmt: skip
    """Add points ``first`` to ``last`` of every randomisation to ``sums``.

    ``first`` is a multiple of ``BLOCK``; ``last`` is one too, or lies in the first block. ``seed`` above 0
    takes independent points instead of Sobol's. Tables and shapes: ``readings``, ``path_legs`` and
    ``path_sampler``. ``sums`` : (randomisations, n_legs + 2 n_events + n_readings n).
    """
    n = starts.shape[1]
    n_factors = walks.shape[0] // loadings.shape[0]
    n_legs = legs.shape[0]
    heads = n_legs + 2 * events.shape[0]
    for r in range(columns.shape[0]):
        if seed == _L(0):
            low_table(columns[r], table)
        for start in range(first, last, BLOCK):
            m = min(BLOCK, last - start)
            if seed > _L(0):
                _pseudo_normals(start // BLOCK, r, seed, table, walks)
            else:
                normals_of_block(start // BLOCK, columns[r], words[r], table, walks)
            walk(at, left, right, bridge_weights, n_factors, walks)
            path_logs(loadings, loadings_common, n_factors - 1, walks, drives, logs, common)
            read(readings, starts, weights, logs, levels, ranks, paths, heights, shares)
            if mode == PLAIN:
                for leg in range(n_legs):
                    plain(
                        leg, legs, first_sums, events, event_numbers, payments, profiles, readings, degrees, heights,
                        common, m, scratch, held_rows, sums[r],
                    )  # fmt: skip
                continue
            project(projection, shifts, common, scratch)
            with_ratios = mode == SMOOTH_WITH_RATIOS
            if with_ratios:
                adjoints[:] = 0.0
            for leg in range(n_legs):
                forward(
                    leg, legs, first_sums, events, event_numbers, payments, profiles, readings, degrees, shifts,
                    heights, common, with_ratios, m, scratch, kept, held_rows, memory, adjoints, sums[r],
                )  # fmt: skip
            if with_ratios:
                for back in range(n_legs):
                    backward(
                        n_legs - 1 - back, legs, events, readings, degrees, shifts, scratch, kept, held_rows, adjoints
                    )
                add_deltas(readings, shares, adjoints, n, m, sums[r, heads:])
