"""How one European problem is laid out for sampling: what is integrated exactly, what is drawn.

Log-levels are normal with covariance C. A common factor ``c w`` that moves the log-levels of
a chosen group of assets equally is split off and integrated exactly (see
``conditional``); only the rest, of covariance ``C - c^2 1 1'``, is sampled. Its rank is one
less, and payoffs with kinks and jumps become smooth functions of what is sampled.

The group is everything for ranked aggregates, which are homogeneous; for a weighted sum it
is the positive or the negative legs, whichever the factor moves more, or one leg alone.
A geometric aggregate is lognormal by itself: its factor is its own logarithm, and as the
rest of the log-levels is independent of it, nothing is left to draw.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.loadings import cholesky, common_deviations, principal_components

Array = NDArray[np.float64]

_LOG2_E = 1.0 / np.log(2.0)

#: Base-2 log-levels beyond this would leave the range of single precision.
_WIDEST = 120.0
_LARGEST_NORMAL = 6.4  # of a 32-bit fraction

#: How many times more than the legs of a sign a single leg must move the aggregate to be preferred.
_ALONE = 3.0


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
    direction: Array  # (n,) deviation of the factor in each log-level; zeros: none
    factor_deviation: float  # of the log of the scaled part, over the factor
    loadings: Array  # (n, dims) of the base-2 log-levels on independent normals

    @property
    def n_assets(self) -> int:
        return len(self.forwards)

    @property
    def dimensions(self) -> int:
        """Normals to draw per path."""
        return int(self.loadings.shape[1])

    @property
    def is_smoothed(self) -> bool:
        """Is there a factor to integrate over?"""
        return self.factor_deviation > 0.0

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
        if aggregate.is_ranked:
            weights, rank_weights = np.ones(n), weights
            importance = np.ones(n)
        else:
            importance = np.abs(weights) * law.forwards
        if aggregate.kind is AggregateKind.GEOMETRIC:
            return cls._geometric(law, weights, payoff)
        if aggregate.kind is AggregateKind.WEIGHTED_SUM:
            members, common = _best_group(law, weights)
            if common > 0.0 and np.all(weights[members] < 0.0):
                weights, payoff = -weights, reflected(payoff)
        else:
            members = np.ones(n, dtype=bool)
            common = float(common_deviations(law.covariance, members[None, :])[0])
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
            direction=direction[order],
            factor_deviation=common,
            loadings=loadings,
        )

    @classmethod
    def _geometric(cls, law: JointLognormal, weights: Array, payoff: PiecewiseLinear) -> Design:
        n = law.n_assets
        covariances = law.covariance @ weights  # of each log-level with the aggregate's logarithm
        deviation = float(np.sqrt(max(float(weights @ covariances), 0.0)))
        return cls(
            kind=AggregateKind.GEOMETRIC,
            payoff=payoff,
            order=np.arange(n),
            weights=weights,
            rank_weights=np.zeros(n),
            forwards=law.forwards,
            deviations=law.deviations,
            n_common=n,
            direction=covariances / deviation if deviation > 0.0 else np.zeros(n),
            factor_deviation=deviation,
            loadings=np.zeros((n, 0)),
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
    """The legs of one sign, or a single leg, that a common factor moves most; and its c.

    What it moves is c times the exposure of the group. A single leg must move several times as
    much as the legs of a sign to be chosen: it leaves the others outside.
    """
    live = law.deviations > 0.0
    alone = np.diag(live & (weights != 0.0))
    groups = np.vstack([(weights > 0.0) & live, (weights < 0.0) & live, alone])
    c = common_deviations(law.covariance, groups)
    moved = c * (groups @ (np.abs(weights) * law.forwards))
    moved[2:] /= _ALONE
    best = int(np.argmax(moved))
    if c[best] == 0.0:
        return np.ones(len(weights), dtype=bool), 0.0
    return groups[best], float(c[best])
