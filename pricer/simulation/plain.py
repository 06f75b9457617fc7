"""The sampling kernel in plain NumPy and double precision: slow, short, and what tests trust.

Same sums as ``kernels.fused.accumulate``; also used where nothing is left to sample.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from pricer.contracts.aggregate import AggregateKind
from pricer.simulation import sobol
from pricer.simulation.conditional import integrate_factor
from pricer.simulation.design import Design

Array = NDArray[np.float64]


def sums(design: Design, words: NDArray[np.uint32], first: int, last: int) -> Array:
    """Sums over points ``first`` to ``last`` of each randomisation, (randomisations, 3 + 5 n).

    ``words`` : (randomisations, dims, WORDS) random. Geometric aggregates leave nothing to sample.
    """
    numbers = sobol.directions(design.dimensions)
    points = [sobol.scrambled_points(numbers, w, first, last) for w in words]
    return np.stack([path_sums(design, ndtri((p + 0.5) / 2.0**32)) for p in points])


def path_sums(design: Design, normals: Array) -> Array:
    """Sums over the paths of ``normals`` (dims, paths), (3 + 5 n,).

    Value, scaled part, outside part; then per asset, in the design's order: derivative by
    the relative level times that level, the same times the base-2 log of that level, the
    same weighted with the factor, second derivative times the level squared, level.
    """
    logs = design.loadings @ normals  # (n, paths)
    levels = 2.0**logs
    inside = (np.arange(design.n_assets) < design.n_common)[:, None]
    outside = np.zeros(normals.shape[1])
    moved = np.ones(normals.shape[1])
    gross: Array | float = 0.0
    if design.kind is AggregateKind.GEOMETRIC:
        scaled = 2.0 ** (design.log2_scale + design.scales @ logs)
        levels, moved = np.ones_like(levels), scaled
    elif design.kind is AggregateKind.WEIGHTED_SUM:
        legs = design.scales[:, None] * levels
        scaled, outside = (np.where(side, legs, 0.0).sum(axis=0) for side in (inside, ~inside))
        gross = np.abs(legs).sum(axis=0)
    else:
        best_first = np.argsort(-design.scales[:, None] * levels, axis=0, kind="stable")
        ranks = np.argsort(best_first, axis=0)
        levels = levels * design.rank_weights[ranks]
        scaled = design.scales @ levels
        gross = np.abs(design.scales) @ np.abs(levels)
    out = integrate_factor(design.payoff, design.factor_deviation, scaled, outside, gross)
    by_level = np.where(inside, out.by_scaled * moved, out.by_outside) * levels
    by_factor = np.where(inside, out.by_factor * moved, 0.0) * levels
    second = np.where(inside, out.by_scaled_twice * moved**2, out.by_outside_twice) * levels**2
    legs = np.stack([by_level, by_level * logs, by_factor, second, levels], axis=1).sum(axis=2)
    head = [out.value.sum(), scaled.sum(), outside.sum()]
    return np.concatenate([head, legs.ravel()])
