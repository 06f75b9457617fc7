"""Print set-up common to all sheets."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pricer.report.text import clean, shorten

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

    from pricer.run.outcome import RunFacts

# A4 landscape, in millimetres.
PAPER_WIDTH, PAPER_HEIGHT = 297.0, 210.0
SIDE, TOP, BOTTOM = 12.0, 13.0, 17.0
_INCH = 25.4
_POINTS_PER_INCH = 72.0
# A character of a column's width is 7 pixels wide, 96 pixels to the inch.
_CHARACTER = 7.0 / 96.0 * _INCH


def page_height(width: float) -> float:
    """Points of rows that fill a page of columns ``width`` characters wide in all.

    Where a program makes columns wider the scale is smaller, and more fits.
    """
    scale = min(1.0, (PAPER_WIDTH - 2.0 * SIDE) / (width * _CHARACTER))
    return 0.97 * (PAPER_HEIGHT - TOP - BOTTOM) / _INCH * _POINTS_PER_INCH / scale


def set_up_page(sheet: Worksheet, facts: RunFacts) -> None:
    """Landscape A4, one page wide, the sheet's name above, book, valuation date and page number below."""
    from openpyxl.worksheet.properties import PageSetupProperties

    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.paperSize = 9
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
    sheet.page_setup.fitToWidth = 1
    sheet.page_setup.fitToHeight = 0
    margins = sheet.page_margins
    margins.left = margins.right = SIDE / _INCH
    margins.top, margins.bottom = TOP / _INCH, BOTTOM / _INCH
    margins.header, margins.footer = 6.0 / _INCH, 8.0 / _INCH
    # An ampersand starts a code in headers and footers unless doubled.
    book = shorten(clean(facts.book_name), 80).replace("&", "&&")
    header, footer = sheet.oddHeader, sheet.oddFooter
    assert header is not None and footer is not None
    for part, words in (
        (header.right, "&A"),
        (footer.left, f"{book}, valuation date {facts.valuation_date.isoformat()}"),
        (footer.center, "model values are estimates, see sheet Run"),
        (footer.right, "page &P of &N"),
    ):
        part.text = words
        part.size = 8
