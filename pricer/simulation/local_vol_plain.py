"""The local-volatility kernel in plain NumPy and double precision: slow, short, and what tests trust.

Same points, bridge and tables as ``kernels.local_vol_paths.accumulate``, same sums.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from pricer.contracts.aggregate import AggregateKind
from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from pricer.simulation.conditional import integrate_factor
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.local_vol_tables import LocalVolTables, Words
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


def brownian(plan: LocalVolPlan, times: Array, words: NDArray[np.uint32], points: int) -> Array:
    """Correlated Brownian motions of the first points of one randomisation at all times, (n_times, n, points).

    ``words`` : (n_steps * dims, WORDS) random.
    """
    bridge = Bridge.over(times)
    coordinates = bridge.coordinates(plan.sizes)
    numbers = sobol.extended_directions(coordinates.size)[coordinates.ravel()]
    normals = ndtri((sobol.scrambled_points(numbers, words, 0, points) + 0.5) / 2.0**32)
    walks = bridge.walk(normals.reshape(*coordinates.shape, points))
    moved = np.einsum("ij,tjp->tip", plan.loadings, walks)
    return np.concatenate([np.zeros_like(moved[:1]), moved])


def look_up(table: Words, lowest: float, per_node: float, states: Array) -> tuple[Array, Array]:
    """Values and slopes of one table at ``states``."""
    value, rise = (
        half.astype(np.uint32).view(np.float32).astype(float)
        for half in (table & np.uint64(0xFFFFFFFF), table >> np.uint64(32))
    )
    x = (states - lowest) * per_node
    node = np.clip(x, 0, len(table) - 2).astype(int)
    return value[node] + rise[node] * (x - node), rise[node] * per_node


def path_sums(plan: LocalVolPlan, grid: TimeGrid, motions: Array) -> Array:
    """Sums over paths, (2 + 3 n,), as ``LocalVolSampler.extend`` describes them.

    ``motions`` : (n_steps + 1, n, paths) of ``brownian`` at the times of ``grid``.
    """
    tables = LocalVolTables.of(plan.surfaces, grid)
    moves = np.diff(motions, axis=0)
    n, last = plan.design.n_assets, grid.n_steps - 2
    starts, levels, slopes = (np.empty(motions.shape[1:]) for _ in range(3))
    deviations, turns = np.empty_like(starts), np.empty_like(starts)
    for i in range(n):
        q = np.full(motions.shape[2], float(tables.starts[i]))
        tangent = np.full(motions.shape[2], float(tables.start_slopes[i]))
        for s in range(last + 1):
            q = q + moves[s, i]
            if s < last:
                value, slope = look_up(tables.moves[s, i], tables.lowest[s, i], tables.per_node[s, i], q)
                q, tangent = q + value, tangent * (1.0 + slope)
        nodes = tables.lowest[last, i], tables.per_node[last, i]
        log2, log2_slope = look_up(tables.before_last[i], *nodes, q)
        s_of_x, s_slope = look_up(tables.deviations[i], *nodes, q)
        moving = plan.shares[i] * 2.0**log2
        starts[i] = moving + 1.0 - plan.shares[i]
        part = moving / starts[i]
        change = np.log(2.0) * log2_slope * tangent
        slopes[i] = part * change
        deviations[i] = s_of_x * part
        turns[i] = s_slope * tangent * part + s_of_x * part * (1.0 - part) * change
    length = float(grid.lengths[-1])
    noise = moves[-1] / np.sqrt(length)
    local = _finish(plan, starts, slopes, deviations, turns, noise)
    a = plan.lognormal_volatilities[:, None]
    levels = np.exp(a * motions[-2] - 0.5 * a**2 * (plan.years - length))
    ones = np.ones_like(levels)
    lognormal = _finish(plan, levels, ones, a * np.sqrt(length) * ones, 0.0 * ones, noise)
    return np.concatenate([local, lognormal, starts.sum(axis=1)])


def _finish(plan: LocalVolPlan, starts: Array, slopes: Array, deviations: Array, turns: Array, noise: Array) -> Array:
    """Value and derivatives to log X(0) over ``scales``, (1 + n,); all inputs (n, paths)."""
    design = plan.design
    inside = (np.arange(design.n_assets) < design.n_common)[:, None]
    c = shift = np.zeros(noise.shape[1])
    if plan.smooth:
        u = np.where(inside, 1.0 / deviations, 0.0)
        v = plan.inverse @ u
        square = 1.0 / (u * v).sum(axis=0)
        c, shift = np.sqrt(square), square * (v * noise).sum(axis=0)
    moved = np.where(inside, shift, 0.0)
    levels = starts * np.exp(deviations * noise - 0.5 * deviations**2 - moved)
    scales, outside, own = plan.scales[:, None], np.zeros_like(c), np.ones_like(c)
    if design.kind is AggregateKind.GEOMETRIC:
        scaled = 2.0 ** (plan.log2_scale + plan.scales @ np.log2(levels))
        levels, own = np.ones_like(levels), scaled
    elif design.kind is AggregateKind.WEIGHTED_SUM:
        scaled, outside = (np.where(side, scales * levels, 0.0).sum(axis=0) for side in (inside, ~inside))
    else:
        ranks = np.argsort(np.argsort(-scales * levels, axis=0, kind="stable"), axis=0)
        levels = levels * design.rank_weights[ranks]
        scaled = plan.scales @ levels
    out = integrate_factor(design.payoff, design.degree * c, scaled, outside)
    by_level = np.where(inside, out.by_scaled * own, out.by_outside)
    by_factor = np.where(inside, out.by_factor * own, 0.0)
    rest = slopes + turns * (noise - deviations - moved / deviations)
    deltas = levels * (by_level * rest + by_factor * turns * c / deviations)
    return np.concatenate([[out.value.sum()], deltas.sum(axis=1)])
