"""Which ranked level an aggregate is, once trivial cases have been renamed."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.contracts.aggregate import AggregateKind
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Side, other
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal


@dataclass(frozen=True, slots=True)
class SingleRank:
    """``weight`` times the level of rank ``rank`` (1 is the best) among two or more."""

    law: JointLognormal
    rank: int
    weight: float

    @classmethod
    def of(cls, problem: EuropeanProblem) -> SingleRank | None:
        """The problem's aggregate as one ranked level; None where several ranks count."""
        aggregate, n = problem.aggregate, problem.law.n_assets
        counting = [k for k, weight in enumerate(aggregate.weights) if weight != 0.0]
        if not aggregate.is_ranked or n < 2 or len(counting) != 1:
            return None
        return cls(problem.law, counting[0] + 1, aggregate.weights[counting[0]])

    @property
    def is_best(self) -> bool:
        return self.rank == 1

    @property
    def is_worst(self) -> bool:
        return self.rank == self.law.n_assets


@dataclass(frozen=True, slots=True)
class Scaled:
    """The law of ``factor * A`` from the law of ``A``; factor is not 0."""

    inner: AggregateLaw
    factor: float

    def mean(self) -> Estimate | None:
        return _times(self.inner.mean(), self.factor)

    def option(self, strike: float, side: Side) -> Estimate | None:
        return _times(self.inner.option(strike / self.factor, self._side(side)), abs(self.factor))

    def digital(self, strike: float, side: Side) -> Estimate | None:
        return self.inner.digital(strike / self.factor, self._side(side))

    def _side(self, side: Side) -> Side:
        return side if self.factor > 0.0 else other(side)


def scaled(law: AggregateLaw, factor: float) -> AggregateLaw:
    """``law`` of the level times ``factor``."""
    return law if factor == 1.0 else Scaled(law, factor)


def _times(estimate: Estimate | None, factor: float) -> Estimate | None:
    return None if estimate is None else estimate.times(factor)


def is_sum(aggregate_kind: AggregateKind, weights: tuple[float, ...]) -> bool:
    """Whether ranking does not matter: a weighted sum, or equal weights on every rank."""
    if aggregate_kind is AggregateKind.WEIGHTED_SUM:
        return True
    return aggregate_kind is not AggregateKind.GEOMETRIC and len(set(weights)) == 1
