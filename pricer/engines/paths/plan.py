"""From legs to the tables of the path kernel."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.codes import KINDS, WHENS
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Event, Leg, Payment, Reading, Trigger
from pricer.simulation.common_steps import CommonSteps
from pricer.simulation.kernels import path_tables as k
from pricer.simulation.kernels import readings as r
from pricer.simulation.path_plan import PathPlan

Array = NDArray[np.float64]

#: A factor that moves a reading less than this smooths nothing.
_HARD = 1e-9

#: Logarithms of levels that no path reaches, or every path.
_NEVER = 1e3


@dataclass(frozen=True, slots=True)
class PathProblem:
    """Value of all ``legs`` together, per unit, discounted.

    ``drawn_like`` : a law close to this one, whose paths are to be made from the same points in the same way.
    """

    law: PathLaw
    legs: tuple[Leg, ...]
    drawn_like: PathLaw | None = None

    def __post_init__(self) -> None:
        last = len(self.law.times) - 1
        for number, leg in enumerate(self.legs):
            if leg.events[-1].date > last:
                raise ValueError(f"leg {number}: date {leg.events[-1].date} lies after the law's last, {last}")
            if leg.branch is not None and leg.branch.leg >= number:
                raise ValueError(f"leg {number}: branches off leg {leg.branch.leg}, which must come before it")


class Tables:
    """Collects readings, events and payments; ``plan`` hands them over.

    ``rows[number][date]`` is the row of a leg's event at a date.
    """

    def __init__(self, problem: PathProblem) -> None:
        self._problem = problem
        other = problem.drawn_like
        like = None if other is None else CommonSteps.of(other.times, other.covariances)
        self._steps = CommonSteps.of(problem.law.times, problem.law.covariances, like=like)
        self._readings: dict[tuple[int, Reading], int] = {}
        self._events: list[list[int]] = []
        self._numbers: list[list[float]] = []
        self._payments: list[list[int]] = []
        self._profiles: list[float] = []
        self._legs: list[list[int]] = []
        self.rows: list[dict[int, int]] = []
        self.is_smoothed = True
        for number in range(len(problem.legs)):
            self._add_leg(number)

    def plan(self) -> PathPlan:
        law = self._problem.law
        kinds = [KINDS[reading.aggregate.kind] for _, reading in self._readings]
        widths = [1 if kind in (r.BEST, r.WORST) else law.n_assets for kind in kinds]
        firsts = np.cumsum([0, *widths])[:-1]
        table = [
            [date, kind, -1 if reading.since is None else reading.since, int(first)]
            for (date, reading), kind, first in zip(self._readings, kinds, firsts, strict=True)
        ]
        starts = [_start(law, date, reading) for date, reading in self._readings]
        weights = [reading.aggregate.weights for _, reading in self._readings]
        degrees = [degree(reading) for _, reading in self._readings]
        return PathPlan(
            steps=self._steps,
            readings=np.array(table, dtype=np.int64).reshape(-1, 4),
            starts=np.array(starts, dtype=float).reshape(-1, law.n_assets),
            weights=np.array(weights, dtype=float).reshape(-1, law.n_assets),
            degrees=np.array(degrees, dtype=float),
            legs=np.array(self._legs, dtype=np.int64).reshape(-1, k.LEG_COLUMNS),
            first_sums=np.array([leg.sum_so_far for leg in self._problem.legs], dtype=float),
            events=np.array(self._events, dtype=np.int64).reshape(-1, k.EVENT_COLUMNS),
            event_numbers=np.array(self._numbers, dtype=float).reshape(-1, k.EVENT_NUMBERS),
            payments=np.array(self._payments, dtype=np.int64).reshape(-1, k.PAYMENT_COLUMNS),
            profiles=np.array(self._profiles or [0.0], dtype=float),
        )

    def forward_deltas(self, by_reading: Array) -> Array:
        """``dV / d ln forwards`` (..., n_dates, n) from derivatives by the levels of readings (..., n_readings, n)."""
        law = self._problem.law
        out = np.zeros((*by_reading.shape[:-2], len(law.times), law.n_assets))
        for row, (date, reading) in enumerate(self._readings):
            out[..., date, :] += by_reading[..., row, :]
            if reading.since is not None:
                out[..., reading.since, :] -= by_reading[..., row, :]
        return out

    def _row_of(self, date: int, reading: Reading | None) -> int:
        if reading is None:
            return -1
        if len(reading.references) != self._problem.law.n_assets:
            raise ValueError(f"{len(reading.references)} references for {self._problem.law.n_assets} levels")
        if min(reading.aggregate.weights) < 0.0:
            raise ValueError(f"weights must have one sign and be written positive; got {reading.aggregate.weights}")
        if reading.since is not None and not 0 <= reading.since < date:
            raise ValueError(f"date {date}: a reading since date {reading.since} needs an earlier one")
        shifts = self._steps.shifts
        moved = shifts[date] - (shifts[reading.since] if reading.since is not None else 0.0)
        self.is_smoothed &= bool(moved > _HARD)
        return self._readings.setdefault((date, reading), len(self._readings))

    def _add_leg(self, number: int) -> None:
        leg = self._problem.legs[number]
        rows: dict[int, int] = {}
        parent = -1
        if leg.branch is not None:
            others = self.rows[leg.branch.leg]
            if leg.branch.date not in others:
                raise ValueError(f"leg {number}: leg {leg.branch.leg} has no event at date {leg.branch.date}")
            parent = others[leg.branch.date]
        first = len(self._events)
        for event in leg.events:
            rows[event.date] = len(self._events)
            self._add_event(event)
        self._legs.append([first, len(self._events), parent])
        self.rows.append(rows)

    def _add_event(self, event: Event) -> None:
        first = len(self._payments)
        for payment in event.payments:
            self._add_payment(event.date, payment)
        above, below, fixing, coupon = event.above, event.below, event.fixing, event.coupon
        share = 1.0 if fixing is None else fixing.share
        if share <= 0.0:
            raise ValueError(f"date {event.date}: a fixing's share must be above 0; got {share}")
        self._events.append(
            [
                self._row_of(event.date, above.reading if above else None),
                self._row_of(event.date, below.reading if below else None),
                first,
                len(self._payments),
                self._row_of(event.date, fixing.reading if fixing else None),
                self._row_of(event.date, coupon.trigger.reading if coupon else None),
            ]
        )
        self._numbers.append(
            [
                _log_level(above),
                _log_level(below),
                float(np.log(share)),
                _log_level(coupon.trigger if coupon else None),
                coupon.amount if coupon else 0.0,
                coupon.discount_factor if coupon else 0.0,
            ]
        )

    def _add_payment(self, date: int, payment: Payment) -> None:
        f = payment.payoff.scaled(payment.discount_factor)
        flat = payment.reading is None or (not f.knots and f.slope == 0.0)
        row = self._row_of(date, None if flat else payment.reading)
        first = len(self._profiles)
        self._profiles += [f.intercept] if flat else _flat(f)
        self._payments.append(
            [row, WHENS[payment.when], int(payment.averaged and not flat), first, 0 if flat else len(f.knots)]
        )


def _log_level(trigger: Trigger | None) -> float:
    if trigger is None or trigger.level <= 0.0:
        return -_NEVER
    return float(np.log(trigger.level))


def degree(reading: Reading) -> float:
    """How often the common factor's move goes into the reading's logarithm."""
    return float(sum(reading.aggregate.weights)) if reading.aggregate.kind is AggregateKind.GEOMETRIC else 1.0


def _start(law: PathLaw, date: int, reading: Reading) -> Array:
    """Base-2 logarithm of what each asset contributes at zero noise, (n,)."""
    drifted = np.log(law.forwards) - 0.5 * law.variances
    start = drifted[date] - np.log(reading.references)
    if reading.since is not None:
        start = start - drifted[reading.since]
    if reading.aggregate.kind is AggregateKind.WEIGHTED_SUM:
        weights = np.array(reading.aggregate.weights)
        start = np.where(weights > 0.0, start + np.log(np.where(weights > 0.0, weights, 1.0)), -_NEVER)
    out: Array = start / np.log(2.0)
    return out


def _flat(f: PiecewiseLinear) -> list[float]:
    return [f.intercept, f.slope, *f.knots, *f.bends, *f.jumps]
