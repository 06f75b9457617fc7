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
from pricer.engines.early_exercise.decision_inputs import InputChoice, importance, inputs_by_date
from pricer.engines.early_exercise.dynamics import MOST_INNER, Dynamics, LognormalDynamics
from pricer.engines.early_exercise.fitting import FitSettings, fit_rule
from pricer.engines.early_exercise.outcome import DateDiagnostics, EarlyExerciseValue, Effort, Ending
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right, infimum
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


def early_exercise_value(
    problem: EarlyExerciseProblem, settings: EarlyExerciseSettings | None = None
) -> EarlyExerciseValue:
    """The interval of ``problem`` on its dates; deterministic under ``settings.seed`` and ``settings.group``."""
    settings = EarlyExerciseSettings() if settings is None else settings
    if settings.rounds < 1:
        raise ValueError(f"at least one round; got {settings.rounds}")
    if problem.times[0] == 0.0:
        return _with_immediate_exercise(problem, settings)
    with threadpool_limits(limits=1), ThreadPoolExecutor(settings.threads) as pool:
        return _refined(problem, settings, pool)


def _with_immediate_exercise(problem: EarlyExerciseProblem, settings: EarlyExerciseSettings) -> EarlyExerciseValue:
    """The better, for who decides, of the payoff today and of what remains."""
    level = problem.aggregate(problem.spots)
    now = float(problem.payoffs[0](level) * problem.discount_factors[0])
    if problem.n_dates == 1:
        return EarlyExerciseValue(now, now, 0.0, 0.0, 0.0, Ending.KNOWN, None, (DateDiagnostics(0.0, 1.0, 0.0, 0.0),))
    later = early_exercise_value(problem.after_first_date(), settings)
    better = max if problem.right is Right.HOLDER else min
    lower, upper = better(now, later.lower), better(now, later.upper)
    at_once = now >= later.value if problem.right is Right.HOLDER else now <= later.value
    stay = 0.0 if at_once else 1.0
    dates = [replace(date, exercise_probability=stay * date.exercise_probability) for date in later.dates]
    return replace(
        later,
        lower=lower,
        upper=upper,
        lower_error=later.lower_error if lower != now else 0.0,
        upper_error=later.upper_error if upper != now else 0.0,
        gap_error=later.gap_error if upper != now else 0.0,
        ending=Ending.KNOWN if lower == upper == now else later.ending,
        dates=(DateDiagnostics(0.0, 1.0 - stay, 0.0, 0.0), *dates),
    )


class RuleMaker:
    """Fits rules to one problem whose first date is after time 0."""

    def __init__(
        self, problem: EarlyExerciseProblem, settings: EarlyExerciseSettings, pool: ThreadPoolExecutor
    ) -> None:
        choice = settings.inputs or InputChoice.suited_to(problem)
        self._inputs = inputs_by_date(problem, choice, streams(settings, Purpose.FIT, _ROUND**2)(0))
        self._floor = min(infimum(payoff) for payoff in problem.decider_payoffs)
        self._settings = settings
        self._pool = pool
        self.dynamics: Dynamics = LognormalDynamics(problem, importance(problem))
        self.start = replace(settings.fit, degree=_degree(self._inputs[0].rows - 1, settings.fit.degree))

    def rule(self, fit: FitSettings, number: int) -> FittedRule:
        """The rule of round ``number``."""
        draws = streams(self._settings, Purpose.FIT, number * _ROUND)
        return fit_rule(self.dynamics, self._inputs, fit, self._floor, draws, self._pool)


def _refined(
    problem: EarlyExerciseProblem, settings: EarlyExerciseSettings, pool: ThreadPoolExecutor
) -> EarlyExerciseValue:
    maker = RuleMaker(problem, settings, pool)
    fit, certificate = maker.start, settings.certificate
    rule: FittedRule | None = None
    blocks: list[BlockBounds] = []
    for number in range(1, settings.rounds + 1):
        if rule is None:
            rule, blocks = maker.rule(fit, number), []
        draws = streams(settings, Purpose.CERTIFY, number * _ROUND)
        blocks = blocks + certify(maker.dynamics, problem.spots, rule, certificate, draws, pool)
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
    return outcome


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
    probabilities = np.mean([b.exercised for b in blocks], axis=0)
    fresh = np.sqrt(np.mean([b.squared_errors for b in blocks], axis=0))
    held = [fit.held_out_error for fit in rule.fits] + [0.0]
    dates = tuple(
        DateDiagnostics(float(t), float(p), float(h), float(e))
        for t, p, h, e in zip(problem.times, probabilities, held, fresh, strict=True)
    )
    if problem.right is Right.ISSUER:
        low, high = -high, -low
        errors[0], errors[1] = errors[1], errors[0]
    return EarlyExerciseValue(low, high, errors[0], errors[1], errors[2], ending, used, dates)


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
