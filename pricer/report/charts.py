"""Native charts. They refer to cells of the workbook, so what is drawn can always be looked up."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from pricer.report.styles import BLUE, FAINT, FONT, INK, LINE, ORANGE

if TYPE_CHECKING:
    from openpyxl.chart import BarChart, Reference, ScatterChart

# From which size on an axis counts in what, and its number format.
_SCALES = ((1e8, "million ", "#,##0,,"), (1e5, "thousand ", "#,##0,"), (10.0, "", "#,##0"), (0.0, "", "General"))


def bar_chart(title: str, unit: str, names: Reference, values: Reference, largest: float) -> BarChart:
    """Horizontal bars, the first on top; negative ones run to the left in the same colour.

    Title and scale count in the same unit: thousands or millions of ``unit`` where ``largest`` asks for it.
    """
    from openpyxl.chart import BarChart, Series
    from openpyxl.chart.data_source import AxDataSource, StrRef

    count, number_format = next((words, code) for size, words, code in _SCALES if largest >= size)
    chart = BarChart()
    chart.type = "bar"
    chart.gapWidth = 40
    unit = count + unit
    series = Series(values, title=title)
    series.graphicalProperties.solidFill = BLUE
    series.graphicalProperties.line.solidFill = INK
    series.invertIfNegative = False
    chart.series.append(series)
    series.cat = AxDataSource(strRef=StrRef(f=str(names)))
    dress(chart, f"{title} ({unit})", x_title="", y_title=unit)
    chart.legend = None
    chart.x_axis.scaling.orientation = "maxMin"  # the first row of the table on top
    chart.x_axis.tickLblPos = "low"  # names stay left of negative bars
    chart.y_axis.crosses = "max"  # and the scale below, although the names run downwards
    chart.y_axis.number_format = number_format
    return chart


def scatter_chart(
    title: str,
    x_title: str,
    y_title: str,
    x: Reference,
    inside: Mapping[str, Reference],
    outside: Reference | None,
    limits: Sequence[tuple[Reference, Reference]],
) -> ScatterChart:
    """Points inside and outside two level limits, each given by its ends; those inside in one or two named clouds.

    The clouds differ in shape and lightness, not in hue alone.
    """
    from openpyxl.chart import ScatterChart

    chart = ScatterChart()
    chart.style = 2
    chart.scatterStyle = "lineMarker"
    names = list(inside)
    if len(names) > 1:
        chart.series.append(cloud(x, inside[names[0]], names[0], "x", 5, FAINT))
    if names:
        chart.series.append(cloud(x, inside[names[-1]], names[-1], "circle", 4, BLUE))
    if outside is not None:
        chart.series.append(cloud(x, outside, "differs", "triangle", 9, ORANGE))
    chart.series.extend(limit(*ends) for ends in limits)
    dress(chart, title, x_title, y_title)
    chart.x_axis.number_format = "#,##0.##"
    chart.y_axis.number_format = "#,##0.0"
    chart.x_axis.tickLblPos = chart.y_axis.tickLblPos = "low"  # clear of the points
    legend_below(chart, unnamed=(len(chart.series) - 1,))  # one limit is named for both
    return chart


def cloud(x: Reference, y: Reference, name: str, symbol: str, size: int, color: str) -> Any:
    """The points (x, y), not joined."""
    from openpyxl.chart import Series

    series = Series(y, x, title=name)
    series.marker.symbol = symbol
    series.marker.size = size
    series.marker.graphicalProperties.solidFill = color
    series.marker.graphicalProperties.line.solidFill = color if symbol in ("circle", "x") else INK
    series.graphicalProperties.line.noFill = True
    series.smooth = False  # some programs take the lack of a word for yes
    return series


def limit(x: Reference, y: Reference, name: str = "tolerance") -> Any:
    """A dashed line through the points (x, y)."""
    from openpyxl.chart import Series

    series = Series(y, x, title=name)
    series.marker.symbol = "none"
    series.graphicalProperties = line(FAINT, 15_000, "dash")
    series.smooth = False
    return series


def line(color: str, width: int | None = None, dash: str | None = None) -> Any:
    """A line's colour, width in EMU (12,700 to a point) and dash."""
    from openpyxl.chart.shapes import GraphicalProperties

    properties: Any = GraphicalProperties()
    properties.line.solidFill = color
    properties.line.width = width
    properties.line.dashStyle = dash
    return properties


def dress(chart: Any, title: str, x_title: str, y_title: str) -> None:
    """Titles, axes and frame as all charts have them."""
    chart.title = _text(title, 1000, bold=True)
    for axis, name in ((chart.x_axis, x_title), (chart.y_axis, y_title)):
        axis.delete = False
        axis.title = _text(name, 800) if name else None
        axis.txPr = _properties(800)
        axis.graphicalProperties = line(FAINT)
    chart.x_axis.majorGridlines = None
    chart.y_axis.majorGridlines.spPr = line(LINE)
    chart.graphical_properties = line(LINE)
    chart.graphical_properties.solidFill = "FFFFFF"


def legend_below(chart: Any, unnamed: Sequence[int] = ()) -> None:
    """A legend under the chart, without the series of the numbers ``unnamed``."""
    from openpyxl.chart.legend import Legend, LegendEntry

    chart.legend = Legend()
    chart.legend.position = "b"
    chart.legend.txPr = _properties(800)
    chart.legend.legendEntry = [LegendEntry(idx=number, delete=True) for number in unnamed]


def _characters(size: int, bold: bool = False) -> Any:
    from openpyxl.drawing.text import CharacterProperties, Font

    return CharacterProperties(sz=size, b=bold, solidFill=INK, latin=Font(typeface=FONT))


def _properties(size: int) -> Any:
    from openpyxl.chart.text import RichText
    from openpyxl.drawing.text import Paragraph, ParagraphProperties

    return RichText(p=[Paragraph(pPr=ParagraphProperties(defRPr=_characters(size)), endParaRPr=_characters(size))])


def _text(words: str, size: int, bold: bool = False) -> Any:
    from openpyxl.chart.text import RichText, Text
    from openpyxl.chart.title import Title
    from openpyxl.drawing.text import Paragraph, ParagraphProperties, RegularTextRun

    run = RegularTextRun(rPr=_characters(size, bold), t=words)
    paragraph = Paragraph(pPr=ParagraphProperties(defRPr=_characters(size, bold)), r=[run])
    return Title(tx=Text(rich=RichText(p=[paragraph])), overlay=False)
