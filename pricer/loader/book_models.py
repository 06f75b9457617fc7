"""The tables of a book, by name: their row models, and which of them a book may lack."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from pricer.loader.barrier_rows import BarrierRow
from pricer.loader.book_rows import ConstituentRow, EuropeanOptionRow, trade_columns
from pricer.loader.call_rows import CallRow
from pricer.loader.columns import Column, TableRow, columns_of
from pricer.loader.coupon_rows import CouponRow
from pricer.loader.exercise_rows import ExerciseRow
from pricer.loader.schedule_rows import ScheduleRow
from pricer.loader.schedule_rule_rows import ScheduleRuleRow
from pricer.loader.writer_rows import WriterRow

TRADES, CONSTITUENTS = "trades", "constituents"
SCHEDULES, RULES = "schedules", "schedule_rules"
BARRIERS, CALLS, COUPONS, EXERCISES, WRITERS = "barriers", "calls", "coupons", "exercises", "writers"

#: Tables that a book may lack, keyed by trade_id. A new feature adds its row model here.
FEATURE_ROWS: Mapping[str, type[TableRow]] = MappingProxyType(
    {
        SCHEDULES: ScheduleRow,
        RULES: ScheduleRuleRow,
        BARRIERS: BarrierRow,
        CALLS: CallRow,
        COUPONS: CouponRow,
        EXERCISES: ExerciseRow,
        WRITERS: WriterRow,
    }
)

#: Every column of every table of a book.
BOOK_COLUMNS: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        TRADES: trade_columns(),
        CONSTITUENTS: columns_of(ConstituentRow),
        **{name: columns_of(model) for name, model in FEATURE_ROWS.items()},
    }
)

#: Columns that a book of European options has no use for.
RARE_COLUMNS: Mapping[str, frozenset[str]] = MappingProxyType(
    {
        TRADES: frozenset(BOOK_COLUMNS[TRADES]) - frozenset(columns_of(EuropeanOptionRow)),
        CONSTITUENTS: frozenset({"barrier_level", "variance_weight"}),
    }
)
