"""How one European problem under local volatility is laid out for sampling.

The design of the lognormal problem decides what the common factor of the last step scales,
and what is drawn first; the lognormal payoff on the same noise is the control variate.
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
    """Arrays are in the design's asset order; rows are the assets, then the simulated factors of exchange rates.

    ``forwards`` : (n,) of the levels before any change of measure; ``shares`` : (n,) part of each that moves,
    the rest being known dividends. ``exposures`` : (n, n_rows - n) of the logarithm of the exchange rate that converts
    each level to those of the factors of rates, 0 for none.
    ``loadings`` : (n_rows, dims) of unit Brownian motions on independent ones; ``sizes`` : (dims,) how far each
    of these moves the aggregate. ``inverse`` : (n_rows, n_rows) of the correlation. ``degree`` : by how much the
    aggregate's logarithm moves when all levels' do by 1.
    """

    design: Design
    surfaces: tuple[LocalVolatility, ...]
    forwards: Array
    shares: Array
    exposures: Array
    loadings: Array
    sizes: Array
    inverse: Array
    degree: float
    smooth: bool  # is there a common factor to integrate?

    @classmethod
    def of(
        cls,
        law: JointLognormal,
        surfaces: Sequence[LocalVolatility],
        correlation: Array,
        forwards: Array,
        shares: Array,
        exposures: Array,
        rate_deviations: Array,
        aggregate: Aggregate,
        payoff: PiecewiseLinear,
        *,
        triangular: bool,
    ) -> LocalVolPlan:
        """From arrays in the problem's order.

        ``law`` : lognormal levels to lay out by. ``correlation`` : (n_rows, n_rows) of the Brownian motions;
        ``exposures`` : (n, n_rows - n); ``rate_deviations`` : (n_rows - n,) of the factors' logarithms over
        the whole time.
        """
        design = Design.of(law, aggregate, payoff, triangular=triangular)
        order, n = design.order, law.n_assets
        rows = np.concatenate([order, np.arange(n, len(correlation))])
        rho = correlation[np.ix_(rows, rows)]
        exposed = np.asarray(exposures, dtype=float)[order]
        geometric = aggregate.kind is AggregateKind.GEOMETRIC
        weights = np.abs(design.weights) * (1.0 if geometric else design.forwards)
        if aggregate.is_ranked:
            weights = np.ones(n)
        of_rates = np.abs(exposed).T @ weights
        importance = np.concatenate([weights * design.deviations, of_rates * rate_deviations])
        importance = np.maximum(importance / np.max(importance), 1e-3)
        ones = np.ones(len(rows))
        loadings = cholesky(rho, ones) if triangular else principal_components(rho, importance, ones)
        values, vectors = np.linalg.eigh(rho)
        regular = bool(values[0] > _SINGULAR)
        inverse = (vectors / np.maximum(values, _SINGULAR)) @ vectors.T
        return cls(
            design=design,
            surfaces=tuple(surfaces[i] for i in order),
            forwards=np.asarray(forwards, dtype=float)[order],
            shares=np.asarray(shares, dtype=float)[order],
            exposures=exposed,
            loadings=loadings,
            sizes=np.linalg.norm(importance[:, None] * loadings, axis=0),
            inverse=np.ascontiguousarray(inverse),
            degree=float(np.sum(aggregate.weights)) if geometric else 1.0,
            smooth=regular and design.is_smoothed,
        )

    @property
    def n_assets(self) -> int:
        return self.design.n_assets

    @property
    def scales(self) -> Array:
        """What multiplies a level over its forward in the aggregate; exponents for a geometric one, (n,)."""
        if self.design.kind is AggregateKind.GEOMETRIC:
            return self.design.weights
        out: Array = self.design.weights * self.forwards
        return out

    @property
    def log2_scale(self) -> float:
        """Base-2 logarithm of a geometric aggregate at the forwards."""
        return float(self.design.weights @ np.log2(self.forwards))
