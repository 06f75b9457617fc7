"""The longest lines first, the rest in one: what a table or a chart of a large book can show."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import median
from typing import TypeVar

from pricer.engines.cross_check import ALARMS
from pricer.report.model_differences import ModelDifference
from pricer.report.reference_coverage import Checked, CheckedTotal
from pricer.report.styles import Mark
from pricer.report.sums import quadrature, ratio, total
from pricer.report.totals import Total
from pricer.report.underlying_totals import UnderlyingTotal
from pricer.report.verdicts import MEASURED_IN_ERRORS, by_verdict
from pricer.run.outcome import CrossCheck

SHOWN = 12  # groups of a table that a chart draws, or that stands beside one
MODEL_DIFFERENCES_SHOWN = 8
NONE_STATED = "(none stated)"

_Item = TypeVar("_Item")


@dataclass(frozen=True, slots=True)
class Line:
    """A name and the numbers beside it, NaN where there is none."""

    name: str
    numbers: tuple[float, ...]
    mark: Mark = Mark.NONE


def lines_of_groups(
    totals: Sequence[Total], whole: Total, own_currency: bool = False, shown: int = SHOWN
) -> list[Line]:
    """Trades, trades not priced, gross notional (or value in own currency), value, standard error; then the total.

    ``totals`` come largest first; of more than ``shown`` the rest is one line, errors added in quadrature.
    """

    def line(item: Total) -> Line:
        third = item.own_value if own_currency else item.gross_notional
        return Line(item.group or NONE_STATED, (item.trades, item.not_priced, third, item.value, item.standard_error))

    if not totals:
        return []
    largest, rest = _split(totals, shown)
    lines = [line(item) for item in largest]
    if rest:
        valued = [t for t in rest if t.trades > t.not_priced]
        numbers = (
            sum(t.trades for t in rest),
            sum(t.not_priced for t in rest),
            math.nan if own_currency else total(t.gross_notional for t in valued),
            total(t.value for t in valued),
            quadrature(t.standard_error for t in valued),
        )
        lines.append(Line(f"other ({len(rest)})", numbers))
    third = math.nan if own_currency else whole.gross_notional
    whole_numbers = (whole.trades, whole.not_priced, third, whole.value, whole.standard_error)
    return [*lines, Line("total", whole_numbers, Mark.TOTAL)]


def lines_of_underlyings(totals: Sequence[UnderlyingTotal]) -> list[Line]:
    """Trades, share of the gross cash delta in percent, delta in shares, reporting cash delta, its standard error.

    Where one delta is unknown, so is every sum that it belongs to. A sum over several underlyings has no standard
    error: the sensitivities of one trade come from the same draws, so quadrature would be wrong.
    """
    gross = total(abs(t.reporting_cash_delta) for t in totals)

    def line(name: str, items: Sequence[UnderlyingTotal], mark: Mark = Mark.NONE) -> Line:
        one = len(items) == 1 and mark is Mark.NONE
        cash = total(t.reporting_cash_delta for t in items)
        numbers = (
            items[0].trades if one else math.nan,
            100.0 * ratio(total(abs(t.reporting_cash_delta) for t in items), gross),
            items[0].delta if one else math.nan,  # shares of different underlyings do not add
            cash,
            items[0].reporting_cash_delta_standard_error if one else math.nan,
        )
        is_partial = math.isnan(cash) or any(t.trades_without_delta for t in items)
        return Line(name, numbers, Mark.LOOK if is_partial and mark is Mark.NONE else mark)

    largest, rest = _split(totals, SHOWN)
    lines = [line(item.underlying, [item]) for item in largest]
    if rest:
        lines.append(line(f"other ({len(rest)})", rest))
    return [*lines, line("total", totals, Mark.TOTAL)] if totals else []


def lines_of_checked(totals: Sequence[CheckedTotal]) -> list[Line]:
    """Values checked exactly, by bounds or a sample, and by nothing, value, and that of the unchecked.

    The last line is the total. Trades that have ended are in the values alone: nothing has to check them.
    """

    def number(item: CheckedTotal, *kinds: Checked) -> int:
        return sum(item.by.get(kind, 0) for kind in kinds)

    return [
        Line(
            item.model,
            (
                number(item, Checked.EXACT),
                number(item, Checked.BOUNDS, Checked.SAMPLE),
                number(item, Checked.NOTHING),
                item.value,
                item.unchecked_value,
            ),
            Mark.TOTAL if item is totals[-1] else Mark.NONE,
        )
        for item in totals
    ]


def lines_of_verdicts(checks: Sequence[CrossCheck]) -> list[Line]:
    """Number, share in percent, median and largest absolute difference in basis points of notional, and the largest
    in standard errors where that says something. Disagreements have a line whether they occurred or not."""
    if not checks:
        return []
    lines = []
    for name, verdict, mine in by_verdict(checks):
        if not mine and verdict not in ALARMS:
            continue
        sizes = [abs(c.difference_bp) for c in mine]
        errors = [abs(c.difference_standard_errors) for c in mine if c.difference_standard_errors is not None]
        if verdict not in MEASURED_IN_ERRORS:
            errors = []
        numbers = (
            len(mine),
            100.0 * len(mine) / len(checks),
            median(sizes) if sizes else math.nan,
            max(sizes, default=math.nan),
            max(errors, default=math.nan),
        )
        lines.append(Line(name, numbers, Mark.LOOK if mine and verdict in ALARMS else Mark.NONE))
    return lines


def lines_of_model_differences(differences: Sequence[ModelDifference], whole: Total) -> list[Line]:
    """Difference in basis points of notional and in percent of the value, value, difference, its standard error.

    ``differences`` come largest first and amounts are in the reporting currency. Trades that do not differ, and those
    valued under one model only, have a line each, so that the values add up to the book's.
    """

    def line(item: ModelDifference) -> Line:
        value = item.valuation.reporting_value
        share = 100.0 * ratio(item.difference, abs(value))
        numbers = (item.difference_bp, share, value, item.difference, item.standard_error)
        return Line(item.valuation.trade_id, numbers, Mark.LOOK if math.isnan(item.difference) else Mark.NONE)

    moved = [item for item in differences if item.difference != 0.0]
    if not moved:
        return []
    unmoved = [item.valuation.reporting_value for item in differences if item.difference == 0.0]
    largest, rest = _split(moved, MODEL_DIFFERENCES_SHOWN)
    lines = [line(item) for item in largest]
    if rest:
        numbers = (
            math.nan,
            math.nan,
            total(item.valuation.reporting_value for item in rest),
            total(item.difference for item in rest),
            quadrature(item.standard_error for item in rest),
        )
        lines.append(Line(f"other ({len(rest):,})", numbers))
    if unmoved:
        lines.append(Line(f"no difference ({len(unmoved):,})", (0.0, 0.0, total(unmoved), 0.0, 0.0)))
    if whole.without_model_difference:
        compared = total(item.valuation.reporting_value for item in differences)
        numbers = (math.nan, math.nan, whole.value - compared, math.nan, math.nan)
        lines.append(Line(f"under one model only ({whole.without_model_difference:,})", numbers))
    share = 100.0 * ratio(whole.model_difference, abs(whole.value))
    numbers = (math.nan, share, whole.value, whole.model_difference, whole.model_difference_standard_error)
    return [*lines, Line("total", numbers, Mark.TOTAL)]


def _split(items: Sequence[_Item], shown: int) -> tuple[Sequence[_Item], Sequence[_Item]]:
    """The lines to show and the rest; a rest of one is shown instead of being called other."""
    if len(items) <= shown + 1:
        return items, ()
    return items[:shown], items[shown:]
