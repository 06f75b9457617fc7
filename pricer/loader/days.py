"""From a cell to a date: a date cell, or text in ISO form. Forms that can mean two days are refused."""

from __future__ import annotations

import calendar
import re
from dataclasses import dataclass
from datetime import date, datetime

from pricer.loader.faults import Fault, Reading, in_words
from pricer.loader.kinds import plain_text, refuse_unusable
from pricer.loader.sheets import Cell
from pricer.loader.text import quoted

#: Dates outside are typing mistakes, not trades.
FIRST_DATE, LAST_DATE = date(1970, 1, 1), date(2150, 12, 31)

_ISO_DATE = re.compile(r"([0-9]{4}-[0-9]{2}-[0-9]{2})(?:[T ]([0-9:.]+)Z?)?")
_SLASHED = re.compile(r"([0-9]{1,2})[/.\-]([0-9]{1,2})[/.\-]([0-9]{4})")


@dataclass(frozen=True, slots=True)
class Day:
    """A date: a date cell, or text in ISO form."""

    def words(self) -> str:
        return "a date such as 2026-09-18"

    def read(self, cell: Cell, reading: Reading) -> date:
        if isinstance(cell, str):
            day = _day_from_text(plain_text(cell, reading))
        else:
            refuse_unusable(cell)
            if isinstance(cell, datetime):
                raise _with_time(in_words(cell), cell.date())
            if not isinstance(cell, date):
                raise Fault("not-a-date", in_words(cell), mend=_mend_of_number(cell))
            day = cell
        if not FIRST_DATE <= day <= LAST_DATE:
            raise Fault(
                "out-of-range", f"the date {day}", f"a date from {FIRST_DATE} to {LAST_DATE}", "Check the year."
            )
        return day


def _day_from_text(text: str) -> date:
    if match := _ISO_DATE.fullmatch(text):
        try:
            day = date.fromisoformat(match[1])
        except ValueError:
            raise Fault("not-a-date", quoted(text), mend="There is no such day; correct it.") from None
        if match[2] and match[2].strip("0:."):
            raise _with_time(quoted(text), day)
        return day
    if match := _SLASHED.fullmatch(text):
        readings = [day for day in (_day(match[3], match[2], match[1]), _day(match[3], match[1], match[2])) if day]
        if len(set(readings)) == 2:
            mend = f"Write {readings[0]} or {readings[1]}: the day and the month may be either."
            raise Fault("ambiguous-date", quoted(text), mend=mend)
        if readings:
            raise Fault("not-a-date", quoted(text), mend=f"Write {readings[0]}.")
    raise Fault("not-a-date", quoted(text), mend="Write year-month-day with hyphens, e.g. 2026-09-18.")


def _day(year: str, month: str, day: str) -> date | None:
    y, m, d = int(year), int(month), int(day)
    return date(y, m, d) if 1 <= m <= 12 and y >= 1 and 1 <= d <= calendar.monthrange(y, m)[1] else None


def _with_time(found: str, day: date) -> Fault:
    return Fault("time-of-day", found, "a date without a time of day", f"Write {day}.")


def _mend_of_number(cell: Cell) -> str:
    """What a number in a date column may have meant."""
    if isinstance(cell, float) and 19_700_101.0 <= cell <= 21_501_231.0 and cell == int(cell):
        digits = str(int(cell))
        if day := _day(digits[:4], digits[4:6], digits[6:]):
            return f"Did you mean {day}? Write it so."
    return "Format the cell as a date, or write the date as text, e.g. 2026-09-18."
