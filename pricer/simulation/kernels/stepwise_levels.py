"""Prices of paths along their common factor: simulated at the factor's nodes, smooth in between."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import exp2_double
from pricer.simulation.kernels.readings import BEST, GEOMETRIC, RANKED, SUM, WORST
from pricer.simulation.kernels.vectors import OPTIONS, SUM_OPTIONS

_LN2 = 0.6931471805599453

# Columns of the table of readings.
DATE, KIND, SINCE = range(3)


@njit(**OPTIONS)
def walk_nodes(
    noise: Any, directions: Any, nodes: Any, start: float, start_slope: float, moves: Any, levels: Any, lowest: Any,
    per_node: Any, dates: Any, rows: Any, places: Any, out: Any, slopes: Any,
) -> None:  # fmt: skip
    """X of one asset at the dates on a few paths, ``out`` (n_dates, lanes), for every value of the factor in ``nodes``.

    Lanes are paths times nodes: paths go together so that a step's table is fetched once for all. ``noise`` (n_paths,
    n_steps), ``directions`` (n_steps,) : increments are ``noise + directions w``; ``moves`` (n_steps - 1, NODES, 2),
    ``levels`` (n_dates, NODES, 2) : values and rises; ``dates`` (n_steps,) : the date that ends a step, -1 for none.
    ``slopes`` (n_dates, lanes) by the logarithm of X at the start. Scratch ``rows`` (4, lanes), ``places`` (lanes,)
    integers.
    """
    n_paths, n_steps = noise.shape
    n_nodes = len(nodes)
    lanes = n_paths * n_nodes
    highest = float(levels.shape[1] - 2)
    for j in range(lanes):
        rows[0, j] = start
        rows[2, j] = start_slope
    for s in range(n_steps):
        low, scale, date, direction = lowest[s], per_node[s], dates[s], directions[s]
        for path in range(n_paths):
            move = noise[path, s]
            for j in range(n_nodes):
                rows[3, path * n_nodes + j] = move + direction * nodes[j]
        for j in range(lanes):
            q = rows[0, j] + rows[3, j]
            x = (q - low) * scale
            place = np.int32(min(max(x, 0.0), highest))
            rows[0, j] = q
            rows[1, j] = x - place
            places[j] = place
        if date >= 0:
            for j in range(lanes):
                rise = levels[date, places[j], 1]
                out[date, j] = levels[date, places[j], 0] + rise * rows[1, j]
                slopes[date, j] = rise * scale * rows[2, j]
        if s + 1 < n_steps:
            for j in range(lanes):
                rise = moves[s, places[j], 1]
                rows[0, j] += moves[s, places[j], 0] + rise * rows[1, j]
                rows[2, j] *= 1.0 + rise * scale
    for k in range(len(out)):
        for j in range(lanes):
            x = exp2_double(out[k, j])
            out[k, j] = x
            slopes[k, j] *= _LN2 * x


@njit(**SUM_OPTIONS)
def spread(at_nodes: Any, scale: float, floor: float, weights: Any, out: Any) -> None:
    """Prices ``scale X + floor`` at the ends of cells (n_ends,) from X at the nodes (n_nodes,)."""
    for f in range(len(out)):
        out[f] = floor
    for j in range(len(at_nodes)):
        x = scale * at_nodes[j]
        for f in range(len(out)):
            out[f] += weights[j, f] * x


@njit(**SUM_OPTIONS)
def read(table: Any, references: Any, weights: Any, prices: Any, ranks: Any, out: Any) -> None:
    """Every reading at the ends of cells, ``out`` (n_readings, n_ends).

    ``table`` (n_readings, 3); ``references``, ``weights`` (n_readings, n); ``prices`` (n_dates, n, n_ends).
    """
    n, n_ends = prices.shape[1], prices.shape[2]
    for r in range(len(table)):
        date, kind, since = table[r, DATE], table[r, KIND], table[r, SINCE]
        for f in range(n_ends):
            out[r, f] = 0.0
        for i in range(n):
            if kind == SUM and weights[r, i] == 0.0:
                continue
            for f in range(n_ends):
                below = references[r, i] if since < 0 else references[r, i] * max(prices[since, i, f], 1e-300)
                level = prices[date, i, f] / below
                if kind == SUM:
                    out[r, f] += weights[r, i] * level
                elif kind == BEST:
                    out[r, f] = level if i == 0 else max(out[r, f], level)
                elif kind == WORST:
                    out[r, f] = level if i == 0 else min(out[r, f], level)
                elif kind == GEOMETRIC:
                    out[r, f] += weights[r, i] * np.log(max(level, 1e-300))
                else:
                    place = i
                    while place > 0 and ranks[place - 1, f] < level:
                        ranks[place, f] = ranks[place - 1, f]
                        place -= 1
                    ranks[place, f] = level
        if kind == GEOMETRIC:
            for f in range(n_ends):
                out[r, f] = np.exp(out[r, f])
        elif kind == RANKED:
            for i in range(n):
                for f in range(n_ends):
                    out[r, f] += weights[r, i] * ranks[i, f]


@njit(**OPTIONS)
def _chosen(table: Any, references: Any, prices: Any, r: int, f: int) -> Any:
    """The asset that is the best or the worst of reading ``r`` at the end ``f`` of a cell; -1 for other readings."""
    date, kind, since = table[r, DATE], table[r, KIND], table[r, SINCE]
    if kind not in (BEST, WORST):
        return -1
    out, found = -1, 0.0
    for i in range(prices.shape[1]):
        level = prices[date, i, f] / (references[r, i] * (1.0 if since < 0 else max(prices[since, i, f], 1e-300)))
        if out < 0 or (level > found if kind == BEST else level < found):
            out, found = i, level
    return out


@njit(**SUM_OPTIONS)
def add_slopes(
    table: Any, references: Any, weights: Any, prices: Any, readings: Any, adjoints: Any, cell_weights: Any,
    price_slopes: Any, of_prices: Any, slopes: Any,
) -> None:  # fmt: skip
    """Hand derivatives by readings, ``adjoints``, on to where assets start: added to ``slopes`` (n,).

    ``price_slopes`` (n_dates, n, n_nodes) of prices at the nodes by the logarithm at the start. Scratch ``of_prices``
    as ``prices``.
    """
    n_dates, n, n_ends = prices.shape
    of_prices[:] = 0.0
    for r in range(len(table)):
        date, kind, since = table[r, DATE], table[r, KIND], table[r, SINCE]
        for f in range(n_ends):
            moved = adjoints[r, f]
            if moved == 0.0:
                continue
            chosen = _chosen(table, references, prices, r, f)
            for i in range(n):
                if chosen >= 0 and i != chosen:
                    continue
                before = 1.0 if since < 0 else max(prices[since, i, f], 1e-300)
                start = references[r, i] * before
                level = prices[date, i, f] / start
                weight = weights[r, i]
                if chosen >= 0:
                    weight = 1.0
                elif kind == GEOMETRIC:
                    weight *= readings[r, f] / max(level, 1e-300)
                elif kind == RANKED:
                    place = 0
                    for j in range(n):
                        below = references[r, j] * (1.0 if since < 0 else max(prices[since, j, f], 1e-300))
                        other = prices[date, j, f] / below
                        place += int(other > level or (other == level and j < i))
                    weight = weights[r, place]
                of_prices[date, i, f] += moved * weight / start
                if since >= 0:
                    of_prices[since, i, f] -= moved * weight * level / before
    for k in range(n_dates):
        for i in range(n):
            size = 0.0
            for f in range(n_ends):
                size += abs(of_prices[k, i, f])
            if size == 0.0:
                continue
            for j in range(len(cell_weights)):
                total = 0.0
                for f in range(n_ends):
                    total += cell_weights[j, f] * of_prices[k, i, f]
                slopes[i] += total * price_slopes[k, i, j]
