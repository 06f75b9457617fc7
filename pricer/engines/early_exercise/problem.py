"""What the early-exercise engine sees of a trade: numbers only, no names, no calendar."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import StrEnum
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear

Array = NDArray[np.float64]


class Right(StrEnum):
    """Who may end the contract before its last date."""

    HOLDER = "holder"  # ends it when that is worth more: value = max(exercise, continuation)
    ISSUER = "issuer"  # ends it when that is worth less: value = min(call, continuation)


@dataclass(frozen=True, slots=True)
class EarlyExerciseProblem:
    """An option that pays ``payoffs[i](aggregate(levels))`` once, at one of its dates.

    ``times`` : (n_dates,) years, increasing, the first may be 0 (exercise at once). On the last date it pays
    whatever the payoff there is. ``spots`` : (n,) levels at time 0. Over the step that ends at date i, log-levels
    move by a normal of mean ``log_drifts[i]`` (n,) and covariance ``step_covariances[i]`` (n, n), independent of
    what came before; a step of length 0 moves nothing. ``discount_factors`` : (n_dates,) from each payment to time 0.
    Levels are in any unit; ``aggregate`` carries no cash level (fold it into the payoffs).
    """

    times: Array
    spots: Array
    log_drifts: Array
    step_covariances: Array
    aggregate: Aggregate
    payoffs: tuple[PiecewiseLinear, ...]
    discount_factors: Array
    right: Right = Right.HOLDER

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
    def decider_payoffs(self) -> tuple[PiecewiseLinear, ...]:
        """Payoffs in time-0 money as the one who decides sees them: the issuer pays, so they are negative."""
        sign = 1.0 if self.right is Right.HOLDER else -1.0
        return tuple(f.scaled(sign * d) for f, d in zip(self.payoffs, self.discount_factors.tolist(), strict=True))

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
