"""What paths that all miss a part of the payoff may hide.

A standard error comes from the spread of what was seen. Where nearly every path lies on one
straight piece of the payoff, the rest of the value hangs on a few of them, and where none
came past the knot the spread is zero. What is certain then is only a count: with 99 %
probability the paths leave out no more than ``-ln(0.01) / paths`` of the probability (the
binomial bound for no success, common practice as the "rule of three" at 95 %).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from pricer.contracts.profile import PiecewiseLinear
from pricer.simulation.design import Design

Array = NDArray[np.float64]

#: Few paths decide a value that lies within this many of its standard errors of a straight piece.
_TOLD_APART = 20.0

#: The mass that n paths leave out is below this over n with 99 % probability.
_LEFT_OUT = float(-np.log(0.01))

#: Standard errors in the 99 % interval that is to hold what is left out.
_QUANTILE = 2.75


@dataclass(frozen=True, slots=True)
class Unseen:
    """Additions to standard errors: how far what all paths missed may move each figure.

    Arrays (n,) in the design's asset order.
    """

    value: float
    log_deltas: Array
    log_gammas: Array
    vegas: Array

    @classmethod
    def nothing(cls, n: int) -> Unseen:
        zero = np.zeros(n)
        return cls(0.0, zero, zero, zero)

    @classmethod
    def of(cls, design: Design, paths: int) -> Unseen:
        """If the mass that ``paths`` leave out all lay past every knot.

        Of a jump it hides the mass times its size. Of a bend it hides what the legs gain beyond
        the edge of the sample, each taken as far out as the mass allows, of lognormal
        levels in closed form: no other way of lying outside is worse. Densities of the factor at
        the knot are taken at their highest.
        """
        mass = min(_LEFT_OUT / paths, 0.5)
        z = -float(ndtri(mass))
        s, v = design.deviations, design.factor_deviation
        edge = design.forwards * np.exp(s * z - 0.5 * s * s) * mass
        whole = design.forwards * ndtr(s - z)  # of the levels beyond the edge
        weights = np.abs(design.weights) * max(1.0, float(np.abs(design.rank_weights).sum()))
        jumps, bends = (float(np.abs(x).sum()) for x in _past(design))
        value = jumps * mass + bends * float(weights @ (whole - edge))
        deltas = bends * weights * whole
        gammas = np.zeros_like(deltas)
        if v > 0.0:
            deltas = deltas + 0.4 * jumps / v * mass
            gammas = (0.4 * bends * weights * whole + 0.25 * jumps / v * mass) / v
        return cls(value / _QUANTILE, deltas / _QUANTILE, gammas / _QUANTILE, z * deltas / _QUANTILE)


def few_paths_decide(payoff: PiecewiseLinear, values: Array, aggregates: Array, rounding: float) -> bool:
    """Can the value hardly be told from that of one straight piece of the payoff?

    ``values``, ``aggregates`` : (randomisations, 1) means of the payoff and of the aggregate.
    """
    if not payoff.knots:
        return False
    intercepts, slopes = payoff.pieces()
    apart = values - (intercepts + slopes * aggregates)  # (randomisations, pieces)
    spread = apart.std(axis=0, ddof=1) / np.sqrt(len(apart))
    noise = rounding + 2.0**-24 * (np.abs(intercepts) + np.abs(slopes * aggregates.mean()))
    return bool(np.any(np.abs(apart.mean(axis=0)) <= _TOLD_APART * np.hypot(spread, noise)))


def _past(design: Design) -> tuple[Array, Array]:
    """Jumps and bends at the knots that the aggregate can pass."""
    payoff = design.payoff
    knots = np.array(payoff.knots)
    positive = bool(np.all(design.weights >= 0.0) and np.all(design.rank_weights >= 0.0))
    passable = (knots > 0.0) | (not positive)
    return np.array(payoff.jumps)[passable], np.array(payoff.bends)[passable]
