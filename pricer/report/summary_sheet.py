"""The first sheet: what the book is worth, how sure that is, what is missing, and what drives it.

Row heights are fixed, so that page breaks fall between sections and never through a table or a chart.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from pricer.core.issues import Severity
from pricer.engines.cross_check import ALARMS
from pricer.report.cells import put_number, put_text, workbook_of
from pricer.report.chart_area import Area
from pricer.report.columns import Kind
from pricer.report.frames import without_value
from pricer.report.layout import HALVES, LAST, LEFT, N_COLUMNS, RIGHT, ROW_HEIGHT, THIRDS, Canvas
from pricer.report.page import set_up_page
from pricer.report.reference_coverage import checked_total
from pricer.report.refusal_causes import refusal_causes
from pricer.report.styles import Mark, body_style, decimals_for
from pricer.report.summary_charts import add_bars, add_scatter
from pricer.report.summary_events import add_events
from pricer.report.summary_tables import (
    checked_table,
    group_table,
    model_difference_table,
    underlying_table,
    verdict_tables,
)
from pricer.report.surface_fits import smiles
from pricer.report.text import shorten
from pricer.report.totals import BookTotal, book_total, priced
from pricer.run.outcome import Outcome

if TYPE_CHECKING:
    import pandas
    from openpyxl import Workbook
    from openpyxl.cell.cell import Cell


TITLE = "Summary"
_GROUPINGS = ("currency", "strategy", "counterparty", "product")
_REASONS_SHOWN = 5
_REASON_LENGTH = 140  # what one line between the list's third column and the page's edge holds


def add_summary_sheet(workbook: Workbook, outcome: Outcome, frames: Mapping[str, pandas.DataFrame]) -> None:
    """Add the sheet in front of those of ``frames``, which its charts refer to."""
    sheet = workbook.create_sheet(TITLE, 0)
    canvas = Canvas(sheet)
    whole = book_total(outcome)
    _heading(canvas, outcome)
    _key_figures(canvas, outcome, whole, frames["problems"])
    _not_priced(canvas, outcome)
    add_events(canvas, outcome)
    chart_areas = _chart_areas(canvas, outcome)
    by = {grouping: group_table(outcome, whole, grouping) for grouping in _GROUPINGS}
    underlyings = underlying_table(outcome)
    first = canvas.stacks(
        (
            by["currency"],
            by["strategy"],
            by["counterparty"],
            checked_table(outcome),
            *verdict_tables(outcome),
        ),
        (model_difference_table(outcome, whole), by["product"], underlyings),
    )
    if chart_areas:
        bars = (("value", by["strategy"], LEFT), ("cash delta", underlyings, RIGHT))
        for area, (what, table, column) in zip(chart_areas, bars, strict=False):
            currency = outcome.facts.reporting_currency
            add_bars(sheet, area, what, currency, table.lines, first[table.title], column)
    if len(chart_areas) == len(THIRDS):
        add_scatter(sheet, chart_areas[-1], workbook["Cross-check"], frames["cross_check"])
    sheet.print_area = f"A1:{sheet.cell(1, LAST).column_letter}{canvas.row - 1}"
    set_up_page(sheet, outcome.facts)
    sheet.sheet_view.showGridLines = False


def _chart_areas(canvas: Canvas, outcome: Outcome) -> list[Area]:
    """Where the charts go, side by side under their titles; none without a priced trade."""
    if not priced(outcome):
        return []
    n_rows = canvas.chart_rows()
    row = canvas.take_rows(n_rows + 2)
    titles = ["Value by strategy", "Cash delta by underlying"]
    if outcome.cross_checks:
        titles.append("Engine against exact and sampled references")
    places = THIRDS if len(titles) == len(THIRDS) else HALVES
    for title, (column, n_columns) in zip(titles, places, strict=True):
        canvas.section(row, column, title, n_columns)
    return [Area(row + 1, column, n_rows, n_columns) for column, n_columns in places]


def _heading(canvas: Canvas, outcome: Outcome) -> None:
    facts = outcome.facts
    put_text(canvas.sheet, canvas.take(24.0), LEFT, facts.book_name, "title")
    words = (
        f"valuation date {facts.valuation_date.isoformat()}",
        f"reporting currency {facts.reporting_currency}",
        f"run started {facts.started.isoformat(sep=' ', timespec='minutes')}",
        f"seed {facts.seed}",
    )
    put_text(canvas.sheet, canvas.take(), LEFT, ",  ".join(words), "subtitle")
    canvas.take(8.0)


def _key_figures(canvas: Canvas, outcome: Outcome, whole: BookTotal, problems: pandas.DataFrame) -> None:
    from openpyxl.worksheet.hyperlink import Hyperlink

    sheet, currency, total = canvas.sheet, outcome.facts.reporting_currency, whole.total
    first = canvas.take()
    canvas.section(first, LEFT, "Value of the book")
    canvas.section(first, RIGHT, "What was done")
    references = checked_total(outcome)
    compared = total.trades - total.not_priced - total.without_model_difference
    amounts = (
        (f"total value ({currency})", total.value),
        (f"standard error ({currency})", total.standard_error),
        (f"99 % sampling interval, from ({currency})", whole.lower),
        (f"99 % sampling interval, to ({currency})", whole.upper),
        (f"errors of values without sampling, added up ({currency})", whole.unsampled_error),
        (f"unpaid premium inside the total ({currency})", whole.unpaid_premium),
        (f"local volatility less lognormal, {compared:,} trades ({currency})", total.model_difference),
        (f"standard error of that model difference ({currency})", total.model_difference_standard_error),
        (f"inside the total: values that no reference checks ({currency})", references.unchecked_value),
        ("precision asked for (bp of notional)", outcome.facts.precision_bp),
    )
    surfaces = smiles(outcome.market.surfaces)
    failing = sum(not surface.passes for surface in surfaces)
    flagged = sum(check.verdict in ALARMS for check in outcome.cross_checks)
    severities = [int((problems["severity"] == severity).sum()) for severity in Severity]
    counts = (
        ("trades in the book", total.trades, False),
        ("priced to the precision asked for", total.priced, False),
        ("priced, precision not reached", total.precision_not_reached, True),
        ("priced, disputed by a cross-check", total.disputed, True),
        ("priced from a failing volatility surface", total.failing_surface, True),
        ("not priced, left out of every total", total.not_priced, True),
        (f"values beside an exact or sampled reference, of {references.trades:,}", references.independent, False),
        (f"cross-checks that disagree, of {len(outcome.cross_checks):,} made", flagged, True),
        (f"volatility surfaces that fail, of {len(surfaces):,}", failing, True),
        ("problems found (number)", sum(severities), True),
    )
    decimals = decimals_for([total.value], [total.standard_error])
    for i, ((label, amount), (what, count, alarm)) in enumerate(zip(amounts, counts, strict=True)):
        row = canvas.take(24.0 if i == 0 else ROW_HEIGHT)
        mark = Mark.LOOK if alarm and count else Mark.NONE
        for first, words, look in ((LEFT, label, Mark.NONE), (RIGHT, what, mark)):
            style = body_style(workbook_of(sheet), Kind.STATUS, mark=look)
            for column in range(first, first + N_COLUMNS - 1):
                put_text(sheet, row, column, words if column == first else "", style)
        # Amounts share the headline's decimals: a tiny one must not look more exact than the total beside it.
        places = decimals if label.endswith(f"({currency})") else decimals_for([amount])
        cell = put_number(sheet, row, LEFT + N_COLUMNS - 1, amount, Kind.AMOUNT, places)
        put_number(sheet, row, RIGHT + N_COLUMNS - 1, count, Kind.COUNT, mark=mark)
        if i == 0:
            instead = "not a number" if priced(outcome) else "no trade was priced"
            _headline(canvas, row, LEFT + N_COLUMNS - 2, cell, instead)
    canvas.take(6.0)
    row = canvas.take(18.0)
    for column in range(LEFT, LAST + 1):
        put_text(sheet, row, column, "", "caution")
    words = "Model values are estimates. Read the cautions on the sheet Run before using them."
    link = put_text(sheet, row, LEFT, words, "caution")
    link.hyperlink = Hyperlink(ref=link.coordinate, location="'Run'!A1")
    link.style = "caution"  # making it a link changed it
    sheet.merge_cells(start_row=row, end_row=row, start_column=LEFT, end_column=LAST)
    canvas.take(8.0)


def _headline(canvas: Canvas, row: int, column: int, cell: Cell, instead: str) -> None:
    """The total in large figures, moved from ``cell`` to ``column``, from which it covers two columns."""
    wide = put_text(canvas.sheet, row, column, instead, "headline")
    if cell.value is not None:
        wide.value = cell.value
    wide.number_format, cell.value = cell.number_format, None
    cell.style = "headline"
    canvas.sheet.merge_cells(start_row=row, end_row=row, start_column=column, end_column=column + 1)


def _not_priced(canvas: Canvas, outcome: Outcome) -> None:
    """The causes that cost most trades, with the first trade of each."""
    causes = refusal_causes(outcome)
    if not causes:
        return
    products = {item.trade_id: item.product for item in without_value(outcome)}
    shown = causes[:_REASONS_SHOWN]
    rest = len(causes) - len(shown)
    canvas.reserve(ROW_HEIGHT * (3 + len(shown) + (rest > 0)))
    canvas.section(canvas.take(), LEFT, "Not priced", LAST - LEFT + 1)
    row = canvas.take()
    text_style = body_style(workbook_of(canvas.sheet), Kind.TEXT)
    for column in range(LEFT, LAST + 1):
        text = {LEFT: "trades", LEFT + 1: "product", LEFT + 4: "cause"}.get(column, "")
        put_text(canvas.sheet, row, column, text, "heading")
    for cause in shown:
        row = canvas.take()
        others = cause.trades - 1
        texts = {
            LEFT: shorten(cause.first_trade, 26 if not others else 16) + (f" and {others:,} more" if others else ""),
            LEFT + 1: "" if others else shorten(products.get(cause.first_trade, ""), 36),
            LEFT + 4: shorten(cause.words, _REASON_LENGTH),
        }
        for column in range(LEFT, LAST + 1):
            put_text(canvas.sheet, row, column, texts.get(column, ""), text_style)
    if rest:
        text = f"and {rest:,} more causes: sheet Why not priced"
        put_text(canvas.sheet, canvas.take(), LEFT, text, "note")
    canvas.take(8.0)
