"""The sheets of contracts with a past: what is due, how long trades live, what was booked."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING

from pricer.report import contract_columns as columns
from pricer.report.contract_frames import Due
from pricer.report.fitting import Table
from pricer.report.styles import Mark
from pricer.run.outcome import Outcome

if TYPE_CHECKING:
    import pandas

_DAYS_SHOWN = 24
EVENTS, LIFE, CONTRACTS = "Events", "Life", "Contracts"
_LIFE_NOTE = (
    "One row a day on which a live contract may end, and one for expiry. Probabilities under the pricing measure of "
    "the leading model. Long series of days are told by month; life.csv has every one."
)
_CONTRACTS_NOTE = (
    "Part by part, to be checked against the confirmation; levels and amounts of performances in percent, prices as "
    "they are. Every single date: contract_dates.csv."
)


def events_table(outcome: Outcome, frame: pandas.DataFrame) -> Table:
    """What is due in the days ahead, tomorrow's marked."""
    soon = frame["due"] != Due.LATER
    counts = frame["due"].value_counts()
    parts = [f"{kind} {int(counts[kind]):,}" for kind in Due if kind in counts]
    note = f"{'; '.join(parts)}. Marked: all but the later ones. Within a day triggers that are met or near come first."
    return Table(
        EVENTS,
        "Events",
        "" if frame.empty else note,
        columns.EVENTS,
        frame,
        [Mark.LOOK if is_soon else Mark.NONE for is_soon in soon],
        empty="Nothing is due in the days ahead.",
        frozen=1,
    )


def by_month(life: pandas.DataFrame) -> pandas.DataFrame:
    """The table of lives with long series of days told month by month; without the errors, which do not add up."""
    import pandas

    parts = []
    for _, mine in life.groupby("trade_id", sort=False):
        if len(mine) <= _DAYS_SHOWN:
            parts.append(mine)
            continue
        chances, expiry = mine.iloc[:-1], mine.iloc[-1:]
        months = chances.groupby([chances["day"].dt.to_period("M"), "what"], sort=False)
        month = months.last().reset_index(level="what")
        month["probability_percent"] = months["probability_percent"].sum().to_numpy()
        month["probability_standard_error_percent"] = math.nan
        month["what"] += ", in the month up to"
        parts.append(pandas.concat([month.reset_index(drop=True)[list(mine)], expiry]))
    return pandas.concat(parts, ignore_index=True) if parts else life


def contract_table_sheets(outcome: Outcome, frames: Mapping[str, pandas.DataFrame]) -> list[Table]:
    """Lives and terms; none for a book of European options alone."""
    life, contracts = by_month(frames["life"]), frames["contracts"]
    tables = []
    if len(life):
        marks = [Mark.NONE] * len(life)
        tables.append(Table(LIFE, LIFE, _LIFE_NOTE, columns.LIFE, life, marks, empty=""))
    if len(contracts):
        marks = [Mark.NONE] * len(contracts)
        tables.append(Table(CONTRACTS, CONTRACTS, _CONTRACTS_NOTE, columns.CONTRACTS, contracts, marks, empty=""))
    return tables
