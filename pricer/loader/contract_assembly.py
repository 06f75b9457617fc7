"""From everything the tables say of one trade to its contract."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date
from typing import Any

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.contract import Contract
from pricer.contracts.feature import Feature
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile
from pricer.contracts.redemption import Redemption
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.core.issues import Severity
from pricer.loader.barrier_assembly import barriers_of
from pricer.loader.book_models import BARRIERS, CONSTITUENTS, WRITERS
from pricer.loader.book_rows import AnyTradeRow, ConstituentRow, NoteRow
from pricer.loader.call_assembly import calls_of, exercises_of
from pricer.loader.coupon_assembly import coupons_of
from pricer.loader.faults import Fault, blank_cell, unwanted
from pricer.loader.schedule_rows import Purpose
from pricer.loader.series import AllSeries, all_series
from pricer.loader.statistic_assembly import statistic_of
from pricer.loader.table import UNREAD
from pricer.loader.trade_parts import TradeParts
from pricer.loader.trade_words import EUROPEAN_OPTION, OPTION, PERFORMANCE, PRICE, SHORT


def contract_of(parts: TradeParts) -> EuropeanOption | Contract | None:
    """The trade's contract; None where something is wrong with it, all of which is told to ``parts``."""
    if parts.get("product") == EUROPEAN_OPTION:
        _refuse_features(parts)
        return european_option(parts) if parts.is_sound else None
    series = all_series(parts)
    levels_are_sound = _check_references(parts, series)
    writer = _writer(parts)
    row, legs = parts.terms, parts.underlyings
    if row is None or any(leg is None for leg in legs) or not parts.is_sound:
        return None
    aggregate = aggregate_of(row, legs)
    payout = redemption_of(row) if isinstance(row, NoteRow) else profile_of(row)
    statistic = statistic_of(parts, series, aggregate)
    features: list[Feature[Any]] = [
        *coupons_of(parts, series, aggregate),
        *calls_of(parts, series, aggregate),
        *exercises_of(parts, series, aggregate, payout),
        *barriers_of(parts, series, aggregate, payout),
    ]
    levels = _levels(parts, series)
    _check_numbers(parts, series)
    if levels.setting_dates:
        _check_after_references(parts, series, levels.setting_dates[-1], features)
    if not levels_are_sound or statistic is None or not parts.is_sound:
        return None
    expiry = Observation(row.expiry_date, parts.paid_after(row.expiry_date))
    try:
        contract = Contract(levels, statistic, payout, expiry, tuple(features), writer)
        plain = None if levels.reference_dates else contract.as_european()
    except ValueError as unfit:
        fault = Fault("terms-do-not-fit", str(unfit), "terms that make one contract", "Correct the rows of this trade.")
        parts.tell_trade("product", fault)
        return None
    return plain or contract


def european_option(parts: TradeParts) -> EuropeanOption:
    """The plain option of a sound row."""
    row, legs = parts.terms, parts.underlyings
    return EuropeanOption(
        underlyings=tuple(leg.underlying for leg in legs),
        reference_levels=tuple(leg.initial_fixing or 1.0 for leg in legs),
        aggregate=aggregate_of(row, legs),
        profile=profile_of(row),
        expiry_date=row.expiry_date,
        payment_date=parts.paid_after(row.expiry_date),
        on_performance=parts.on_performance,
        conversion=row.conversion,
    )


def aggregate_of(row: AnyTradeRow, legs: Sequence[ConstituentRow]) -> Aggregate:
    """The aggregate of a trade."""
    n = len(legs)
    weights = tuple(leg.weight for leg in legs if leg.weight is not None)
    match row.aggregate:
        case AggregateKind.WEIGHTED_SUM:
            return Aggregate.weighted_sum(weights)
        case AggregateKind.GEOMETRIC:
            return Aggregate.geometric(weights)
        case AggregateKind.BEST_OF:
            return Aggregate.best_of(n, row.cash_level)
        case AggregateKind.WORST_OF:
            return Aggregate.worst_of(n, row.cash_level)
        case AggregateKind.KTH_BEST:
            return Aggregate.kth_best(row.rank or 1, n)
        case AggregateKind.RANK_WEIGHTED:
            return Aggregate.rank_weighted(row.rank_weights or ())


def profile_of(row: Any) -> Profile:
    """The profile of an option."""
    unset = Profile(row.profile)
    return Profile(
        kind=row.profile,
        strike=unset.strike if row.strike is None else row.strike,
        cash_amount=unset.cash_amount if row.cash_amount is None else row.cash_amount,
        floor=row.floor,
        cap=row.cap,
    )


def redemption_of(row: NoteRow) -> Redemption:
    """What a note redeems."""
    return Redemption(
        1.0 if row.capital is None else row.capital,
        row.put_strike,
        1.0 if row.leverage is None else row.leverage,
        row.call_strike,
        1.0 if row.participation is None else row.participation,
        row.floor,
        row.cap,
    )


