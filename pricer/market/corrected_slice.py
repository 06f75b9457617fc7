"""A smile that no SVI slice meets: one, and on it a smooth correction that ends where the quotes do."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.svi import SviSlice, butterfly

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class CorrectedSlice:
    """Total variance ``base(k) + h(k)``, h a cubic spline on even knots with two continuous derivatives.

    h is the sum of ``coefficients`` (m,) times B-splines, the j-th of which reaches over the four cells from
    ``start + j width`` on (de Boor 1978). It vanishes outside these, so the wings are those of ``base``.
    """

    base: SviSlice
    start: float
    width: float
    coefficients: Array
    _cells: Array = field(init=False, repr=False)

    def __post_init__(self) -> None:
        if not (self.width > 0.0 and self.coefficients.ndim == 1 and np.all(np.isfinite(self.coefficients))):
            raise ValueError("a correction needs a width above 0 and a row of finite coefficients")
        object.__setattr__(self, "_cells", cubics(self.coefficients))

    @property
    def cells(self) -> Array:
        """The spline as polynomials of the place within a cell, (m + 5, 4) from constant to cubic.

        The first and the last are 0 and stand for everything to the left of ``start`` and beyond the last cell.
        """
        return self._cells

    @property
    def end(self) -> float:
        """Where the correction ends on the right; on the left it ends at ``start``."""
        return self.start + (self.coefficients.size + 3) * self.width

    @property
    def wings(self) -> tuple[float, float]:
        """As :attr:`SviSlice.wings`."""
        return self.base.wings

    def total_variance(self, k: ArrayLike) -> Array:
        """Total variance at log-moneyness ``k``, any shape."""
        return self.derivatives(k)[0]

    def derivatives(self, k: ArrayLike) -> tuple[Array, Array, Array]:
        """Total variance and its first and second derivative in k, each of the shape of ``k``."""
        k = np.asarray(k, dtype=float)
        z = (k - self.start) / self.width
        cell = np.clip(np.floor(z), -1.0, self._cells.shape[0] - 2.0)
        p = self._cells[cell.astype(np.intp) + 1]
        value, first, second = cubic_derivatives(z - cell, p[..., 0], p[..., 1], p[..., 2], p[..., 3])
        w, slope, curvature = self.base.derivatives(k)
        return w + value, slope + first / self.width, curvature + second / self.width**2

    def butterfly(self, k: ArrayLike) -> Array:
        """The function g of :func:`svi.butterfly` at ``k``."""
        return butterfly(k, *self.derivatives(k))


#: One expiry's smile of either kind.
Slice = SviSlice | CorrectedSlice


def base_of(smile: Slice) -> SviSlice:
    """The SVI slice behind either kind."""
    return smile.base if isinstance(smile, CorrectedSlice) else smile


def cubics(coefficients: Array) -> Array:
    """:attr:`CorrectedSlice.cells` of B-spline coefficients (m,) or of several splines' (m, s): (m + 5, ..., 4)."""
    padded = np.pad(coefficients, [(4, 4)] + [(0, 0)] * (coefficients.ndim - 1))
    a, b, c, d = padded[:-3], padded[1:-2], padded[2:-1], padded[3:]
    out: Array = np.stack([(a + 4.0 * b + c) / 6.0, 0.5 * (c - a), 0.5 * (a - 2.0 * b + c), (d - a) / 6.0], axis=-1)
    out[..., 3] += 0.5 * (b - c)
    return out


def cubic_derivatives(u: Array, p: Array, q: Array, r: Array, s: Array) -> tuple[Array, Array, Array]:
    """``p + q u + r u^2 + s u^3`` and its two derivatives in u."""
    return p + u * (q + u * (r + u * s)), q + u * (2.0 * r + 3.0 * u * s), 2.0 * r + 6.0 * u * s
