"""Barriers: when they are watched, at which levels, and what is paid while the payoff is not in force."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta
from typing import Any

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import NOTHING, Barrier, BarrierKind
from pricer.contracts.feature import Payout
from pricer.contracts.observation import Observation
from pricer.contracts.redemption import Redemption
from pricer.loader.barrier_rows import OVER_TIME, BarrierRow, Monitoring, RebatePaid
from pricer.loader.book_models import BARRIERS, CONSTITUENTS
from pricer.loader.faults import Fault, blank_cell, unwanted
from pricer.loader.schedule_rows import Purpose
from pricer.loader.series import AllSeries, business_days
from pricer.loader.table import UNREAD
from pricer.loader.trade_parts import TradeParts
from pricer.loader.trigger_columns import WatchedOn
from pricer.loader.triggers import HIGHEST_REDEMPTION, by_number, check_amounts, check_levels, trigger_of


def barriers_of(parts: TradeParts, series: AllSeries, aggregate: Aggregate, payout: Payout) -> list[Barrier]:
    """The trade's barriers by number; those with a fault are told and left out."""
    rows = by_number(parts, BARRIERS)
    barriers = []
    for number in sorted({*rows, *series.numbers(Purpose.BARRIER)}):
        row = rows.get(number)
        if number not in rows:
            table, first = series.first_rows[Purpose.BARRIER, number]
            words = "dates of a barrier that the table barriers lacks"
            mend = "Add it under the same trade_id and feature, or delete the dates."
            parts.tell(table, first, "purpose", Fault("no-feature", words, "a row there", mend))
        elif row is not None:
            barrier = _barrier(parts, row.value, row.number, series, aggregate, payout)
            barriers += [] if barrier is None else [barrier]
    _check_own_levels(parts, rows)
    return barriers


def without_put(payout: Redemption) -> Redemption:
    """What a note redeems while its put is not in force."""
    return replace(payout, put_strike=None, leverage=1.0)


def _barrier(
    parts: TradeParts, row: BarrierRow, place: int, series: AllSeries, aggregate: Aggregate, payout: Payout
) -> Barrier | None:
    watched = _watched(parts, row, place, series)
    if watched is None:
        return None
    schedule, by_date = watched
    leveled = _levels(parts, row, place, by_date, len(schedule))
    if leveled is None:
        return None
    levels, scales = leveled
    trigger = trigger_of(aggregate, row, scales)
    if row.level is not None:
        check_levels(parts, trigger, (row.level,), BARRIERS, (place,))
    elif by_date is not None and scales is None:
        dates = series.by_key[Purpose.BARRIER, row.feature]
        check_levels(parts, trigger, levels, dates.table, dates.rows)
    check_amounts(parts, (row.rebate,), HIGHEST_REDEMPTION, BARRIERS, (place,), "rebate")
    hit = row.recorded_hit_date
    if hit is not None and not schedule[0].day <= hit <= schedule[-1].day:
        expected = f"a date from {schedule[0].day} to {schedule[-1].day}, when the barrier is watched"
        fault = Fault("dates-out-of-order", f"the date {hit}", expected, "Correct the date, or those of the barrier.")
        parts.tell(BARRIERS, place, "recorded_hit_date", fault)
        return None
    if hit is not None and row.monitoring is not Monitoring.CONTINUOUS and hit not in {o.day for o in schedule}:
        mend = "Correct the date, or clear the cell: the fixings of the days that are watched tell a hit."
        expected = "a day on which the barrier is watched, as it is not watched at all times"
        parts.tell(BARRIERS, place, "recorded_hit_date", Fault("terms-do-not-fit", f"the date {hit}", expected, mend))
        return None
    instead, at_hit = _instead(parts, row, payout)
    if at_hit is None and instead == payout:
        words = f"a {row.kind} that changes nothing: the trade pays the same with and without a hit"
        mend = "Enter the note's put_strike in the table trades, or delete the row."
        expected = "a note with a put, which the barrier brings or takes away, or a barrier with a rebate"
        parts.tell(BARRIERS, place, "kind", Fault("terms-do-not-fit", words, expected, mend))
        return None
    return Barrier(
        row.kind,
        trigger,
        schedule,
        levels,
        instead,
        at_hit,
        row.monitoring is Monitoring.CONTINUOUS,
        None if hit is None else Observation(hit, row.recorded_payment_date or parts.paid_after(hit)),
        row.clear_until,
    )


