"""Payoff profiles: what is paid as a function of one aggregate level.

Every European profile the desk trades is piecewise linear with jumps. Holding it in
that one form lets the sampling kernel, the closed forms and the bounds each treat all
profiles with a single piece of code: a profile is a fixed amount, a slope, a few calls
and a few digitals on the same aggregate.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

#: A level that differs from a knot by no more than this share of its terms is *at* the knot:
#: in which order weights were multiplied and added must not decide whether a digital pays.
TIE = 1e-12


def is_above(level: ArrayLike, knot: ArrayLike, gross: ArrayLike = 0.0) -> NDArray[np.bool_]:
    """Whether known levels are above ``knot``, so that a jump there is paid; all arguments broadcast.

    ``gross`` is the sum of the absolute terms that made up the level, where they may cancel.
    """
    level, knot = np.asarray(level, dtype=float), np.asarray(knot, dtype=float)
    size = np.maximum(np.maximum(np.abs(level), np.abs(knot)), gross)
    return np.asarray(level - knot > TIE * size)


class ProfileKind(StrEnum):
    """The profile's name on a trade ticket."""

    CALL = "call"
    PUT = "put"
    FORWARD = "forward"
    STRADDLE = "straddle"
    CASH_DIGITAL_CALL = "cash digital call"
    CASH_DIGITAL_PUT = "cash digital put"
    ASSET_DIGITAL_CALL = "asset digital call"
    ASSET_DIGITAL_PUT = "asset digital put"
    EXCHANGE = "exchange"


