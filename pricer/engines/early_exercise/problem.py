"""What the early-exercise engine sees of a trade: numbers only, no names, no calendar."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import StrEnum
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import PiecewiseLinear

Array = NDArray[np.float64]


class Right(StrEnum):
    """Who may end the contract before its last date."""

    HOLDER = "holder"  # ends it when that is worth more: value = max(exercise, continuation)
    ISSUER = "issuer"  # ends it when that is worth less: value = min(call, continuation)


@dataclass(frozen=True, slots=True)
class EarlyExerciseProblem:
    """An option that pays ``payoffs[i](aggregate(levels))`` once, at one of its dates, and an income until then.

    ``times`` : (n_dates,) years, increasing, the first may be 0 (exercise at once). On the last date it pays
    whatever the payoff there is; a payoff of None is a date without a right. ``spots`` : (n,) random parts of the
    levels at time 0. Over the step that ends at date i, their logs
    move by a normal of mean ``log_drifts[i]`` (n,) and covariance ``step_covariances[i]`` (n, n), independent of
    what came before; a step of length 0 moves nothing. ``discount_factors`` : (n_dates,) from each payment to time 0.
    Levels are in any unit; ``aggregate`` carries no cash level (fold it into the payoffs).

    ``incomes`` : functions of the same aggregate, in time-0 money, paid on a date that finds the contract alive,
    before the decision; empty, or one per date, None for none. ``floors`` : (n_dates, n) known parts of the levels by
    date, None for none: what is aggregated is the random part plus the floor.

    ``some`` : empty, or whether each date is among those whose rights alone are valued beside, to see what the
    others add.
    """

    times: Array
    spots: Array
    log_drifts: Array
    step_covariances: Array
    aggregate: Aggregate
    payoffs: tuple[PiecewiseLinear | None, ...]
    discount_factors: Array
    right: Right = Right.HOLDER
    incomes: tuple[PiecewiseLinear | None, ...] = ()
    floors: Array | None = None
    some: tuple[bool, ...] = ()

    def __post_init__(self) -> None:
        dates, n = len(self.times), len(self.spots)
        if dates == 0 or self.times[0] < 0.0 or any(b <= a for a, b in pairwise(self.times)):
            raise ValueError(f"dates must increase from 0 or later; got {self.times.tolist()}")
        if self.log_drifts.shape != (dates, n) or self.step_covariances.shape != (dates, n, n):
            raise ValueError(
                f"{dates} dates and {n} levels need log-drifts {(dates, n)} and covariances {(dates, n, n)}; "
                f"got {self.log_drifts.shape} and {self.step_covariances.shape}"
            )
        if len(self.payoffs) != dates or len(self.discount_factors) != dates:
            raise ValueError(
                f"{dates} dates need as many payoffs and discount factors; "
                f"got {len(self.payoffs)} and {len(self.discount_factors)}"
            )
        if self.payoffs[-1] is None:
            raise ValueError("the last date needs a payoff")
        if self.incomes and len(self.incomes) != dates:
            raise ValueError(f"{dates} dates need as many incomes; got {len(self.incomes)}")
        if self.some and len(self.some) != dates:
            raise ValueError(f"{dates} dates need as many marks; got {len(self.some)}")
        if self.times[0] == 0.0 and (self.payoffs[0] is None or (self.incomes and self.incomes[0])):
            raise ValueError("a date at time 0 needs a right, and income of that date is no longer to come")
        if self.floors is not None:
            if self.floors.shape != (dates, n) or not np.all(self.floors >= 0.0):
                raise ValueError(f"floors must be {(dates, n)} numbers from 0 on; got {self.floors.tolist()}")
            if self.aggregate.kind is AggregateKind.GEOMETRIC and np.any(self.floors):
                raise ValueError("a geometric aggregate takes no floors")
        if not (np.all(np.isfinite(self.spots)) and np.all(self.spots > 0.0)):
            raise ValueError("spots must be finite and positive")
        if not (np.all(np.isfinite(self.discount_factors)) and np.all(self.discount_factors > 0.0)):
            raise ValueError("discount factors must be finite and positive")
        if not (np.all(np.isfinite(self.log_drifts)) and np.all(np.isfinite(self.step_covariances))):
            raise ValueError("drifts and covariances must be finite")
        if self.aggregate.cash is not None:
            raise ValueError("fold the cash level into the payoffs first")
        if len(self.aggregate.weights) != n:
            raise ValueError(f"{n} levels for {len(self.aggregate.weights)} weights")

    @property
    def n_dates(self) -> int:
        return len(self.times)

    @property
    def n_assets(self) -> int:
        return len(self.spots)

    @property
    def covariances(self) -> Array:
        """Of the log-levels from time 0 to each date, (n_dates, n, n)."""
        out: Array = np.cumsum(self.step_covariances, axis=0)
        return out

    @property
    def sign(self) -> float:
        """Of what is paid, as the one who decides sees it: the issuer pays."""
        return 1.0 if self.right is Right.HOLDER else -1.0

    @property
    def decider_payoffs(self) -> tuple[PiecewiseLinear | None, ...]:
        """Payoffs in time-0 money as the one who decides sees them."""
        pairs = zip(self.payoffs, self.discount_factors.tolist(), strict=True)
        return tuple(None if f is None else f.scaled(self.sign * d) for f, d in pairs)

    @property
    def decider_incomes(self) -> tuple[PiecewiseLinear | None, ...]:
        """Incomes as the one who decides sees them, one per date."""
        found = self.incomes or (None,) * self.n_dates
        return tuple(None if f is None else f.scaled(self.sign) for f in found)

    @property
    def continuation_floors(self) -> Array:
        """The least that going on can be worth at each date, (n_dates,), to the one who decides; -inf without one."""
        ends = min(infimum(f) for f in self.decider_payoffs if f is not None)
        incomes = [0.0 if f is None else infimum(f) for f in self.decider_incomes]
        to_come = np.concatenate([np.cumsum(incomes[:0:-1])[::-1], [0.0]])
        return np.asarray(ends + to_come)

    def after_first_date(self) -> EarlyExerciseProblem:
        """The same without its first date, which must move nothing (time 0)."""
        if self.times[0] != 0.0 or self.n_dates == 1:
            raise ValueError("only a date at time 0 that is not the last can be taken off")
        return replace(
            self,
            times=self.times[1:],
            log_drifts=self.log_drifts[1:],
            step_covariances=self.step_covariances[1:],
            payoffs=self.payoffs[1:],
            discount_factors=self.discount_factors[1:],
            incomes=self.incomes[1:],
            floors=None if self.floors is None else self.floors[1:],
            some=self.some[1:],
        )

    @classmethod
    def from_constants(
        cls,
        times: Array,
        spots: Array,
        *,
        rate: float,
        dividend_yields: Array,
        volatilities: Array,
        correlation: Array,
        aggregate: Aggregate,
        payoff: PiecewiseLinear,
        right: Right = Right.HOLDER,
    ) -> EarlyExerciseProblem:
        """Constant continuously compounded rate and yields, annualised volatilities, one payoff on every date."""
        times, spots = np.asarray(times, dtype=float), np.asarray(spots, dtype=float)
        vols, yields = np.asarray(volatilities, dtype=float), np.asarray(dividend_yields, dtype=float)
        lengths = np.diff(times, prepend=0.0)
        return cls(
            times,
            spots,
            lengths[:, None] * (rate - yields - 0.5 * vols**2),
            lengths[:, None, None] * (np.asarray(correlation, dtype=float) * np.outer(vols, vols)),
            aggregate,
            (payoff,) * len(times),
            np.exp(-rate * times),
            right,
        )


def infimum(payoff: PiecewiseLinear) -> float:
    """The least value a payoff can take or come close to, -inf where there is none."""
    intercepts, slopes = payoff.pieces()
    if slopes[0] > 0.0 or slopes[-1] < 0.0:
        return float("-inf")
    knots = np.array(payoff.knots)
    left, right = intercepts[:-1] + slopes[:-1] * knots, intercepts[1:] + slopes[1:] * knots
    return float(np.min(np.concatenate([left, right]))) if len(knots) else float(intercepts[0])
