"""The amount at expiry as a sum over barriers not hit.

With N_j = 1 where barrier j was not hit, a knock-out is in force where N_j = 1 and a knock-in where 1 - N_j = 1; the
first barrier that is not in force decides what is paid instead. Multiplied out, the amount is a sum over sets S of
barriers of one function of the final level times the product of N_j over S: a leg that the barriers of S stop.
"""

from __future__ import annotations

from collections.abc import Sequence

from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.feature import Payout
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.algebra import difference

#: By the barriers that must not have been hit, numbered in the order of the contract.
Parts = dict[frozenset[int], PiecewiseLinear]


def parts(payout: Payout, barriers: Sequence[Barrier]) -> Parts:
    """The functions of the final level, those that are 0 left out."""
    found: Parts = {frozenset(): payout.payoff()}
    for number in reversed(range(len(barriers))):
        barrier, unhit = barriers[number], frozenset({number})
        untouched: Parts
        if barrier.kind is BarrierKind.OUT:
            untouched, touched = found, {frozenset[int](): barrier.instead.payoff()}
        else:
            untouched, touched = {frozenset[int](): barrier.instead.payoff()}, found
        # touched (1 - N) + untouched N
        found = dict(touched)
        for chosen, f in untouched.items():
            found[chosen | unhit] = _plus(found.get(chosen | unhit), f)
        for chosen, f in touched.items():
            found[chosen | unhit] = _plus(found.get(chosen | unhit), f.scaled(-1.0))
    return {chosen: f for chosen, f in found.items() if not is_zero(f)}


def is_flat(f: PiecewiseLinear) -> bool:
    """Whether it is one amount whatever the level."""
    return f.slope == 0.0 and not f.knots


def is_zero(f: PiecewiseLinear) -> bool:
    """Whether nothing is ever paid."""
    return is_flat(f) and f.intercept == 0.0


def _plus(f: PiecewiseLinear | None, g: PiecewiseLinear) -> PiecewiseLinear:
    return g if f is None else difference(f, g.scaled(-1.0))
