"""Triggers of features, and the sizes that their levels and amounts can have."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import Any

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.trigger import Direction, Trigger
from pricer.loader.barrier_rows import BarrierRow
from pricer.loader.faults import Fault, number_in_words
from pricer.loader.numbers import as_percentage_points
from pricer.loader.series import Numbers
from pricer.loader.trade_parts import TradeParts
from pricer.loader.trigger_columns import FeatureRow, TriggerRow, WatchedOn

#: A level this many times the sum of the weights' sizes is no performance: 100 was typed for 100 %.
HIGHEST_PERFORMANCE = 4.0
#: Amounts per unit beyond these are percentage points typed where a decimal belongs.
HIGHEST_COUPON, HIGHEST_REDEMPTION = 1.0, 3.0


def trigger_of(
    aggregate: Aggregate, row: TriggerRow | BarrierRow | None, scales: tuple[float, ...] | None = None
) -> Trigger:
    """The trigger of a feature's row; without one it looks up, on the aggregate."""
    if row is None:
        return Trigger(Direction.UP, aggregate)
    n = len(aggregate.weights)
    match row.watched_on:
        case WatchedOn.AGGREGATE:
            made = Trigger(row.direction, aggregate, scales)
        case WatchedOn.ANY:
            made = Trigger.any_underlying(row.direction, n, scales)
        case WatchedOn.EVERY:
            made = Trigger.every_underlying(row.direction, n, scales)
    return replace(made, at_level_counts=row.at_level_counts)


def by_number(parts: TradeParts, table: str) -> dict[int, Any]:
    """The rows of a table of features by number, None where one could not be read; repeated numbers are told."""
    found: dict[int, Any] = {}
    first: dict[int, int] = {}
    for row in parts.rows(table):
        number = row.get("feature")
        if not isinstance(number, int):
            continue
        if number in first:
            words = f"number {number} again, as in row {first[number]}"
            mend = "Number them 1, 2 and so on in the column feature, in this table and in the schedules."
            parts.tell(table, row.number, "feature", Fault("repeated-feature", words, "each number once", mend))
            found[number] = None
            continue
        first[number] = row.number
        found[number] = row if isinstance(row.value, FeatureRow) else None
    return found


def check_levels(
    parts: TradeParts, trigger: Trigger, levels: Numbers, table: str, rows: Sequence[int], column: str = "level"
) -> None:
    """Tell levels that no aggregate reaches: below 0 for one that is never, or percentage points of a performance."""
    weights = trigger.aggregate.weights
    limit = HIGHEST_PERFORMANCE * sum(map(abs, weights))
    for row, level in _first_of_each_row(rows, levels):
        if level <= 0.0 and min(weights) >= 0.0:
            because = "no level that it is compared with is below"
            parts.tell(
                table, row, column, Fault("out-of-range", number_in_words(level), "a number above 0", because=because)
            )
        elif parts.on_performance and abs(level) > limit:
            expected = f"a decimal performance (1.00 = 100 %) of at most {limit:g}"
            parts.tell(table, row, column, as_percentage_points(level, expected, limit))


def check_amounts(
    parts: TradeParts, amounts: Numbers, highest: float, table: str, rows: Sequence[int], column: str = "amount"
) -> None:
    """Tell amounts of a performance that are percentage points."""
    if not parts.on_performance:
        return
    for row, amount in _first_of_each_row(rows, amounts):
        if abs(amount) > highest:
            expected = f"a decimal amount (0.08 = 8 %) of at most {highest:g}"
            parts.tell(table, row, column, as_percentage_points(amount, expected, highest))


def _first_of_each_row(rows: Sequence[int], numbers: Numbers) -> Iterator[tuple[int, float]]:
    """The numbers in each row, a rule's first and its farthest."""
    by_row: dict[int, list[float]] = {}
    for row, number in zip(rows, numbers, strict=True):
        if number is not None:
            by_row.setdefault(row, []).append(number)
    for row, found in by_row.items():
        yield row, min(found) if min(found) <= 0.0 else max(found, key=abs)
