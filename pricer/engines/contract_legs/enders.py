"""What ends a contract before its expiry: calls, and knock-outs that pay at the hit."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from typing import Any

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier
from pricer.contracts.feature import Ending, Feature
from pricer.contracts.observation import Observation
from pricer.engines.contract_legs import watching
from pricer.engines.contract_legs.draft import DraftLeg, Source
from pricer.engines.contract_legs.readings import Bound, Readings
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.paths.leg import Payment, When
from pricer.market.local_vol_surface import LocalVolSurface


@dataclass(frozen=True, slots=True)
class Watch:
    """One observation to come of a trigger: ``bound`` says where it is met, True or False where that is certain."""

    date: int
    bound: Bound | bool
    seen: Observation


def add_enders(
    draft: DraftLeg,
    features: Sequence[Feature[Any]],
    states: Sequence[Any],
    terms: ContractTerms,
    readings: Readings,
    surfaces: Sequence[LocalVolSurface] = (),
) -> dict[int, list[int]]:
    """Stops of ``draft`` and what they pay; the features that end the contract, in order, by date."""
    found: dict[int, list[int]] = {}
    for number, (feature, state) in enumerate(zip(features, states, strict=True)):
        if isinstance(feature, Autocall):
            source = Source(number, str(Ending.CALLED), is_barrier=False)
            watches, amounts = _calls(feature, state, terms, readings), feature.amounts[state:]
        elif isinstance(feature, Barrier) and feature.rebate_at_hit is not None:
            source = Source(number, str(Ending.KNOCKED_OUT), is_barrier=True)
            watches = tuple(barrier_watches(feature, terms, readings, surfaces))
            amounts = (feature.rebate_at_hit,) * len(watches)
        else:
            continue
        for watch, amount in zip(watches, amounts, strict=True):
            found.setdefault(watch.date, []).append(number)
            _add(draft, watch, amount, terms.discount(watch.seen.payment_date), source)
    return found


def _add(draft: DraftLeg, watch: Watch, amount: float, discount_factor: float, source: Source) -> None:
    before = draft.event(watch.date)
    bound = watch.bound if isinstance(watch.bound, Bound) else draft.readings.always if watch.bound else None
    if bound is None:
        return
    if (before.above if bound.above else before.below) is not None:
        raise UnsayableError("two features may end the contract on the same side on one day")
    there = before.below if bound.above else before.above
    if bound.above and there is not None:
        # A leg counts the stop above first; here it comes second.
        apart = there.reading == bound.trigger.reading and there.level <= bound.trigger.level
        if not apart:
            raise UnsayableError("two features may end the contract on one day, the one below first")
    draft.stop(watch.date, bound, source)
    when = When.STOPPED_ABOVE if bound.above else When.STOPPED_BELOW
    if amount:
        draft.pay(watch.date, Payment.fixed(amount, discount_factor, when))


def _calls(call: Autocall, passed: int, terms: ContractTerms, readings: Readings) -> tuple[Watch, ...]:
    rows = zip(call.schedule[passed:], call.levels[passed:], strict=True)
    return tuple(
        Watch(readings.places[seen.day], readings.bound(call.trigger, seen.day, level), seen) for seen, level in rows
    )


def barrier_watches(
    barrier: Barrier, terms: ContractTerms, readings: Readings, surfaces: Sequence[LocalVolSurface] = ()
) -> Iterator[Watch]:
    """The observations to come of a barrier that was not hit; ``surfaces`` (n,) of local volatility, if any."""
    today = terms.as_of.valuation_date
    if barrier.recorded_hit is not None and barrier.recorded_hit.day > today:
        raise UnsayableError("a hit is recorded for a day to come")
    clear = max(barrier.clear_until or date.min, today)
    rows = [(seen, level) for seen, level in zip(barrier.schedule, barrier.levels, strict=True) if seen.day > clear]
    has_begun = barrier.schedule[0].day <= clear == today
    places = [readings.places[seen.day] for seen, _ in rows]
    for number, (seen, level) in enumerate(rows):
        moved = None
        if barrier.continuous and not readings.is_setting(seen.day):
            moved = watching.scales(
                terms, readings, barrier.trigger, level, places, number, has_begun=has_begun, surfaces=surfaces
            )
        yield Watch(places[number], readings.bound(barrier.trigger, seen.day, level, moved), seen)
