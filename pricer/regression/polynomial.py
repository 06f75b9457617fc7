"""Polynomials of low total degree in whitened inputs: which monomials, and how inputs are prepared."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.regression import polynomial_kernels as kernels

Array = NDArray[np.float64]
Singles = NDArray[np.float32]
Places = NDArray[np.int64]

#: Directions of the inputs with less than this part of the largest variance are left out.
_NEGLIGIBLE = 1e-6

#: Directions below this part of it are correlations' left-overs: they count double in a monomial's degree,
#: because where states crowd on a thin sheet a high power of the distance from it explodes beside it.
_SLIGHT = 1e-3

#: Inputs, and whitened inputs, are held between the quantiles that leave this share of the sample on either side.
_BEYOND = 5e-4


@dataclass(frozen=True, slots=True)
class PolynomialBasis:
    """Monomials up to a total degree in inputs whitened by principal components, and some inputs as they are.

    Components are those of the inputs each divided by its deviation. Inputs are held within what the sample
    covers one by one, so that a rare state moves to a likely one that resembles it, and components once more:
    a polynomial then cannot explode on paths rarer than any it was fitted to. *Free* inputs also enter unheld, and
    carry a value that grows without end.
    ``centre`` and ``scale`` : (n_inputs,), ``reach`` : (2, n_inputs), ``whitening`` : (q, n_inputs),
    ``bounds`` : (2, q); ``parents`` and ``factors`` : (n_basis,), see the kernel.
    """

    centre: Singles
    reach: Singles
    whitening: Singles
    bounds: Singles
    scale: Singles
    first_free: int
    parents: Places
    factors: Places

    @classmethod
    def of(cls, inputs: Singles, degree: int, *, free: int = 0) -> PolynomialBasis:
        """For the law that ``inputs`` (n_inputs, n_samples) were drawn from; the last ``free`` of them are free.

        Raises ValueError for a negative degree or inputs that are not finite.
        """
        if degree < 0:
            raise ValueError(f"the degree must not be negative; got {degree}")
        sample = np.asarray(inputs, dtype=float)
        if not np.all(np.isfinite(sample)):
            raise ValueError("inputs must be finite")
        centre, deviations = sample.mean(axis=1), sample.std(axis=1)
        live = deviations > 1e-6 * np.maximum(np.abs(centre), 1e-30)
        scale = np.where(live, 1.0 / np.where(live, deviations, 1.0), 0.0)
        centred = sample - centre[:, None]
        reach = np.quantile(centred, [_BEYOND, 1.0 - _BEYOND], axis=1)
        scaled = np.clip(centred, *reach[:, :, None]) * scale[:, None]
        scaled_mean = scaled.mean(axis=1)
        centre, reach = centre + scaled_mean * deviations, reach - scaled_mean * deviations
        scaled -= scaled_mean[:, None]
        variances, directions = np.linalg.eigh(scaled @ scaled.T / scaled.shape[1])
        kept = variances > _NEGLIGIBLE * max(float(variances[-1]), 1e-300)
        if degree == 0:
            kept, free = np.zeros_like(kept), 0
        variances, directions = variances[kept][::-1], directions[:, kept][:, ::-1]
        whitening = (directions / np.sqrt(variances)).T
        bounds = np.quantile(whitening @ scaled, [_BEYOND, 1.0 - _BEYOND], axis=1)
        costs = np.where(variances > _SLIGHT * float(np.max(variances, initial=0.0)), 1, 2)
        parents, factors = _products(costs, free, degree)
        return cls(
            centre.astype(np.float32),
            np.ascontiguousarray(reach, dtype=np.float32),
            np.ascontiguousarray(whitening * scale, dtype=np.float32),
            np.ascontiguousarray(bounds, dtype=np.float32),
            scale.astype(np.float32),
            len(inputs) - free,
            parents,
            factors,
        )

    @property
    def size(self) -> int:
        return len(self.parents)

    def __call__(self, inputs: Singles) -> Singles:
        """Basis functions (n_basis, lanes) of ``inputs`` (n_inputs, lanes), lanes a multiple of the kernel's strip."""
        out = np.empty((self.size, inputs.shape[1]), dtype=np.float32)
        kernels.basis_functions(inputs, *self._layout, out)
        return out

    def combined(self, coefficients: Singles, inputs: Singles, out: Singles) -> None:
        """``out`` (lanes,) = the sum of ``coefficients`` (n_basis,) times the basis at ``inputs``."""
        kernels.combination(inputs, *self._layout, coefficients, out)

    @property
    def _layout(self) -> tuple[Any, ...]:
        return (
            self.centre,
            self.reach,
            self.whitening,
            self.bounds,
            self.scale,
            self.first_free,
            self.parents,
            self.factors,
        )


def _products(costs: Places, free: int, degree: int) -> tuple[Places, Places]:
    """Each monomial as an earlier one times an input no earlier than its last; free inputs between.

    ``costs`` : (q,) degree that each input counts for; those of degree 1 are there whatever they count for.
    """
    q = len(costs)
    parents, factors = [0] * (1 + q + free), list(range(1 + q + free))
    layer = [(1 + j, int(costs[j])) for j in range(q)]
    while layer:
        following = []
        for m, spent in layer:
            for j in range(factors[m], 1 + q):
                cost = spent + int(costs[j - 1])
                if cost <= degree:
                    following.append((len(parents), cost))
                    parents.append(m)
                    factors.append(j)
        layer = following
    return np.array(parents, dtype=np.int64), np.array(factors, dtype=np.int64)