@dataclass(frozen=True, slots=True)
class PiecewiseLinear:
    """A piecewise linear function with jumps on the whole real line.

    Left of the first knot it is ``intercept + slope * a``. At ``knots[j]`` it jumps by
    ``jumps[j]`` and its slope changes by ``bends[j]``::

        f(a) = intercept + slope a + sum_j bends[j] (a - knots[j])+ + jumps[j] 1{a > knots[j]}

    Knots increase strictly.
    """

    intercept: float
    slope: float
    knots: tuple[float, ...] = ()
    bends: tuple[float, ...] = ()
    jumps: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        if not len(self.knots) == len(self.bends) == len(self.jumps):
            raise ValueError(
                "knots, bends and jumps must have one length; got "
                f"{len(self.knots)}, {len(self.bends)} and {len(self.jumps)}"
            )
        if any(b <= a for a, b in pairwise(self.knots)):
            raise ValueError(f"knots must increase strictly; got {self.knots}")

    def __call__(self, a: NDArray[np.float64]) -> NDArray[np.float64]:
        """Value at ``a`` of any shape."""
        a = np.asarray(a, dtype=float)
        out = self.intercept + self.slope * a
        for knot, bend, jump in zip(self.knots, self.bends, self.jumps, strict=True):
            out = out + bend * np.maximum(a - knot, 0.0) + jump * (a > knot)
        return out

    def pieces(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Intercept and slope of each straight piece, left to right: two arrays (n_knots + 1,)."""
        knots, bends, jumps = (np.array(x, dtype=float) for x in (self.knots, self.bends, self.jumps))
        slopes = self.slope + np.concatenate(([0.0], np.cumsum(bends)))
        intercepts = self.intercept + np.concatenate(([0.0], np.cumsum(jumps - bends * knots)))
        return intercepts, slopes

    @property
    def is_continuous(self) -> bool:
        return not any(self.jumps)

    @classmethod
    def from_pieces(
        cls, knots: tuple[float, ...], intercepts: tuple[float, ...], slopes: tuple[float, ...]
    ) -> PiecewiseLinear:
        """From straight pieces, left to right; knots where nothing changes are dropped."""
        kept: list[tuple[float, float, float]] = []
        for j, knot in enumerate(knots):
            bend = slopes[j + 1] - slopes[j]
            jump = intercepts[j + 1] - intercepts[j] + bend * knot
            scale = max(1.0, abs(intercepts[j]), abs(intercepts[j + 1]))
            if abs(jump) <= 1e-14 * scale:
                jump = 0.0
            if bend != 0.0 or jump != 0.0:
                kept.append((knot, bend, jump))
        return cls(
            intercepts[0],
            slopes[0],
            tuple(k for k, _, _ in kept),
            tuple(b for _, b, _ in kept),
            tuple(j for _, _, j in kept),
        )

    def limited(self, floor: float | None = None, cap: float | None = None) -> PiecewiseLinear:
        """The function held between ``floor`` and ``cap`` (either may be None)."""
        out = self
        if floor is not None:
            out = out._at_least(floor)
        if cap is not None:
            out = out.scaled(-1.0)._at_least(-cap).scaled(-1.0)
        return out

    def scaled(self, factor: float) -> PiecewiseLinear:
        """The function times ``factor``."""
        return PiecewiseLinear(
            self.intercept * factor,
            self.slope * factor,
            self.knots,
            tuple(b * factor for b in self.bends),
            tuple(j * factor for j in self.jumps),
        )

    def ramped(self, share: float) -> PiecewiseLinear:
        """Each jump made a straight ramp over ``abs(share)`` of its knot; a jump at 0 stays.

        Ramps lie on the side on which the function nowhere exceeds this one (``share`` above 0) or is nowhere
        below it (below 0).
        """
        bends = dict(zip(self.knots, self.bends, strict=True))
        kept: dict[float, float] = {}
        for knot, jump in zip(self.knots, self.jumps, strict=True):
            width = abs(share * knot)
            if not jump or not width:
                kept[knot] = jump
                continue
            start = knot if (jump > 0.0) is (share > 0.0) else knot - width
            for end, bend in ((start, jump / width), (start + width, -jump / width)):
                bends[end] = bends.get(end, 0.0) + bend
        knots = tuple(sorted(knot for knot in bends if bends[knot] or kept.get(knot)))
        jumps = tuple(kept.get(knot, 0.0) for knot in knots)
        return PiecewiseLinear(self.intercept, self.slope, knots, tuple(bends[knot] for knot in knots), jumps)

    def of_shifted_argument(self, by: float) -> PiecewiseLinear:
        """``a -> f(a + by)``: the payoff on an aggregate that lacks a known part."""
        if by == 0.0:
            return self
        knots = tuple(knot - by for knot in self.knots)
        return PiecewiseLinear(self.intercept + self.slope * by, self.slope, knots, self.bends, self.jumps)

    def of_floored_argument(self, level: float) -> PiecewiseLinear:
        """``a -> f(max(a, level))``: the payoff on the best of an aggregate and cash."""
        value = float(self(np.array(level)))
        return self._spliced(level, value, keep_right=True)

    def of_capped_argument(self, level: float) -> PiecewiseLinear:
        """``a -> f(min(a, level))``: the payoff on the worst of an aggregate and cash."""
        value = float(self(np.array(level)))
        return self._spliced(level, value, keep_right=False)

    def _spliced(self, level: float, value: float, *, keep_right: bool) -> PiecewiseLinear:
        """The constant ``value`` on one side of ``level``, this function on the other."""
        intercepts, slopes = self.pieces()
        if keep_right:
            first = sum(k <= level for k in self.knots)
            knots = (level, *self.knots[first:])
            b, m = (value, *intercepts[first:]), (0.0, *slopes[first:])
        else:
            last = sum(k < level for k in self.knots)
            knots = (*self.knots[:last], level)
            b, m = (*intercepts[: last + 1], value), (*slopes[: last + 1], 0.0)
        return PiecewiseLinear.from_pieces(knots, tuple(map(float, b)), tuple(map(float, m)))

    def _at_least(self, floor: float) -> PiecewiseLinear:
        intercepts, slopes = self.pieces()
        edges = (-np.inf, *self.knots, np.inf)
        knots: list[float] = []
        b: list[float] = []
        m: list[float] = []
        for j, (lo, hi) in enumerate(pairwise(edges)):
            crossing = (floor - intercepts[j]) / slopes[j] if slopes[j] != 0.0 else np.nan
            cuts = [lo, crossing, hi] if lo < crossing < hi else [lo, hi]
            for start, end in pairwise(cuts):
                middle = _inside(start, end)
                above = intercepts[j] + slopes[j] * middle >= floor
                if start != -np.inf:
                    knots.append(float(start))
                b.append(float(intercepts[j]) if above else floor)
                m.append(float(slopes[j]) if above else 0.0)
        return PiecewiseLinear.from_pieces(tuple(knots), tuple(b), tuple(m))


def _inside(lo: float, hi: float) -> float:
    """Some point strictly inside (lo, hi), which may be infinite."""
    if np.isinf(lo) and np.isinf(hi):
        return 0.0
    if np.isinf(lo):
        return hi - max(1.0, abs(hi))
    if np.isinf(hi):
        return lo + max(1.0, abs(lo))
    return 0.5 * (lo + hi)


@dataclass(frozen=True, slots=True)
class Profile:
    """A payoff per unit on an aggregate level.

    ``strike`` is in the aggregate's units (currency, or 1.0 = 100 % for performance);
    an exchange pays ``max(aggregate, 0)`` and has no strike. ``cash_amount`` is what a
    cash digital pays per unit. ``floor`` and ``cap`` limit the payoff per unit. ``jump_ramp`` other than 0
    pays jumps as the ramps of :meth:`PiecewiseLinear.ramped`, as an overhedge does; no trade is booked with it.
    """

    kind: ProfileKind
    strike: float = 0.0
    cash_amount: float = 1.0
    floor: float | None = None
    cap: float | None = None
    jump_ramp: float = 0.0

    def payoff(self) -> PiecewiseLinear:
        """The payoff per unit as a function of the aggregate."""
        k, c = self.strike, self.cash_amount
        match self.kind:
            case ProfileKind.CALL:
                base = PiecewiseLinear(0.0, 0.0, (k,), (1.0,), (0.0,))
            case ProfileKind.PUT:
                base = PiecewiseLinear(k, -1.0, (k,), (1.0,), (0.0,))
            case ProfileKind.FORWARD:
                base = PiecewiseLinear(-k, 1.0)
            case ProfileKind.STRADDLE:
                base = PiecewiseLinear(k, -1.0, (k,), (2.0,), (0.0,))
            case ProfileKind.CASH_DIGITAL_CALL:
                base = PiecewiseLinear(0.0, 0.0, (k,), (0.0,), (c,))
            case ProfileKind.CASH_DIGITAL_PUT:
                base = PiecewiseLinear(c, 0.0, (k,), (0.0,), (-c,))
            case ProfileKind.ASSET_DIGITAL_CALL:
                base = PiecewiseLinear(0.0, 0.0, (k,), (1.0,), (k,))
            case ProfileKind.ASSET_DIGITAL_PUT:
                base = PiecewiseLinear(0.0, 1.0, (k,), (-1.0,), (-k,))
            case ProfileKind.EXCHANGE:
                base = PiecewiseLinear(0.0, 0.0, (0.0,), (1.0,), (0.0,))
        payoff = base.limited(self.floor, self.cap)
        return payoff.ramped(self.jump_ramp) if self.jump_ramp else payoff
