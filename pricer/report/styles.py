"""The look of the workbook: palette, named styles, number formats, widths.

Meaning never rests on colour alone: a marked row is tinted, and the word that marks it is bold, so that it survives
a grey printer and a colour-blind reader. The blue and the orange differ in lightness as well as in hue.
"""

from __future__ import annotations

import math
from enum import Enum
from typing import TYPE_CHECKING, Any

from pricer.report.columns import FIXED_DECIMALS, Kind

if TYPE_CHECKING:
    from collections.abc import Iterable

    from openpyxl import Workbook
    from openpyxl.styles import Font, NamedStyle

FONT = "Arial"
INK = "1F2933"
FAINT = "5B6873"
BLUE = "2B5F8A"
ORANGE = "D9822B"
HEADING_FILL = "DCE5EC"
FLAG_FILL = "FBE5C8"
REFUSED_FILL = "DADADA"
LINE = "CBD5DC"
PRICE_DECIMALS = 6  # at most
PRICE_FORMAT = "#,##0.00" + "#" * (PRICE_DECIMALS - 2)


class Mark(Enum):
    """How a row stands out."""

    NONE = ""
    LOOK = "look"  # a person should look
    REFUSED = "refused"  # carries no number
    TOTAL = "total"


def define_styles(workbook: Workbook) -> None:
    """Add the styles that are not tied to a column, and set the workbook's own font."""
    from openpyxl.styles import Alignment, Border, Side

    # The one style openpyxl makes by itself, and gives no public name to; its font sets the unit of all widths.
    own: Any = workbook
    normal = own._named_styles["Normal"]
    normal.font = _font()
    normal.alignment = Alignment(vertical="center")
    normal.bind(workbook)
    rule = Border(bottom=Side(style="medium", color=BLUE))
    top = Alignment(horizontal="left", indent=1, vertical="top", wrap_text=True)
    for style in (
        _style("title", font=_font(size=16, bold=True)),
        _style("subtitle", font=_font(color=FAINT)),
        _style("section", font=_font(size=12, bold=True, color=BLUE), border=rule),
        _style("heading", font=_font(bold=True), fill=HEADING_FILL, border=rule, alignment=top),
        _style(
            "heading number",
            font=_font(bold=True),
            fill=HEADING_FILL,
            border=rule,
            alignment=Alignment(horizontal="right", vertical="top", wrap_text=True),
        ),
        _style("label", font=_font()),
        _style("note", font=_font(color=FAINT, italic=True)),
        _style("caution", font=_font(bold=True), fill=FLAG_FILL, alignment=top),
        _style(
            "headline",
            font=_font(size=16, bold=True),
            border=Border(bottom=Side(style="hair", color=LINE)),
            alignment=Alignment(horizontal="right", vertical="center"),
        ),
    ):
        workbook.add_named_style(style)


def body_style(
    workbook: Workbook, kind: Kind, decimals: int = 0, mark: Mark = Mark.NONE, vertical: str = "center"
) -> str:
    """The name of the style of one kind of cell, added to the workbook when first asked for."""
    from openpyxl.styles import Alignment, Border, Side

    amount = kind is Kind.AMOUNT
    parts = (
        kind.value,
        f"{decimals} decimals" if amount else "",
        mark.value,
        vertical if vertical != "center" else "",
    )
    name = " ".join(part for part in parts if part)
    if name in workbook.named_styles:
        return name
    strong = mark is Mark.TOTAL or (kind is Kind.STATUS and mark is not Mark.NONE)
    style = _style(
        name,
        font=_font(bold=strong, italic=mark is Mark.REFUSED and not strong),
        fill={Mark.LOOK: FLAG_FILL, Mark.REFUSED: REFUSED_FILL}.get(mark),
        border=Border(
            top=Side(style="thin", color=INK) if mark is Mark.TOTAL else None,
            bottom=Side(style="hair", color=LINE),
        ),
        alignment=Alignment(
            horizontal="right" if kind.numeric else "left",
            indent=0 if kind.numeric else 1,  # keeps text off the number left of it
            vertical=vertical,
            wrap_text=kind is Kind.PROSE,
        ),
    )
    style.number_format = number_format(kind, decimals)
    workbook.add_named_style(style)
    return name


def number_format(kind: Kind, decimals: int = 0) -> str:
    """The number format of a kind of cell."""
    if kind is Kind.AMOUNT:
        return "#,##0" + ("." + "0" * decimals if decimals else "")
    if kind in FIXED_DECIMALS:
        return "#,##0." + "0" * FIXED_DECIMALS[kind]
    return {Kind.DATE: "yyyy-mm-dd", Kind.COUNT: "#,##0", Kind.PRICE: PRICE_FORMAT}.get(kind, "@")


def decimals_for(base: Iterable[float], errors: Iterable[float] = ()) -> int:
    """Decimals at which the smaller amounts, and the errors beside them, still show two digits.

    Judged at the lower quartile of the sizes that are not zero, so that one tiny number does not widen a whole sheet.
    """
    sizes = sorted(abs(x) for x in base if x and math.isfinite(x))
    faults = sorted(abs(x) for x in errors if x and math.isfinite(x))
    needed = max(_digits_after_point(sizes, whole_from=1e5), _digits_after_point(faults, whole_from=10.0))
    widest = 4 if sizes and sizes[len(sizes) // 4] >= 1e3 else 8
    return min(needed, widest)


def _digits_after_point(sizes: list[float], whole_from: float) -> int:
    if not sizes or all(size == round(size) for size in sizes):
        return 0
    typical = sizes[len(sizes) // 4]
    return 0 if typical >= whole_from else max(2, 1 - math.floor(math.log10(typical)))


def _font(**changes: Any) -> Font:
    from openpyxl.styles import Font

    return Font(**{"name": FONT, "size": 10, "color": INK, **changes})


def _style(name: str, fill: str | None = None, **parts: Any) -> NamedStyle:
    from openpyxl.styles import NamedStyle, PatternFill

    style = NamedStyle(name=name, **parts)
    if fill:
        style.fill = PatternFill("solid", start_color=fill, end_color=fill)
    return style
