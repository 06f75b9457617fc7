"""Early exercise as an interval: fit a rule, certify it on fresh paths, refine until the interval is narrow enough."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from pricer.core.randomness import Purpose, stream
from pricer.engines.early_exercise.certificate import BlockBounds, CertificateSettings, certify
from pricer.engines.early_exercise.decision_inputs import FIRST_INPUT, InputChoice, importance, inputs_by_date
from pricer.engines.early_exercise.dynamics import MOST_INNER, Dynamics, LognormalDynamics
from pricer.engines.early_exercise.fitting import FitSettings, fit_rule
from pricer.engines.early_exercise.outcome import DateDiagnostics, EarlyExerciseValue, Effort, Ending
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right
from pricer.engines.early_exercise.rule import FittedRule

Array = NDArray[np.float64]

#: Blocks of one round of fresh paths, and streams set aside for each round.
_ROUND = 2**16

#: At most so many monomials: the degree follows from the number of inputs.
_LARGEST_BASIS = 480


@dataclass(frozen=True, slots=True)
class EarlyExerciseSettings:
    """``gap`` asked, relative to the value, and ``least_gap`` in money: the larger of the two counts.

    A round without success doubles what it lacked, at most ``rounds`` times in all; work is bounded by rounds and not
    by a clock, so that numbers repeat. ``inputs`` None: chosen by the problem.
    """

    seed: int = 0
    group: str = ""
    gap: float = 5e-4
    least_gap: float = 1e-6
    rounds: int = 4
    fit: FitSettings = field(default_factory=FitSettings)
    certificate: CertificateSettings = field(default_factory=CertificateSettings)
    inputs: InputChoice | None = None
    threads: int = 2


@dataclass(frozen=True, slots=True)
class Solution:
    """The interval, and the rule of its last round; None where nothing was fitted."""

    value: EarlyExerciseValue
    rule: FittedRule | None
    dynamics: Dynamics | None


def early_exercise_value(
    problem: EarlyExerciseProblem, settings: EarlyExerciseSettings | None = None
) -> EarlyExerciseValue:
    """The interval of ``problem`` on its dates; deterministic under ``settings.seed`` and ``settings.group``."""
    return solve(problem, settings).value


def solve(problem: EarlyExerciseProblem, settings: EarlyExerciseSettings | None = None) -> Solution:
    """The same with the fitted rule, for deltas."""
    settings = EarlyExerciseSettings() if settings is None else settings
    if settings.rounds < 1:
        raise ValueError(f"at least one round; got {settings.rounds}")
    if problem.times[0] == 0.0:
        return _with_immediate_exercise(problem, settings)
    with threadpool_limits(limits=1), ThreadPoolExecutor(settings.threads) as pool:
        return _refined(problem, settings, pool)


def _with_immediate_exercise(problem: EarlyExerciseProblem, settings: EarlyExerciseSettings) -> Solution:
    """The better, for who decides, of the payoff today and of what remains."""
    payoff = problem.payoffs[0]
    assert payoff is not None  # the problem says so
    level = problem.aggregate(problem.spots if problem.floors is None else problem.spots + problem.floors[0])
    now = float(payoff(level) * problem.discount_factors[0])
    if problem.n_dates == 1:
        only = (DateDiagnostics(0.0, 1.0, 0.0, 0.0),)
        return Solution(EarlyExerciseValue(now, now, 0.0, 0.0, 0.0, Ending.KNOWN, None, only), None, None)
    solution = solve(problem.after_first_date(), settings)
    later = solution.value
    better = max if problem.right is Right.HOLDER else min
    lower, upper = better(now, later.lower), better(now, later.upper)
    at_once = now >= later.value if problem.right is Right.HOLDER else now <= later.value
    stay = 0.0 if at_once else 1.0
    dates = [
        replace(
            date,
            exercise_probability=stay * date.exercise_probability,
            probability_error=stay * date.probability_error,
        )
        for date in later.dates
    ]
    value = replace(
        later,
        lower=lower,
        upper=upper,
        lower_error=later.lower_error if lower != now else 0.0,
        upper_error=later.upper_error if upper != now else 0.0,
        gap_error=later.gap_error if upper != now else 0.0,
        ending=Ending.KNOWN if lower == upper == now else later.ending,
        dates=(DateDiagnostics(0.0, 1.0 - stay, 0.0, 0.0), *dates),
        expected_life=stay * later.expected_life,
        expected_life_error=stay * later.expected_life_error,
        gain=stay * later.gain,
        gain_error=stay * later.gain_error,
    )
    return replace(solution, value=value)


class RuleMaker:
    """Fits rules to one problem whose first date is after time 0."""

    def __init__(
        self, problem: EarlyExerciseProblem, settings: EarlyExerciseSettings, pool: ThreadPoolExecutor
    ) -> None:
        choice = settings.inputs or InputChoice.suited_to(problem)
        self._inputs = inputs_by_date(problem, choice, streams(settings, Purpose.FIT, _ROUND**2)(0))
        self._floors = problem.continuation_floors
        self._settings = settings
        self._pool = pool
        self.dynamics: Dynamics = LognormalDynamics(problem, importance(problem))
        self.start = replace(settings.fit, degree=_degree(self._inputs[0].rows - FIRST_INPUT, settings.fit.degree))

    def rule(self, fit: FitSettings, number: int) -> FittedRule:
        """The rule of round ``number``."""
        draws = streams(self._settings, Purpose.FIT, number * _ROUND)
        return fit_rule(self.dynamics, self._inputs, fit, self._floors, draws, self._pool)


def _refined(problem: EarlyExerciseProblem, settings: EarlyExerciseSettings, pool: ThreadPoolExecutor) -> Solution:
    maker = RuleMaker(problem, settings, pool)
    fit, certificate = maker.start, settings.certificate
    rule: FittedRule | None = None
    found: FittedRule | None = None
    blocks: list[BlockBounds] = []
    for number in range(1, settings.rounds + 1):
        if rule is None:
            rule = found = maker.rule(fit, number)
            blocks = []
        draws = streams(settings, Purpose.CERTIFY, number * _ROUND)
        blocks = blocks + certify(maker.dynamics, problem.spots, rule, certificate, draws, pool, problem.some)
        used = Effort(
            number,
            fit.blocks * fit.points,
            fit.inner,
            len(blocks) * certificate.points,
            certificate.inner,
            fit.degree,
            len(rule.fits[0].coefficients) if rule.fits else 0,
        )
        outcome = _outcome(problem, rule, blocks, used, settings)
        if outcome.reached:
            break
        if outcome.ending is Ending.GAP_TOO_WIDE:
            rule = None
            fit = replace(fit, blocks=2 * fit.blocks, inner=min(2 * fit.inner, MOST_INNER))
            certificate = replace(certificate, inner=min(2 * certificate.inner, MOST_INNER))
        else:
            certificate = replace(certificate, blocks=2 * len(blocks))
    return Solution(outcome, found, maker.dynamics)


def _outcome(
    problem: EarlyExerciseProblem,
    rule: FittedRule,
    blocks: list[BlockBounds],
    used: Effort,
    settings: EarlyExerciseSettings,
) -> EarlyExerciseValue:
    lower, upper = np.array([b.lower for b in blocks]), np.array([b.upper for b in blocks])
    root = np.sqrt(len(blocks))
    errors = [float(np.std(x, ddof=1) / root) for x in (lower, upper, upper - lower)]
    low, high = float(np.mean(lower)), float(np.mean(upper))
    asked = max(settings.gap * 0.5 * abs(low + high), settings.least_gap)
    if high - low > asked:
        ending = Ending.GAP_TOO_WIDE
    elif max(errors[:2]) > asked:
        ending = Ending.TOO_NOISY
    else:
        ending = Ending.REACHED
    exercised = np.array([b.exercised for b in blocks])
    lives = exercised @ problem.times
    probabilities, doubts = exercised.mean(axis=0), exercised.std(axis=0, ddof=1) / root
    fresh = np.sqrt(np.mean([b.squared_errors for b in blocks], axis=0))
    held = [fit.held_out_error for fit in rule.fits] + [0.0]
    dates = tuple(
        DateDiagnostics(float(t), float(p), float(h), float(e), float(d))
        for t, p, h, e, d in zip(problem.times, probabilities, held, fresh, doubts, strict=True)
    )
    if problem.right is Right.ISSUER:
        low, high = -high, -low
        errors[0], errors[1] = errors[1], errors[0]
    life, life_error = float(lives.mean()), float(lives.std(ddof=1) / root)
    gains = np.array([b.gain for b in blocks])
    return EarlyExerciseValue(
        *(low, high, errors[0], errors[1], errors[2], ending, used, dates, life, life_error),
        gain=float(gains.mean()),
        gain_error=float(gains.std(ddof=1) / root),
    )


def _degree(inputs: int, most: int) -> int:
    """The highest total degree up to twice ``most`` whose monomials in few inputs are few enough."""
    size, degree = 1 + inputs, 1
    while degree < 2 * most and size * (inputs + degree + 1) // (degree + 1) <= _LARGEST_BASIS:
        degree += 1
        size = size * (inputs + degree) // degree
    return degree


def streams(settings: EarlyExerciseSettings, purpose: Purpose, first: int) -> Callable[[int], np.random.Generator]:
    """Generators of blocks from ``first`` on."""
    return lambda block: stream(settings.seed, settings.group, purpose, first + block)
