"""What a family of formulas has to know, and how that becomes a value of any payoff.

Every payoff is a fixed amount, a slope, calls and digitals on one aggregate level. A
family therefore prices only those, on its own kind of aggregate; :func:`expectation`
puts them together.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal, Protocol

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.problem import EuropeanProblem, Reference, ReferenceKind

#: +1 for a call or "above", -1 for a put or "at or below".
Side = Literal[1, -1]


def other(side: Side) -> Side:
    """The opposite side: a call's put, the complement of "above"."""
    return -1 if side == 1 else 1


@dataclass(frozen=True, slots=True)
class Estimate:
    """A number and a bound on its numerical error."""

    value: float
    error: float = 0.0

    def __add__(self, other: Estimate) -> Estimate:
        return Estimate(self.value + other.value, self.error + other.error)

    def times(self, factor: float) -> Estimate:
        return Estimate(factor * self.value, abs(factor) * self.error)


class AggregateLaw(Protocol):
    """What a family knows of the law of one aggregate ``A``; nothing is discounted.

    A method returns None where the family has no formula for that strike.
    """

    def mean(self) -> Estimate | None:
        """``E[A]``."""

    def option(self, strike: float, side: Side) -> Estimate | None:
        """``E[(side (A - strike))+]`` for any real strike."""

    def digital(self, strike: float, side: Side) -> Estimate | None:
        """``P(A > strike)`` for side +1, ``P(A <= strike)`` for side -1."""


@dataclass(frozen=True, slots=True)
class Family:
    """A named, cited way of knowing the law of some aggregates.

    ``law`` returns None for a problem to which the family does not apply.
    """

    method: str
    kind: ReferenceKind
    source: str
    law: Callable[[EuropeanProblem], AggregateLaw | None]

    def reference(self, problem: EuropeanProblem) -> Reference | None:
        """The family's number for ``problem``, or None where it has none."""
        kind = _kind_for(self.kind, problem.payoff)
        law = self.law(problem) if kind is not None else None
        if kind is None or law is None:
            return None
        estimate = expectation(problem.payoff, law)
        if estimate is None or not (math.isfinite(estimate.value) and math.isfinite(estimate.error)):
            return None
        discounted = estimate.times(problem.discount_factor)
        return Reference(self.method, kind, float(discounted.value), float(discounted.error), self.source)


def expectation(payoff: PiecewiseLinear, law: AggregateLaw) -> Estimate | None:
    """``E[payoff(A)]``, or None where the law lacks a part of it.

    The payoff is unfolded from its first flat piece, with puts to the left of it and calls
    to the right, so that no large amounts cancel and the mean is needed only where the
    payoff has no flat piece.
    """
    intercepts, slopes = payoff.pieces()
    anchor = next((j for j, slope in enumerate(slopes) if slope == 0.0), 0)
    parts: list[tuple[float, Estimate | None]] = [(float(intercepts[anchor]), Estimate(1.0))]
    if slopes[anchor] != 0.0:
        parts.append((float(slopes[anchor]), law.mean()))
    for j, (knot, bend, jump) in enumerate(zip(payoff.knots, payoff.bends, payoff.jumps, strict=True)):
        side: Side = 1 if j >= anchor else -1
        if bend != 0.0:
            parts.append((bend, law.option(knot, side)))
        if jump != 0.0:
            parts.append((side * jump, law.digital(knot, side)))
    total, gross = Estimate(0.0), 0.0
    for factor, part in parts:
        if part is None:
            return None
        total = total + part.times(factor)
        gross += abs(factor * part.value)
    return Estimate(total.value, total.error + 4.0 * sys.float_info.epsilon * gross)


def _kind_for(kind: ReferenceKind, payoff: PiecewiseLinear) -> ReferenceKind | None:
    """What a family's number claims once it is composed into ``payoff``.

    A bound on calls (and, the mean being exact, on puts) bounds a convex payoff the same
    way and a concave one the other way; with bends of both signs or with jumps it bounds
    nothing. A payoff without a knot leaves nothing to bound or to approximate.
    """
    if kind is ReferenceKind.EXACT:
        return kind
    bends = [bend for bend in payoff.bends if bend != 0.0]
    if kind is ReferenceKind.APPROXIMATION:
        return kind if bends or not payoff.is_continuous else None
    if not bends or not payoff.is_continuous:
        return None
    if min(bends) > 0.0:
        return kind
    if max(bends) < 0.0:
        return ReferenceKind.UPPER_BOUND if kind is ReferenceKind.LOWER_BOUND else ReferenceKind.LOWER_BOUND
    return None
