"""Parts of a piecewise linear payoff, and its expectation for many lognormal levels at once."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.family import Estimate, Side
from pricer.engines.closed_form.lognormal import black, exceedance

Array = NDArray[np.float64]


def between(payoff: PiecewiseLinear, low: float, high: float) -> PiecewiseLinear:
    """``payoff`` on levels above ``low`` and up to ``high`` (either may be infinite), 0 elsewhere."""
    intercepts, slopes = payoff.pieces()
    first = sum(knot <= low for knot in payoff.knots)
    last = sum(knot < high for knot in payoff.knots)
    knots, b, m = payoff.knots[first:last], list(intercepts[first : last + 1]), list(slopes[first : last + 1])
    if low > -math.inf:
        knots, b, m = (low, *knots), [0.0, *b], [0.0, *m]
    if high < math.inf:
        knots, b, m = (*knots, high), [*b, 0.0], [*m, 0.0]
    return PiecewiseLinear.from_pieces(knots, tuple(map(float, b)), tuple(map(float, m)))


def above_zero(payoff: PiecewiseLinear) -> PiecewiseLinear:
    """The same payoff without its knots at or below 0, which only add rounding on a positive level."""
    kept = sum(knot > 0.0 for knot in payoff.knots)
    if kept == len(payoff.knots):
        return payoff
    first = len(payoff.knots) - kept
    intercepts, slopes = payoff.pieces()
    return replace(
        payoff,
        intercept=float(intercepts[first]),
        slope=float(slopes[first]),
        knots=payoff.knots[first:],
        bends=payoff.bends[first:],
        jumps=payoff.jumps[first:],
    )


def part_between(
    payoff: PiecewiseLinear, low: float, high: float, forward: float, deviation: float, log_weight: float = 0.0
) -> Estimate:
    """``exp(log_weight) E[payoff(X); low < X < high]`` for one lognormal level of mean ``forward``, ``deviation`` > 0.

    Piece by piece, each normal probability from its nearer tail and together with the weight: a huge
    weight of a tiny probability, as images of barriers have them, keeps its digits. ``low`` >= 0.
    """
    intercepts, slopes = payoff.pieces()
    total, gross = 0.0, 0.0
    for b, m, (lo, hi) in zip(intercepts, slopes, pairwise((-math.inf, *payoff.knots, math.inf)), strict=True):
        lo, hi = max(lo, low), min(hi, high)
        if lo >= hi:
            continue
        start, end = (
            math.log(x / forward) / deviation + 0.5 * deviation
            if 0.0 < x < math.inf
            else math.copysign(math.inf, x - 1.0)
            for x in (lo, hi)
        )
        for amount, moved in ((float(b), 0.0), (float(m) * forward, deviation)):
            if amount != 0.0:
                value = amount * _weighted_probability(start - moved, end - moved, log_weight)
                total += value
                gross += abs(value)
    return Estimate(total, 1e-14 * gross)


def _weighted_probability(lo: float, hi: float, log_weight: float) -> float:
    """``exp(log_weight) P(lo < z < hi)``."""
    if lo > 0.0:
        lo, hi = -hi, -lo
    upper, lower = log_weight + float(log_ndtr(hi)), log_weight + float(log_ndtr(lo))
    return math.exp(upper) * -math.expm1(lower - upper) if upper > -745.0 else 0.0


def lognormal_expectations(payoff: PiecewiseLinear, forwards: Array, deviation: float) -> Array:
    """``E[payoff(X)]``, (m,), for lognormal levels of mean ``forwards`` (m,) > 0 and one ``deviation`` >= 0 of the log.

    Unfolded from the first flat piece, like :func:`family.expectation`.
    """
    intercepts, slopes = payoff.pieces()
    anchor = next((j for j, slope in enumerate(slopes) if slope == 0.0), 0)
    total = intercepts[anchor] + slopes[anchor] * forwards
    for j, (knot, bend, jump) in enumerate(zip(payoff.knots, payoff.bends, payoff.jumps, strict=True)):
        side: Side = 1 if j >= anchor else -1
        if bend != 0.0:
            total = total + bend * black(forwards, knot, deviation, side)
        if jump != 0.0:
            total = total + side * jump * exceedance(forwards, knot, deviation, side)
    return np.asarray(total)
