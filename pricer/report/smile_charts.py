"""Charts of smiles and of the errors they are repriced with."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from pricer.report.charts import cloud, dress, legend_below, limit, line
from pricer.report.styles import BLUE, INK, ORANGE
from pricer.report.surface_fits import TARGET

if TYPE_CHECKING:
    from openpyxl.chart import Reference, ScatterChart

_WIDTH_OF_LINE = 19_000  # EMU, 1.5 points


def error_chart(
    delta: Reference, fit: Reference, simulated: Reference | None, limits: Sequence[tuple[Reference, Reference]]
) -> ScatterChart:
    """Errors in vol points over the delta of the call, as far as four times the target; the limits are the target's."""
    chart = _scatter()
    # Wide and flat, so that it hides no triangle whichever of the two a program paints first.
    chart.series.append(cloud(delta, fit, "fitted less quoted", "dash", 8, BLUE))
    if simulated is not None:
        chart.series.append(cloud(delta, simulated, "simulated less quoted", "triangle", 5, ORANGE))
    chart.series.extend(limit(*ends, name="target") for ends in limits)
    dress(chart, "error by delta", "delta of the call (%)", "error (vol points)")
    _scale(chart, (0.0, 100.0), 10.0, (-4.0 * TARGET, 4.0 * TARGET), TARGET)
    chart.y_axis.number_format = "0.00"
    legend_below(chart, unnamed=(len(chart.series) - 1,))
    return chart


def smile_chart(
    title: str,
    strikes: Reference,
    quoted: Reference,
    fitted: Reference,
    simulated: Reference | None,
    x_range: tuple[float, float],
    y_range: tuple[float, float],
) -> ScatterChart:
    """One expiry: quotes as crosses, the fitted smile as a line, the simulated one as triangles between their arms.

    ``x_range`` in percent of the forward and ``y_range`` in percent are the least and the largest number drawn.
    """
    from openpyxl.chart import Series

    chart = _scatter()
    curve = Series(fitted, strikes, title="fitted")
    curve.marker.symbol = "none"
    curve.graphicalProperties = line(BLUE, _WIDTH_OF_LINE)
    curve.smooth = False
    chart.series.append(curve)
    chart.series.append(cloud(strikes, quoted, "quoted", "x", 10, INK))
    if simulated is not None:
        chart.series.append(cloud(strikes, simulated, "simulated", "triangle", 7, ORANGE))
    dress(chart, f"{title}, by strike (% of forward)", "", "volatility (%)")
    _scale(chart, *_rounded(x_range), *_rounded(y_range))
    legend_below(chart)
    return chart


def _scatter() -> ScatterChart:
    from openpyxl.chart import ScatterChart

    chart = ScatterChart()
    chart.style = 2
    chart.scatterStyle = "lineMarker"
    return chart


def _rounded(ends: tuple[float, float]) -> tuple[tuple[float, float], float]:
    """Round ends around a range, and a step that divides it into four to ten parts."""
    low, high = ends
    spread = max(high - low, 1.0)
    unit = 10.0 ** math.floor(math.log10(spread))
    step = next(unit * part for part in (0.2, 0.5, 1.0, 2.0) if spread / (unit * part) <= 8.0)
    return (step * math.floor(low / step), step * math.ceil(high / step)), step


def _scale(chart: ScatterChart, x: tuple[float, float], x_step: float, y: tuple[float, float], y_step: float) -> None:
    axes: Sequence[tuple[Any, tuple[float, float], float]] = ((chart.x_axis, x, x_step), (chart.y_axis, y, y_step))
    for axis, (low, high), step in axes:
        axis.scaling.min, axis.scaling.max = low, high
        axis.majorUnit = step
        axis.number_format = "0" if step >= 1.0 else "0.0"
        axis.tickLblPos = "low"  # clear of the points
