"""The samplers of one valuation: on all steps, on half as many, and of the control variate."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.core.randomness import Purpose, stream
from pricer.engines.contract_legs.drawing import Drawn
from pricer.engines.contract_legs.result import ContractLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.noise import Noise
from pricer.engines.local_vol_problem import FlatVolatility
from pricer.engines.model_value import Asked
from pricer.engines.path_inputs import Drivers, is_converted
from pricer.engines.stepwise.law import StepwiseLaw, grid_of, prices_of
from pricer.engines.stepwise.sampler import StepwiseSampler
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.engines.stepwise.tables import LegTables
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.market import Market
from pricer.simulation.batch_means import batch_estimate, batch_regression
from pricer.simulation.local_vol_tables import LocalVolatility

Array = NDArray[np.float64]

#: Points of a randomisation on which steps are halved, at most.
_HALVED = 1024

#: Relative rounding of a control's mean.
_ROUNDING = 2.0**-24


@dataclass(frozen=True, slots=True)
class Stops:
    """Where paths leave a leg, as ``ContractLegs.life_of`` asks for it."""

    dates: NDArray[np.int64]
    above: Array
    above_errors: Array
    below: Array
    below_errors: Array
    life: float
    life_error: float
    stopped_above_error: float
    stopped_below_error: float


@dataclass(slots=True)
class Run:
    """Samplers on common draws.

    ``known`` : legs on lognormal prices, the mean of ``control``, which is then a control variate. ``halving`` : what
    twice as many steps changed, with its standard error.
    """

    terms: ContractTerms
    settings: StepwiseSettings
    drivers: Drivers
    tables: LegTables
    fine: StepwiseSampler
    coarse: StepwiseSampler | None
    control: StepwiseSampler | None
    steps: int
    known: Drawn | None = None
    halving: tuple[float, float] = (0.0, 0.0)

    @classmethod
    def of(
        cls,
        trade: Trade,
        terms: ContractTerms,
        legs: ContractLegs,
        market: Market,
        asked: Asked,
        settings: StepwiseSettings,
        *,
        smiled: bool,
        drivers: Drivers | None = None,
        controlled: bool = False,
    ) -> Run:
        """``drivers`` in place of the market's own; ``controlled`` : lognormal legs are drawn, too."""
        drivers = Drivers.of(trade, market) if drivers is None else drivers
        names, composite = trade.contract.underlyings, is_converted(trade, market)
        flat = [FlatVolatility.of(drivers.times, drivers.variances[row]) for row in range(len(names))]
        surfaces: Sequence[LocalVolatility] = flat
        if smiled:
            surfaces = [LocalVolSurface.from_implied(market.implied_surface(x), horizon=terms.years) for x in names]
        tables = LegTables.of(legs.legs)
        grid, signs = grid_of(terms, drivers, settings, smiled=smiled), _signs(legs, len(names))
        scales, floors = prices_of(trade, terms, market)
        law = StepwiseLaw.of(grid, drivers, surfaces, signs, scales, floors, composite=composite)
        words = stream(asked.seed, f"{asked.group}/stepwise", Purpose.PRICE, 0)
        noise = Noise(grid.times, law.factor.sizes, words, settings.randomisations)

        def sampler(law: StepwiseLaw) -> StepwiseSampler:
            return StepwiseSampler(law, noise, tables, settings.cells)

        halved = control = None
        if smiled and not np.any(grid.dates % 2):
            twice = grid.halved()
            halved = sampler(
                StepwiseLaw.of(twice, drivers, surfaces, signs, scales, floors, composite=composite, factor=law.factor)
            )
        if controlled:
            whole = scales * (1.0 + floors / terms.forwards)
            none = np.zeros_like(floors)
            control = sampler(
                StepwiseLaw.of(grid, drivers, flat, signs, whole, none, composite=composite, factor=law.factor)
            )
        steps = grid.n_steps if smiled else 0
        return cls(terms, settings, drivers, tables, sampler(law), halved, control, steps)

    @property
    def most_points(self) -> int:
        """Of a randomisation, within the budget of work."""
        n = len(self.terms.random_spots)
        laws = 1 if self.control is None else 2
        per_point = self.settings.randomisations * len(self.terms.dates) * n * 2 * laws
        affordable = 1 << max(int(self.settings.maximum_work / per_point).bit_length() - 1, 4)
        return max(min(affordable, self.settings.maximum_points), self.settings.initial_points)

    def extend(self, points: int, *, with_slopes: bool) -> None:
        """Draw up to ``points`` of every randomisation."""
        self.fine.extend(points, with_slopes=with_slopes)
        if self.control is not None:
            self.control.extend(points, with_slopes=with_slopes)
        if self.coarse is not None and self.coarse.points < min(points, _HALVED):
            self.coarse.extend(points)
            moved = (self.fine.values - self.coarse.values).sum(axis=1, keepdims=True) / points
            (difference,), (noise,) = batch_estimate(moved)
            self.halving = float(difference), float(noise)

    @property
    def degrees_of_freedom(self) -> int:
        return self.settings.randomisations - (1 if self.known is None else 2)

    def value(self) -> tuple[float, float]:
        """Of the legs, and its standard error."""
        means = self.fine.values.sum(axis=1, keepdims=True) / self.fine.points
        if self.control is None or self.known is None:
            (value,), (error,) = batch_estimate(means)
            return float(value), float(error)
        others = self.control.values.sum(axis=1, keepdims=True) / self.control.points
        found = _controlled(means, others, np.array([self.known.value]), np.array([self.known.standard_error]))
        return float(found[0][0]), float(found[1][0])

    def slopes(self) -> tuple[Array, Array]:
        """By the logarithm of each X at the start, with errors, (n,)."""
        means = self.fine.slopes / self.fine.slope_points
        if self.control is None or self.known is None:
            return batch_estimate(means)
        others = self.control.slopes / self.control.slope_points
        return _controlled(means, others, self.known.log_deltas, self.known.log_delta_errors)

    def forwards(self) -> tuple[Array, Array]:
        """Means of X on the last date, with errors, (n,)."""
        return batch_estimate(self.fine.forwards / self.fine.points)

    def stops(self) -> list[Stops]:
        """Leg by leg."""
        shares, years = self.fine.stopped / self.fine.points, self.terms.times
        up, up_errors = batch_estimate(shares[:, :, 0])
        down, down_errors = batch_estimate(shares[:, :, 1])
        out = []
        for dates, rows in zip(self.tables.dates, self.tables.rows, strict=True):
            of_leg, ends = shares[:, rows], years[dates]
            saved = of_leg.sum(axis=2) @ (ends[-1] - ends)
            (life,), (life_error,) = batch_estimate((ends[-1] - saved)[:, None])
            _, whole_errors = batch_estimate(of_leg.sum(axis=1))
            found = up[rows], up_errors[rows], down[rows], down_errors[rows], float(life), float(life_error)
            out.append(Stops(dates, *found, *whole_errors.tolist()))
        return out


def _controlled(means: Array, others: Array, known: Array, known_errors: Array) -> tuple[Array, Array]:
    sizes = np.maximum(np.maximum(np.abs(known), np.abs(others).max(axis=0)), 1e-300)
    estimates, errors, slopes = batch_regression(means, (others - known) / sizes, _ROUNDING)
    return estimates, np.hypot(errors, slopes / sizes * known_errors)


def _signs(legs: ContractLegs, n: int) -> Array:
    """Which way a factor moves each asset so that readings with weights of two signs move one way."""
    total = np.zeros(n)
    for reading in legs.readings:
        if not reading.aggregate.is_ranked:
            total += np.array(reading.aggregate.weights) / np.array(reading.references)
    return np.where(total < 0.0, -1.0, 1.0)
