"""The forward equation's steps in time: compiled, some ten microseconds each."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[np.float64]


@njit(cache=True, nogil=True, error_model="numpy")
def march(
    calls: Array,
    k: Array,
    down: Array,
    up: Array,
    rows: Array,
    lowest: Array,
    spacing: Array,
    lengths: Array,
    first_steps: int,
    steps: int,
    out: Array,
) -> None:
    """Fill ``out`` (m, n) with the calls of log-strikes ``k`` (n,) at the end of each of m pieces of time.

    ``calls`` (n,) at first; both ends keep their value. ``down``, ``up`` (n,): weights of the neighbours in
    ``c_kk - c_k``, less whose sum the point itself has. ``rows`` (m, nodes): local volatility of each piece at nodes
    from ``lowest`` (m,), ``spacing`` (m,) apart, linear between, constant beyond. ``lengths`` (m,) in years.
    The first piece is done in ``first_steps`` steps of implicit Euler, the others in ``steps`` of Crank-Nicolson,
    each by elimination without pivots, which diagonals above 1 do not need; a piece's steps share the pivots.
    """
    n, last = k.size, rows.shape[1] - 1
    below, above, ratio, inverse = np.zeros(n), np.zeros(n), np.zeros(n), np.ones(n)
    now, known = calls.copy(), np.zeros(n)
    for piece in range(lengths.size):
        count, implicit = (first_steps, 1.0) if piece == 0 else (steps, 0.5)
        explicit = 1.0 - implicit
        rate = 0.5 * lengths[piece] / count
        row = rows[piece]
        for j in range(1, n - 1):
            x = min(max((k[j] - lowest[piece]) / spacing[piece], 0.0), float(last))
            node = min(int(x), last - 1)
            sigma = row[node] + (x - node) * (row[node + 1] - row[node])
            below[j], above[j] = rate * sigma * sigma * down[j], rate * sigma * sigma * up[j]
            ratio[j] = implicit * below[j]
            pivot = 1.0 + implicit * (below[j] + above[j])
            if j > 1:
                ratio[j] *= inverse[j - 1]
                pivot -= ratio[j] * implicit * above[j - 1]
            inverse[j] = 1.0 / pivot
        known[0] = now[0]
        for _ in range(count):
            for j in range(1, n - 1):
                change = below[j] * (now[j - 1] - now[j]) + above[j] * (now[j + 1] - now[j])
                known[j] = now[j] + explicit * change + ratio[j] * known[j - 1]
            for j in range(n - 2, 0, -1):
                now[j] = (known[j] + implicit * above[j] * now[j + 1]) * inverse[j]
        out[piece] = now
