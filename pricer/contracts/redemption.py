"""What a note redeems as a function of its final level."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.contracts.profile import PiecewiseLinear


@dataclass(frozen=True, slots=True)
class Redemption:
    """``capital`` per unit, less a short put, plus a share of the rise, between ``floor`` and ``cap``::

        capital - leverage (put_strike - a)+ + participation (a - call_strike)+

    A strike of None leaves its term out; with both left out the capital is paid whatever the
    level, as a rebate is.
    """

    capital: float = 1.0
    put_strike: float | None = None
    leverage: float = 1.0
    call_strike: float | None = None
    participation: float = 1.0
    floor: float | None = None
    cap: float | None = None

    def __post_init__(self) -> None:
        if self.floor is not None and self.cap is not None and self.cap <= self.floor:
            raise ValueError(f"the cap {self.cap} must lie above the floor {self.floor}")

    def payoff(self) -> PiecewiseLinear:
        """The redemption per unit as a function of the final level."""
        intercept, slope = self.capital, 0.0
        bends: dict[float, float] = {}
        if self.put_strike is not None:
            intercept -= self.leverage * self.put_strike
            slope += self.leverage
            bends[self.put_strike] = -self.leverage
        if self.call_strike is not None:
            bends[self.call_strike] = bends.get(self.call_strike, 0.0) + self.participation
        knots = tuple(sorted(knot for knot, bend in bends.items() if bend))
        redeemed = PiecewiseLinear(intercept, slope, knots, tuple(bends[k] for k in knots), (0.0,) * len(knots))
        return redeemed.limited(self.floor, self.cap)
