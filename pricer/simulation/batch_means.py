"""Estimates and standard errors from independent randomisations, with control variates.

Each randomisation's mean is one observation; a control with known mean 0 enters by
regression over the randomisations, whose intercept is the estimate (Lavenberg & Welch 1981).
Regressing means rather than paths finds the coefficient that serves low-discrepancy points,
where the best one for independent paths does not (Hickernell, Lemieux & Owen 2005).

The error is the jackknife's: how the estimate moves when one randomisation is left out
(Miller 1974). Without a control it is the usual one; with one it sees when the coefficient
hangs on a single randomisation, where the residuals, forced to be small there, do not.

Means are skewed where the outermost points decide, and for low-discrepancy points more of
them do not help: it is always the outermost cell that is left. The usual error is then too
small just when the estimate is too low. Student's ratio moves by ``g (1 + 2 t^2) / (6 sqrt(n))``
at t for a skewness g (Johnson 1978); errors are widened by that share at t = 6, and so by
more than it at the quantiles in use, as a sample's skewness falls short of the true one.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: A control that varies less than this, relative to 1, is rounding.
_STILL = 1e-12

#: Student's ratio t for which skewness widens errors by as much as it moves the ratio.
_WIDENED_AT = 6.0


def batch_estimate(means: Array, controls: Array | None = None, control_rounding: float = 0.0) -> tuple[Array, Array]:
    """Estimate and standard error of each column of ``means`` (randomisations, m): two (m,).

    ``controls`` (randomisations, m), one per column, of mean 0 and order 1; None for none.
    ``control_rounding`` : how far rounding may take a control's mean from 0. A column whose
    error without the control is smaller than what that would add goes without it.
    """
    estimate, error, _ = batch_regression(means, controls, control_rounding)
    return estimate, error


def batch_regression(
    means: Array, controls: Array | None = None, control_rounding: float = 0.0
) -> tuple[Array, Array, Array]:
    """As ``batch_estimate``, and the slopes (m,): how much of a control's own error enters."""
    n = means.shape[0]
    centre = means.mean(axis=0)
    off = means - centre
    plain = _error(off / (n - 1))
    if controls is None:
        return centre, plain, np.zeros_like(centre)
    control_centre = controls.mean(axis=0)
    control_off = controls - control_centre
    spread = (control_off * control_off).sum(axis=0)
    moving = spread > n * _STILL**2
    slope = (control_off * off).sum(axis=0) / np.where(moving, spread, 1.0)
    moving &= np.abs(slope) * control_rounding <= plain
    slope = np.where(moving, slope, 0.0)
    reach = control_off / np.where(moving, spread, np.inf)
    left_out = 1.0 - 1.0 / n - reach * control_off  # 0 where one randomisation alone moves the control
    shares = (1.0 / n - reach * control_centre) / np.maximum(left_out, 1e-6)
    error = _error(shares * (off - slope * control_off))
    return centre - slope * control_centre, np.hypot(error, slope * control_rounding), slope


def batch_estimate_with(means: Array, controls: Array) -> tuple[Array, Array]:
    """Estimates and errors with several controls each: two (m,) from (randomisations, m), (randomisations, m, c).

    Controls have mean 0 and order 1; those that do not move, or only together, are left out.
    """
    n = means.shape[0]
    design = np.concatenate([np.ones((means.shape[1], n, 1)), np.moveaxis(controls, 1, 0)], axis=2)
    inverse = np.linalg.pinv(design, rcond=_STILL)  # (m, 1 + c, n)
    y = means.T[:, :, None]
    coefficients = inverse @ y
    residuals = (y - design @ coefficients)[:, :, 0]
    reach = np.einsum("mic,mci->mi", design, inverse)  # 1 where one randomisation alone decides
    moves = inverse[:, 0, :] * residuals / np.maximum(1.0 - reach, 1e-6)
    return coefficients[:, 0, 0], _error(moves.T)


def _error(influences: Array) -> Array:
    """Jackknife error, widened for skewness: (m,) from the moves on leaving one out (randomisations, m)."""
    n = influences.shape[0]
    squares = (influences * influences).sum(axis=0)
    size = np.sqrt(squares / n)
    skewness = np.abs(((influences / np.where(size > 0.0, size, 1.0)) ** 3).mean(axis=0))
    out: Array = np.sqrt((n - 1) / n * squares) * (1.0 + _WIDENED_AT / 3.0 * skewness / np.sqrt(n))
    return out
