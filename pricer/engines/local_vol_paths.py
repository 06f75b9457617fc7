"""One problem under local volatility laid out on grids of time: samplers, their noise and their control."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

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


@dataclass(frozen=True, slots=True)
class LocalVolSettings:
    """How much is drawn, and how finely time is cut.

    Steps are doubled from ``initial_steps`` until the bias that halving them reveals is within half
    the value's tolerance, or ``maximum_steps`` are reached.
    """

    sampling: SamplingSettings = field(default_factory=SamplingSettings)
    initial_steps: int = 8  # even
    maximum_steps: int = 64

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
        self.converts = converted = problem.composite and any(rate is not None for rate in problem.rates)
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
            [-1 if rate is None or not converted else rate for rate in problem.rates],
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
            grid = TimeGrid.with_ending(problem.years, _LOGNORMAL_ENDING * 0.5**level * problem.years)
            coarse = grid.without_last_cut()
        else:
            grid = TimeGrid.of(problem.years, steps=self.settings.initial_steps * 2**level, ending=ENDING)
            coarse = grid.halved()
        self.level, self.grid = level, grid
        of_grid, of_coarse = (
            LognormalSteps.of(
                on,
                problem.variance_times,
                problem.variances,
                problem.correlation,
                problem.rates,
                composite=problem.composite,
            )
            for on in (grid, coarse)
        )
        order, shares = plan.design.order, plan.shares
        noise = PathNoise(
            grid,
            plan.loadings,
            plan.sizes,
            stream(self.seed, self.group, Purpose.PRICE, 0),
            self.settings.sampling.randomisations,
        )
        self.fine = LocalVolSampler(plan, grid, of_grid.ordered(order, shares), noise)
        self.coarse = LocalVolSampler(plan, coarse, of_coarse.ordered(order, shares), noise, with_ratios=False)

    @property
    def can_be_cut(self) -> bool:
        return bool(self.settings.initial_steps * 2 ** (self.level + 1) <= self.settings.maximum_steps)

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
