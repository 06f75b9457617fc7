"""Automatic calls, and rights to end a trade early."""

from __future__ import annotations

from datetime import date

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.feature import Payout
from pricer.contracts.observation import Observation
from pricer.core.issues import Severity
from pricer.loader.book_models import CALLS, EXERCISES
from pricer.loader.exercise_rows import ExerciseRow
from pricer.loader.faults import Fault, blank_cell, number_in_words, unwanted
from pricer.loader.schedule_rows import Purpose
from pricer.loader.series import AllSeries, Series
from pricer.loader.table import UNREAD
from pricer.loader.trade_parts import TradeParts
from pricer.loader.triggers import HIGHEST_REDEMPTION, by_number, check_amounts, check_levels, trigger_of

#: A note called at less than this share of its capital pays a premium where the whole redemption belongs.
LEAST_REDEMPTION = 0.5


def calls_of(parts: TradeParts, series: AllSeries, aggregate: Aggregate) -> list[Autocall]:
    """The trade's automatic calls by number; those with a fault are told and left out."""
    rows = by_number(parts, CALLS)
    calls = []
    for number in sorted({*rows, *series.numbers(Purpose.CALL)}):
        dates, row = series.get(Purpose.CALL, number), rows.get(number)
        if dates is None and row is not None and not series.is_given(Purpose.CALL, number):
            parts.tell(CALLS, row.number, "feature", _no_dates("calls", Purpose.CALL))
        if dates is None or (number in rows and row is None):
            continue
        trigger = trigger_of(aggregate, None if row is None else row.value)
        check_levels(parts, trigger, dates.levels, dates.table, dates.rows)
        amounts = _redemptions(parts, dates)
        if amounts is not None:
            levels = tuple(level or 0.0 for level in dates.levels)
            calls.append(Autocall(dates.observations, trigger, levels, amounts))
    return calls


def exercises_of(parts: TradeParts, series: AllSeries, aggregate: Aggregate, payout: Payout) -> list[Exercise]:
    """The trade's rights by number; those with a fault are told and left out."""
    rows = by_number(parts, EXERCISES)
    rights = []
    for number in sorted({*rows, *series.numbers(Purpose.EXERCISE)}):
        row, dates = rows.get(number), series.get(Purpose.EXERCISE, number)
        if number not in rows:
            table, first = series.first_rows[Purpose.EXERCISE, number]
            fault = Fault(
                "no-feature",
                "dates to exercise a right that the table exercises lacks",
                "a row there that says whose right it is",
                "Add it under the same trade_id and feature, or delete the dates.",
            )
            parts.tell(table, first, "purpose", fault)
        elif row is not None:
            right = _exercise(parts, row.value, row.number, dates, series, aggregate, payout)
            rights += [] if right is None else [right]
    return rights


def _exercise(
    parts: TradeParts,
    row: ExerciseRow,
    place: int,
    dates: Series | None,
    series: AllSeries,
    aggregate: Aggregate,
    payout: Payout,
) -> Exercise | None:
    given = series.is_given(Purpose.EXERCISE, row.feature)
    if dates is None and given:
        return None
    if dates is None and row.style is ExerciseStyle.BERMUDAN:
        parts.tell(EXERCISES, place, "feature", _no_dates("a right", Purpose.EXERCISE))
        return None
    if dates is not None and row.start_date is not None:
        parts.tell(EXERCISES, place, "start_date", unwanted(row.start_date, "rights without dates", "the schedules"))
        return None
    rights = _window(parts, row, place) if dates is None else dates.observations
    if rights is None:
        return None
    amounts: tuple[float, ...] | None = None
    if row.by is ExercisedBy.ISSUER:
        amounts = _issuers_capital(parts, place, len(rights)) if dates is None else _redemptions(parts, dates)
        if amounts is None:
            return None
    elif dates is not None and any(amount is not None for amount in dates.amounts):
        at = next(i for i, amount in enumerate(dates.amounts) if amount is not None)
        fault = unwanted(dates.amounts[at], "rights of the issuer", "the table exercises")
        parts.tell(dates.table, dates.rows[at], "amount", fault)
        return None
    used = row.exercised_date
    exercised = None if used is None else Observation(used, row.exercised_payment_date or parts.paid_after(used))
    if used is not None and not _was_allowed(used, rights, row.style):
        expected = "a date of purpose exercise" if row.style is ExerciseStyle.BERMUDAN else _between(rights)
        fault = Fault("dates-out-of-order", f"the date {used}", expected, "Correct the date, or those of the right.")
        parts.tell(EXERCISES, place, "exercised_date", fault)
        return None
    issuer = amounts is not None
    return Exercise(row.by, rights, aggregate, None if issuer else payout, amounts, row.style, exercised)


