"""Both ends of the interval on fresh paths, with one martingale.

Increments ``dM = v(next) - E[v(next) | state]`` of the fitted value v, the expectation an unbiased average over inner
successors, make M a martingale exactly (Andersen & Broadie 2004; the inner draws are part of what it knows).
Lower: what the rule earns less M, a control variate of mean zero. Upper: the best that perfect foresight can
earn less M (Rogers 2002; Haugh & Kogan 2004), path by path: ``U_i = max(payoff_i, U_{i+1} - dM_{i+1})``.
Both bound the value on the exercise dates given. Noise of the inner averages widens the upper end, it biases neither.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.early_exercise.dynamics import Dynamics, checked_sizes
from pricer.engines.early_exercise.rule import FittedRule

Array = NDArray[np.float64]
Singles = NDArray[np.float32]


@dataclass(frozen=True, slots=True)
class CertificateSettings:
    """``blocks`` randomisations of ``points`` paths, ``inner`` successors a date.

    Raises ValueError for a single block, which has no standard error, or sizes that the sampler does not have.
    """

    blocks: int = 32
    points: int = 256
    inner: int = 256

    def __post_init__(self) -> None:
        if self.blocks < 2:
            raise ValueError(f"at least 2 blocks; got {self.blocks}")
        checked_sizes(self.points, self.inner)


@dataclass(frozen=True, slots=True)
class BlockBounds:
    """Means over one randomisation, in time-0 money; (n_dates,) where by date."""

    lower: float
    upper: float
    exercised: Array  # share of paths that the rule ends there
    squared_errors: Array  # of the continuation value, on these fresh paths
    gain: float  # of the lower bound, over that with the rights of some dates alone


def certify(
    dynamics: Dynamics,
    start: Array,
    rule: FittedRule,
    settings: CertificateSettings,
    streams: Callable[[int], np.random.Generator],
    pool: ThreadPoolExecutor,
    some: tuple[bool, ...] = (),
) -> list[BlockBounds]:
    """Bounds from each block of paths. ``start`` : (n_state,) at time 0; ``some`` dates as in the problem.

    The rule with the rights of some dates alone is followed on the same paths: the difference has little noise.
    """
    marks = some or (True,) * len(rule.dates)
    return list(pool.map(lambda b: _block(dynamics, start, rule, settings, streams(b), marks), range(settings.blocks)))


def _block(
    dynamics: Dynamics,
    start: Array,
    rule: FittedRule,
    settings: CertificateSettings,
    stream: np.random.Generator,
    some: tuple[bool, ...],
) -> BlockBounds:
    paths = dynamics.paths(stream, settings.points)
    successors = dynamics.successors(settings.inner)
    last = len(rule.dates) - 1
    lower = upper = value = rule.dates[last].value(paths[last]).astype(float)
    stop = np.full(settings.points, last)
    errors, gain = np.zeros(last + 1), np.zeros(settings.points)
    for i in range(last - 1, -1, -1):
        expected = rule.dates[i + 1].expected(i + 1, paths[i], successors, settings.inner, stream)
        move = value - expected
        rows = rule.dates[i].rows(paths[i])
        payoff, income, on = rows[0].astype(float), rows[1].astype(float), rule.dates[i].going_on(rows).astype(float)
        lower, upper = lower - move, np.maximum(payoff, upper - move) + income
        errors[i] = np.mean((lower - on) ** 2)
        ends = payoff > on
        gain = np.where(ends, 0.0 if some[i] else payoff - lower + gain, gain)
        lower = np.where(ends, payoff, lower) + income
        stop[ends] = i
        value = np.maximum(payoff, on) + income
    origin = np.repeat(start.astype(np.float32)[:, None], settings.points, axis=1)
    move = value - rule.dates[0].expected(0, origin, successors, settings.inner, stream)
    exercised = np.bincount(stop, minlength=last + 1) / settings.points
    return BlockBounds(
        float(np.mean(lower - move)), float(np.mean(upper - move)), exercised, errors, float(np.mean(gain))
    )
