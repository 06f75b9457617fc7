"""One-dimensional quadrature: adaptive Gauss-Legendre panels, evaluated in batches."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.engines.closed_form.family import Estimate

#: Deviations beyond which a standard normal has less than 1e-18.
RANGE = 9.0
#: Half width, in deviations, of the layer in which a conditional option is neither certain nor worthless.
LAYER = 8.0
#: Error, relative to the scale of the payoff, up to which a quadrature counts as exact.
ACCEPTED = 1e-6

_ORDER = 16
_HIDDEN = 1e-4  # share of a panel's difference that may be left, unseen, when its halves show none
_SMALLEST = 1e-13  # a panel narrower than this times the whole range is not split again


def integrate(
    f: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    edges: NDArray[np.float64],
    tolerance: float,
    evaluations: int = 20_000,
) -> Estimate:
    """Integral of ``f`` from ``edges[0]`` to ``edges[-1]``.

    ``f`` maps nodes (m,) to values (m,). Panels start at the ``edges`` (increasing) and are
    halved until a panel and its halves agree within their share of ``tolerance``, or
    ``evaluations`` are spent. The error is the sum of those differences, which for a
    smooth integrand is far above the error of the halves that are kept, and a little of
    the differences before: a kink may hide between a panel's edge and its first node. An
    edge belongs where a kink or a jump is known to be.
    """
    nodes, weights = gauss_legendre(_ORDER)
    left, right = edges[:-1], edges[1:]
    whole_range = float(edges[-1] - edges[0])
    if whole_range <= 0.0:
        return Estimate(0.0)

    def panels(lo: NDArray[np.float64], hi: NDArray[np.float64]) -> NDArray[np.float64]:
        half = 0.5 * (hi - lo)
        x = (0.5 * (lo + hi))[:, None] + half[:, None] * nodes
        return np.asarray(half * (f(x.ravel()).reshape(x.shape) @ weights))

    coarse = panels(left, right)
    before = np.zeros_like(coarse)
    spent = coarse.size * _ORDER
    value, error = 0.0, 0.0
    while coarse.size:
        middle = 0.5 * (left + right)
        lo = np.concatenate((left, middle))
        hi = np.concatenate((middle, right))
        fine = panels(lo, hi)
        spent += fine.size * _ORDER
        halves = fine.reshape(2, -1)
        gap = np.abs(coarse - halves.sum(axis=0))
        unsure = gap + _HIDDEN * before
        share = (right - left) / whole_range
        rounding = 4e-16 * np.abs(halves).sum(axis=0)
        done = (unsure <= np.maximum(tolerance * share, rounding)) | (share < _SMALLEST)
        if spent + 4 * _ORDER * int(np.sum(~done)) > evaluations:
            done = np.ones_like(done)
        value += float(halves[:, done].sum())
        error += float((unsure + rounding)[done].sum())
        again = np.concatenate((~done, ~done))
        left, right, coarse, before = lo[again], hi[again], fine[again], np.tile(gap, 2)[again]
    return Estimate(value, error)


def edges_between(
    low: float, high: float, panels: int, centres: ArrayLike = (), widths: ArrayLike = ()
) -> NDArray[np.float64]:
    """Edges of ``panels`` equal panels, and of layers that reach ``widths`` to both sides of their ``centres``."""
    middle, width = np.asarray(centres, dtype=float), np.asarray(widths, dtype=float)
    edges = np.concatenate((np.linspace(low, high, panels + 1), middle - width, middle, middle + width))
    return np.unique(edges[(edges >= low) & (edges <= high)])


@lru_cache(maxsize=64)
def gauss_legendre(order: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes and weights on (-1, 1), read-only."""
    return _frozen(*np.polynomial.legendre.leggauss(order))


@lru_cache(maxsize=64)
def gauss_hermite(order: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes and weights for the expectation under the standard normal law, read-only."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(order)
    return _frozen(nodes, weights / weights.sum())


def _frozen(*arrays: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    for array in arrays:
        array.setflags(write=False)
    return arrays[0], arrays[1]


def normal_density(z: NDArray[np.float64]) -> NDArray[np.float64]:
    """Standard normal density."""
    return np.asarray(np.exp(-0.5 * z * z) / np.sqrt(2.0 * np.pi))
