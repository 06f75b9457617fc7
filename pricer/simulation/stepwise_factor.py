"""One normal factor of a whole path that moves all log-levels alike, split off its Brownian motions.

For increments ``dB_s`` of covariance ``R h_s`` and any directions ``d_s`` with ``sum_s d_s' R^-1 d_s / h_s = 1``
(the matrix determinant lemma) the normal ``w = sum_s d_s' R^-1 dB_s / h_s`` is independent of what is left of the
motions, ``dB_s - d_s w``. Directions over volatility move log-levels alike, so the ranking of levels hardly changes
along w. In time they follow the power 0.6 of the clock of what moves all, as in ``common_steps``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_POWER = 0.6

#: Correlation in directions weaker than this part of the strongest is none.
_NEGLIGIBLE = 1e-12


@dataclass(frozen=True, slots=True)
class PathFactor:
    """``loadings`` (rows, dims) of the motions on independent ones, ``sizes`` (dims,) how much each matters.

    ``directions`` (n_steps, rows) : what one unit of w adds to the increments; ``projection`` (n_steps, dims) : w is
    its product with the increments of the independent motions.
    """

    loadings: Array
    sizes: Array
    directions: Array
    projection: Array

    @classmethod
    def of(cls, lengths: Array, correlation: Array, volatilities: Array, signs: Array) -> PathFactor:
        """``lengths`` (n_steps,) years; ``correlation`` (rows, rows) of the motions, assets first.

        ``volatilities`` (n_steps, n) > 0 of the assets; ``signs`` (n,) 1 or -1, the way w moves each. Exchange rates
        do not move.
        """
        n, rows = len(signs), len(correlation)
        inverse = np.linalg.pinv(correlation, rcond=_NEGLIGIBLE, hermitian=True)
        wanted = np.zeros((len(lengths), rows))
        wanted[:, :n] = signs / volatilities
        wanted = wanted @ inverse @ correlation  # what tied motions cannot do is left out
        strengths = np.einsum("si,ij,sj->s", wanted, inverse, wanted)
        ticks = lengths / strengths
        moves = np.diff(np.cumsum(ticks) ** _POWER, prepend=0.0)
        scale = 1.0 / np.sqrt(float((moves**2 / ticks).sum()))
        directions = scale * moves[:, None] * wanted
        share = min(scale**2 * float(ticks.sum()) ** (2.0 * _POWER - 1.0), 1.0)
        mean = lengths @ wanted
        loadings, sizes = _loadings(correlation, mean / np.sqrt(float(mean @ inverse @ mean)), share)
        return cls(loadings, sizes, directions, (directions @ inverse / lengths[:, None]) @ loadings)


def _loadings(correlation: Array, common: Array, share: float) -> tuple[Array, Array]:
    """The common direction and the principal components of the rest; of the first, w takes ``share``."""
    values, axes = np.linalg.eigh(correlation - np.outer(common, common))
    kept = (values > _NEGLIGIBLE * max(float(values[-1]), 1.0))[::-1]
    rest = (axes[:, ::-1] * np.sqrt(np.maximum(values[::-1], 0.0)))[:, kept]
    sizes = np.append(np.sqrt(1.0 - share) * np.linalg.norm(common), np.linalg.norm(rest, axis=0))
    return np.column_stack([common, rest]), sizes
