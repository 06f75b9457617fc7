"""One problem under local volatility laid out on grids of time: samplers, their noise and their control."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.core.randomness import Purpose, stream
from pricer.engines.local_vol_problem import FlatVolatility, LocalVolProblem
from pricer.engines.monte_carlo import SamplingSettings
from pricer.engines.problem import EuropeanProblem
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

#: The lognormal last step has the largest error of all, which falls with the square of its length, while
#: what it smooths falls with the root. Measured on baskets, spreads, rankings and digitals: with a quarter
#: of the others' length, 8 steps have less bias than 16 equal ones, at the same sampling error.
ENDING = 0.25

#: The last step of lognormal levels above known amounts, as part of the whole time, to begin with.
_LOGNORMAL_ENDING = 1.0 / 32.0

#: How often that may be halved.
_LOGNORMAL_CUTS = 4

#: Steps are joined in pairs this often: two successive halvings tell whether they fall as the scheme's order says.
HALVINGS = 2


def grid_of(dates: ArrayLike, kinks: ArrayLike, *, steps: int, level: int, every: bool = False) -> TimeGrid:
    """The grid number ``level`` of trades and of repriced vanillas; each cuts every step of the one before in two.

    Every kink ends a step: local volatility jumps in time at quoted expiries. The first grid has about ``steps``
    steps and four at least between kinks. Measured on such grids, between two and sixteen steps an interval:
    weak order 1.4 to 2 on smooth surfaces, 1 where local volatility is clipped and so has corners in the level, too.
    """
    cuts = HALVINGS + level
    finer = 2**level
    return TimeGrid.of(dates, steps=steps * finer, kinks=kinks, least=2**cuts, cuts=cuts, ending=ENDING, every=every)


@dataclass(frozen=True, slots=True)
class LocalVolSettings:
    """How much is drawn, and how finely time is cut.

    Steps are doubled from some ``initial_steps``, four at least between quoted expiries, until the bias that halving
    them reveals is within half the value's tolerance, or doubling would exceed ``maximum_steps``.
    """

    sampling: SamplingSettings = field(default_factory=SamplingSettings)
    initial_steps: int = 8  # even
    maximum_steps: int = 512

    def __post_init__(self) -> None:
        if self.initial_steps < 4 or self.initial_steps % 2:
            raise ValueError(f"initial steps must be even and at least 4; got {self.initial_steps}")
        if self.maximum_steps < self.initial_steps:
            raise ValueError(f"{self.initial_steps} initial steps exceed {self.maximum_steps} maximum steps")


class PathSamplers:
    """One problem's samplers on ever finer grids, on the noise of one stream."""

    def __init__(
        self,
        problem: LocalVolProblem,
        group: str,
        seed: int,
        settings: LocalVolSettings,
        *,
        plan: LocalVolPlan | None = None,
        level: int = 0,
    ) -> None:
        """``plan`` : one that is ready; ``level`` : the grid to begin with, see ``cut``."""
        sampling, n = settings.sampling, problem.n_assets
        self.problem, self.group, self.seed, self.settings = problem, group, seed, settings
        self.shares = problem.scales / problem.forwards
        self.converts = converted = problem.composite and bool(np.any(problem.is_converted))
        rows = len(problem.variances) if converted else n
        covariance = self._of_levels(problem.covariance)
        triangular = sampling.ordering == "cholesky" or (
            sampling.ordering == "automatic" and problem.aggregate.is_ranked
        )
        surfaces = problem.surfaces or tuple(
            FlatVolatility.of(problem.variance_times, v) for v in problem.variances[:n]
        )
        self.plan = plan or LocalVolPlan.of(
            problem.law_of(covariance),
            surfaces,
            problem.correlation[:rows, :rows],
            problem.forwards,
            self.shares,
            problem.rate_exposures[:, : rows - n],
            np.sqrt(np.diag(covariance))[n:rows],
            problem.aggregate,
            problem.payoff,
            triangular=triangular,
        )
        self.cut(level)

    def _of_levels(self, covariance: Array) -> Array:
        """Of log-levels instead of ln X: known amounts do not move."""
        parts = np.concatenate([self.shares, np.ones(len(covariance) - len(self.shares))])
        out: Array = covariance * np.outer(parts, parts)
        return out

    def cut(self, level: int) -> None:
        """Take the grid number ``level``, each of half the steps' length of the one before."""
        from pricer.simulation.local_vol_sampler import LocalVolSampler  # compiles the kernels: only when needed
        from pricer.simulation.path_noise import PathNoise

        problem, plan = self.problem, self.plan
        if problem.is_lognormal:
            ending = _LOGNORMAL_ENDING * 0.5**level * problem.years
            grids = [TimeGrid.with_ending(problem.years, ending, cuts=HALVINGS)]
            for _ in range(HALVINGS):
                grids.append(grids[-1].without_last_cut())
        else:
            kinks = problem.variance_times
            grids = [grid_of(problem.years, kinks, steps=self.settings.initial_steps, level=level)]
            for _ in range(HALVINGS):
                grids.append(grids[-1].halved())
        self.level, self.grid = level, grids[0]
        noise = PathNoise(
            self.grid,
            plan.loadings,
            plan.sizes,
            stream(self.seed, self.group, Purpose.PRICE, 0),
            self.settings.sampling.randomisations,
        )
        samplers = []
        for grid in grids:
            steps = LognormalSteps.of(
                grid,
                problem.variance_times,
                problem.variances,
                problem.correlation,
                problem.rate_exposures,
                composite=problem.composite,
            ).ordered(plan.design.order, plan.shares)
            samplers.append(LocalVolSampler(plan, grid, steps, noise, with_ratios=grid is self.grid))
        self.fine, self.coarse, self.coarsest = samplers

    @property
    def can_be_cut(self) -> bool:
        if self.problem.is_lognormal:
            return self.level < _LOGNORMAL_CUTS
        return 2 * self.grid.n_steps <= self.settings.maximum_steps

    def halvings(self, points: int) -> tuple[Array, Array, Array]:
        """Means of each randomisation's sums over ``points`` on all steps, on half as many, and on a quarter."""
        fine, coarse, coarsest = (s.extend(points) / points for s in (self.fine, self.coarse, self.coarsest))
        return fine, coarse, coarsest

    def with_lognormal_deviation(self, asset: int, factor: float) -> PathSamplers:
        """The same draws, grid and layout, one asset's lognormal deviation times ``factor`` at all times."""
        variances = self.problem.variances.copy()
        variances[asset] *= factor**2
        surfaces = list(self.plan.surfaces)
        flat = FlatVolatility.of(self.problem.variance_times, variances[asset])
        surfaces[int(np.argsort(self.plan.design.order)[asset])] = flat
        plan = replace(self.plan, surfaces=tuple(surfaces))
        problem = replace(self.problem, variances=variances)
        return PathSamplers(problem, self.group, self.seed, self.settings, plan=plan, level=self.level)

    @property
    def control(self) -> EuropeanProblem:
        """The lognormal problem whose payoff is taken along on the paths' own noise."""
        problem = self.problem
        law = problem.law_of(self._of_levels(problem.covariance))
        return EuropeanProblem(law, problem.aggregate, problem.payoff, problem.discount_factor)