def _window(parts: TradeParts, row: ExerciseRow, place: int) -> tuple[Observation, ...] | None:
    """The first and the last day of an american right that has no dates of its own."""
    expiry = parts.get("expiry_date")
    if parts.row.get("trade_date") is UNREAD:
        return None
    start = row.start_date or parts.get("trade_date")
    if start is None:
        parts.tell(EXERCISES, place, "start_date", blank_cell("the trade has no trade date"))
        return None
    if start > expiry:
        expected = f"a date up to the expiry date {expiry}"
        fault = Fault("dates-out-of-order", f"the date {start}", expected, "Correct one of the two dates.")
        parts.tell(EXERCISES, place, "start_date", fault)
        return None
    return tuple(Observation(day, parts.paid_after(day)) for day in sorted({start, expiry}))


def _was_allowed(used: date, rights: tuple[Observation, ...], style: ExerciseStyle) -> bool:
    if style is ExerciseStyle.BERMUDAN:
        return any(right.day == used for right in rights)
    return rights[0].day <= used <= rights[-1].day


def _between(rights: tuple[Observation, ...]) -> str:
    return f"a date from {rights[0].day} to {rights[-1].day}"


def _issuers_capital(parts: TradeParts, place: int, n: int) -> tuple[float, ...] | None:
    if not parts.is_note:
        parts.tell(EXERCISES, place, "by", _no_dates("a right of the issuer", Purpose.EXERCISE))
        return None
    return (_capital(parts),) * n


def _redemptions(parts: TradeParts, dates: Series) -> tuple[float, ...] | None:
    """What a note is redeemed at: its capital where nothing is said; a blank amount of an option is told."""
    check_amounts(parts, dates.amounts, HIGHEST_REDEMPTION, dates.table, dates.rows)
    capital = _capital(parts)
    amounts: list[float] = []
    doubted: set[int] = set()
    for row, amount in zip(dates.rows, dates.amounts, strict=True):
        if amount is None and not parts.is_note:
            parts.tell(dates.table, row, "amount", blank_cell("an option has no capital to redeem"))
            return None
        if amount is not None and parts.is_note and amount < LEAST_REDEMPTION * capital and row not in doubted:
            doubted.add(row)
            mend = f"Used as given: the note ends and pays this alone. Was {number_in_words(capital)} to be added?"
            words = f"a redemption of {number_in_words(amount)}"
            note = Fault("small-redemption", words, f"about the capital {number_in_words(capital)} or more", mend)
            parts.tell(dates.table, row, "amount", note, Severity.WARNING)
        amounts.append(capital if amount is None else amount)
    return tuple(amounts)


def _capital(parts: TradeParts) -> float:
    capital = parts.get("capital")
    return 1.0 if capital is None else float(capital)


def _no_dates(owner: str, purpose: Purpose) -> Fault:
    return Fault(
        "no-dates",
        f"{owner} without dates of purpose {purpose}",
        "the dates in the table schedules or schedule_rules",
        "Add them under the same trade_id and feature, or delete the row.",
    )
