"""How one European problem is laid out for sampling: what is integrated exactly, what is drawn.

Log-levels are normal with covariance C. A common factor ``c w`` that moves the log-levels of
a chosen group of assets equally is split off and integrated exactly (see
``conditional``); only the rest, of covariance ``C - c^2 1 1'``, is sampled. Its rank is one
less, and payoffs with kinks and jumps become smooth functions of what is sampled.

The group is everything for ranked and geometric aggregates, which are homogeneous; for a
weighted sum it is the positive or the negative legs, whichever the factor moves more.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.loadings import cholesky, common_deviation, principal_components

Array = NDArray[np.float64]

_LOG2_E = 1.0 / np.log(2.0)

#: Base-2 log-levels beyond this would leave the range of single precision.
_WIDEST = 120.0
_LARGEST_NORMAL = 6.4  # of a 32-bit fraction


@dataclass(frozen=True, slots=True)
class Design:
    """Arrays are in the design's asset order: first those that the common factor scales.

    ``order`` : (n,) asset of the problem at each place. ``payoff`` and ``weights`` are
    reflected where the factor scales negative legs.
    """

    kind: AggregateKind
    payoff: PiecewiseLinear
    order: NDArray[np.int64]
    weights: Array  # (n,) of the aggregate per asset; ones for ranked aggregates
    rank_weights: Array  # (n,) best first; zeros where nothing is ranked
    forwards: Array  # (n,)
    deviations: Array  # (n,) of the log-levels
    n_common: int  # assets that the common factor scales
    common: float  # deviation c of the common factor in a log-level; 0: none
    degree: float  # degree of homogeneity of the aggregate in the scaled assets
    loadings: Array  # (n, dims) of the base-2 log-levels on independent normals

    @property
    def n_assets(self) -> int:
        return len(self.forwards)

    @property
    def dimensions(self) -> int:
        """Normals to draw per path."""
        return int(self.loadings.shape[1])

    @property
    def factor_deviation(self) -> float:
        """Deviation v of the log of the scaled part over the common factor."""
        return self.degree * self.common

    @property
    def drifted(self) -> Array:
        """Levels at zero normals and zero factor, (n,)."""
        out: Array = self.forwards * np.exp(-0.5 * self.deviations**2)
        return out

    @property
    def scales(self) -> Array:
        """What multiplies a sampled relative level in the aggregate; exponents for a geometric one."""
        if self.kind is AggregateKind.GEOMETRIC:
            return self.weights
        return self.weights * self.drifted

    @property
    def log2_scale(self) -> float:
        """Base-2 logarithm of a geometric aggregate at zero normals."""
        return float(self.weights @ np.log2(self.drifted))

    @classmethod
    def of(cls, law: JointLognormal, aggregate: Aggregate, payoff: PiecewiseLinear, *, triangular: bool) -> Design:
        """Choose the common factor and the loadings; ``triangular`` takes Cholesky's."""
        n = law.n_assets
        weights = np.array(aggregate.weights, dtype=float)
        rank_weights = np.zeros(n)
        degree = 1.0
        if aggregate.is_ranked:
            weights, rank_weights = np.ones(n), weights
            importance = np.ones(n)
        elif aggregate.kind is AggregateKind.GEOMETRIC:
            degree = float(weights.sum())
            importance = weights
        else:
            importance = np.abs(weights) * law.forwards
        if aggregate.kind is AggregateKind.WEIGHTED_SUM:
            members, common = _best_group(law, weights)
            if common > 0.0 and np.all(weights[members] < 0.0):
                weights, payoff = -weights, reflected(payoff)
        else:
            members = np.ones(n, dtype=bool)
            common = common_deviation(law.covariance, members)
        if common == 0.0:
            members = np.ones(n, dtype=bool)
        order = np.argsort(~members, kind="stable")
        direction = np.where(members, common, 0.0)
        rest = (law.covariance - np.outer(direction, direction))[np.ix_(order, order)]
        importance = np.maximum(importance, 1e-3 * np.max(importance, initial=1e-300))[order]
        variances = np.diag(law.covariance)[order]
        if triangular:
            loadings = cholesky(rest, variances)
        else:
            loadings = principal_components(rest, importance / np.max(importance), variances)
        loadings = loadings * _LOG2_E
        if _LARGEST_NORMAL * np.max(np.linalg.norm(loadings, axis=1), initial=0.0) > _WIDEST:
            raise ValueError("log-levels too wide to sample: a standard deviation over the whole time above 13")
        return cls(
            kind=aggregate.kind,
            payoff=payoff,
            order=order,
            weights=weights[order],
            rank_weights=rank_weights,
            forwards=law.forwards[order],
            deviations=law.deviations[order],
            n_common=int(members.sum()),
            common=common,
            degree=degree,
            loadings=loadings,
        )


def reflected(payoff: PiecewiseLinear) -> PiecewiseLinear:
    """``a -> payoff(-a)``; at a jump the value is that of the other side."""
    intercepts, slopes = payoff.pieces()
    return PiecewiseLinear(
        float(intercepts[-1]),
        -float(slopes[-1]),
        tuple(-k for k in reversed(payoff.knots)),
        tuple(reversed(payoff.bends)),
        tuple(-j for j in reversed(payoff.jumps)),
    )


def _best_group(law: JointLognormal, weights: Array) -> tuple[NDArray[np.bool_], float]:
    """The legs of one sign, failing these a single leg, that a common factor moves most; and its c."""
    n = len(weights)
    live = law.deviations > 0.0
    by_sign = [(weights > 0.0) & live, (weights < 0.0) & live]
    alone = [live & (np.arange(n) == i) for i in range(n) if weights[i] != 0.0]
    for candidates in (by_sign, alone):
        found = [(common_deviation(law.covariance, members), members) for members in candidates]
        c, members = max(found, key=lambda f: f[0] * float(np.abs(weights[f[1]]) @ law.forwards[f[1]]))
        if c > 0.0:
            return members, c
    return np.ones(n, dtype=bool), 0.0
