"""Sums of legs and payoffs."""

from __future__ import annotations

from dataclasses import replace

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.leg import Leg


def times(factor: float, leg: Leg) -> Leg:
    """``factor`` of a leg."""
    events = tuple(
        replace(
            event, payments=tuple(replace(payment, payoff=payment.payoff.scaled(factor)) for payment in event.payments)
        )
        for event in leg.events
    )
    return replace(leg, events=events)


def difference(f: PiecewiseLinear, g: PiecewiseLinear) -> PiecewiseLinear:
    """``f - g``."""
    bends: dict[float, float] = {}
    jumps: dict[float, float] = {}
    for sign, h in ((1.0, f), (-1.0, g)):
        for knot, bend, jump in zip(h.knots, h.bends, h.jumps, strict=True):
            bends[knot] = bends.get(knot, 0.0) + sign * bend
            jumps[knot] = jumps.get(knot, 0.0) + sign * jump
    knots = tuple(sorted(knot for knot in bends if bends[knot] != 0.0 or jumps[knot] != 0.0))
    return PiecewiseLinear(
        f.intercept - g.intercept,
        f.slope - g.slope,
        knots,
        tuple(bends[knot] for knot in knots),
        tuple(jumps[knot] for knot in knots),
    )
