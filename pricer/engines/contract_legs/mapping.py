"""A contract as a sum of legs."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind, BarrierState
from pricer.contracts.coupons import Coupons
from pricer.contracts.life_cycle import Status
from pricer.contracts.remainder import Remaining, remaining
from pricer.engines.contract_legs.coupons import CouponWriter
from pricer.engines.contract_legs.draft import DraftLeg, Source
from pricer.engines.contract_legs.enders import Watch, add_enders, barrier_watches
from pricer.engines.contract_legs.final_level import FinalLevel
from pricer.engines.contract_legs.final_payoff import is_zero, parts
from pricer.engines.contract_legs.readings import Bound, Readings
from pricer.engines.contract_legs.result import ContractLegs, NotAsLegs, Stop
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.paths.leg import When
from pricer.market.local_vol_surface import LocalVolSurface


def contract_legs(terms: ContractTerms, surfaces: Sequence[LocalVolSurface] = ()) -> ContractLegs | NotAsLegs:
    """What the contract of ``terms`` still pays from tonight on, as legs; amounts already decided are left out.

    Leg 0 is stopped by what ends the contract; it pays calls, rebates at hit, coupons and the part of the final
    amount that no barrier changes. Each further leg is one that barriers stop as well. ``surfaces`` (n,) of local
    volatility say how far barriers watched at all times are moved under a smile.
    """
    as_of = terms.as_of
    if as_of.status is not Status.LIVE:
        return NotAsLegs("the contract is not live")
    try:
        return _Decomposition(terms, remaining(as_of), surfaces).legs()
    except UnsayableError as reason:
        return NotAsLegs(str(reason))


class _Decomposition:
    def __init__(self, terms: ContractTerms, left: Remaining, surfaces: Sequence[LocalVolSurface]) -> None:
        contract = left.contract
        for feature in contract.features:
            if not isinstance(feature, Coupons | Autocall | Barrier):
                raise UnsayableError(f"the contract has a feature that looks ahead: {feature.label}")
        if contract.writer is not None and contract.writer.structural is not None:
            raise UnsayableError("the writer's assets decide on its default")
        self._terms, self._left, self._surfaces = terms, left, surfaces
        self._readings = Readings.of(terms, contract)
        self._final = FinalLevel(contract, left.statistic, terms, self._readings)
        self._expiry = self._readings.places[contract.expiry.day]
        self._barriers = [
            (number, feature)
            for number, feature in enumerate(contract.features)
            if isinstance(feature, Barrier) and feature.rebate_at_hit is None
        ]
        self._watches = {
            number: tuple(barrier_watches(feature, terms, self._readings, surfaces))
            for number, feature in self._barriers
        }

    def legs(self) -> ContractLegs:
        contract, states = self._left.contract, self._left.features
        main = DraftLeg(self._readings)
        main.event(self._expiry)
        enders = add_enders(main, contract.features, states, self._terms, self._readings, self._surfaces)
        bare = main.copy_of_stops()
        ends = tuple(self._stops(0, bare))
        drafts = [main, *self._add_coupons(main, bare, enders)]
        at_expiry = self._only_at_expiry(bare)
        if at_expiry is not None:
            self._pay_at_expiry(main, *at_expiry)
            watched = 0
        else:
            watched = self._pay_in_parts(main, bare, drafts)
        past = self._terms.as_of.progress.features
        already_hit = any(isinstance(state, BarrierState) and state.hit_on is not None for state in past)
        has_barrier = any(isinstance(feature, Barrier) for feature in contract.features)
        hits = _hits(watched, drafts[watched]) if has_barrier else ()
        return ContractLegs(tuple(draft.leg() for draft in drafts), ends, hits, has_barrier, already_hit)

    def _add_coupons(self, main: DraftLeg, bare: DraftLeg, enders: dict[int, list[int]]) -> list[DraftLeg]:
        """Coupons go to ``main``, further series of remembered ones to legs of their own, which are returned."""
        others: list[DraftLeg] = []
        is_taken = False
        for number, (feature, state) in enumerate(zip(self._left.contract.features, self._left.features, strict=True)):
            if not isinstance(feature, Coupons):
                continue
            writer = CouponWriter(feature, state, number, self._terms, self._readings.places, enders)
            draft = main
            if writer.needs_own_leg:
                if is_taken:
                    draft = bare.copy_of_stops()
                    others.append(draft)
                is_taken = True
            writer.add_to(draft)
        return others

    def _only_at_expiry(self, bare: DraftLeg) -> tuple[Barrier, Bound] | None:
        """A single barrier, watched on the expiry date alone, on a side on which nothing else stops there."""
        if len(self._barriers) != 1 or not self._final.is_read_at_expiry:
            return None
        ((number, barrier),) = self._barriers
        if len(self._watches[number]) != 1:
            return None
        (watch,) = self._watches[number]
        if watch.date != self._expiry or not isinstance(watch.bound, Bound):
            return None
        taken = [above for date, above in bare.sources if date == self._expiry]
        return None if watch.bound.above in taken or (watch.bound.above and taken) else (barrier, watch.bound)

    def _pay_at_expiry(self, main: DraftLeg, barrier: Barrier, bound: Bound) -> None:
        """Paths that hit it are stopped on the last date, and paid then."""
        main.stop(self._expiry, bound, self._source(self._barriers[0][0], barrier))
        plain, instead = self._left.contract.payout.payoff(), barrier.instead.payoff()
        hit, spared = (plain, instead) if barrier.kind is BarrierKind.IN else (instead, plain)
        self._final.pay(main, hit, When.STOPPED_ABOVE if bound.above else When.STOPPED_BELOW)
        self._final.pay(main, spared)

    def _pay_in_parts(self, main: DraftLeg, bare: DraftLeg, drafts: list[DraftLeg]) -> int:
        """The final amount, barrier by barrier; returns the number of the leg that every barrier stops."""
        barriers = [barrier for _, barrier in self._barriers]
        found = parts(self._left.contract.payout, barriers)
        everyone = frozenset(range(len(barriers)))
        watched = 0
        for chosen in sorted({*found, everyone}, key=sorted):
            draft = main
            if chosen:
                draft = bare.copy_of_stops()
                draft.event(self._expiry)
                for place in sorted(chosen):
                    number, barrier = self._barriers[place]
                    self._stop_by(draft, self._watches[number], self._source(number, barrier))
                if chosen == everyone:
                    watched = len(drafts)
                drafts.append(draft)
            if chosen in found and not is_zero(found[chosen]):
                self._final.pay(draft, found[chosen])
        return watched

    def _stop_by(self, draft: DraftLeg, watches: Iterable[Watch], source: Source) -> None:
        for watch in watches:
            draft.stop(watch.date, watch.bound, source)

    def _source(self, number: int, barrier: Barrier) -> Source:
        return Source(number, barrier.label, is_barrier=True)

    def _stops(self, leg: int, draft: DraftLeg) -> Iterable[Stop]:
        for (date, above), sources in sorted(draft.sources.items(), key=lambda item: item[0]):
            yield Stop(leg, date, above, sources[0].what)


def _hits(leg: int, draft: DraftLeg) -> tuple[Stop, ...] | None:
    """The stops of a leg by barriers; None where a call on the same date hides some."""
    stops = []
    for (date, above), sources in sorted(draft.sources.items(), key=lambda item: item[0]):
        if not any(source.is_barrier for source in sources):
            continue
        called_below = above and any(not source.is_barrier for source in draft.sources.get((date, False), ()))
        if called_below or not all(source.is_barrier for source in sources):
            return None
        stops.append(Stop(leg, date, above, sources[0].what))
    return tuple(stops)
