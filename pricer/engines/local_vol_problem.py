"""What the local-volatility engine sees of a European trade: numbers only, no names, no dates."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.problem import EuropeanProblem
from pricer.market.currency_conversion import composite, quanto
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.local_vol_tables import LocalVolatility

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class LocalVolProblem:
    """Value of ``discount_factor * E[payoff(aggregate(levels))]`` per unit at ``years``.

    Level i is ``scales[i] X_i + floors[i]``: X_i a martingale from 1 in its own currency, the floor known
    cash dividends. Its exchange rate Q (payment currency per unit of the level's) is a product of m factors F with
    constantly correlated Brownian motions, pairs that have a volatility: ``ln Q = exposures[i] @ ln F``. Three ways of
    paying it:

    - in its own currency: ``exposures[i]`` are 0;
    - quanto: the number is paid as it stands, X_i has the drift that the payment currency's measure gives it;
    - composite: the level is ``(scales[i] X_i + floors[i]) Y`` with Y the rate's own martingale from 1 under the
      payment currency's measure; scales and floors are in the payment currency at the rate's forward.

    ``surfaces`` : (n,) local volatility of each X; empty for lognormal X of the variances below.
    ``scales`` : (n,) > 0 and ``floors`` : (n,) >= 0 in units of the reference level.
    ``correlation`` : (n + m, n + m) of the Brownian motions of the assets and of the factors after them.
    ``variance_times`` : (k + 1,) years from 0 to ``years`` or beyond, ``variances`` : (n + m, k + 1) total
    variances of the lognormal model's ln X and ln F at these times, not decreasing, linear in between. For the
    assets they define the model that local volatility is compared with and make the control variate: take those of
    the surfaces at the forward, which bend in time where the surfaces do.
    """

    surfaces: tuple[LocalVolatility, ...]
    correlation: Array
    scales: Array
    floors: Array
    variance_times: Array
    variances: Array
    years: float
    aggregate: Aggregate
    payoff: PiecewiseLinear
    discount_factor: float
    exposures: Array | None = None  # (n, m) of -1, 0 and 1; None: all are paid in their own currency
    composite: bool = False

    def __post_init__(self) -> None:
        n, rows, times = len(self.scales), len(self.variances), len(self.variance_times)
        if self.surfaces and len(self.surfaces) != n:
            raise ValueError(f"{len(self.surfaces)} surfaces do not fit {n} scales")
        shapes = self.scales.shape, self.floors.shape, self.variances.shape, self.correlation.shape
        if shapes != ((n,), (n,), (rows, times), (rows, rows)) or rows < n:
            raise ValueError(f"scales, floors, variances, correlation of shapes {shapes} do not fit {times} times")
        if self.aggregate.cash is not None:
            raise ValueError("fold the cash level into the payoff first")
        if self.exposures is not None and self.exposures.shape != (n, rows - n):
            raise ValueError(
                f"exposures of shape {self.exposures.shape} do not fit {n} assets and {rows - n} rows after them"
            )
        if not (np.all(self.scales > 0.0) and np.all(self.floors >= 0.0)):
            raise ValueError("scales must be above 0, floors at least 0")
        if not (np.isfinite(self.years) and self.years > 0.0):
            raise ValueError(f"the time to expiry must be above 0; got {self.years}")
        if self.variance_times[0] != 0.0 or np.any(np.diff(self.variance_times) <= 0.0):
            raise ValueError("the times of the variances must increase from 0")
        if self.variance_times[-1] < self.years * (1.0 - 1e-12):
            raise ValueError(f"variances end at {self.variance_times[-1]}, before the expiry at {self.years}")
        if np.any(self.variances[:, 0] != 0.0) or not np.all(np.diff(self.variances, axis=1) >= 0.0):
            raise ValueError("total variances must start at 0 and not decrease")

    @property
    def n_assets(self) -> int:
        return len(self.scales)

    @property
    def rate_exposures(self) -> Array:
        """Of the logarithm of each asset's exchange rate to those of the factors, (n, m)."""
        if self.exposures is None:
            return np.zeros((self.n_assets, len(self.variances) - self.n_assets))
        return self.exposures

    @property
    def is_converted(self) -> NDArray[np.bool_]:
        """Which assets are in another currency than the payment's, (n,)."""
        return np.asarray(np.any(self.rate_exposures != 0.0, axis=1))

    @property
    def is_lognormal(self) -> bool:
        return not self.surfaces

    @property
    def has_floors(self) -> bool:
        return bool(np.any(self.floors > 0.0))

    @property
    def ties(self) -> tuple[tuple[int, int], ...]:
        """Pairs of ranked assets whose levels never differ: which of them is ahead is arbitrary."""
        if not self.aggregate.is_ranked:
            return ()
        own = [self.scales, self.floors, self.variances[: self.n_assets], self.rate_exposures]
        same = self.correlation[: self.n_assets, : self.n_assets] >= 1.0
        for rows in own:
            same = same & np.all(rows[:, None] == rows[None], axis=tuple(range(2, rows.ndim + 1)))
        pairs = [(int(i), int(j)) for i, j in np.argwhere(np.triu(same, 1))]
        return tuple(
            (i, j)
            for i, j in pairs
            if self.is_lognormal or np.array_equal(self.surfaces[i].values, self.surfaces[j].values)
        )

    @property
    def forwards(self) -> Array:
        """Of the levels before any change of measure, (n,)."""
        out: Array = self.scales + self.floors
        return out

    def with_floors_in_payoff(self) -> LocalVolProblem:
        """Known amounts taken out of a weighted sum; the problem itself where that cannot be done."""
        summed = self.aggregate.kind is AggregateKind.WEIGHTED_SUM
        if not (summed and self.has_floors) or (self.composite and np.any(self.is_converted)):
            return self
        known = float(np.array(self.aggregate.weights) @ self.floors)
        payoff = self.payoff.of_shifted_argument(known)
        return replace(self, floors=np.zeros(self.n_assets), payoff=payoff)

    @property
    def covariance(self) -> Array:
        """Of the lognormal model's ln X and ln F over the whole time, exact, (n + m, n + m)."""
        times = np.unique(np.append(self.variance_times[self.variance_times < self.years], self.years))
        total = np.stack([np.interp(times, self.variance_times, row) for row in self.variances])
        rises = np.sqrt(np.diff(total, axis=1))
        out: Array = self.correlation * (rises @ rises.T)
        return out

    def law_of(self, covariance: Array) -> JointLognormal:
        """Lognormal levels of these forwards under the payment currency's measure; ``covariance`` of ln X and ln F.

        Where there are floors, levels as a whole are taken for lognormal.
        """
        n, forwards = self.n_assets, self.forwards
        if not np.any(self.is_converted):
            return JointLognormal(forwards, covariance[:n, :n])
        exposures = self.rate_exposures
        loadings = np.block([[np.eye(n), np.zeros(exposures.shape)], [np.zeros((n, n)), exposures]])
        both = loadings @ covariance @ loadings.T
        return composite(forwards, np.ones(n), both) if self.composite else quanto(forwards, both)

    @property
    def lognormal(self) -> EuropeanProblem:
        """The problem with lognormal levels. Raises ValueError where floors are left: such levels are not lognormal."""
        if self.has_floors:
            raise ValueError("levels above known amounts are not lognormal")
        return EuropeanProblem(self.law_of(self.covariance), self.aggregate, self.payoff, self.discount_factor)


@dataclass(frozen=True, slots=True)
class FlatVolatility:
    """Local volatility that does not depend on the level, from a row of ``LocalVolProblem.variances``."""

    times: Array
    values: Array
    reach: float = 8.0

    @classmethod
    def of(cls, times: Array, variances: Array) -> FlatVolatility:
        """``times``, ``variances`` : (k + 1,) from 0."""
        volatilities = np.sqrt(np.diff(variances) / np.diff(times))
        return cls(times, np.repeat(volatilities[:, None], 3, axis=1))

    @property
    def widths(self) -> Array:
        """Any will do, (k,)."""
        return np.ones(len(self.values))
