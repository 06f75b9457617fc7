"""What an engine sees of a European trade: numbers only, no names, no dates."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.market.joint_lognormal import JointLognormal


@dataclass(frozen=True, slots=True)
class EuropeanProblem:
    """Value of ``discount_factor * E[payoff(aggregate(levels))]`` per unit.

    ``law`` is that of the *normalised* levels (price over reference level); ``aggregate``
    carries no cash level (it has been folded into ``payoff``).
    """

    law: JointLognormal
    aggregate: Aggregate
    payoff: PiecewiseLinear
    discount_factor: float

    def __post_init__(self) -> None:
        if self.aggregate.cash is not None:
            raise ValueError("fold the cash level into the payoff first")
        if self.law.n_assets != len(self.aggregate.weights):
            raise ValueError(f"{self.law.n_assets} levels for {len(self.aggregate.weights)} weights")


class ReferenceKind(StrEnum):
    """What a reference number claims."""

    EXACT = "exact"  # equal to the value up to its stated error
    LOWER_BOUND = "lower bound"
    UPPER_BOUND = "upper bound"
    APPROXIMATION = "approximation"
    SAMPLE = "independent sample"  # equal in expectation; its error is a standard error


@dataclass(frozen=True, slots=True)
class Reference:
    """A number obtained without sampling, per unit and discounted.

    ``error`` is an honest bound on its own numerical error (quadrature, integration);
    0.0 for an approximation means only that the formula itself was evaluated exactly.
    ``allowance`` is how far a sampled value may differ besides, its paths being a discretisation.
    """

    method: str
    kind: ReferenceKind
    value: float
    error: float
    source: str
    allowance: float = 0.0
