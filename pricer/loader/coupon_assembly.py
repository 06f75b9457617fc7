"""Coupons from their dates, their accrual dates and their trigger."""

from __future__ import annotations

from bisect import bisect_left
from datetime import date
from itertools import pairwise

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.trigger import Direction
from pricer.loader.book_models import COUPONS
from pricer.loader.faults import Fault, blank_cell, number_in_words, unwanted
from pricer.loader.schedule_rows import Purpose
from pricer.loader.series import AllSeries, Series
from pricer.loader.trade_parts import TradeParts
from pricer.loader.triggers import HIGHEST_COUPON, by_number, check_amounts, check_levels, trigger_of


def coupons_of(parts: TradeParts, series: AllSeries, aggregate: Aggregate) -> list[Coupons]:
    """The trade's coupons by number; those with a fault are told and left out."""
    rows = by_number(parts, COUPONS)
    numbers = {*rows, *series.numbers(Purpose.COUPON), *series.numbers(Purpose.ACCRUAL)}
    made = (_coupons(parts, series, aggregate, number, rows) for number in sorted(numbers))
    return [coupons for coupons in made if coupons is not None]


def _coupons(
    parts: TradeParts, series: AllSeries, aggregate: Aggregate, number: int, rows: dict[int, object]
) -> Coupons | None:
    paid, accrual = series.get(Purpose.COUPON, number), series.get(Purpose.ACCRUAL, number)
    if paid is None:
        if not series.is_given(Purpose.COUPON, number):
            _tell_missing(parts, series, number, rows)
        return None
    found = rows.get(number)
    if (number in rows and found is None) or (accrual is None and (Purpose.ACCRUAL, number) in series.first_rows):
        return None
    row = None if found is None else found.value  # type: ignore[attr-defined]
    trigger = trigger_of(aggregate, row)
    check_levels(parts, trigger, paid.levels, paid.table, paid.rows)
    check_levels(parts, trigger, paid.ceilings, paid.table, paid.rows, "ceiling")
    check_amounts(parts, paid.amounts, HIGHEST_COUPON, paid.table, paid.rows)
    memory = row is not None and row.memory
    if memory and accrual is not None:
        fault = Fault("terms-do-not-fit", "yes", "no, as coupons that accrue have no memory", "Clear the cell.")
        parts.tell(COUPONS, found.number, "memory", fault)  # type: ignore[attr-defined]
        return None
    shares = _shares(parts, paid, accrual)
    if shares is None or not _ranges_fit(parts, paid, accrual is not None, trigger.direction):
        return None
    coupons = tuple(
        Coupon(observation.day, observation.payment_date, amount or 0.0, level, days, ceiling)
        for observation, amount, level, days, ceiling in zip(
            paid.observations, paid.amounts, paid.levels, shares, paid.ceilings, strict=True
        )
    )
    has_trigger = any(level is not None for level in paid.levels)
    return Coupons(coupons, trigger if has_trigger else None, memory)


def _tell_missing(parts: TradeParts, series: AllSeries, number: int, rows: dict[int, object]) -> None:
    fault = Fault(
        "no-dates",
        "coupons without dates of purpose coupon",
        "their dates and amounts in the table schedules or schedule_rules",
        "Add them under the same trade_id and feature, or delete the row.",
    )
    found = rows.get(number)
    if found is not None:
        parts.tell(COUPONS, found.number, "feature", fault)  # type: ignore[attr-defined]
    elif (Purpose.ACCRUAL, number) in series.first_rows:
        table, row = series.first_rows[Purpose.ACCRUAL, number]
        parts.tell(table, row, "purpose", fault)


def _shares(parts: TradeParts, paid: Series, accrual: Series | None) -> list[tuple[date, ...]] | None:
    """The accrual dates of each coupon: those after the coupon before it, up to its own day."""
    if accrual is None:
        return [()] * len(paid.days)
    days = accrual.days
    if days[-1] > paid.days[-1]:
        words = f"the accrual date {days[-1]}, after the last coupon of {paid.days[-1]}"
        fault = Fault("dates-out-of-order", words, "a coupon after every accrual date", "Correct one of the two.")
        parts.tell(accrual.table, accrual.rows[-1], accrual.column, fault)
        return None
    cuts = [0, *(bisect_left(days, date.fromordinal(day.toordinal() + 1)) for day in paid.days)]
    shares = [days[first:last] for first, last in pairwise(cuts)]
    for share, day, row in zip(shares, paid.days, paid.rows, strict=True):
        if not share:
            words = f"the coupon of {day} without accrual dates since the coupon before it"
            mend = "Add dates of purpose accrual, or give this coupon a feature number of its own."
            parts.tell(paid.table, row, paid.column, Fault("no-dates", words, "accrual dates before it", mend))
            return None
    return shares


def _ranges_fit(parts: TradeParts, paid: Series, accrues: bool, direction: Direction) -> bool:
    """Whether levels and ceilings make ranges, and are there where they must be."""
    told: set[int] = set()
    for row, level, ceiling in zip(paid.rows, paid.levels, paid.ceilings, strict=True):
        if row in told:
            continue
        count = len(parts.issues)
        if accrues and level is None:
            parts.tell(paid.table, row, "level", blank_cell("the coupon accrues"))
        if ceiling is not None and not accrues:
            parts.tell(paid.table, row, "ceiling", unwanted(ceiling, "coupons with accrual dates", "the schedules"))
        elif ceiling is not None and direction is not Direction.UP:
            mend = "Give the range from its lower end, with the direction up in the table coupons."
            fault = Fault("terms-do-not-fit", number_in_words(ceiling), "a blank cell, as the trigger looks down", mend)
            parts.tell(paid.table, row, "ceiling", fault)
        elif ceiling is not None and level is not None and ceiling <= level:
            expected = f"a number above the level {number_in_words(level)}"
            fault = Fault("terms-do-not-fit", number_in_words(ceiling), expected, "Correct one of the two.")
            parts.tell(paid.table, row, "ceiling", fault)
        if len(parts.issues) > count:
            told.add(row)
    return not told
