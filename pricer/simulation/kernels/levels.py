"""From scrambled Sobol points to lognormal levels, one block of paths at a time."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import exp2_single, normal_from_bits
from pricer.simulation.kernels.vectors import BLOCK, BLOCK_BITS, OPTIONS, use_wide_vectors

_U = np.uint32


@njit(**OPTIONS)
def scrambled_columns(directions: Any, words: Any, columns: Any) -> None:
    """Direction numbers times a random lower triangular binary matrix (Matousek 1998).

    ``directions`` : (dims, bits) uint32, highest bit first.
    ``words`` : (dims, bits + 1) uint32, random; word c fills column c below its unit diagonal.
    ``columns`` : (dims, bits) uint32, result.
    """
    use_wide_vectors()
    dims, bits = directions.shape
    for j in range(dims):
        for b in range(bits):
            columns[j, b] = _U(0)
        for c in range(bits):  # direction numbers have no lower bits than these
            top = _U(_U(1) << _U(31 - c))
            column = _U(top | _U(words[j, c] & _U(top - _U(1))))
            for b in range(bits):
                bit = _U(_U(directions[j, b] >> _U(31 - c)) & _U(1))
                columns[j, b] = _U(columns[j, b] ^ _U(column * bit))


@njit(**OPTIONS)
def low_table(columns: Any, table: Any) -> None:
    """The first ``BLOCK`` points without shift: ``table`` (dims, BLOCK) uint32."""
    for j in range(columns.shape[0]):
        table[j, 0] = _U(0)
        length = 1
        for b in range(BLOCK_BITS):
            column = columns[j, b]
            for p in range(length):
                table[j, length + p] = _U(table[j, p] ^ column)
            length *= 2


@njit(**OPTIONS)
def normals_of_block(block: int, columns: Any, words: Any, table: Any, normals: Any) -> None:
    """Normals of points ``block * BLOCK`` and following: ``normals`` (>= dims, BLOCK) float32.

    Points come in natural order: all high bits of the index are the same within a block, so
    a point is one exclusive-or of the block's word with the table's.
    """
    use_wide_vectors()
    for j in range(columns.shape[0]):
        high = words[j, words.shape[1] - 1]
        rest = block
        b = BLOCK_BITS
        while rest > 0:
            if rest & 1:
                high = _U(high ^ columns[j, b])
            rest >>= 1
            b += 1
        for p in range(BLOCK):
            normals[j, p] = normal_from_bits(_U(table[j, p] ^ high))


@njit(**OPTIONS)
def log_levels(loadings: Any, widths: Any, normals: Any, logs: Any) -> None:
    """``logs = loadings @ normals`` : (n, BLOCK) float32, four rows and four columns at a time.

    ``loadings`` : (n, dims) with dims a multiple of 4. ``widths`` : (n,) multiples of 4; row i
    has zeros from column ``widths[i]`` on, and widths do not decrease, so a triangular
    matrix costs half.
    """
    use_wide_vectors()
    n = loadings.shape[0]
    tiled = n - n % 4
    for i in range(0, tiled, 4):
        for j in range(0, widths[i + 3], 4):
            a0, a1, a2, a3 = loadings[i, j], loadings[i, j + 1], loadings[i, j + 2], loadings[i, j + 3]
            b0, b1, b2, b3 = loadings[i + 1, j], loadings[i + 1, j + 1], loadings[i + 1, j + 2], loadings[i + 1, j + 3]
            c0, c1, c2, c3 = loadings[i + 2, j], loadings[i + 2, j + 1], loadings[i + 2, j + 2], loadings[i + 2, j + 3]
            d0, d1, d2, d3 = loadings[i + 3, j], loadings[i + 3, j + 1], loadings[i + 3, j + 2], loadings[i + 3, j + 3]
            if j == 0:
                for p in range(BLOCK):
                    z0, z1, z2, z3 = normals[0, p], normals[1, p], normals[2, p], normals[3, p]
                    logs[i, p] = a0 * z0 + a1 * z1 + a2 * z2 + a3 * z3
                    logs[i + 1, p] = b0 * z0 + b1 * z1 + b2 * z2 + b3 * z3
                    logs[i + 2, p] = c0 * z0 + c1 * z1 + c2 * z2 + c3 * z3
                    logs[i + 3, p] = d0 * z0 + d1 * z1 + d2 * z2 + d3 * z3
            else:
                for p in range(BLOCK):
                    z0, z1, z2, z3 = normals[j, p], normals[j + 1, p], normals[j + 2, p], normals[j + 3, p]
                    logs[i, p] += a0 * z0 + a1 * z1 + a2 * z2 + a3 * z3
                    logs[i + 1, p] += b0 * z0 + b1 * z1 + b2 * z2 + b3 * z3
                    logs[i + 2, p] += c0 * z0 + c1 * z1 + c2 * z2 + c3 * z3
                    logs[i + 3, p] += d0 * z0 + d1 * z1 + d2 * z2 + d3 * z3
    for i in range(tiled, n):
        for j in range(0, widths[i], 4):
            a0, a1, a2, a3 = loadings[i, j], loadings[i, j + 1], loadings[i, j + 2], loadings[i, j + 3]
            if j == 0:
                for p in range(BLOCK):
                    logs[i, p] = a0 * normals[0, p] + a1 * normals[1, p] + a2 * normals[2, p] + a3 * normals[3, p]
            else:
                for p in range(BLOCK):
                    logs[i, p] += (
                        a0 * normals[j, p] + a1 * normals[j + 1, p] + a2 * normals[j + 2, p] + a3 * normals[j + 3, p]
                    )


@njit(**OPTIONS)
def powers(logs: Any, levels: Any) -> None:
    """``levels = 2 ** logs``, both (n, BLOCK) float32."""
    use_wide_vectors()
    for i in range(logs.shape[0]):
        for p in range(BLOCK):
            levels[i, p] = exp2_single(logs[i, p])
