"""A barrier observed on dates on one lognormal level: exact, by quadrature from date to date.

Between two observations the level is lognormal, and the option's value on a date is a smooth function of
the levels still alive. Backward from the last observation each date costs a few Gauss-Legendre panels
fitted to the corridor of that date (Andricopoulos, Widdicks, Duck & Newton 2003; Fusai & Recchioni 2007).
Forwards, volatilities, barriers and rebates may change from date to date.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.payoff_pieces import above_zero, between, lognormal_expectations
from pricer.engines.closed_form.quadrature import gauss_legendre

Array = NDArray[np.float64]

_FAR = 8.0  # deviations on either side of the law of a date
_KERNEL = 8.5  # deviations of a step beyond which the step is not taken
_PANEL = 6.0  # width of a panel, in deviations of the shortest step that starts or ends there
_ORDER, _COARSE = 32, 26  # nodes of a panel: at 32 a Gaussian of that width is integrated to 13 digits
_ROWS = 64  # nodes of a date treated together


@dataclass(frozen=True, slots=True)
class Observations:
    """Dates on which the level is looked at, all in the future, and the corridor it must then be inside of.

    ``forwards``, ``variances`` : (n_dates,), of the level and of its log since today, variances increasing.
    ``lowers``, ``uppers`` : (n_dates,), barriers; 0 and infinity for none. A level at a barrier is outside.
    ``rebates`` : (n_dates,), paid when found outside, in money of the expiry date (paid at once: divided by the
    discount factor between); none if empty.
    """

    forwards: Array
    variances: Array
    lowers: Array
    uppers: Array
    rebates: Array

    def __post_init__(self) -> None:
        shape = self.forwards.shape
        if len(shape) != 1 or any(a.shape != shape for a in (self.variances, self.lowers, self.uppers)):
            raise ValueError("forwards, variances and barriers need one number per observation")
        if self.rebates.size and self.rebates.shape != shape:
            raise ValueError("rebates need one number per observation")
        if np.any(np.diff(self.variances, prepend=0.0) <= 0.0):
            raise ValueError("variance must increase from observation to observation")
        if np.any(self.lowers >= self.uppers):
            raise ValueError("every lower barrier must be below the upper one")


def knock_out(observations: Observations, forward: float, variance: float, payoff: PiecewiseLinear) -> Estimate:
    """``E[payoff(level at expiry); inside on every date] + E[rebates]``, undiscounted.

    ``forward`` and ``variance`` are those of expiry, which may be the last observation itself. The error is the change
    when the panels get a fifth less nodes. Work grows as the sum over dates of nodes times the nodes
    within a step's reach.
    """
    coarse = _value(observations, forward, variance, payoff, _COARSE)
    fine = _value(observations, forward, variance, payoff, _ORDER)
    return Estimate(fine, float(abs(fine - coarse)) + 1e-14 * (forward + abs(fine)))


def knock_in(observations: Observations, forward: float, variance: float, payoff: PiecewiseLinear) -> Estimate:
    """``E[payoff(level at expiry); outside on at least one date]``, undiscounted and without rebates."""
    free = Observations(
        observations.forwards, observations.variances, observations.lowers, observations.uppers, np.empty(0)
    )
    out = knock_out(free, forward, variance, payoff)
    plain = float(lognormal_expectations(above_zero(payoff), np.array([forward]), math.sqrt(variance))[0])
    return Estimate(plain - out.value, out.error)


def _value(observations: Observations, forward: float, variance: float, payoff: PiecewiseLinear, order: int) -> float:
    """Backward through the dates, in ``u = log(level / forward of the date) + variance / 2``: driftless."""
    last = observations.forwards.size - 1
    variances = np.append(0.0, observations.variances)
    steps = np.sqrt(np.diff(variances))
    with np.errstate(divide="ignore"):
        lows, highs = (
            np.log(barrier / observations.forwards) + 0.5 * observations.variances
            for barrier in (observations.lowers, observations.uppers)
        )
    rebates = observations.rebates if observations.rebates.size else np.zeros(last + 1)
    # Value from each date on, for levels that are alive just after it, at that date's nodes.
    at_expiry = variance <= observations.variances[last] * (1.0 + 1e-14)
    ends = (float(observations.lowers[last]), float(observations.uppers[last])) if at_expiry else (0.0, math.inf)
    alive = above_zero(between(payoff, *ends))

    def to_expiry(u: Array, date: int) -> Array:
        """Expected payoff from the nodes of ``date`` (-1: today) with no observation between."""
        left = variance - variances[date + 1]
        return lognormal_expectations(alive, forward * np.exp(u - 0.5 * variances[date + 1]), math.sqrt(max(left, 0.0)))

    def outside(u: Array, date: int) -> Array:
        """Probability, seen from ``u`` one step earlier, of being found outside on ``date``."""
        step = steps[date]
        return np.asarray(ndtr((lows[date] - u) / step) + ndtr((u - highs[date]) / step))

    start = last - 1 if at_expiry else last
    nodes, weights = _nodes(observations, lows, highs, steps, start, variance, order)
    values = to_expiry(nodes, start)
    if at_expiry:
        values = values + rebates[last] * outside(nodes, last)
    for date in range(start - 1, -2, -1):
        before, before_weights = _nodes(observations, lows, highs, steps, date, variance, order)
        carried = _convolved(before, nodes, weights * values, float(steps[date + 1]))
        values = carried + rebates[date + 1] * outside(before, date + 1)
        nodes, weights = before, before_weights
    return float(values[0])


def _nodes(
    observations: Observations,
    lows: Array,
    highs: Array,
    steps: Array,
    date: int,
    variance: float,
    order: int,
) -> tuple[Array, Array]:
    """Nodes and weights on what is alive on ``date``; today (-1) is the one node 0."""
    if date < 0:
        return np.zeros(1), np.ones(1)
    # A payoff that grows with the level moves the weight up by the variance, an image under it down.
    reach = _FAR * math.sqrt(float(observations.variances[date])) + float(observations.variances[date])
    low, high = max(float(lows[date]), -reach), min(float(highs[date]), reach)
    if high <= low:
        return np.zeros(1), np.zeros(1)
    shortest = float(min(steps[date], steps[date + 1])) if date + 1 < steps.size else float(steps[date])
    left = math.sqrt(max(variance - float(observations.variances[date]), 0.0))
    shortest = min(shortest, left) if date == steps.size - 1 and left > 0.0 else shortest
    x, w = gauss_legendre(order)
    edges = np.linspace(low, high, 1 + math.ceil((high - low) / (_PANEL * shortest)))
    half = 0.5 * (edges[1] - edges[0])
    return np.add.outer(edges[:-1] + half, half * x).ravel(), np.tile(half * w, edges.size - 1)


def _convolved(before: Array, nodes: Array, amounts: Array, step: float) -> Array:
    """``sum_k amounts[k] density(nodes[k] - before[i])`` of a normal step, for rising nodes: (n_before,)."""
    out = np.empty(before.size)
    for first in range(0, before.size, _ROWS):
        rows = before[first : first + _ROWS]
        a, b = np.searchsorted(nodes, (rows[0] - _KERNEL * step, rows[-1] + _KERNEL * step))
        z = (nodes[a:b] - rows[:, None]) / step
        out[first : first + _ROWS] = np.exp(-0.5 * z * z) @ amounts[a:b]
    return out / (step * math.sqrt(2.0 * math.pi))
