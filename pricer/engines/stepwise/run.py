"""The samplers of one valuation: on all steps and cells, on half as many of either, and of the control variate."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

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
from pricer.engines.stepwise.estimates import slopes_of, value_of
from pricer.engines.stepwise.law import StepwiseLaw, cut_grid, grid_of, prices_of
from pricer.engines.stepwise.sampler import StepwiseSampler
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.engines.stepwise.stops import Stops, stops_of
from pricer.engines.stepwise.tables import LegTables
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.market import Market
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.local_vol_tables import LocalVolatility
from pricer.simulation.stepwise_factor import PathFactor
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

#: Points of a randomisation on which steps are halved, at most; and on which single steps a date are cut in two.
_HALVED = 1024
_CUT = 32

#: What halving the steps, or the cells, changes for a scheme of order 2, over the bias that is left.
_ORDER = 3.0


@dataclass(slots=True)
class Run:
    """Samplers on common draws.

    ``known`` : legs on lognormal prices, the mean of ``control``, which is then a control variate. ``crude`` and
    ``crude_control`` : both on half the cells, for the first points. ``cut`` : twice as many steps, and as many, on
    draws of their own, where steps cannot be halved. ``step_bias`` : what steps are thought to leave, with its standard
    error; ``cell_bias`` and ``slope_bias`` (n,) what cells leave of the value and the slopes.
    """

    terms: ContractTerms
    settings: StepwiseSettings
    drivers: Drivers
    tables: LegTables
    fine: StepwiseSampler
    coarse: StepwiseSampler | None
    control: StepwiseSampler | None
    crude: StepwiseSampler
    crude_control: StepwiseSampler | None
    cut: tuple[StepwiseSampler, StepwiseSampler] | None
    steps: int
    known: Drawn | None = None
    step_bias: tuple[float, float] = (0.0, 0.0)
    cell_bias: float = 0.0
    slope_bias: Array = field(default_factory=lambda: np.zeros(1))

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
        known: Drawn | None = None,
        measured: bool = True,
    ) -> Run:
        """``drivers`` in place of the market's own; with ``known`` lognormal legs are drawn, too.

        Without ``measured`` nothing is asked of single steps a date.
        """
        drivers = Drivers.of(trade, market) if drivers is None else drivers
        names, composite = trade.contract.underlyings, is_converted(trade, market)
        flat = [FlatVolatility.of(drivers.times, drivers.variances[row]) for row in range(len(names))]
        surfaces: Sequence[LocalVolatility] = flat
        if smiled:
            surfaces = [LocalVolSurface.from_implied(market.implied_surface(x), horizon=terms.years) for x in names]
        tables = LegTables.of(legs.legs)
        grid, signs = grid_of(terms, drivers, settings, smiled=smiled), _signs(legs, len(names))
        scales, floors = prices_of(trade, terms, market)
        words = stream(asked.seed, f"{asked.group}/stepwise", Purpose.PRICE, 0)

        def law_of(grid: TimeGrid, factor: PathFactor | None = None) -> StepwiseLaw:
            return StepwiseLaw.of(grid, drivers, surfaces, signs, scales, floors, composite=composite, factor=factor)

        law = law_of(grid)
        noise = Noise(grid.times, law.factor.sizes, words, settings.randomisations)
        fine = StepwiseSampler(law, noise, tables, settings.cells)
        halved = control = cut = None
        if smiled and not np.any(grid.dates % 2):
            halved = StepwiseSampler(law_of(grid.halved(), law.factor), noise, tables, settings.cells)
        elif smiled and measured:
            twice = law_of(cut_grid(terms, drivers))
            own = stream(asked.seed, f"{asked.group}/stepwise/cut", Purpose.PRICE, 0)
            finer = Noise(twice.grid.times, twice.factor.sizes, own, settings.randomisations)
            once = law_of(twice.grid.halved(), twice.factor)
            cut = (
                StepwiseSampler(twice, finer, tables, settings.cells),
                StepwiseSampler(once, finer, tables, settings.cells),
            )
        if known is not None:
            whole = scales * (1.0 + floors / terms.forwards)
            none = np.zeros_like(floors)
            control = StepwiseSampler(
                StepwiseLaw.of(grid, drivers, flat, signs, whole, none, composite=composite, factor=law.factor),
                noise,
                tables,
                settings.cells,
            )
        half = settings.cells // 2
        return cls(
            terms=terms,
            settings=settings,
            drivers=drivers,
            tables=tables,
            fine=fine,
            coarse=halved,
            control=control,
            crude=fine.with_cells(half),
            crude_control=None if control is None else control.with_cells(half),
            cut=cut,
            steps=grid.n_steps if smiled else 0,
            known=known,
            slope_bias=np.zeros(len(names)),
        )

    @property
    def most_points(self) -> int:
        """Of a randomisation, within the budget of work."""
        n = len(self.terms.random_spots)
        laws = 1 if self.control is None else 2
        per_point = self.settings.randomisations * len(self.terms.dates) * n * 2 * laws
        per_point *= max(self.fine.cells // self.settings.cells, 1)
        affordable = 1 << max(int(self.settings.maximum_work / per_point).bit_length() - 1, 4)
        return max(min(affordable, self.settings.maximum_points), self.settings.initial_points)

    def extend(self, points: int, *, with_slopes: bool) -> None:
        """Draw up to ``points`` of every randomisation; biases are measured on the first."""
        self.fine.extend(points, with_slopes=with_slopes)
        if self.control is not None:
            self.control.extend(points, with_slopes=with_slopes)
        if not self.crude.points:
            self.crude.extend(points, with_slopes=with_slopes)
            if self.crude_control is not None:
                self.crude_control.extend(points, with_slopes=with_slopes)
            self._compare_cells()
        if self.coarse is not None and self.coarse.points < min(points, _HALVED):
            self.coarse.extend(points)
            difference, noise = _difference(self.fine, self.coarse)
            self.step_bias = difference / _ORDER, noise / _ORDER
        if self.cut is not None and not self.cut[0].points:
            for sampler in self.cut:
                sampler.extend(min(points, _CUT))
            difference, noise = _difference(*self.cut)
            left = 1.0 + 1.0 / _ORDER  # what cutting took away, and what is left then
            self.step_bias = left * difference, left * noise

    def double_cells(self) -> None:
        """Begin again on twice as many; what was drawn becomes ``crude``."""
        points, with_slopes = self.fine.points, self.fine.slope_points > 0
        self.crude, self.crude_control = self.fine, self.control
        self.fine = self.fine.with_cells(2 * self.fine.cells)
        self.fine.extend(points, with_slopes=with_slopes)
        if self.control is not None:
            self.control = self.control.with_cells(self.fine.cells)
            self.control.extend(points, with_slopes=with_slopes)
        self._compare_cells()

    def _compare_cells(self) -> None:
        known = self.known
        one, _ = value_of(self.fine, self.control, known)
        other, _ = value_of(self.crude, self.crude_control, known)
        self.cell_bias = abs(one - other) / _ORDER
        if self.fine.slope_points:
            slopes, _ = slopes_of(self.fine, self.control, known)
            others, _ = slopes_of(self.crude, self.crude_control, known)
            self.slope_bias = np.abs(slopes - others) / _ORDER

    @property
    def degrees_of_freedom(self) -> int:
        return self.settings.randomisations - (1 if self.known is None else 2)

    def value(self) -> tuple[float, float]:
        """Of the legs, and its standard error, biases left out."""
        return value_of(self.fine, self.control, self.known)

    def slopes(self) -> tuple[Array, Array]:
        """By the logarithm of each X at the start, with errors, biases left out, (n,)."""
        return slopes_of(self.fine, self.control, self.known)

    def forwards(self) -> tuple[Array, Array]:
        """Means of X on the last date, with errors, (n,)."""
        return batch_estimate(self.fine.forwards / self.fine.points)

    def stops(self) -> list[Stops]:
        """Leg by leg."""
        return stops_of(self.fine.stopped / self.fine.points, self.tables, self.terms.times)


def _difference(one: StepwiseSampler, other: StepwiseSampler) -> tuple[float, float]:
    """Between values on common draws, and its standard error."""
    moved = (one.values - other.values).sum(axis=1, keepdims=True) / one.points
    (difference,), (noise,) = batch_estimate(moved)
    return float(difference), float(noise)


def _signs(legs: ContractLegs, n: int) -> Array:
    """Which way a factor moves each asset so that readings with weights of two signs move one way."""
    total = np.zeros(n)
    for reading in legs.readings:
        if not reading.aggregate.is_ranked:
            total += np.array(reading.aggregate.weights) / np.array(reading.references)
    return np.where(total < 0.0, -1.0, 1.0)
