"""How one European problem under local volatility is laid out for sampling.

The design of the lognormal problem with the same forwards, at-the-money deviations and
correlation decides what the common factor of the last step scales, and what is drawn first; the
lognormal payoff on the same noise is the control variate.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.design import Design
from pricer.simulation.loadings import cholesky, principal_components
from pricer.simulation.local_vol_tables import LocalVolatility

Array = NDArray[np.float64]

#: A correlation with a smaller eigenvalue has no inverse of use: the last step is then not smoothed.
_SINGULAR = 1e-8


@dataclass(frozen=True, slots=True)
class LocalVolPlan:
    """Arrays are in the design's asset order.

    ``loadings`` : (n, dims) of unit Brownian motions on independent ones; ``sizes`` : (dims,) how far each
    of these moves the aggregate. ``inverse`` : (n, n) of the correlation. ``shares`` : (n,) part of
    each forward that moves, the rest being known dividends.
    """

    design: Design
    surfaces: tuple[LocalVolatility, ...]
    loadings: Array
    sizes: Array
    inverse: Array
    shares: Array
    years: float
    smooth: bool  # is there a common factor to integrate?

    @classmethod
    def of(
        cls,
        law: JointLognormal,
        surfaces: Sequence[LocalVolatility],
        shares: Array,
        years: float,
        aggregate: Aggregate,
        payoff: PiecewiseLinear,
        *,
        triangular: bool,
    ) -> LocalVolPlan:
        """``law`` : forwards and lognormal covariance over ``years``; its correlation is the Brownian motions'."""
        design = Design.of(law, aggregate, payoff, triangular=triangular)
        order = design.order
        correlation = law.correlation[np.ix_(order, order)]
        if aggregate.kind is AggregateKind.WEIGHTED_SUM:
            importance = np.abs(design.weights) * design.forwards * design.deviations
        elif aggregate.kind is AggregateKind.GEOMETRIC:
            importance = design.weights * design.deviations
        else:
            importance = design.deviations
        importance = np.maximum(importance / np.max(importance), 1e-3)
        ones = np.ones(law.n_assets)
        loadings = cholesky(correlation, ones) if triangular else principal_components(correlation, importance, ones)
        values, vectors = np.linalg.eigh(correlation)
        regular = bool(values[0] > _SINGULAR)
        inverse = (vectors / np.maximum(values, _SINGULAR)) @ vectors.T
        return cls(
            design=design,
            surfaces=tuple(surfaces[i] for i in order),
            loadings=loadings,
            sizes=np.linalg.norm(importance[:, None] * loadings, axis=0),
            inverse=np.ascontiguousarray(inverse),
            shares=np.asarray(shares, dtype=float)[order],
            years=years,
            smooth=regular and design.common > 0.0,
        )

    @property
    def kind(self) -> AggregateKind:
        return self.design.kind

    @property
    def scales(self) -> Array:
        """What multiplies a level over its forward in the aggregate; exponents for a geometric one, (n,)."""
        if self.kind is AggregateKind.GEOMETRIC:
            return self.design.weights
        out: Array = self.design.weights * self.design.forwards
        return out

    @property
    def log2_scale(self) -> float:
        """Base-2 logarithm of a geometric aggregate at the forwards."""
        return float(self.design.weights @ np.log2(self.design.forwards))

    @property
    def lognormal_volatilities(self) -> Array:
        """(n,) annualised."""
        out: Array = self.design.deviations / np.sqrt(self.years)
        return out
