"""Implied volatility of one underlying by expiry and strike: slices by expiry, ordered in time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import date
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.calendars import year_fraction
from pricer.market.corrected_slice import CorrectedSlice, Slice, base_of, cubic_derivatives
from pricer.market.slice_fit import fit_slice
from pricer.market.slice_order import is_admissible
from pricer.market.smile_quotes import Smile, SmileParameters, SmileQuotes
from pricer.market.svi import SviSlice, butterfly
from pricer.market.svi_fit import next_deviation
from pricer.market.volatility import VolatilityCurve

Array = NDArray[np.float64]


class SurfaceDerivatives(NamedTuple):
    """Total variance and its derivatives, all of one shape: in k once and twice, and in time (per year)."""

    variance: Array
    slope: Array
    curvature: Array
    speed: Array


@dataclass(frozen=True, slots=True, eq=False)
class ImpliedSurface:
    """Total variance ``w(k, t)`` of the pure martingale X (forward 1), k = log strike of X, t in ACT/365F years.

    Between two expiries w is linear in t at fixed k; before the first it is proportional to t, so
    the volatility of a strike is that of the first expiry. After the last the smile keeps its
    shape in standard deviations, ``w(k, t) = (t / T) w(k sqrt(T / t), T)``: the volatility at the forward stays
    and skew fades as 1 / sqrt(t). That is free of arbitrage in time wherever the last slice is free of it in strike.

    ``dates``, ``times``, ``slices`` : the expiries, increasing. ``quotes`` : what each was fitted to
    (empty for a surface not made from quotes).
    """

    valuation_date: date
    dates: tuple[date, ...]
    times: tuple[float, ...]
    slices: tuple[Slice, ...]
    quotes: tuple[SmileQuotes, ...] = ()
    _table: Array = field(init=False, repr=False)  # (5, n + 1) raw parameters, slice 0 without variance
    _places: Array = field(init=False, repr=False)  # (3, n + 1) start and width of corrections, index of the last cell
    _cells: Array = field(init=False, repr=False)  # (n + 1, largest number of cells, 4); one cell if there are none

    def __post_init__(self) -> None:
        if not self.slices or not len(self.dates) == len(self.times) == len(self.slices):
            raise ValueError(f"{len(self.slices)} slices do not fit {len(self.dates)} dates, {len(self.times)} times")
        for earlier, later in pairwise((0.0, *self.times)):
            if later <= earlier:
                raise ValueError(f"expiries must increase after the valuation date {self.valuation_date}")
        bases = map(base_of, self.slices)
        rows = [(0.0, 0.0, 0.0, 0.0, 1.0), *((s.a, s.b, s.rho, s.m, s.sigma) for s in bases)]
        object.__setattr__(self, "_table", np.array(rows).T)
        splines = {i: s for i, s in enumerate(self.slices, 1) if isinstance(s, CorrectedSlice)}
        places = np.tile([[0.0], [1.0], [0.0]], len(rows))
        cells = np.zeros((len(rows), max((s.cells.shape[0] for s in splines.values()), default=1), 4))
        for i, spline in splines.items():
            places[:, i] = spline.start, spline.width, spline.cells.shape[0] - 1.0
            cells[i, : spline.cells.shape[0]] = spline.cells
        object.__setattr__(self, "_places", places)
        object.__setattr__(self, "_cells", cells)

    @classmethod
    def from_quotes(cls, valuation_date: date, smiles: Sequence[Smile]) -> ImpliedSurface:
        """Slices fitted from short to long, each without butterfly arbitrage and above the one before.

        Total variance is therefore ordered in time within :data:`slice_order.RANGE` standard deviations of each
        expiry's forward. Slices are SVI, with a smooth correction where quotes are
        not SVI-shaped. Quotes that contradict this are missed by as much as needed: ``fit_errors`` says by
        how much, :mod:`pricer.market.arbitrage` where. A smile of parameters is taken as is where it is free of
        arbitrage, else fitted like nine quotes drawn from it.
        Raises ValueError unless expiry dates increase strictly after the valuation date.
        """
        if not smiles:
            raise ValueError("an implied volatility surface needs at least one expiry")
        dates = [smile.expiry_date for smile in smiles]
        for earlier, later in pairwise((valuation_date, *dates)):
            if later <= earlier:
                raise ValueError(
                    f"expiry dates must increase and lie after the valuation date {valuation_date}; "
                    f"{later} follows {earlier}"
                )
        times = [year_fraction(valuation_date, day) for day in dates]
        quotes = [
            smile.samples(time) if isinstance(smile, SmileParameters) else smile
            for smile, time in zip(smiles, times, strict=True)
        ]
        totals = [(q.log_moneyness, q.volatilities**2 * time) for q, time in zip(quotes, times, strict=True)]
        slices: list[Slice] = []
        for i, (smile, quote, time) in enumerate(zip(smiles, quotes, times, strict=True)):
            before = slices[-1] if slices else None
            stated = smile.slice(time) if isinstance(smile, SmileParameters) else None
            ahead = totals[i + 1 : i + 3]
            if stated is not None and is_admissible(stated, before, next_deviation(ahead)):
                slices.append(stated)
            else:
                slices.append(fit_slice(quote, time, before, ahead))
        return cls(valuation_date, tuple(dates), tuple(times), tuple(slices), tuple(quotes))

    @classmethod
    def flat(cls, curve: VolatilityCurve) -> ImpliedSurface:
        """The surface without skew of a curve, total variance for total variance."""
        slices = tuple(SviSlice.flat(variance) for variance in curve.variances[1:])
        return cls(curve.valuation_date, curve.dates, curve.times[1:], slices)

    @property
    def last_date(self) -> date:
        """The last expiry date."""
        return self.dates[-1]

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last expiry date."""
        return day > self.last_date

    def total_variance(self, k: ArrayLike, t: ArrayLike) -> Array:
        """Total variance at log-moneyness ``k`` and time ``t`` >= 0, broadcast against each other."""
        return self.derivatives(k, t).variance

    def volatility(self, k: ArrayLike, t: ArrayLike) -> Array:
        """Annualised implied volatility, as ``total_variance``; at ``t`` = 0 the limit, the first expiry's."""
        t = np.asarray(t, dtype=float)
        positive = np.where(t > 0.0, t, self.times[0])
        out: Array = np.sqrt(self.total_variance(k, positive) / positive)
        return out

    def butterfly(self, k: ArrayLike, t: ArrayLike) -> Array:
        """The function g of :func:`svi.butterfly` at ``k`` and ``t`` > 0."""
        at = self.derivatives(k, t)
        return butterfly(np.broadcast_to(np.asarray(k, dtype=float), at.variance.shape), *at[:3])

    def derivatives(self, k: ArrayLike, t: ArrayLike) -> SurfaceDerivatives:
        """Total variance, d/dk, d2/dk2 and d/dt, each of the broadcast shape of ``k`` and ``t``.

        At an expiry d/dt is that of the interval which ends there. Raises ValueError for ``t`` < 0.
        """
        k, t = np.asarray(k, dtype=float), np.asarray(t, dtype=float)
        if np.any(t < 0.0):
            raise ValueError("total variance has no meaning before the valuation date")
        nodes = np.array((0.0, *self.times))
        right = np.clip(np.searchsorted(nodes, t, side="left"), 1, nodes.size - 1)
        span = nodes[right] - nodes[right - 1]
        beyond = t > nodes[-1]
        # One formula for inside and beyond: beyond, the last slice alone, at the strike of equal standard deviations.
        stretch = np.where(beyond, t / nodes[-1], 1.0)
        x = k / np.sqrt(stretch)
        share = np.where(beyond, 1.0, (t - nodes[right - 1]) / span)
        low, high = self._slices(x, right - 1), self._slices(x, right)
        variance, slope, curvature = (a + share * (b - a) for a, b in zip(low, high, strict=True))
        inside = (high[0] - low[0]) / span
        outside = (variance - 0.5 * x * slope) / nodes[-1]
        speed = np.where(beyond, outside, inside)
        return SurfaceDerivatives(stretch * variance, np.sqrt(stretch) * slope, curvature, speed)

    def fit_errors(self) -> tuple[Array, ...]:
        """Per expiry: surface less quote in annualised volatility (0.001 is 0.1 vol points), (n,) each."""
        return tuple(
            self.volatility(quote.log_moneyness, time) - quote.volatilities
            for quote, time in zip(self.quotes, self.times, strict=False)
        )

    def _slices(self, k: Array, which: NDArray[np.intp]) -> tuple[Array, Array, Array]:
        """Total variance and its derivatives in k of slices ``which`` (0: none), broadcast."""
        a, b, rho, m, sigma = self._table[:, which]
        z = k - m
        root = np.sqrt(z * z + sigma * sigma)
        variance, slope, curvature = a + b * (rho * z + root), b * (rho + z / root), b * sigma * sigma / root**3
        if self._cells.shape[1] == 1:
            return variance, slope, curvature
        start, width, last = self._places[:, which]
        z = (k - start) / width
        cell = np.clip(np.floor(z), -1.0, last - 1.0)
        p = self._cells[which, cell.astype(np.intp) + 1]
        value, first, second = cubic_derivatives(z - cell, p[..., 0], p[..., 1], p[..., 2], p[..., 3])
        return variance + value, slope + first / width, curvature + second / width**2
