"""Where a chart goes on a sheet."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from openpyxl.chart import BarChart, ScatterChart
    from openpyxl.worksheet.worksheet import Worksheet


@dataclass(frozen=True, slots=True)
class Area:
    """Where a chart goes: its upper left cell, and how many rows and columns it covers."""

    row: int
    column: int
    n_rows: int
    n_columns: int


def place(sheet: Worksheet, chart: BarChart | ScatterChart, area: Area) -> None:
    """Anchored to cells at both ends, so that it covers them whatever a program makes of their size."""
    from openpyxl.drawing.spreadsheet_drawing import AnchorMarker, TwoCellAnchor

    placed: Any = chart  # its anchor may be a cell or, as here, a pair of them
    placed.anchor = TwoCellAnchor(
        editAs="oneCell",
        _from=AnchorMarker(col=area.column - 1, row=area.row - 1, colOff=60_000, rowOff=40_000),
        to=AnchorMarker(col=area.column - 1 + area.n_columns, row=area.row - 1 + area.n_rows),
    )
    sheet.add_chart(chart)
