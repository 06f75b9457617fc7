"""Legs as tables for the kernels of paths in steps."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.paths.codes import KINDS, WHENS
from pricer.engines.paths.leg import Event, Leg, Payment, Reading, Trigger
from pricer.simulation.kernels import stepwise_legs as k
from pricer.simulation.kernels.path_tables import PAYMENT_COLUMNS

Array = NDArray[np.float64]
Integers = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class LegTables:
    """Columns as in ``kernels.stepwise_levels`` and ``kernels.stepwise_legs``.

    A leg that branches off another repeats that one's events before, without payments. ``rows`` and ``dates`` : of
    each leg's own events, their rows among all stops and their dates.
    """

    readings: Integers  # (n_readings, 3)
    references: Array  # (n_readings, n)
    weights: Array
    legs: Integers  # (n_legs, 2)
    first_sums: Array  # (n_legs,)
    events: Integers
    numbers: Array
    payments: Integers
    profiles: Array
    rows: tuple[Integers, ...]
    dates: tuple[Integers, ...]

    @classmethod
    def of(cls, legs: Sequence[Leg]) -> LegTables:
        """All ``legs``, parents before their branches."""
        return _Collector(legs).tables()

    @property
    def n_stops(self) -> int:
        """Events at which a leg may stop, over all legs."""
        return sum(len(rows) for rows in self.rows)


class _Collector:
    def __init__(self, legs: Sequence[Leg]) -> None:
        self._all = tuple(legs)
        self._readings: dict[tuple[int, Reading], int] = {}
        self._events: list[list[int]] = []
        self._numbers: list[list[float]] = []
        self._payments: list[list[int]] = []
        self._profiles: list[float] = []
        self._spans: list[list[int]] = []
        self._stops = 0
        self._rows: list[Integers] = []
        self._dates: list[Integers] = []
        for leg in legs:
            first, first_stop = len(self._events), self._stops
            for event, pays in self._whole(leg):
                self._add(event, pays=pays)
            self._spans.append([first, len(self._events)])
            self._rows.append(np.arange(first_stop, self._stops))
            self._dates.append(np.array([event.date for event in leg.events], dtype=np.int64))

    def tables(self) -> LegTables:
        found = list(self._readings)
        n = -1 if found else 1
        table = [[date, KINDS[x.aggregate.kind], -1 if x.since is None else x.since] for date, x in found]
        return LegTables(
            readings=np.array(table, dtype=np.int64).reshape(-1, 3),
            references=np.array([x.references for _, x in found], dtype=float).reshape(len(found), n),
            weights=np.array([x.aggregate.weights for _, x in found], dtype=float).reshape(len(found), n),
            legs=np.array(self._spans, dtype=np.int64).reshape(-1, 2),
            first_sums=np.array([leg.sum_so_far for leg in self._all], dtype=float),
            events=np.array(self._events, dtype=np.int64).reshape(-1, k.EVENT_COLUMNS),
            numbers=np.array(self._numbers, dtype=float).reshape(-1, k.EVENT_NUMBERS),
            payments=np.array(self._payments, dtype=np.int64).reshape(-1, PAYMENT_COLUMNS),
            profiles=np.array(self._profiles or [0.0], dtype=float),
            rows=tuple(self._rows),
            dates=tuple(self._dates),
        )

    def _whole(self, leg: Leg) -> list[tuple[Event, bool]]:
        own = [(event, True) for event in leg.events]
        if leg.branch is None:
            return own
        before = self._whole(self._all[leg.branch.leg])
        return [(event, False) for event, _ in before if event.date < leg.branch.date] + own

    def _row(self, date: int, of: Reading | Trigger | None) -> int:
        if of is None:
            return -1
        reading = of.reading if isinstance(of, Trigger) else of
        return self._readings.setdefault((date, reading), len(self._readings))

    def _add(self, event: Event, *, pays: bool) -> None:
        first = len(self._payments)
        for payment in event.payments if pays else ():
            self._pay(event.date, payment)
        coupon = event.coupon if pays else None
        fixing, date = event.fixing, event.date
        self._events.append(
            [
                self._row(date, event.above),
                self._row(date, event.below),
                first,
                len(self._payments),
                self._row(date, fixing.reading if fixing else None),
                self._row(date, coupon.trigger if coupon else None),
                int(pays),
                self._stops if pays else -1,
            ]
        )
        self._stops += int(pays)
        self._numbers.append(
            [
                event.above.level if event.above else 0.0,
                event.below.level if event.below else 0.0,
                fixing.share if fixing else 0.0,
                coupon.trigger.level if coupon else 0.0,
                coupon.amount if coupon else 0.0,
                coupon.discount_factor if coupon else 0.0,
            ]
        )

    def _pay(self, date: int, payment: Payment) -> None:
        f = payment.payoff.scaled(payment.discount_factor)
        flat = payment.reading is None or (not f.knots and f.slope == 0.0)
        row = -1 if flat else self._row(date, payment.reading)
        first = len(self._profiles)
        self._profiles += [f.intercept, f.slope, *f.knots, *f.bends, *f.jumps]
        self._payments.append([row, WHENS[payment.when], int(payment.averaged and not flat), first, len(f.knots)])
