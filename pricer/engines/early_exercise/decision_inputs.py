"""What a continuation value is a function of: the payoff's own view of a state.

Payoffs averaged over a small frozen set of shocks to a later date (a coarse European price, one per
horizon), the logs of the ranked levels, a few leading combinations of the log-levels, and the aggregate.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.early_exercise import kernels
from pricer.engines.early_exercise.dynamics import mirrored_normals
from pricer.engines.early_exercise.problem import EarlyExerciseProblem
from pricer.simulation.loadings import principal_components

Array = NDArray[np.float64]
Singles = NDArray[np.float32]

KINDS = {
    AggregateKind.WEIGHTED_SUM: kernels.SUM,
    AggregateKind.BEST_OF: kernels.BEST,
    AggregateKind.WORST_OF: kernels.WORST,
    AggregateKind.KTH_BEST: kernels.RANKED,
    AggregateKind.RANK_WEIGHTED: kernels.RANKED,
    AggregateKind.GEOMETRIC: kernels.GEOMETRIC,
}


#: Rows of a date before its inputs: what is paid at exercise, and the income.
FIRST_INPUT = 2

_NOTHING = PiecewiseLinear(0.0, 0.0)

#: Less than anything that going on could be worth, and far from the end of single precision.
_NO_RIGHT = PiecewiseLinear(-1e30, 0.0)


@dataclass(frozen=True, slots=True)
class InputChoice:
    """How many of each: ``ranks`` of sorted levels, ``scores`` of log-levels, ``powers``, ``shocks`` per horizon."""

    ranks: int = 3
    scores: int = 0
    powers: int = 4
    shocks: int = 32

    @classmethod
    def suited_to(cls, problem: EarlyExerciseProblem) -> InputChoice:
        """Where assets are alike, what is blind to labels; else leading components of the log-levels too."""
        n = problem.n_assets
        if n == 1:
            return cls(ranks=0, scores=0, powers=0)
        if not problem.aggregate.is_ranked:
            return cls(ranks=0, scores=min(n, 3), powers=0)
        if _are_alike(problem):
            return cls()
        return cls(ranks=1, scores=min(n, 4))


@dataclass(frozen=True, slots=True)
class DateInputs:
    """The inputs of one date, ready for the kernel; payoffs are in time-0 money, negated where the issuer decides."""

    kind: int
    weights: Singles
    first_rank: int
    n_ranks: int
    scores: Singles  # (n_scores, n)
    powers: Singles  # (n_powers, n)
    shocks: Singles  # (horizons, m, n)
    profiles: Singles  # (2 + horizons, width): of the payoff now, the income now, and later payoffs
    floors: Singles  # (1 + horizons, n)

    @property
    def rows(self) -> int:
        """The payoff, the income, the aggregate, and the rest."""
        return FIRST_INPUT + 1 + self.n_ranks + len(self.scores) + len(self.powers) + len(self.shocks)

    def fill(self, levels: Singles, out: Singles) -> None:
        """``out`` (rows, lanes) at ``levels`` (n, lanes): rows 0 and 1 are payoff and income now."""
        kernels.decision_inputs(
            levels,
            self.kind,
            self.weights,
            self.first_rank,
            self.n_ranks,
            self.scores,
            self.powers,
            self.shocks,
            self.profiles,
            self.floors,
            out,
        )


def importance(problem: EarlyExerciseProblem) -> Array:
    """Each asset's share of the aggregate, (n,), none below a thousandth of the largest."""
    if problem.aggregate.is_ranked:
        return np.ones(problem.n_assets)
    weights = np.abs(np.array(problem.aggregate.weights))
    if problem.aggregate.kind is AggregateKind.WEIGHTED_SUM:
        weights = weights * problem.spots
    out: Array = np.maximum(weights, 1e-3 * np.max(weights, initial=1e-300))
    return out


