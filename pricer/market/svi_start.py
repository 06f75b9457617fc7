"""Slices from which the search for the nearest one to an expiry's quotes begins."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.market.svi import SviSlice

Array = NDArray[np.float64]


def prior_slice(k: Array, variances: Array) -> SviSlice:
    """The three-parameter slice through level, slope and curvature of quotes (n,) near the forward."""
    scale = math.sqrt(float(np.interp(0.0, k, variances)))
    if k.size == 1:
        return SviSlice.flat(float(variances[0]))
    near = np.exp(-0.25 * np.minimum((k / scale) ** 2, 30.0))
    degree = min(k.size - 1, 2)
    basis = np.vander(k / scale, degree + 1, increasing=True)
    level, *rest = np.linalg.lstsq(basis * near[:, None], variances * near, rcond=None)[0]
    level = float(np.clip(level, 0.5 * scale * scale, 2.0 * scale * scale))  # quotes on one side only
    curvature = 2.0 * float(rest[1]) / scale**2 if degree == 2 else None
    return SviSlice.from_forward(level, float(rest[0]) / scale, curvature)


def starting_slices(x: Array, roots: Array, weights: Array, s: float) -> list[SviSlice]:
    """Two slices by exact linear least squares for given centre and width (De Marco & Martini 2009).

    Of quotes (n,) in units of the deviation ``s``: strikes ``x``, roots of total variance, weights.
    None for fewer than four.
    """
    if x.size < 4:
        return []
    centres, widths = np.meshgrid(np.array([-2.0, -1.0, -0.3, 0.3, 1.0, 2.0]), np.array([0.3, 1.0, 3.0]))
    m, sigma = centres.ravel(), widths.ravel()
    z = x - m[:, None]
    basis = np.stack([np.ones_like(z), z, np.sqrt(z * z + sigma[:, None] ** 2)], axis=-1) * weights[:, None]
    target = roots**2 * weights
    normal = np.einsum("snp,snq->spq", basis, basis) + 1e-10 * np.eye(3)
    a, d, c = np.linalg.solve(normal, np.einsum("snp,n->sp", basis, target)[..., None])[..., 0].T
    error = np.sum((np.einsum("snp,ps->sn", basis, np.array([a, d, c])) - target) ** 2, axis=1)
    rho = d / np.where(c > 0.0, c, 1.0)
    least = a + c * sigma * np.sqrt(np.maximum(1.0 - rho * rho, 0.0))
    allowed = (c > 1e-6) & (np.abs(rho) < 0.999) & (least > 1e-4)
    order = [i for i in np.argsort(error) if allowed[i]][:2]
    return [SviSlice(s * s * a[i], s * c[i], rho[i], s * m[i], s * sigma[i]) for i in order]
