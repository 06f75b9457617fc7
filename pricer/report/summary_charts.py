"""The summary's charts. Bars draw the summary's own tables, the cloud of cross-checks draws the sheet Cross-check."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from pricer.report.cells import put_number, put_text
from pricer.report.chart_area import Area, place
from pricer.report.charts import bar_chart, scatter_chart
from pricer.report.columns import CROSS_CHECK, Kind
from pricer.report.styles import Mark
from pricer.report.table_sheet import HEADING_ROW
from pricer.report.top import Line

if TYPE_CHECKING:
    import pandas
    from openpyxl.chart import Reference
    from openpyxl.worksheet.worksheet import Worksheet

#: Columns of the table of cross-checks that the chart draws where engine and reference agree, and their names there.
_AGREES = {"agrees_lognormal": "agrees, lognormal", "agrees_local_volatility": "agrees, local volatility"}
_VALUE_COLUMN = 4  # of a block table's columns, counted from its name


def add_bars(
    sheet: Worksheet, area: Area, what: str, currency: str, lines: Sequence[Line], first: int, column: int
) -> None:
    """Bars of the value column of the block table whose lines begin at row ``first`` and column ``column``."""
    from openpyxl.chart import Reference

    # Lines without a value come last, before the total.
    bars = [line for line in lines if line.mark is not Mark.TOTAL and math.isfinite(line.numbers[_VALUE_COLUMN - 1])]
    largest = max((abs(line.numbers[_VALUE_COLUMN - 1]) for line in bars), default=0.0)
    if not largest:
        put_text(sheet, area.row, area.column, "There is nothing to draw.", "note")
        return
    last = first + len(bars) - 1
    names = Reference(sheet, min_col=column, min_row=first, max_row=last)
    values = Reference(sheet, min_col=column + _VALUE_COLUMN, min_row=first, max_row=last)
    place(sheet, bar_chart(what, currency, names, values, largest), area)


def add_scatter(sheet: Worksheet, area: Area, source: Worksheet, checks: pandas.DataFrame) -> None:
    """Differences from exact and sampled references in units of their tolerance, over the reference value, by model.

    ``source`` is the sheet that shows ``checks``; its rows may be sorted and filtered: the chart follows.
    """
    from openpyxl.chart import Reference

    clouds = [name for name in (*_AGREES, "differs") if checks[name].notna().any()]
    drawn = checks[checks[clouds].notna().any(axis=1)]
    percents = drawn["reference_percent"].dropna()
    if percents.empty:
        put_text(sheet, area.row, area.column, "No exact or sampled reference could be set beside the engine.", "note")
        return

    def column(name: str) -> Reference:
        number = [c.name for c in CROSS_CHECK].index(name) + 1
        return Reference(source, min_col=number, min_row=HEADING_ROW + 1, max_row=HEADING_ROW + len(checks))

    chart = scatter_chart(
        "engine less reference",
        "reference value (% of notional)",
        "difference (tolerances)",
        x=column("reference_percent"),
        inside={words: column(name) for name, words in _AGREES.items() if name in clouds},
        outside=column("differs") if "differs" in clouds else None,
        limits=_limits(sheet, area, float(percents.min()), float(percents.max())),
    )
    place(sheet, chart, area)


def _limits(sheet: Worksheet, area: Area, lowest: float, highest: float) -> list[tuple[Reference, Reference]]:
    """The ends of the lines at plus and minus one tolerance, written in the cells that the chart covers."""
    from openpyxl.chart import Reference

    first = area.row + 3
    put_text(sheet, first - 1, area.column + 1, "limits drawn (% of notional; tolerances)", "note")
    for i, percent in enumerate((lowest, highest)):
        for j, number in enumerate((percent, 1.0, -1.0)):
            put_number(sheet, first + i, area.column + 1 + j, number, Kind.FIXED)
    x, upper, lower = (
        Reference(sheet, min_col=area.column + 1 + j, min_row=first, max_row=first + 1) for j in range(3)
    )
    return [(x, upper), (x, lower)]