def inputs_by_date(problem: EarlyExerciseProblem, choice: InputChoice, stream: np.random.Generator) -> list[DateInputs]:
    """The inputs of every date; ``stream`` draws the frozen shocks."""
    kind, n = problem.aggregate.kind, problem.n_assets
    payoffs, incomes = problem.decider_payoffs, problem.decider_incomes
    width = 3 + 3 * max(len(f.knots) for f in (*payoffs, *incomes) if f is not None)
    profiles = [_packed(f or _NO_RIGHT, width) for f in payoffs]
    income_profiles = [_packed(f or _NOTHING, width) for f in incomes]
    floors = np.zeros((problem.n_dates, n)) if problem.floors is None else problem.floors
    weights = np.array(problem.aggregate.weights, dtype=np.float32)
    first_rank, n_ranks = _ranks(problem, choice.ranks)
    cumulated = problem.covariances
    drifts = np.cumsum(problem.log_drifts, axis=0)
    shares = importance(problem)
    out = []
    last = problem.n_dates - 1
    for i in range(problem.n_dates):
        horizons = sorted({_next_right(payoffs, i), last}) if i < last else []
        shocks = np.empty((len(horizons), choice.shocks, 1 if kind is AggregateKind.GEOMETRIC else n), dtype=np.float32)
        for h, to in enumerate(horizons):
            moves = _frozen(cumulated[to] - cumulated[i], drifts[to] - drifts[i], shares, choice.shocks, stream)
            if kind is AggregateKind.GEOMETRIC:
                moves = moves @ weights[:, None].astype(float)
            shocks[h] = np.exp(moves)
        scores = _scores(cumulated[i] if i else cumulated[-1], shares, choice.scores)
        out.append(
            DateInputs(
                KINDS[kind],
                weights,
                first_rank,
                n_ranks,
                scores,
                _powers(problem, cumulated[last] - cumulated[i], drifts[last] - drifts[i], choice.powers),
                shocks,
                np.array([profiles[i], income_profiles[i], *(profiles[to] for to in horizons)], dtype=np.float32),
                np.array([floors[to] for to in (i, *horizons)], dtype=np.float32),
            )
        )
    return out


def _next_right(payoffs: tuple[PiecewiseLinear | None, ...], date: int) -> int:
    return next(i for i in range(date + 1, len(payoffs)) if payoffs[i] is not None)


def _packed(payoff: PiecewiseLinear, width: int) -> Array:
    out = np.zeros(width)
    out[:3] = payoff.intercept, payoff.slope, len(payoff.knots)
    for j, corner in enumerate(zip(payoff.knots, payoff.bends, payoff.jumps, strict=True)):
        out[3 + 3 * j : 6 + 3 * j] = corner
    return out


def _ranks(problem: EarlyExerciseProblem, wanted: int) -> tuple[int, int]:
    """The first rank and how many, around those that the aggregate weighs."""
    if not problem.aggregate.is_ranked:
        return 0, 0
    n = problem.n_assets
    used = np.flatnonzero(np.array(problem.aggregate.weights))
    low, high = (int(used[0]), int(used[-1])) if len(used) else (0, 0)
    count = min(n, max(wanted, 1))
    first = min(max((low + high + 1 - count) // 2, 0), n - count)
    return first, count


def _scores(covariance: Array, shares: Array, wanted: int) -> Singles:
    """Combinations of log-levels: the leading principal components of their covariance, (n_scores, n)."""
    loadings = principal_components(covariance, shares, np.diag(covariance))[:, : min(wanted, 8)]
    return np.ascontiguousarray((loadings * shares[:, None] ** 2).T, dtype=np.float32)


def _frozen(covariance: Array, drift: Array, shares: Array, m: int, stream: np.random.Generator) -> Array:
    """Log-moves over a horizon at ``m`` mirrored points that keep the mean of each level, (m, n)."""
    loadings = principal_components(covariance, shares, np.diag(covariance))
    moves = mirrored_normals(loadings.shape[1], m, stream) @ loadings.T
    wanted = np.exp(0.5 * np.diag(covariance))
    moves += np.log(wanted / np.exp(moves).mean(axis=0))
    out: Array = moves + drift
    return out


def _powers(problem: EarlyExerciseProblem, covariance: Array, drift: Array, wanted: int) -> Singles:
    """Expected growth to the end to the powers 1, 2, 4, ... over the largest, (n_powers, n); extremes only."""
    if problem.aggregate.kind not in (AggregateKind.BEST_OF, AggregateKind.WORST_OF):
        return np.empty((0, problem.n_assets), dtype=np.float32)
    sign = 1.0 if problem.aggregate.kind is AggregateKind.BEST_OF else -1.0
    orders = 2.0 ** np.arange(wanted)[:, None]
    logs = sign * orders * drift + 0.5 * orders**2 * np.diag(covariance)
    out = np.exp(np.maximum(logs - logs.max(axis=1, keepdims=True), -30.0))
    return np.ascontiguousarray(out, dtype=np.float32)


def _are_alike(problem: EarlyExerciseProblem) -> bool:
    """Do all assets of a ranked aggregate move by one law?"""
    if problem.floors is not None and np.ptp(problem.floors, axis=1).any():
        return False
    for drift, covariance in zip(problem.log_drifts, problem.step_covariances, strict=True):
        off = covariance[~np.eye(problem.n_assets, dtype=bool)]
        spread = np.ptp(np.diag(covariance)) + np.ptp(off) + np.ptp(drift)
        if spread > 1e-9 + 1e-3 * float(np.max(np.diag(covariance))):
            return False
    return True
