"""Smiles at a glance: every quote's error by delta, and three smiles of each of the underlyings that fit worst."""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import date
from typing import TYPE_CHECKING

from pricer.report.cells import put_number, put_text
from pricer.report.chart_area import Area, place
from pricer.report.columns import Kind
from pricer.report.layout import LAST, LEFT, ROW_HEIGHT, THIRDS, Canvas
from pricer.report.market_columns import CALIBRATION
from pricer.report.market_sheet import CALIBRATION as CALIBRATION_TITLE
from pricer.report.market_sheet import surfaces_note
from pricer.report.page import set_up_page
from pricer.report.smile_charts import error_chart, smile_chart
from pricer.report.surface_fits import TARGET, SurfaceFit, fit_error, simulated_error, smiles, surface_fit
from pricer.report.table_sheet import HEADING_ROW
from pricer.run.outcome import MarketFacts, Outcome, QuoteFit, SurfaceFacts

if TYPE_CHECKING:
    import pandas
    from openpyxl import Workbook
    from openpyxl.chart import Reference
    from openpyxl.worksheet.worksheet import Worksheet

TITLE = "Smiles"
_ERROR_ROWS, _SMILE_ROWS = 13, 13  # the errors and two smiles fill a page
_SURFACES_SHOWN = 5
_DATA = LAST + 2  # first column of what the charts draw, right of what prints


def add_smile_sheet(workbook: Workbook, outcome: Outcome, calibration: pandas.DataFrame) -> None:
    """Add the sheet after that of ``calibration``, to whose cells the chart of errors refers."""
    sheet = workbook.create_sheet(TITLE)
    canvas = Canvas(sheet)
    put_text(sheet, canvas.take(24.0), LEFT, TITLE, "title")
    put_text(sheet, canvas.take(), LEFT, surfaces_note(outcome.market), "subtitle")
    if not calibration.empty and smiles(outcome.market.surfaces):
        canvas.take(8.0)
        _errors(canvas, workbook[CALIBRATION_TITLE], outcome.market, calibration)
        _smiles(canvas, outcome.market)
    sheet.print_area = f"A1:{sheet.cell(1, LAST).column_letter}{canvas.row - 1}"
    set_up_page(sheet, outcome.facts)
    sheet.sheet_view.showGridLines = False


def worst_surfaces(market: MarketFacts, n_surfaces: int) -> list[SurfaceFacts]:
    """The surfaces to look at first: failing ones, then those with the largest error between 10 and 90 delta."""

    def rank(surface: SurfaceFacts) -> tuple[bool, float]:
        fit: SurfaceFit = surface_fit(surface)
        errors = (fit.worst_simulated_error_middle, fit.worst_fit_error_middle)
        return surface.passes, -max((error for error in errors if not math.isnan(error)), default=0.0)

    quoted = [surface for surface in smiles(market.surfaces) if surface.quotes]
    return sorted(quoted, key=rank)[:n_surfaces]


def _errors(canvas: Canvas, source: Worksheet, market: MarketFacts, calibration: pandas.DataFrame) -> None:
    from openpyxl.chart import Reference

    quotes = [quote for surface in market.surfaces for quote in surface.quotes]
    reach = 4.0 * TARGET
    far = sum(abs(fit_error(q)) > reach or abs(simulated_error(q)) > reach for q in quotes)
    beyond = f"; {far:,} points with an error beyond {reach:.2f} lie outside the chart" if far else ""
    canvas.section(canvas.take(), LEFT, f"How closely the quotes are repriced{beyond}", LAST - LEFT + 1)
    row = canvas.take_rows(_ERROR_ROWS + 1)

    def column(name: str) -> Reference:
        number = [c.name for c in CALIBRATION].index(name) + 1
        return Reference(source, min_col=number, min_row=HEADING_ROW + 1, max_row=HEADING_ROW + len(calibration))

    names = ("target drawn (delta; vol points)", "", "")
    cells = [[0.0, TARGET, -TARGET], [100.0, TARGET, -TARGET]]
    x, upper, lower = _data(canvas.sheet, row, names, cells)
    any_simulated = bool(calibration["simulated_error_vol_points"].notna().any())
    chart = error_chart(
        column("delta_percent"),
        column("fit_error_vol_points"),
        column("simulated_error_vol_points") if any_simulated else None,
        [(x, upper), (x, lower)],
    )
    place(canvas.sheet, chart, Area(row, LEFT, _ERROR_ROWS, LAST - LEFT + 1))


def _smiles(canvas: Canvas, market: MarketFacts) -> None:
    """A row of charts for each of the worst underlyings."""
    for surface in worst_surfaces(market, _SURFACES_SHOWN):
        canvas.reserve((_SMILE_ROWS + 2) * ROW_HEIGHT)
        words = f"{surface.underlying}: shortest expiry, largest error between, longest expiry"
        canvas.section(canvas.take(), LEFT, words, LAST - LEFT + 1)
        row = canvas.take_rows(_SMILE_ROWS + 1)
        for i, (expiry, (column, n_columns)) in enumerate(zip(shown_expiries(surface), THIRDS, strict=False)):
            quotes = [quote for quote in surface.quotes if quote.expiry_date == expiry]
            area = Area(row, column, _SMILE_ROWS, n_columns)
            _smile(canvas.sheet, f"{surface.underlying}, {expiry.isoformat()}", quotes, area, _DATA + 6 * i)


def shown_expiries(surface: SurfaceFacts) -> list[date]:
    """The shortest expiry, the one between with the largest error where a target applies, and the longest."""
    errors: dict[date, float] = {}
    for quote in surface.quotes:
        both = (abs(fit_error(quote)), abs(simulated_error(quote)))
        error = max((each for each in both if quote.counts and not math.isnan(each)), default=0.0)
        errors[quote.expiry_date] = max(error, errors.get(quote.expiry_date, 0.0))
    first, *others = sorted(errors)
    between, last = others[:-1], others[-1:]
    return [first, *([max(between, key=errors.__getitem__)] if between else []), *last]


def _smile(sheet: Worksheet, title: str, quotes: Sequence[QuoteFit], area: Area, data: int) -> None:
    names = (f"{title}: strike (% of forward)", "quoted (%)", "fitted (%)", "simulated (%)")
    lines = []
    for quote in sorted(quotes, key=lambda quote: quote.strike):
        simulated = math.nan if quote.simulated is None else quote.simulated
        lines.append([100.0 * x for x in (quote.strike_of_forward, quote.quoted, quote.fitted, simulated)])
    strikes, quoted, fitted, simulation = _data(sheet, area.row, names, lines, data)
    drawn = [number for line in lines for number in line[1:] if math.isfinite(number)]
    any_simulated = any(math.isfinite(line[-1]) for line in lines)
    chart = smile_chart(
        title,
        strikes,
        quoted,
        fitted,
        simulation if any_simulated else None,
        (lines[0][0], lines[-1][0]),
        (min(drawn), max(drawn)),
    )
    place(sheet, chart, area)


def _data(
    sheet: Worksheet, row: int, names: Sequence[str], lines: Sequence[Sequence[float]], first: int = _DATA
) -> list[Reference]:
    """Write what a chart draws under its names; returns a reference a column."""
    from openpyxl.chart import Reference

    for i, name in enumerate(names):
        put_text(sheet, row, first + i, name, "note")
    for j, line in enumerate(lines, 1):
        for i, number in enumerate(line):
            put_number(sheet, row + j, first + i, number, Kind.FINE)
    return [Reference(sheet, min_col=first + i, min_row=row + 1, max_row=row + len(lines)) for i in range(len(names))]
