"""Estimates and standard errors from independent randomisations, with control variates.

Each randomisation's mean is one observation; a control with known mean 0 enters by
regression over the randomisations, whose intercept is the estimate and whose residuals
give the error (Lavenberg & Welch 1981). Regressing means rather than paths finds the
coefficient that serves low-discrepancy points, where the best one for independent paths
does not (Hickernell, Lemieux & Owen 2005). Under normal means the estimate is unbiased
and the error exact, with ``randomisations - 2`` degrees of freedom.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: A control that varies less than this, relative to 1, is rounding.
_STILL = 1e-12


def batch_estimate(means: Array, controls: Array | None = None) -> tuple[Array, Array]:
    """Estimate and standard error of each column of ``means`` (randomisations, m): two (m,).

    ``controls`` (randomisations, m), one per column, of mean 0 and order 1; None for none.
    """
    estimate, error, _ = batch_regression(means, controls)
    return estimate, error


def batch_regression(means: Array, controls: Array | None = None) -> tuple[Array, Array, Array]:
    """As ``batch_estimate``, and the slopes (m,): by how much an error in a control's mean would enter."""
    n = means.shape[0]
    centre = means.mean(axis=0)
    off = means - centre
    if controls is None:
        return centre, np.sqrt((off * off).sum(axis=0) / (n * (n - 1))), np.zeros_like(centre)
    control_centre = controls.mean(axis=0)
    control_off = controls - control_centre
    spread = (control_off * control_off).sum(axis=0)
    moving = spread > n * _STILL**2
    safe = np.where(moving, spread, 1.0)
    slope = np.where(moving, (control_off * off).sum(axis=0) / safe, 0.0)
    residual = off - slope * control_off
    variance = (residual * residual).sum(axis=0) / (n - 2)
    leverage = 1.0 / n + np.where(moving, control_centre**2 / safe, 0.0)
    return centre - slope * control_centre, np.sqrt(variance * leverage), slope
