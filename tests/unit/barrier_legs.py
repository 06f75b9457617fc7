"""Barrier features as legs: knocked out, knocked in, with rebates at the hit or at the end."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.algebra import difference, times
from pricer.engines.paths.leg import Event, Leg, Payment, Trigger, When


def knocked_out(
    end: Payment,
    last: int,
    dates: Sequence[int],
    *,
    above: Trigger | None = None,
    below: Trigger | None = None,
    rebate: float = 0.0,
    rebate_discount_factors: Mapping[int, float] | None = None,
) -> Leg:
    """``end`` is paid at date ``last`` if the barriers were not crossed on any of ``dates``.

    ``rebate`` is paid at the hit with the discount factor of its date, or at the end where
    ``rebate_discount_factors`` is None. A payoff jumps where the barrier does: at the barrier it is alive.
    """
    own = set(dates)
    events = []
    for date in sorted(own | {last}):
        seen = date in own
        payments: list[Payment] = []
        if rebate != 0.0 and seen:
            df = end.discount_factor if rebate_discount_factors is None else rebate_discount_factors[date]
            sides = [When.STOPPED_ABOVE] * (above is not None) + [When.STOPPED_BELOW] * (below is not None)
            payments = [Payment.fixed(rebate, df, side) for side in sides]
        if date == last:
            payments.append(replace(end, when=When.SURVIVING))
        events.append(Event(date, above if seen else None, below if seen else None, tuple(payments)))
    return Leg(tuple(events))


def knocked_in(
    end: Payment, last: int, dates: Sequence[int], *, above: Trigger | None = None, below: Trigger | None = None
) -> tuple[Leg, Leg]:
    """``end`` is paid at date ``last`` if a barrier was crossed on one of ``dates``: all, less what is knocked out."""
    whole = Leg((Event(last, payments=(replace(end, when=When.ALIVE),)),))
    return whole, times(-1.0, knocked_out(end, last, dates, above=above, below=below))


def observed_knock_in(
    main: Leg, below: Trigger, dates: Sequence[int], touched: PiecewiseLinear, untouched: PiecewiseLinear, end: Payment
) -> tuple[Leg, Leg]:
    """``main``, stopped above by its own triggers, with a redemption that depends on a level touched on ``dates``.

    At its last date ``main`` pays ``touched`` where the level was crossed up to that date, else ``untouched``, with
    the reading and discount factor of ``end``. It is ``touched`` for all survivors, and the difference for those that a
    second leg, stopped below as well, has left.
    """
    last = main.events[-1].date
    own = {event.date: event for event in main.events}
    if max(dates) > last:
        raise ValueError(f"the knock-in is observed at date {max(dates)}, after the last, {last}")
    first_leg = [*main.events[:-1], _with_payment(main.events[-1], replace(end, payoff=touched, when=When.SURVIVING))]
    gained = replace(end, payoff=difference(untouched, touched), when=When.SURVIVING)
    second_leg = []
    for date in sorted({*own, *dates}):
        above = own[date].above if date in own else None
        payments = (gained,) if date == last else ()
        second_leg.append(Event(date, above, below if date in dates else None, payments))
    return replace(main, events=tuple(first_leg)), Leg(tuple(second_leg))


def _with_payment(event: Event, payment: Payment) -> Event:
    return replace(event, payments=(*event.payments, payment))