def _watched(
    parts: TradeParts, row: BarrierRow, place: int, series: AllSeries
) -> tuple[tuple[Observation, ...], tuple[float | None, ...] | None] | None:
    """The observations, and their own levels where the schedules have them."""
    dates, expiry = series.get(Purpose.BARRIER, row.feature), parts.get("expiry_date")
    key = Purpose.BARRIER, row.feature
    if key in series.first_rows and row.monitoring in (Monitoring.EXPIRY, Monitoring.DAILY):
        table, first = series.first_rows[key]
        words = f"dates of a barrier that is watched {'daily' if row.monitoring is Monitoring.DAILY else 'at expiry'}"
        mend = "Delete them, or write dates for its monitoring in the table barriers."
        parts.tell(table, first, "purpose", Fault("terms-do-not-fit", words, "a barrier watched on dates", mend))
        return None
    if dates is not None:
        if row.start_date is not None or row.end_date is not None:
            column = "start_date" if row.start_date is not None else "end_date"
            owner = "barriers without dates in the schedules"
            parts.tell(BARRIERS, place, column, unwanted(row.start_date or row.end_date, owner, "the schedules"))
            return None
        return dates.observations, dates.levels
    if key in series.first_rows:
        return None
    if row.monitoring is Monitoring.EXPIRY:
        return (Observation(expiry, parts.paid_after(expiry)),), None
    if row.monitoring in OVER_TIME:
        every_day = _every_day(parts, row, place, series)
        return None if every_day is None else (every_day, None)
    if series.is_whole:
        words = "a barrier watched on dates, without dates of purpose barrier"
        mend = "Add them under the same trade_id and feature, or write daily, continuous or expiry."
        expected = "the dates in the table schedules or schedule_rules"
        parts.tell(BARRIERS, place, "monitoring", Fault("no-dates", words, expected, mend))
    return None


def _every_day(parts: TradeParts, row: BarrierRow, place: int, series: AllSeries) -> tuple[Observation, ...] | None:
    """The business days of a barrier that is watched over time."""
    expiry, traded = parts.get("expiry_date"), parts.row.get("trade_date")
    observed, settled = parts.observation_calendar, parts.settlement_calendar
    if observed is None or settled is None or traded is UNREAD:
        return None
    references = series.get(Purpose.REFERENCE)
    known = [day for day in (traded, *(() if references is None else references.days)) if day is not None]
    start, end = row.start_date, row.end_date or expiry
    if start is None and not known:
        parts.tell(BARRIERS, place, "start_date", blank_cell("the trade has no trade date"))
        return None
    start = start or max(known) + timedelta(days=1)
    column = "end_date" if row.end_date is not None else "start_date"
    if end > expiry:
        expected = f"a date up to the expiry date {expiry}"
        fault = Fault("dates-out-of-order", f"the date {end}", expected, "Correct one of the two dates.")
        parts.tell(BARRIERS, place, "end_date", fault)
        return None
    try:
        return business_days(start, end, observed, settled, parts.get("settlement_lag_days") or 0)
    except ValueError:
        words = f"a barrier watched from {start} to {end}"
        fault = Fault("dates-out-of-order", words, "at least one business day in between", "Correct one of the two.")
        parts.tell(BARRIERS, place, column, fault)
        return None


def _levels(
    parts: TradeParts, row: BarrierRow, place: int, by_date: tuple[float | None, ...] | None, n: int
) -> tuple[tuple[float, ...], tuple[float, ...] | None] | None:
    """One level per observation; where they are the underlyings' own, ones and the scales that they make."""
    dated = [level for level in by_date or () if level is not None]
    if row.level is not None:
        if dated:
            owner = "barriers without levels in the schedules"
            parts.tell(BARRIERS, place, "level", unwanted(row.level, owner, "the schedules"))
            return None
        return (row.level,) * n, None
    if dated:
        if len(dated) < n:
            parts.tell(BARRIERS, place, "level", blank_cell("some of its dates in the schedules have no level"))
            return None
        return tuple(dated), None
    own = [leg.get("barrier_level") for leg in parts.legs]
    if any(level is UNREAD for level in own):
        return None
    if not any(level is not None for level in own):
        mend = "Enter it here, by date in the table schedules, or by underlying in the table constituents."
        parts.tell(BARRIERS, place, "level", Fault("blank-cell", "a blank cell", "the barrier's level", mend))
        return None
    if row.watched_on is WatchedOn.AGGREGATE:
        words, mend = str(row.watched_on), "Correct it, or enter a level for the aggregate."
        expected = f"{WatchedOn.ANY} or {WatchedOn.EVERY}, as each has a level of its own"
        parts.tell(BARRIERS, place, "watched_on", Fault("terms-do-not-fit", words, expected, mend))
        return None
    if any(level is None for level in own):
        return None  # told by _check_own_levels
    return (1.0,) * n, tuple(own)


def _check_own_levels(parts: TradeParts, rows: dict[int, Any]) -> None:
    """Barrier levels in the table constituents: of all underlyings or of none, and only where a barrier takes them."""
    own = [leg.get("barrier_level") for leg in parts.legs]
    if all(level is None or level is UNREAD for level in own):
        return
    taken = any(row is None or row.value.level is None for row in rows.values())
    for leg, level in zip(parts.legs, own, strict=True):
        if level is None and taken:
            fault = blank_cell("the trade's other underlyings have one")
            parts.tell(CONSTITUENTS, leg.number, "barrier_level", fault)
        elif level is not None and level is not UNREAD and not taken:
            fault = unwanted(level, "trades with a barrier that has no level of its own", "the table barriers")
            parts.tell(CONSTITUENTS, leg.number, "barrier_level", fault)


def _instead(parts: TradeParts, row: BarrierRow, payout: Payout) -> tuple[Payout, float | None]:
    """What is paid at expiry while the payoff is not in force, and at a hit that ends the trade."""
    if row.rebate is None:
        if isinstance(payout, Redemption):
            return without_put(payout), None
        return NOTHING, 0.0 if row.kind is BarrierKind.OUT else None
    if row.rebate_paid is RebatePaid.AT_HIT:
        return NOTHING, row.rebate
    return Redemption(capital=row.rebate), None
