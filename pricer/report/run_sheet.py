"""The last sheet: cautions, how to repeat the run, and what every number on the other sheets means."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING

from pricer.report import columns as c
from pricer.report import contract_columns as k
from pricer.report import market_columns as m
from pricer.report.cells import put_text, workbook_of
from pricer.report.explanations import CAUTION, INTERVALS, READING, SEVERITIES, STATUSES, VERDICTS
from pricer.report.known_sums import OF_DELTA, OF_VEGA
from pricer.report.page import page_height, set_up_page
from pricer.report.styles import body_style
from pricer.report.totals import priced
from pricer.run.outcome import Outcome

if TYPE_CHECKING:
    from openpyxl import Workbook
    from openpyxl.worksheet.worksheet import Worksheet

TITLE = "Run"
_WIDTHS = (56.0, 44.0, 98.0)
_LINE_HEIGHT = 13.5
_TITLE_HEIGHT = 16.0
_BELOW = "Below, on screen: the methods with their sources, and the meaning of every column."
_Section = tuple[str, list[tuple[str, str, str]]]  # title; lines of three cells, the third continues the second
_SHEETS: Mapping[str, tuple[c.Column, ...]] = {
    "Events": k.EVENTS,
    "Valuations": (*c.VALUATIONS, *k.OF_CONTRACTS, *k.MORE_OF_CONTRACTS),
    "Deltas by trade": c.DELTAS,
    "Deltas by underlying": (*c.UNDERLYING_DELTAS, *OF_DELTA, *OF_VEGA),
    "Cross-check": c.CROSS_CHECK,
    "Why not priced": c.REFUSAL_CAUSES,
    "Problems": c.PROBLEMS,
    "Life": k.LIFE,
    "Contracts": k.CONTRACTS,
    "the plain table contract_dates": k.CONTRACT_DATES,
    "Market: problems": m.MARKET_PROBLEMS,
    "Market: what is lacking": m.LACKING,
    "Market: surfaces": m.SURFACES,
    "Market: violations": m.VIOLATIONS,
    "Calibration": m.CALIBRATION,
    "Curves": m.CURVES,
    "Forwards": m.FORWARDS,
    "Credit, funding, agreements: credit": m.CREDIT,
    "Credit, funding, agreements: funding": m.FUNDING,
    "Credit, funding, agreements: agreements": m.AGREEMENTS,
}


def add_run_sheet(workbook: Workbook, outcome: Outcome) -> None:
    """Add the sheet. What only explains the other sheets' columns and methods comes last and is not printed."""
    from openpyxl.worksheet.pagebreak import Break

    sheet = workbook.create_sheet(TITLE)
    for letter, width in zip("ABC", _WIDTHS, strict=True):
        sheet.column_dimensions[letter].width = width
    put_text(sheet, 1, 1, "How this report was made and how to read it", "title")
    sheet.row_dimensions[1].height = 24.0
    row = _line(sheet, 3, CAUTION, "", "", "caution")
    sheet.merge_cells("A3:C3")
    sheet.row_dimensions[3].height = 2.3 * _LINE_HEIGHT
    left_on_page = page_height(sum(_WIDTHS)) - 24.0 - 3.3 * _LINE_HEIGHT
    for section in _printed(outcome):
        height = _height(section)
        if height > left_on_page:
            sheet.row_breaks.append(Break(id=row - 1))
            left_on_page = page_height(sum(_WIDTHS))
        left_on_page -= height
        row = _section(sheet, row, section)
    put_text(sheet, row + 1, 1, _BELOW, "note")
    sheet.print_area = f"A1:C{row + 1}"
    row += 2
    for section in _on_screen(outcome):
        row = _section(sheet, row, section)
    set_up_page(sheet, outcome.facts)
    sheet.freeze_panes = "A2"
    sheet.sheet_view.showGridLines = False


