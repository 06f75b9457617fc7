"""Correlated lognormal steps: a factor common to the whole path, other common moves, and the rest.

What moves all log-levels equally is split off the covariance of every step (see
``loadings.common_deviations``); its variance over time is the clock tau. Of that motion Y one normal w for
the whole path is split off again, ``Y(t) = shift(t) w + what is left``, and integrated exactly. For shifts ``b g(t)``
the covariance of what is left stays positive as long as

    b^2 sum_k (g_k - g_{k-1})^2 / (tau_k - tau_{k-1}) <= 1

(the matrix determinant lemma for the covariance ``min(tau_j, tau_k)``), and with equality
``w = b sum_k (g_k - g_{k-1}) / (tau_k - tau_{k-1}) (Y_k - Y_{k-1})``. With ``g = sqrt(tau)`` w has the same
share of the common variance on every date, and hardly a smaller one for many dates: the sum grows like ``1 +
ln(tau_last / tau_first) / 4``. Higher powers give late dates more and early ones less, values less noise and
early deltas more; 0.6 served both best in trials. A step by step split (one-step survival; Glasserman & Staum 2001)
smooths each date by its own step only, and has to redraw what it conditions on.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.loadings import common_to_all

Array = NDArray[np.float64]

#: Columns with less than this part of the largest loading are left out.
_NEGLIGIBLE = 1e-7


@dataclass(frozen=True, slots=True)
class CommonSteps:
    """Loadings are per unit of Brownian motion over time, in natural logarithms.

    ``times`` : (n_steps,) years. ``common`` : (n_steps,) of what moves all, 0 where a step has none; ``rest`` :
    (n_steps, n, n_rest). ``shifts`` : (n_steps,) by one unit of the path's factor w, never decreasing;
    ``projection`` : (n_steps,), w is its product with the common moves. ``turn`` : (n, n_rest) directions of ``rest``;
    ``sizes`` : (n_rest + 1,) how far each factor moves all log-levels together, root of the mean square, the
    common one last.
    """

    times: Array
    common: Array
    rest: Array
    shifts: Array
    projection: Array
    turn: Array
    sizes: Array

    @classmethod
    def of(cls, times: Array, covariances: Array, power: float = 0.6, like: CommonSteps | None = None) -> CommonSteps:
        """Split ``covariances`` (n_steps, n, n) of the steps that end at ``times``; ``g = tau^power``.

        The loadings of a step are the symmetric root of its covariance, turned to the principal components of
        all steps together: roots, unlike triangles and components, change little where
        covariances do, so a bridge in time serves all steps. ``like`` : steps of nearly the same covariances, whose
        directions and sizes are taken, so that equal points of a sequence make nearly equal paths.
        """
        lengths = np.diff(times, prepend=0.0)
        n = covariances.shape[1]
        rates = covariances / lengths[:, None, None]
        common = common_to_all(rates)
        left = rates - (common**2)[:, None, None] * np.ones((n, n))
        turn = _turn(np.tensordot(lengths, left, axes=1)) if like is None else like.turn
        values, vectors = np.linalg.eigh(left)
        roots = np.einsum("tij,tj,tkj->tik", vectors, np.sqrt(np.maximum(values, 0.0)), vectors)
        rest = roots @ turn
        if like is None:
            size = np.sqrt((rest**2).sum(axis=1)).max(axis=0)
            kept = size > _NEGLIGIBLE * max(float(np.sqrt(rates.max())), 1e-300)
            rest, turn = rest[:, :, kept], turn[:, kept]
        ticks = common**2 * lengths
        shape = np.cumsum(ticks) ** power
        moves = np.diff(shape, prepend=0.0)
        slopes = np.divide(moves, ticks, out=np.zeros_like(ticks), where=ticks > 0.0)
        total = float(moves @ slopes)
        b = 1.0 / np.sqrt(total) if total > 0.0 else 0.0
        shifts = b * shape
        sizes = _sizes(lengths, common, rest, shifts) if like is None else like.sizes
        return cls(times, common, rest, shifts, b * slopes, turn, sizes)


def _turn(total: Array) -> Array:
    """Principal components of a covariance, largest first, each with its largest entry above 0."""
    _, turn = np.linalg.eigh(total)
    turn = turn[:, ::-1]
    largest = turn[np.argmax(np.abs(turn), axis=0), np.arange(len(total))]
    out: Array = turn * np.where(largest < 0.0, -1.0, 1.0)
    return out


def _sizes(lengths: Array, common: Array, rest: Array, shifts: Array) -> Array:
    n = rest.shape[1]
    whole = float(common**2 @ lengths)
    left = max(1.0 - shifts[-1] ** 2 / whole, 0.0) if whole > 0.0 else 0.0
    moved = np.sqrt((rest**2).sum(axis=1).mean(axis=0))
    return np.append(moved, np.sqrt(left * n * float((common**2).mean())))
