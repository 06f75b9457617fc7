"""Whether the past of a trade is known: its fixings, the desk's records, its writer's default."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from datetime import date

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupons
from pricer.contracts.life_cycle import AsOf, Status
from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.findings import Locate, error, warning
from pricer.market.market import Market
from pricer.market.standing import missing_days, price_record

#: Kinds of features by the columns that may tell their days.
_TABLES: tuple[tuple[type, str], ...] = ((Coupons, "coupon"), (Autocall, "call"), (Barrier, "barrier"))


def has_ended(state: AsOf) -> bool:
    """Whether all that is left are amounts that no price can change any more, if anything is.

    One that ended today by spots that stand in for fixings may still change.
    """
    return state.status in (Status.TO_BE_PAID, Status.SETTLED) and not state.assumed


def past_coverage(trade: Trade, state: AsOf, market: Market, place: Locate) -> Iterator[Issue]:
    """The issues of where the trade stands, each at the cell that asks for what is missing."""
    for issue in state.issues:
        match issue.code:
            case "missing-fixing":
                days = missing_days(price_record(trade, market))
                here = _cell_of(days[0] if days else state.contract.expiry_date, state.contract, place)
                yield _at(here, _or_removed(issue, trade, market))
            case "spot-for-fixing" | "no-final-level":
                yield _at(_cell_of(market.valuation_date, state.contract, place), issue)
            case "touch-not-recorded":
                yield _at(place("barrier"), issue)
            case _:
                yield _at(place("writer"), issue)
    yield from _records_ahead(state, place)
    yield from _hits_from_the_start(state, place)


def _records_ahead(state: AsOf, place: Locate) -> Iterator[Issue]:
    """Records of days to come would be taken for facts: a hit that is certain, a barrier that nothing can touch."""
    today = state.valuation_date
    for feature in state.contract.features:
        if not isinstance(feature, Barrier):
            continue
        hit, clear = None if feature.recorded_hit is None else feature.recorded_hit.day, feature.clear_until
        for what, day in (("a hit recorded on", hit), ("a barrier known to be clear until", clear)):
            if day is not None and day > today:
                yield error(
                    place("barrier"),
                    "record-of-later-day",
                    f"{what} {day}, after the valuation date {today}",
                    "records up to the valuation date",
                    "Correct the date, or clear the cell until that day.",
                )


def _hits_from_the_start(state: AsOf, place: Locate) -> Iterator[Issue]:
    """A barrier hit on the first of its days is on the wrong side, or in another unit than the levels."""
    for i, feature in enumerate(state.contract.features):
        if not isinstance(feature, Barrier) or len(feature.schedule) == 1 or feature.recorded_hit is not None:
            continue
        first, seen = feature.schedule[0].day, state.progress.features[i]
        if seen.hit_on == first:
            yield warning(
                place("barrier"),
                "hit-from-the-start",
                f"a {feature.kind} that was hit on {first}, the first day it was watched",
                "a barrier that the levels of its first day do not reach",
                "Check its level, unit and direction against the terms. The trade is valued as given.",
            )


def _or_removed(issue: Issue, trade: Trade, market: Market) -> Issue:
    """A trade that must have been paid may leave the book instead of having its fixings entered."""
    paid = trade.contract.payment_date
    if paid > market.valuation_date:
        return issue
    return replace(issue, mend=f"{issue.mend} Or remove the trade: it was paid on {paid}.")


def _cell_of(day: date, contract: Contract, place: Locate) -> Place | None:
    """The cell that makes the contract look at ``day``: of a schedule, of a feature, or of the expiry."""
    purposes: list[str] = []
    tables: list[str] = []
    if day in contract.levels.setting_dates:
        purposes.append("reference")
    if day in contract.statistic.dates and day != contract.expiry.day:
        purposes.append("observation")
    for feature in contract.features:
        if day in feature.dates:
            table = next((name for kind, name in _TABLES if isinstance(feature, kind)), "exercise")
            purposes += ["coupon", "accrual"] if table == "coupon" else [table]
            tables.append(table)
    columns = [
        *(["expiry_date"] if day == contract.expiry.day else []),
        *(f"schedule:{purpose}:{day}" for purpose in purposes),
        *(f"schedule:{purpose}" for purpose in purposes),
        *tables,
        "schedule",
        "expiry_date",
    ]
    return next((found for column in columns if (found := place(column))), None)


def _at(place: Place | None, issue: Issue) -> Issue:
    if place is None:
        return issue
    cell = place.cell or None
    return replace(issue, file=place.file, sheet=place.sheet, row=place.row, column=place.column, cell=cell)
