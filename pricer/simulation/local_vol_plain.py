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
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


def brownian(plan: LocalVolPlan, times: Array, words: NDArray[np.uint32], points: int) -> Array:
    """Correlated Brownian motions of the first points of one randomisation at all times, (n_times, n_rows, points).

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


def path_sums(plan: LocalVolPlan, grid: TimeGrid, steps: LognormalSteps, motions: Array) -> Array:
    """Sums over paths, (3 + 4 n,), as ``kernels.local_vol_paths.accumulate`` describes them.

    ``motions`` : (n_steps + 1, n_rows, paths) of ``brownian`` at the times of ``grid``; ``steps`` in the plan's order.
    """
    tables = LocalVolTables.of(plan.surfaces, grid, steps.shifts)
    moves = np.diff(motions, axis=0)
    n, rows, last = plan.n_assets, motions.shape[1], grid.n_steps - 2
    starts, levels, slopes = (np.empty((n, motions.shape[2])) for _ in range(3))
    deviations, turns = np.empty_like(starts), np.empty_like(starts)
    logs = steps.starts[:rows, None] + np.einsum("ti,tip->ip", steps.volatilities[:-1, :rows], moves[:-1])
    drops = steps.conversion_drops[:, :, None]
    rates = np.exp(plan.exposures @ logs[n:] - drops[0])
    for i in range(n):
        q = np.full(motions.shape[2], float(tables.starts[i]))
        tangent = np.full(motions.shape[2], float(tables.start_slopes[i]))
        for s in range(last + 1):
            q = q + moves[s, i]
            if s < last:
                value, slope = look_up(tables.moves[s, i], tables.lowest[s, i], tables.per_node[s, i], q)
                q, tangent = q + value, tangent * (1.0 + slope)
        nodes = tables.lowest[last, i], tables.per_node[last, i]
        log2, log2_slope = look_up(tables.before[-1, i], *nodes, q)
        s_of_x, s_slope = look_up(tables.deviations[-1, i], *nodes, q)
        moving = plan.shares[i] * 2.0**log2
        levels[i] = moving + 1.0 - plan.shares[i]
        part = moving / levels[i]
        change = np.log(2.0) * log2_slope * tangent
        slopes[i] = part * change
        quarter = 0.25 * s_of_x**2
        deviations[i] = s_of_x * part * (1.0 + (1.0 - part**2) * quarter)
        by_s = part * (1.0 + 3.0 * (1.0 - part**2) * quarter)
        by_part = s_of_x * (1.0 + (1.0 - 3.0 * part**2) * quarter)
        turns[i] = by_s * s_slope * tangent + by_part * part * (1.0 - part) * change
        starts[i] = levels[i] * rates[i]
    noise = moves[-1] / np.sqrt(float(grid.lengths[-1]))
    b = steps.last_deviations[:rows, None]
    rate_moves = np.exp(plan.exposures @ (b * noise)[n:] - drops[1])
    drifts = steps.last_drifts[:, None]
    local = _finish(plan, starts, slopes, deviations, turns, noise, drifts, rate_moves)
    ones = np.ones_like(starts)
    control_starts = np.exp(logs[:n]) * rates
    control = _finish(plan, control_starts, ones, b[:n] * ones, 0.0 * ones, noise, drifts, rate_moves)
    heads = [local[0], control[0], local[1]]
    return np.concatenate([heads, local[2 : 2 + n], control[2 : 2 + n], starts.sum(axis=1), local[2 + n :]])


def _finish(
    plan: LocalVolPlan,
    starts: Array,
    slopes: Array,
    deviations: Array,
    turns: Array,
    noise: Array,
    drifts: Array,
    rate_moves: Array,
) -> Array:
    """Value, aggregate, derivatives to log X(0) and to log-levels over ``scales``, (2 + 2 n,); inputs (n, paths).

    ``noise`` also has rows of the exchange rates.
    """
    design, n = plan.design, plan.n_assets
    inside = (np.arange(n) < design.n_common)[:, None]
    c = shift = np.zeros(noise.shape[1])
    if plan.smooth:
        u = np.concatenate([np.where(inside, 1.0 / deviations, 0.0), np.zeros((len(noise) - n, noise.shape[1]))])
        v = plan.inverse @ u
        square = 1.0 / (u * v).sum(axis=0)
        c, shift = np.sqrt(square), square * (v * noise).sum(axis=0)
    own_noise = noise[:n] - drifts
    moved = np.where(inside, shift, 0.0)
    levels = starts * np.exp(deviations * own_noise - 0.5 * deviations**2 - moved) * rate_moves
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
    out = integrate_factor(design.payoff, plan.degree * c, scaled, outside)
    aggregate = np.exp(0.5 * (plan.degree * c) ** 2) * scaled + outside
    by_level = np.where(inside, out.by_scaled * own, out.by_outside)
    by_factor = np.where(inside, out.by_factor * own, 0.0)
    rest = slopes + turns * (own_noise - deviations - moved / deviations)
    deltas = levels * (by_level * rest + by_factor * turns * c / deviations)
    sums = deltas.sum(axis=1), (levels * by_level).sum(axis=1)
    return np.concatenate([[out.value.sum(), aggregate.sum()], *sums])
