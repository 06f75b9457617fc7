"""Arithmetic average of one level over dates: its whole law, by one convolution per date.

Counted from the end, the weighted sum of fixings is ``S(1) (w1 + R2 (w2 + R3 (w3 + ...)))`` with independent
lognormal returns ``R``. The log of each bracket's product with its return has a smooth density, which the
next date smooths further (Carverhill & Clewlow 1990; Benhamou 2002): the trapezoidal rule carries it with the
accuracy of its tails. Given all later returns the sum is lognormal, so that every payoff is taken exactly.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.fixing_law import FixingLaw
from pricer.engines.closed_form.payoff_pieces import above_zero, lognormal_expectations

Array = NDArray[np.float64]

_FAR = 8.5  # deviations of the logs that are carried
_KERNEL = 8.5  # deviations of one return that are counted
_SPACING, _COARSE = 0.5, 0.6  # of nodes, in deviations of the shorter return: 13 digits, and what shows them
_MOST = 20_000  # nodes; a wider spacing shows in the error
_ROWS = 64  # nodes of a date treated together


def average_by_convolution(fixings: FixingLaw, weights: Array, payoff: PiecewiseLinear, fixed: float = 0.0) -> Estimate:
    """``E[payoff(fixed + sum weights[j] S(j))]``, undiscounted, for one underlying and any payoff.

    ``weights`` (n_dates,) > 0; dates and variances strictly increasing, none today. The error is the change under a
    wider spacing. Raises ValueError where the law or the weights are not of that form.
    """
    if fixings.forwards.shape != (weights.size, 1):
        raise ValueError(f"one underlying and {weights.size} dates expected; got {fixings.forwards.shape}")
    variances = fixings.covariances[:, 0, 0]
    steps = np.sqrt(np.diff(variances, prepend=0.0))
    if np.any(weights <= 0.0) or not np.all(steps > 0.0):
        raise ValueError("weights must be positive and variance must increase from date to date")
    amounts = weights * fixings.forwards[:, 0]
    rest = above_zero(payoff.of_shifted_argument(fixed))
    scale = float(amounts.sum()) + abs(fixed)
    return with_error(lambda means: lognormal_expectations(rest, means, float(steps[0])), amounts, steps, scale)


def with_error(value_of: Callable[[Array], Array], amounts: Array, steps: Array, scale: float) -> Estimate:
    """Mean of ``value_of`` over :func:`means_given_later`, and what a wider spacing changes."""
    fine, coarse = (
        float(masses @ value_of(means))
        for means, masses in (means_given_later(amounts, steps, spacing) for spacing in (_SPACING, _COARSE))
    )
    return Estimate(fine, abs(fine - coarse) + 1e-14 * (scale + abs(fine)))


def means_given_later(amounts: Array, steps: Array, spacing: float = _SPACING) -> tuple[Array, Array]:
    """Law of ``m`` in ``sum_j amounts[j] X[j] = m R[0]``, where ``X[j]`` is the product of returns ``R[0] ... R[j]``.

    ``amounts`` (n_dates,) > 0; ``steps`` (n_dates,) > 0, deviations of the logs of the independent ``R``, each
    lognormal of mean 1. Returns values of ``m`` and their masses, (n_nodes,) each.
    """
    last = amounts.size - 1
    if last == 0:
        return amounts.copy(), np.ones(1)
    variances = np.cumsum(steps**2)
    # c[j]: log of the return to date j times what is due from date j on, whose density is carried.
    c = _nodes(amounts, variances, steps, last, spacing)
    density = np.exp(-0.5 * ((c - math.log(amounts[last]) + 0.5 * steps[last] ** 2) / steps[last]) ** 2)
    density *= 1.0 / (steps[last] * math.sqrt(2.0 * math.pi))
    for j in range(last - 1, 0, -1):
        due = np.log(amounts[j] + np.exp(c)) - 0.5 * steps[j] ** 2
        before = _nodes(amounts, variances, steps, j, spacing)
        density = _spread(before, due, density * (c[1] - c[0]), float(steps[j]))
        c = before
    return amounts[0] + np.exp(c), density * (c[1] - c[0])


def _nodes(amounts: Array, variances: Array, steps: Array, j: int, spacing: float) -> Array:
    """Evenly spaced logs that hold what is due from date ``j`` >= 1 on, seen from the date before."""
    left = float(variances[-1] - variances[j - 1])
    # The sum lies between its own amount times the lowest and the highest growth on the way; an amount of money
    # weights the law with itself, which moves it up by its variance.
    centre, reach = math.log(float(amounts[j:].sum())), _FAR * math.sqrt(left) + left
    # The density is as smooth as the return it holds, and is next weighted with the return before.
    width = max(spacing * float(steps[j - 1 : j + 1].min()), 2.0 * reach / _MOST)
    count = 1 + math.ceil(2.0 * reach / width)
    return np.linspace(centre - reach, centre + reach, count)


def _spread(to: Array, due: Array, amounts: Array, step: float) -> Array:
    """``sum_k amounts[k] normal density(to[i] - due[k])`` for rising ``to`` and ``due``: (n_to,)."""
    out = np.empty(to.size)
    for first in range(0, to.size, _ROWS):
        rows = to[first : first + _ROWS]
        lo, hi = np.searchsorted(due, (rows[0] - _KERNEL * step, rows[-1] + _KERNEL * step))
        z = (due[lo:hi] - rows[:, None]) / step
        out[first : first + _ROWS] = np.exp(-0.5 * z * z) @ amounts[lo:hi]
    return out / (step * math.sqrt(2.0 * math.pi))
