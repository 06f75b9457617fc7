"""What a payout pays on a level that is known."""

from __future__ import annotations

from pricer.contracts.feature import Payout
from pricer.contracts.profile import is_above


def paid_at(payout: Payout, level: float) -> float:
    """The amount per unit at a known ``level``; one that equals a jump's knot but for rounding is *at* the knot."""
    payoff = payout.payoff()
    amount = payoff.intercept + payoff.slope * level
    for knot, bend, jump in zip(payoff.knots, payoff.bends, payoff.jumps, strict=True):
        amount += bend * max(level - knot, 0.0)
        if jump and is_above(level, knot):
            amount += jump
    return float(amount)
