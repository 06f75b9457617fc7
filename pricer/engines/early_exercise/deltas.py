"""Deltas of early exercise under the frozen rule, with the value's martingale as control.

To first order a change of the spot leaves the best rule as good as it was (envelope argument), so the path-wise
derivative of what the fitted rule earns is the delta (Piterbarg 2004). Both that and the martingale are
differentiated, path by path, on common draws with the stopping date held: the derivative of a martingale is one too, of
mean zero, and takes most of the noise away.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from pricer.core.randomness import Purpose
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.dynamics import Dynamics
from pricer.engines.early_exercise.engine import EarlyExerciseSettings, RuleMaker, Solution, streams
from pricer.engines.early_exercise.problem import EarlyExerciseProblem
from pricer.engines.early_exercise.rule import FittedRule

Array = NDArray[np.float64]

#: Relative change of a spot either way: small beside a step's deviation, large beside single precision.
_BUMP = 2e-3

#: Streams of these blocks; those of the value's certificate lie below.
_FIRST_BLOCK = 2**40


@dataclass(frozen=True, slots=True)
class EarlyExerciseDeltas:
    """Per unit and asset asked for: ``values`` and ``errors`` (k,), change of value per change of spot.

    ``raw_errors`` : (k,) what the standard errors were without the martingale, on the same paths.
    """

    assets: tuple[int, ...]
    values: Array
    errors: Array
    raw_errors: Array


def early_exercise_deltas(
    problem: EarlyExerciseProblem,
    settings: EarlyExerciseSettings | None = None,
    assets: Sequence[int] | None = None,
    solution: Solution | None = None,
) -> EarlyExerciseDeltas:
    """Deltas of some assets (all where None) under the rule of ``solution``, else of a first round.

    Each costs two more evaluations of the certificate. The random parts of levels must move in proportion to their
    spots, as lognormal ones do. Raises ValueError for a first date at time 0: whether to exercise at once is another
    question.
    """
    settings = EarlyExerciseSettings() if settings is None else settings
    chosen = tuple(range(problem.n_assets)) if assets is None else tuple(assets)
    with threadpool_limits(limits=1), ThreadPoolExecutor(settings.threads) as pool:
        if solution is None or solution.rule is None or solution.dynamics is None:
            maker = RuleMaker(problem, settings, pool)
            rule, dynamics = maker.rule(maker.start, 1), maker.dynamics
        else:
            rule, dynamics = solution.rule, solution.dynamics
        draws = streams(settings, Purpose.CERTIFY, _FIRST_BLOCK)

        def block(b: int) -> Array:
            return _block(dynamics, problem.spots, rule, settings.certificate, chosen, draws(b))

        means = np.stack(list(pool.map(block, range(settings.certificate.blocks))))  # (blocks, 2, k)
    errors = means.std(axis=0, ddof=1) / np.sqrt(len(means))
    return EarlyExerciseDeltas(chosen, problem.sign * means[:, 0].mean(axis=0), errors[0], errors[1])


def _block(
    dynamics: Dynamics,
    spots: Array,
    rule: FittedRule,
    settings: CertificateSettings,
    assets: tuple[int, ...],
    stream: np.random.Generator,
) -> Array:
    """Means over one randomisation of derivatives with and without control, (2, k)."""
    paths = dynamics.paths(stream, settings.points)
    successors = dynamics.successors(settings.inner)
    origin = np.repeat(spots.astype(np.float32)[:, None], settings.points, axis=1)
    stops = np.full(settings.points, len(rule.dates) - 1)
    for i in range(len(rule.dates) - 2, -1, -1):
        rows = rule.dates[i].rows(paths[i])
        stops[rows[0] > rule.dates[i].going_on(rows)] = i
    out = np.zeros((2, len(assets)))
    bumps = [np.float32(1.0 + side * _BUMP) for side in (1.0, -1.0)]
    for i, date in enumerate(rule.dates):
        alive, ends = stops >= i, stops == i
        before = paths[i - 1] if i else origin
        draws = stream.bit_generator.state
        for k, asset in enumerate(assets):
            moves = np.zeros(settings.points)
            for bump, side in zip(bumps, (1.0, -1.0), strict=True):
                scale = np.ones((len(spots), 1), dtype=np.float32)
                scale[asset] = bump
                stream.bit_generator.state = draws
                levels = paths[i] * scale
                martingale = date.value(levels) - date.expected(i, before * scale, successors, settings.inner, stream)
                rows = date.rows(levels)[:2].astype(float)
                payoff = np.where(ends, rows[0], 0.0) + np.where(alive, rows[1], 0.0)
                moves += side * (payoff - np.where(alive, martingale, 0.0))
                out[1, k] += side * float(np.mean(payoff))
            out[0, k] += float(np.mean(moves))
    widths = [(float(bumps[0]) - float(bumps[1])) * spots[asset] for asset in assets]
    return np.asarray(out / np.array(widths))