def _levels(parts: TradeParts, series: AllSeries) -> Levels:
    legs = parts.underlyings
    names, conversion = tuple(leg.underlying for leg in legs), parts.get("conversion")
    if not parts.on_performance:
        return Levels.of_prices(names, conversion)
    references = series.get(Purpose.REFERENCE)
    known = tuple(leg.initial_fixing for leg in legs)
    dates = () if references is None else references.days
    return Levels(names, None if None in known else known, dates, True, conversion)


def _check_references(parts: TradeParts, series: AllSeries) -> bool:
    """Initial fixings are given for all underlyings, or set for all by dates; anything else is told."""
    count = len(parts.issues)
    key = Purpose.REFERENCE, 1
    level = parts.get("underlying_level")
    if key in series.first_rows and level == PRICE:
        table, row = series.first_rows[key]
        words = "dates of purpose reference of a price option"
        mend = "Delete the dates, or correct the trade's underlying_level."
        parts.tell(table, row, "purpose", Fault("terms-do-not-fit", words, "a performance option", mend))
    fixings = [leg.get("initial_fixing") for leg in parts.legs]
    if level == PERFORMANCE:
        some = any(fixing is not None and fixing is not UNREAD for fixing in fixings)
        for leg, fixing in zip(parts.legs, fixings, strict=True):
            if fixing is not None:
                continue
            if some:
                because = "the trade's other underlyings have one"
            elif not series.is_given(*key):
                because = "the trade has no dates of purpose reference that set it"
            else:
                continue
            parts.tell(CONSTITUENTS, leg.number, "initial_fixing", blank_cell(because))
    return len(parts.issues) == count


def _check_after_references(parts: TradeParts, series: AllSeries, last: date, features: list[Feature[Any]]) -> None:
    """Nothing is observed on a performance before its references are set."""
    expected = f"a date from {last} on, when the references are set"
    told = False
    for (purpose, _), found in series.by_key.items():
        if purpose in (Purpose.REFERENCE, Purpose.EXERCISE) or found.days[0] >= last:
            continue
        told = True
        fault = Fault("dates-out-of-order", f"the date {found.days[0]}", expected, "Correct one of the two dates.")
        column = "date" if found.column == "date" else "start_date"
        parts.tell(found.table, found.rows[0], column, fault)
    early = [day for feature in features for day in feature.dates[:1] if day < last]
    if early and not told and parts.rows(BARRIERS):
        fault = Fault("dates-out-of-order", f"the date {min(early)}", expected, "Correct one of the two dates.")
        parts.tell(BARRIERS, parts.rows(BARRIERS)[0].number, "start_date", fault)


def _check_numbers(parts: TradeParts, series: AllSeries) -> None:
    """References and statistics are one of a kind: their dates have no number but 1."""
    for (purpose, number), (table, row) in series.first_rows.items():
        if purpose in (Purpose.REFERENCE, Purpose.OBSERVATION) and number != 1:
            fault = unwanted(str(number), "barriers, calls, coupons and exercises", "the purpose")
            parts.tell(table, row, "feature", fault)


def _writer(parts: TradeParts) -> Writer | None:
    rows = parts.rows(WRITERS)
    if len(rows) > 1:
        fault = Fault("repeated-writer", f"a second writer, as in row {rows[0].number}", "one writer", "Delete one.")
        parts.tell(WRITERS, rows[1].number, "trade_id", fault)
    row = rows[0].value if rows else None
    if row is None:
        return None
    _warn_of_own_default(parts, rows[0].number)
    structural = None
    if row.assets is not None:
        structural = StructuralDefault(row.assets, row.liabilities, row.deadweight_cost_decimal or 0.0)
    return Writer(row.writer, row.recovery_decimal, structural, row.defaulted_on)


def _warn_of_own_default(parts: TradeParts, place: int) -> None:
    """A short trade is paid by the desk, whose own default is seldom what is meant."""
    if parts.get("direction") != SHORT:
        return
    words = "the writer of a trade that the desk is short, and pays itself"
    mend = "What the desk owes counts less for the writer's default; delete the row unless its own default is meant."
    fault = Fault("writer-of-short-trade", words, "writers of trades that the desk is long", mend)
    parts.tell(WRITERS, place, "writer", fault, Severity.WARNING)


def _refuse_features(parts: TradeParts) -> None:
    """A european option has no rows beyond its constituents."""
    for table, rows in parts.features.items():
        if rows:
            words = f"a european option with rows in the table {table}"
            mend = f"Write {OPTION}, or delete these rows."
            parts.tell_trade("product", Fault("terms-do-not-fit", words, f"the product {OPTION}", mend))
    given = parts.tables[CONSTITUENTS].header.positions
    for column in ("barrier_level", "variance_weight"):
        for leg in parts.legs if column in given else ():
            value = leg.get(column)
            if value is not None and value is not UNREAD:
                fault = unwanted(value, "options and notes on a path", "the trade's product")
                parts.tell(CONSTITUENTS, leg.number, column, fault)
