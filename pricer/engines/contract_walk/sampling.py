"""Means over randomisations of what a contract pays on drawn prices, and of how it ends."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from datetime import date
from functools import cache

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.barrier import Barrier
from pricer.core.randomness import Purpose, stream
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.between_dates import (
    BridgeWatch,
    ShiftedWatch,
    Watch,
    bridge_deviations,
    is_bridged,
    shift_factors,
)
from pricer.engines.contract_walk.bulk import read
from pricer.engines.contract_walk.ledger import DiscountedSum
from pricer.engines.contract_walk.noise import Noise
from pricer.engines.contract_walk.prices import Drawn
from pricer.engines.contract_walk.walker import ENDINGS, Ends, walk_paths
from pricer.market.local_vol_surface import LocalVolSurface

Array = NDArray[np.float64]

#: Normals and prices held at a time: 8 MB an array.
_CELLS = 2**20

#: Relative change of the random part of a price to differentiate by. Values have second derivatives that jump at kinks
#: only: the error of a difference falls with it, and rounding is far off.
BUMP = 1e-3


@dataclass(slots=True)
class Sums:
    """Sums over the paths of each randomisation, R of them; ``points`` of each have been added.

    ``values`` (R,) discounted; ``lives`` (R,) years; ``hits`` (R,); ``ends`` (R, n_dates, n_endings) counts;
    ``slopes`` (R, n_assets) of the value in the logarithm of each asset's random part, of the first ``slope_points``.
    """

    values: Array
    lives: Array
    hits: Array
    ends: Array
    slopes: Array
    points: int = 0
    slope_points: int = 0
    has_barrier: bool = False

    @classmethod
    def none(cls, randomisations: int, dates: int, assets: int) -> Sums:
        values, lives, hits = np.zeros((3, randomisations))
        ends = np.zeros((randomisations, dates, len(ENDINGS)))
        return cls(values, lives, hits, ends, np.zeros((randomisations, assets)))


@dataclass(slots=True)
class WalkSampler:
    """Draws prices with ``draw`` from the motions of ``noise`` and walks ``terms``' contract along them.

    ``group``, ``seed`` and ``purpose`` key what is drawn besides. ``with_slopes`` : differentiate, too. ``surfaces`` of
    local volatility, none where prices are lognormal.
    """

    terms: ContractTerms
    noise: Noise
    draw: Callable[[Array], Drawn]
    group: str
    seed: int
    purpose: Purpose
    with_slopes: bool = False
    surfaces: Sequence[LocalVolSurface] = ()
    sums: Sums = field(init=False)
    _discount: Callable[[date], float] = field(init=False)
    _continuous: tuple[_Continuous | None, ...] = field(init=False)

    def __post_init__(self) -> None:
        n_dates, n_assets = self.terms.forwards.shape
        self.sums = Sums.none(self.noise.randomisations, n_dates, n_assets)
        self._discount = cache(self.terms.discount)
        self._continuous = tuple(
            _Continuous.of(feature, self.terms, self.surfaces)
            if isinstance(feature, Barrier) and feature.continuous
            else None
            for feature in self.terms.contract.features
        )

    def extend(self, points: int) -> None:
        """Up to ``points``, a power of two, of every randomisation."""
        sums, noise = self.sums, self.noise
        n_dates, n_assets = self.terms.forwards.shape
        room = max(_CELLS // max(noise.cells, n_dates * n_assets, 1), 16)
        block = min(1 << (room.bit_length() - 1), points, sums.points or points)  # divides both: all powers of two
        together = max(min(room // block, noise.randomisations), 1)
        for r in range(0, noise.randomisations, together):
            rows = range(r, min(r + together, noise.randomisations))
            for first in range(sums.points, points, block):
                walks = np.concatenate([noise.walks(row, first, block) for row in rows], axis=2)
                self._add(slice(rows.start, rows.stop), first, self.draw(walks))
        sums.points = points
        if self.with_slopes:
            sums.slope_points = points

    def _add(self, rows: slice, first: int, drawn: Drawn) -> None:
        """Paths of randomisations ``rows`` follow one another."""
        sums, times = self.sums, self.terms.times
        several = rows.stop - rows.start

        def by_row(numbers: Array) -> Array:
            return np.asarray(numbers.reshape(several, -1).sum(axis=1))

        values, ends = self._walk(drawn.prices, rows.start, first)
        sums.values[rows] += by_row(values)
        sums.lives[rows] += by_row(times[ends.places])
        sums.ends[rows] += _counts(ends, len(times), several)
        if ends.hit is not None:
            sums.has_barrier = True
            sums.hits[rows] += by_row(ends.hit.astype(float))
        if self.with_slopes:
            for asset in range(sums.slopes.shape[1]):
                bumps = (drawn.bumped(asset, 1.0 + h) for h in (BUMP, -BUMP))
                up, down = (self._walk(prices, rows.start, first)[0] for prices in bumps)
                sums.slopes[rows, asset] += by_row(up - down) / (2.0 * BUMP)

    def _walk(self, prices: Array, r: int, first: int) -> tuple[Array, Ends]:
        terms = self.terms
        ledger = DiscountedSum(prices.shape[2], self._discount)
        found = enumerate(self._continuous)
        watches = [None if watched is None else self._watch(watched, i, r, first) for i, watched in found]
        ends = walk_paths(terms.contract, terms.as_of.progress, terms.dates, prices, ledger, watches)
        return ledger.values, ends

    def _watch(self, found: _Continuous, feature: int, r: int, first: int) -> Watch:
        if not found.is_bridged:
            return ShiftedWatch(found.numbers)
        block = first * self.noise.randomisations + r
        draws = stream(self.seed, f"{self.group}/between dates {feature}", self.purpose, block)
        return BridgeWatch(found.numbers, found.start, draws)


@dataclass(frozen=True, slots=True)
class _Continuous:
    """What watching a barrier between the dates takes: deviations of bridges, or factors that shift levels."""

    is_bridged: bool
    numbers: Array
    start: float = float("nan")

    @classmethod
    def of(cls, barrier: Barrier, terms: ContractTerms, surfaces: Sequence[LocalVolSurface]) -> _Continuous:
        if not surfaces and is_bridged(barrier, terms):
            now = terms.as_of.levels
            start = float("nan") if now is None else float(read(barrier.trigger, np.array(now)[:, None])[0])
            return cls(True, bridge_deviations(barrier, terms), start)
        known = terms.as_of.references
        # References still to be set are near the forwards of the days that set them.
        known = _expected_references(terms) if known is None else known
        return cls(False, shift_factors(barrier, terms, known, surfaces))


def _expected_references(terms: ContractTerms) -> Array:
    sums, levels = terms.as_of.progress.references, terms.contract.levels
    setting = [place for place, day in enumerate(terms.dates) if day in set(levels.setting_dates)]
    total = np.array(sums.sums) + (terms.forwards + terms.floors)[setting].sum(axis=0)
    return np.asarray(total / len(levels.setting_dates))


def _counts(ends: Ends, dates: int, several: int) -> Array:
    """Paths by randomisation, last date and ending, (several, n_dates, n_endings)."""
    cells = dates * len(ENDINGS)
    rows = np.repeat(np.arange(several), len(ends.places) // several)
    places = (rows * dates + ends.places) * len(ENDINGS) + ends.kinds
    return np.bincount(places, minlength=several * cells).reshape(several, dates, -1).astype(float)
