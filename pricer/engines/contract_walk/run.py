"""The samplers of one valuation: its law, its noise, and steps twice as long to tell what steps leave."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.core.randomness import Purpose, stream
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.laws import grid_of, local_vol_prices, lognormal_prices
from pricer.engines.contract_walk.noise import Noise
from pricer.engines.contract_walk.prices import Drawn
from pricer.engines.contract_walk.sampling import WalkSampler
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.model_value import Asked
from pricer.engines.path_inputs import Drivers
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.market import Market
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]

#: Points of a randomisation on which steps are halved: enough to see their bias, which is far below the sampling error.
_HALVED = 1024


@dataclass(frozen=True, slots=True)
class Found:
    """The value of one unit with all that is decided already, and what steps leave of a bias."""

    value: float
    standard_error: float
    degrees_of_freedom: int
    bias: float
    bias_error: float


@dataclass(slots=True)
class Run:
    """The sampler of one valuation; under local volatility a second one on steps twice as long."""

    terms: ContractTerms
    sampler: WalkSampler
    coarse: WalkSampler | None
    steps: int
    halving: Array | None = None  # by randomisation: what twice as many steps changed

    @classmethod
    def of(
        cls,
        trade: Trade,
        terms: ContractTerms,
        market: Market,
        asked: Asked,
        settings: WalkSettings,
        purpose: Purpose,
        *,
        smiled: bool,
    ) -> Run:
        group = f"{asked.group}/walk"
        words = stream(asked.seed, group + ("/local volatility" if smiled else ""), purpose, 0)

        names = trade.contract.underlyings if smiled else ()
        surfaces = [LocalVolSurface.from_implied(market.implied_surface(name), horizon=terms.years) for name in names]

        def sampler(noise: Noise, draw: Callable[[Array], Drawn]) -> WalkSampler:
            return WalkSampler(terms, noise, draw, group, asked.seed, purpose, surfaces=surfaces)

        if not smiled:
            law = lognormal_prices(trade, terms, market)
            noise = Noise(law.clock, law.sizes, words, settings.randomisations)
            return cls(terms, sampler(noise, law.draw), None, 0)
        drivers = Drivers.of(trade, market)
        grid = grid_of(terms, drivers, settings)
        fine = local_vol_prices(trade, terms, market, drivers, surfaces, grid)
        noise = Noise(fine.clock, fine.sizes, words, settings.randomisations)
        halved = None
        if not np.any(grid.dates % 2):
            twice = local_vol_prices(trade, terms, market, drivers, surfaces, grid.halved())
            halved = sampler(noise, lambda walks: twice.draw(walks[1::2]))
        return cls(terms, sampler(noise, fine.draw), halved, grid.n_steps)

    @property
    def halves(self) -> bool:
        """Whether the bias of the steps is measured."""
        return self.coarse is not None

    @property
    def cells_per_point(self) -> int:
        noise = self.sampler.noise
        return noise.randomisations * max(noise.cells, 1)

    def extend(self, points: int) -> None:
        """Up to ``points``, a power of two, of every randomisation."""
        coarse, sums = self.coarse, self.sampler.sums
        if coarse is not None and coarse.sums.points < min(points, _HALVED):
            self.sampler.extend(min(points, _HALVED))
            coarse.extend(sums.points)
            self.halving = (sums.values - coarse.sums.values) / sums.points
        if sums.points < points:
            self.sampler.extend(points)

    def estimate(self) -> Found:
        """The value with all that is decided already."""
        sums, known = self.sampler.sums, self.terms.known_value
        means = sums.values / sums.points
        bias = bias_error = 0.0
        if self.halving is not None:
            (difference,), (noise,) = batch_estimate(self.halving[:, None])
            # What halving the steps changed is at least what is left, for a scheme of order 1 or more.
            bias, bias_error = abs(float(difference)), float(noise)
        (value,), (error,) = batch_estimate(means[:, None])
        return Found(float(value) + known, float(error), len(means) - 1, bias, bias_error)
