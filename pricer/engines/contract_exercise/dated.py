"""A contract's right to exercise on given days as a problem in numbers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np

from pricer.contracts.book import Trade
from pricer.contracts.observation import Observation
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.contract_exercise.functions import best
from pricer.engines.contract_exercise.parts import ExerciseParts
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right
from pricer.market.market import Market


@dataclass(frozen=True, slots=True)
class DatedProblem:
    """The problem and the day of each of its dates; payoffs and incomes are in money of tonight."""

    problem: EarlyExerciseProblem
    days: tuple[date, ...]


def dated_problem(
    parts: ExerciseParts, terms: ContractTerms, trade: Trade, market: Market, rights: Sequence[Observation]
) -> DatedProblem:
    """With exercise on the days of ``rights``, which may be today, and the end of the contract.

    Levels are prices over references; those of tonight start the paths. Raises as :meth:`ContractTerms.of`.
    """
    today, by_day = market.valuation_date, {right.day: right for right in rights if right.day <= parts.end}
    incomes = {day: paid for day, paid in parts.incomes if day > today}
    days = tuple(sorted({*by_day, *incomes, parts.end}))
    later = [day for day in days if day > today]
    laws = ContractTerms.of(trade, terms.as_of, market, later)
    places = [laws.dates.index(day) for day in later]
    references, spots = terms.as_of.references, terms.as_of.levels
    assert references is not None and spots is not None  # the parts are of a contract whose references are set
    n = len(spots)
    covariances = laws.covariances.cumsum(axis=0)[places]
    logs = np.log(laws.forwards[places] / references / np.array(spots))
    means = logs - 0.5 * np.diagonal(covariances, axis1=1, axis2=2)
    times, floors = laws.times[places], laws.floors[places] / references
    if days[0] == today:
        times, floors = np.concatenate([[0.0], times]), np.concatenate([np.zeros((1, n)), floors])
        means, covariances = (
            np.concatenate([np.zeros((1, n)), means]),
            np.concatenate([np.zeros((1, n, n)), covariances]),
        )
    payoffs = [_payoff(parts, terms, day, by_day.get(day)) for day in days]
    problem = EarlyExerciseProblem(
        times,
        np.array(spots),
        np.diff(means, axis=0, prepend=0.0),
        np.diff(covariances, axis=0, prepend=0.0),
        parts.aggregate,
        tuple(payoffs),
        np.ones(len(days)),
        parts.right,
        tuple(incomes.get(day) for day in days) if incomes else (),
        floors if np.any(floors) else None,
    )
    return DatedProblem(problem, days)


def _payoff(parts: ExerciseParts, terms: ContractTerms, day: date, right: Observation | None) -> PiecewiseLinear | None:
    exercised = None if right is None else parts.payout(right, terms.discount(right.payment_date))
    announced = parts.exercise.exercised
    if day != parts.end or announced is not None:
        return exercised
    kept = parts.at_end()
    if exercised is None:
        return kept
    if parts.right is Right.HOLDER:
        return best(exercised, kept)
    return best(exercised.scaled(-1.0), kept.scaled(-1.0)).scaled(-1.0)
