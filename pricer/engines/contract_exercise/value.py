"""The value of a contract that may be ended early: an interval, deltas under the fitted rule, and its life."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.book import Trade
from pricer.contracts.exercise import ExerciseStyle
from pricer.engines.closed_form import best_exact, references
from pricer.engines.contract_exercise.american import around_dividends, business_days, thinned
from pricer.engines.contract_exercise.dated import DatedProblem, dated_problem
from pricer.engines.contract_exercise.parts import ExerciseParts, exercise_parts
from pricer.engines.contract_exercise.settings import ExerciseSettings
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.early_exercise.deltas import early_exercise_deltas
from pricer.engines.early_exercise.engine import EarlyExerciseSettings, Solution, solve
from pricer.engines.early_exercise.outcome import EarlyExerciseValue
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right
from pricer.engines.model_value import Asked, Chance, Life, ModelValue, UnitRatios
from pricer.engines.not_covered import NotCovered
from pricer.engines.problem import EuropeanProblem, Reference, ReferenceKind
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import COVERAGE, Headline, Interval, sampling_quantile
from pricer.market.joint_lognormal import JointLognormal
from pricer.market.market import Market

Array = NDArray[np.float64]

#: Relative change of a spot for the slope of what exercise at once pays.
_BUMP = 1e-6

#: Rows of chances at most: the days of an American right are summed up to so many.
_CHANCES = 12


@dataclass(frozen=True, slots=True)
class _Found:
    """The solution on the days looked at, and what the days between add to its middle (0 or more by size)."""

    dated: DatedProblem
    settings: EarlyExerciseSettings
    solution: Solution
    between: float = 0.0
    between_error: float = 0.0
    all_days: bool = True


def why_not(terms: ContractTerms) -> str | None:
    """Why this contract with a right to exercise is not priced; None for one that is."""
    try:
        parts = exercise_parts(terms)
    except NotCovered as reason:
        return str(reason)
    if terms.has_floors and parts.aggregate.kind is AggregateKind.GEOMETRIC:
        return "a right to exercise on a geometric aggregate of prices with cash dividends is not priced"
    return None


def exercise_value(
    trade: Trade, terms: ContractTerms, market: Market, asked: Asked, settings: ExerciseSettings | None = None
) -> ModelValue:
    """One unit under lognormal levels. Raises :class:`NotCovered`, and as :meth:`ContractTerms.of`."""
    settings = ExerciseSettings() if settings is None else settings
    reason = why_not(terms)
    if reason is not None:
        raise NotCovered(reason)
    parts = exercise_parts(terms)
    american = parts.style is ExerciseStyle.AMERICAN and parts.exercise.exercised is None and parts.rights
    found = (_american if american else _bermudan)(parts, terms, trade, market, asked, settings)
    value = found.solution.value
    effort, dated = value.effort, found.dated
    blocks = 0 if effort is None else effort.fresh_paths // found.settings.certificate.points
    headline = _headline(found, parts, terms.known_value, max(blocks - 1, 1))
    sampled = SampledValue(
        headline.value,
        headline.standard_error,
        max(blocks - 1, 1),
        0 if effort is None else effort.fresh_paths,
        blocks,
        _ending(value, terms.unit_notional),
    )
    return ModelValue(
        headline=headline,
        sample=sampled,
        references=_without_early_exercise(dated.problem, terms.known_value),
        ratios=_ratios(found, parts, terms, market, settings),
        is_sound=True,
        life=_life(dated, value, parts),
    )


def _bermudan(
    parts: ExerciseParts,
    terms: ContractTerms,
    trade: Trade,
    market: Market,
    asked: Asked,
    settings: ExerciseSettings,
) -> _Found:
    rights = parts.rights if parts.exercise.exercised is None else (parts.exercise.exercised,)
    dated = dated_problem(parts, terms, trade, market, rights)
    engine = EarlyExerciseSettings(
        asked.seed,
        asked.group,
        settings.gap,
        asked.value_tolerance,
        settings.rounds,
        settings.fit,
        settings.certificate,
        threads=settings.threads,
    )
    return _Found(dated, engine, solve(dated.problem, engine))


def _american(
    parts: ExerciseParts,
    terms: ContractTerms,
    trade: Trade,
    market: Market,
    asked: Asked,
    settings: ExerciseSettings,
) -> _Found:
    """On all business days where they are few; else on some, and half of these to see what the others add."""
    engine = EarlyExerciseSettings(
        asked.seed,
        asked.group,
        settings.gap,
        asked.value_tolerance,
        settings.rounds,
        settings.american_fit,
        settings.american_certificate,
        threads=settings.threads,
    )
    names = terms.as_of.contract.underlyings
    days = business_days(parts, names, market)
    kept = around_dividends(days, names, market)
    many = thinned(days, settings.american_days, kept)
    some = {right.day for right in thinned(days, (settings.american_days + 1) // 2, kept)}
    dated = dated_problem(parts, terms, trade, market, many)
    if len(many) == len(days):
        return _Found(dated, engine, solve(dated.problem, engine))
    marks = tuple(day in some for day in dated.days)
    solution = solve(replace(dated.problem, some=marks), engine)
    gain, error = max(solution.value.gain, 0.0), solution.value.gain_error
    return _Found(dated, engine, solution, gain, error, all_days=False)


def _middle_error(value: EarlyExerciseValue) -> float:
    return max(value.lower_error, value.upper_error)


def _headline(found: _Found, parts: ExerciseParts, known: float, degrees: int) -> Headline:
    """The middle, and both bounds moved out by their 99 % errors.

    What is added for days between those looked at goes to the side of the one who decides, twice over and
    with its own error: it is an extrapolation.
    """
    value = found.solution.value
    quantile = sampling_quantile(degrees, 1.0 - COVERAGE)
    lower, upper = value.interval(quantile)
    wider = 2.0 * found.between + quantile * found.between_error
    if parts.right is Right.HOLDER:
        upper += wider
    else:
        lower -= wider
    middle = value.value + found.dated.problem.sign * found.between
    error = math.hypot(_middle_error(value), found.between_error)
    method = "regression: exercise rule on fresh paths and dual bound"
    if not found.all_days:
        side = "upper" if parts.right is Right.HOLDER else "lower"
        method += (
            f"; bounds for exercise on {len(found.dated.days)} days, the {side} one widened by "
            "twice the extrapolated worth of the business days between"
        )
    elif parts.style is ExerciseStyle.AMERICAN:
        method += "; exercise on every business day"
    return Headline(middle + known, error, lower + known, upper + known, Interval.CERTIFIED, method)


def _ending(value: EarlyExerciseValue, notional: float) -> str:
    relative = 100.0 * value.relative_gap
    return f"{value.ending}; gap {relative:.3f} % of the value, {1e4 * value.gap / notional:.2f} bp of notional"


def _without_early_exercise(problem: EarlyExerciseProblem, known: float) -> tuple[Reference, ...]:
    """The exact value of what is paid on the last date, a bound: to wait until then is allowed."""
    payoff = problem.payoffs[-1]
    if any(problem.incomes) or problem.floors is not None or problem.times[-1] <= 0.0 or payoff is None:
        return ()
    covariance = problem.covariances[-1]
    forwards = problem.spots * np.exp(problem.log_drifts.sum(axis=0) + 0.5 * np.diag(covariance))
    law = JointLognormal(forwards, covariance)
    discount = float(problem.discount_factors[-1])
    exact = best_exact(references(EuropeanProblem(law, problem.aggregate, payoff, discount)))
    if exact is None:
        return ()
    bound = ReferenceKind.LOWER_BOUND if problem.right is Right.HOLDER else ReferenceKind.UPPER_BOUND
    return (replace(exact, kind=bound, value=exact.value + known, method=f"never ended early: {exact.method}"),)


def _ratios(
    found: _Found, parts: ExerciseParts, terms: ContractTerms, market: Market, settings: ExerciseSettings
) -> UnitRatios:
    """Shares under the frozen rule; of what exercise pays tonight if it is best at once."""
    problem, dates = found.dated.problem, found.solution.value.dates
    n = problem.n_assets
    unknown = np.full(n, np.nan)
    shares = terms.random_spots * terms.rates
    if dates[0].time == 0.0 and dates[0].exercise_probability == 1.0:
        spots = np.array([market.underlyings[name].spot for name in terms.contract.underlyings])
        deltas = _slopes_now(problem) / (spots * terms.rates)
        return UnitRatios(deltas, np.zeros(n), None, None, unknown, unknown, "slope of what exercise pays tonight")
    later = problem.after_first_date() if dates[0].time == 0.0 else problem
    american = parts.style is ExerciseStyle.AMERICAN
    engine = replace(found.settings, certificate=settings.american_deltas if american else settings.deltas)
    differentiated = early_exercise_deltas(later, engine, solution=found.solution)
    to_shares = later.spots / shares
    method = "fitted exercise rule held, derivatives on common paths"
    deltas, errors = differentiated.values * to_shares, differentiated.errors * to_shares
    return UnitRatios(deltas, errors, None, None, unknown, unknown, method)


def _slopes_now(problem: EarlyExerciseProblem) -> Array:
    """Derivatives of what exercise pays tonight by the logs of the levels, (n,)."""
    payoff = problem.payoffs[0]
    assert payoff is not None  # a date at time 0 has a right
    moves = _BUMP * np.eye(problem.n_assets)
    up, down = (payoff(problem.aggregate(problem.spots * np.exp(side * moves))) for side in (1.0, -1.0))
    return np.asarray((up - down) * problem.discount_factors[0] / (2.0 * _BUMP))


def _life(dated: DatedProblem, value: EarlyExerciseValue, parts: ExerciseParts) -> Life:
    """Chances of an early end by day; of an American right summed up to the day named."""
    what = "exercised" if parts.right is Right.HOLDER else "called"
    early = [
        (day, date.exercise_probability, date.probability_error)
        for day, date, payoff in zip(dated.days, value.dates, dated.problem.payoffs, strict=True)
        if payoff is not None
    ][:-1]
    width = math.ceil(len(early) / _CHANCES) if parts.style is ExerciseStyle.AMERICAN else 1
    chances = []
    for start in range(0, len(early), width):
        part = early[start : start + width]
        name = what if width == 1 else f"{what} since the date before"
        error = math.hypot(*(doubt for _, _, doubt in part))
        chances.append(Chance(part[-1][0], name, sum(p for _, p, _ in part), error))
    return Life(value.expected_life, value.expected_life_error, tuple(chances))