def _printed(outcome: Outcome) -> Iterable[_Section]:
    """The facts of the run and how to read the numbers."""
    facts = outcome.facts
    yield (
        "Run",
        [
            ("book", facts.book_name, ""),
            ("valuation date", facts.valuation_date.isoformat(), ""),
            ("reporting currency", facts.reporting_currency, ""),
            ("started", facts.started.isoformat(sep=" ", timespec="seconds"), ""),
            ("seed", str(facts.seed), "the same input and seed give the same numbers to the last bit"),
            ("precision asked for (bp of notional)", f"{facts.precision_bp:g}", ""),
            ("workers (number)", str(facts.workers), "has no effect on the numbers"),
            ("exit status", str(outcome.exit_status), "0 all priced, 1 some not priced, 2 nothing could be done"),
        ],
    )
    yield "Files read", [(s.name, "SHA-256", s.sha256) for s in facts.sources] or [("none", "", "")]
    yield "Settings", [(name, value, "") for name, value in facts.settings] or [("none", "", "")]
    yield "Versions", [(name, value, "") for name, value in facts.versions] or [("none", "", "")]
    timings = [*facts.timings, ("whole run", facts.seconds)]
    yield "Time taken (seconds)", [(name, f"{seconds:,.2f}", "") for name, seconds in timings]
    yield "How to read the numbers", [(name, text, "") for name, text in READING]
    yield "Kinds of interval", [(str(kind), text, "") for kind, text in INTERVALS.items()]
    yield "Statuses of a trade", [(str(status), text, "") for status, text in STATUSES.items()]
    yield "Verdicts of a cross-check", [(name, text, "") for name, text in VERDICTS.items()]
    yield "Severities of a problem", [(str(severity), text, "") for severity, text in SEVERITIES.items()]


def _on_screen(outcome: Outcome) -> Iterable[_Section]:
    """The methods with their sources, and every column of every table."""
    yield "Methods in this run", _methods(outcome)
    for sheet, columns in _SHEETS.items():
        lines = [
            (column.name, column.header.format(reporting=outcome.facts.reporting_currency), column.meaning)
            for column in columns
        ]
        yield f"Columns of {sheet} (name in the plain files, heading, meaning)", lines


def _methods(outcome: Outcome) -> list[tuple[str, str, str]]:
    """Every method that produced a number, and how often."""
    values = Counter(v.method for v in priced(outcome))
    deltas = Counter(d.method for v in priced(outcome) for d in v.deltas)
    references = Counter((c.reference_method, c.source) for c in outcome.cross_checks)
    lines = [(method, f"{n:,} values", "") for method, n in sorted(values.items())]
    lines += [(method, f"{n:,} sets of sensitivities", "") for method, n in sorted(deltas.items())]
    lines += [(method, f"{n:,} references", source) for (method, source), n in sorted(references.items())]
    return lines or [("none", "", "")]


def _section(sheet: Worksheet, row: int, section: _Section) -> int:
    """Write a section after a row of air; returns the next row."""
    title, lines = section
    for column in (1, 2, 3):
        put_text(sheet, row + 1, column, title if column == 1 else "", "section")
    row += 2
    prose = body_style(workbook_of(sheet), c.Kind.PROSE, vertical="top")
    for line in lines:
        row = _line(sheet, row, *line, style=prose)
    return row


def _height(section: _Section) -> float:
    """Points of a section with the row of air above it."""
    return _TITLE_HEIGHT + _LINE_HEIGHT * (1 + sum(_n_lines(*line) for line in section[1]))


def _n_lines(first: str, second: str, third: str) -> int:
    """Lines of text of the fullest cell; without a third cell the second takes its room."""
    widths = (_WIDTHS[0], _WIDTHS[1] if third else _WIDTHS[1] + _WIDTHS[2], _WIDTHS[2])
    return max(
        1,
        *(math.ceil(len(text) / (1.12 * width)) for text, width in zip((first, second, third), widths, strict=True)),
    )


def _line(sheet: Worksheet, row: int, first: str, second: str, third: str, style: str) -> int:
    """Write one line; returns the next row."""
    put_text(sheet, row, 1, first, style)
    put_text(sheet, row, 2, second, style)
    put_text(sheet, row, 3, third, style)
    if second and not third:
        sheet.merge_cells(start_row=row, end_row=row, start_column=2, end_column=3)
    # Merged cells do not grow with their text, so heights are set for all lines alike.
    sheet.row_dimensions[row].height = _LINE_HEIGHT * _n_lines(first, second, third)
    return row + 1
