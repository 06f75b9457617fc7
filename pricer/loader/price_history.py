"""Past levels in long form: one row per day and underlying or currency pair."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from datetime import date

from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.loader.faults import Fault, number_in_words
from pricer.loader.findings import Findings
from pricer.loader.table import UNREAD, Table
from pricer.loader.text import misspelt, quoted
from pricer.loader.underlying_rows import PriceHistoryRow
from pricer.market.calendars import is_business_day
from pricer.market.correlation_estimate import HistoryRules

#: Levels older than this many business days are no longer those of the market.
OLD_HISTORY_DAYS = 5


@dataclass(frozen=True, slots=True)
class PriceHistory:
    """Levels by id and date, each with the row that it stands in."""

    table: Table[PriceHistoryRow]
    levels: Mapping[str, Mapping[date, tuple[float, int]]]
    first_rows: Mapping[str, int]

    def place(self, name: str) -> Place | None:
        """The cell of an id's first level."""
        return self.table.place(self.first_rows[name], "underlying") if name in self.first_rows else None

    def last_levels(self, valuation_date: date) -> dict[str, tuple[date, float]]:
        """Day and level of the last row of each id, unless it is old."""
        last = {name: max(levels) for name, levels in self.levels.items() if levels}
        return {
            name: (day, self.levels[name][day][0])
            for name, day in last.items()
            if not is_old(day, valuation_date, HistoryRules().calendar)
        }


def is_old(last: date, valuation_date: date, calendar: str) -> bool:
    """Whether more than ``OLD_HISTORY_DAYS`` business days passed from ``last`` to the valuation date."""
    day, passed = last, 0
    while passed <= OLD_HISTORY_DAYS and day < valuation_date:
        day = date.fromordinal(day.toordinal() + 1)
        passed += is_business_day(calendar, day)
    return passed > OLD_HISTORY_DAYS


def read_price_history(
    table: Table[PriceHistoryRow], known: Collection[str], valuation_date: date, findings: Findings
) -> PriceHistory:
    """The usable levels of ``known`` ids up to the valuation date.

    A level that cannot be read, or of which there are two on one day, costs itself: it is missing.
    """
    history: dict[str, dict[date, tuple[float, int]]] = {}
    first_rows: dict[str, int] = {}
    ignored: dict[str, list[int]] = {}
    later: list[tuple[int, date]] = []
    doubtful: set[tuple[str, date]] = set()
    for row in table.rows:
        findings.add(row.issues)
        name = row.get("underlying")
        if name is UNREAD:
            continue
        if name not in known:
            ignored.setdefault(name, []).append(row.number)
            continue
        first_rows.setdefault(name, row.number)
        if row.value is None:
            continue
        day, level = row.value.date, row.value.level
        if day > valuation_date:
            later.append((row.number, day))
            continue
        own = history.setdefault(name, {})
        if day in own and own[day][0] != level:
            doubtful.add((name, day))
            findings.add([table.issue(row.number, "level", _second(name, day, level, own[day]))])
        else:
            own.setdefault(day, (level, row.number))
    for name, day in doubtful:
        del history[name][day]
    findings.add(_unknown(table, name, numbers, known) for name, numbers in ignored.items())
    if later:
        findings.add([_after(table, later, valuation_date)])
    return PriceHistory(table, history, first_rows)


def _second(name: str, day: date, level: float, other: tuple[float, int]) -> Fault:
    found = f"{number_in_words(level)} for {name} on {day}, but {number_in_words(other[0])} in row {other[1]}"
    return Fault("repeated-level", found, "one level per day", "Both are left out. Delete the wrong one.")


def _unknown(table: Table[PriceHistoryRow], name: str, numbers: Sequence[int], known: Collection[str]) -> Issue:
    more = f" (and {len(numbers) - 1} more rows)" if len(numbers) > 1 else ""
    guess = misspelt(name, known)
    mend = "Not used. Add it to the market, or delete these rows."
    if guess is not None:
        mend = f"Did you mean {quoted(guess)}? Correct the id: these levels are missing."
    expected = "an underlying or a currency pair of the market"
    fault = Fault("unknown-underlying", f"{quoted(name)}{more}", expected, mend)
    return table.issue(numbers[0], "underlying", fault)


def _after(table: Table[PriceHistoryRow], later: Sequence[tuple[int, date]], valuation_date: date) -> Issue:
    more = f" (and {len(later) - 1} more rows)" if len(later) > 1 else ""
    found, expected = f"the date {later[0][1]}{more}", f"a date up to the valuation date {valuation_date}"
    fault = Fault("level-after-valuation", found, expected, "Ignored. Delete the rows, or correct the valuation date.")
    return table.issue(later[0][0], "date", fault, Severity.WARNING)
