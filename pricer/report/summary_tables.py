"""The summary's small tables: value by group, delta by underlying, cross-checks by verdict."""

from __future__ import annotations

import math
from collections.abc import Sequence

from pricer.report.columns import Kind
from pricer.report.layout import BlockTable
from pricer.report.model_differences import model_differences
from pricer.report.reference_coverage import checked_totals
from pricer.report.styles import decimals_for
from pricer.report.top import (
    SHOWN,
    lines_of_checked,
    lines_of_groups,
    lines_of_model_differences,
    lines_of_underlyings,
    lines_of_verdicts,
)
from pricer.report.totals import BookTotal, group_totals, priced
from pricer.report.underlying_totals import known_totals, underlying_totals
from pricer.report.verdicts import by_model
from pricer.run.outcome import CrossCheck, Outcome

_PRODUCTS_SHOWN = 20  # no chart has to hold them, and a book has many


def group_table(outcome: Outcome, whole: BookTotal, grouping: str) -> BlockTable:
    """Trades, notional, value and standard error by one grouping; by currency with the value in that currency."""
    currency = outcome.facts.reporting_currency
    own = grouping == "currency"
    lines = lines_of_groups(
        group_totals(outcome, grouping),
        whole.total,
        own_currency=own,
        shown=_PRODUCTS_SHOWN if grouping == "product" else SHOWN,
    )
    return BlockTable(
        title=f"Value by {grouping}",
        headings=(
            grouping,
            "trades (number)",
            "not priced (number)",
            "value (trade currency)" if own else f"gross notional ({currency})",
            f"value ({currency})",
            f"standard error ({currency})",
        ),
        kinds=(Kind.COUNT, Kind.COUNT, Kind.AMOUNT, Kind.AMOUNT, Kind.AMOUNT),
        lines=lines,
        empty="The book has no trades.",
        decimals=decimals_for([whole.total.value], [whole.total.standard_error]),
    )


def underlying_table(outcome: Outcome) -> BlockTable:
    """Delta by underlying, largest cash delta first; where trades lack one, of the others, and the title says so."""
    currency, totals = outcome.facts.reporting_currency, underlying_totals(outcome)
    lacking = sum(any(math.isnan(d.delta) for d in v.deltas) for v in priced(outcome))
    without = f", without {lacking:,} trade{'s' if lacking > 1 else ''} of unknown delta" if lacking else ""
    return BlockTable(
        title=f"Cash delta by underlying{without}",
        headings=(
            "underlying",
            "trades (number)",
            "gross share (%)",
            "delta (shares)",
            f"cash delta ({currency})",
            f"standard error ({currency})",
        ),
        kinds=(Kind.COUNT, Kind.FIXED, Kind.AMOUNT, Kind.AMOUNT, Kind.AMOUNT),
        lines=lines_of_underlyings(known_totals(totals) if lacking else totals),
        empty="No priced trade has sensitivities.",
    )


def checked_table(outcome: Outcome) -> BlockTable:
    """Value by leading model, and how many of the values have a reference under that model."""
    currency = outcome.facts.reporting_currency
    return BlockTable(
        title="Value by model, and by what it is checked",
        headings=(
            "model",
            "exactly (number)",
            "otherwise (number)",
            "by no reference (number)",
            f"value ({currency})",
            f"of it unchecked ({currency})",
        ),
        kinds=(Kind.COUNT, Kind.COUNT, Kind.COUNT, Kind.AMOUNT, Kind.AMOUNT),
        lines=lines_of_checked(checked_totals(outcome)),
        empty="No trade has a value.",
    )


def verdict_tables(outcome: Outcome) -> list[BlockTable]:
    """One a model that was checked; one that says so where none was."""
    groups = by_model(outcome.cross_checks)
    return [_verdict_table(f"Cross-checks under {model}", checks) for model, checks in groups] or [
        _verdict_table("Cross-checks", [])
    ]


def _verdict_table(title: str, checks: Sequence[CrossCheck]) -> BlockTable:
    """How many cross-checks ended how, and how far off they were."""
    return BlockTable(
        title=title,
        headings=(
            "verdict",
            "checks (number)",
            "share (%)",
            "median difference (bp of notional)",
            "largest difference (bp of notional)",
            "largest (standard errors)",
        ),
        kinds=(Kind.COUNT, Kind.FIXED, Kind.FIXED, Kind.FIXED, Kind.FIXED),
        lines=lines_of_verdicts(checks),
        empty="No cross-checks were made in this run.",
    )


def model_difference_table(outcome: Outcome, whole: BookTotal) -> BlockTable:
    """The trades whose value depends most on the model: local volatility less lognormal."""
    currency = outcome.facts.reporting_currency
    return BlockTable(
        title="Largest model differences",
        headings=(
            "trade",
            "difference (bp)",
            "share of value (%)",
            f"value ({currency})",
            f"difference ({currency})",
            f"standard error ({currency})",
        ),
        kinds=(Kind.FIXED, Kind.FIXED, Kind.AMOUNT, Kind.AMOUNT, Kind.AMOUNT),
        lines=lines_of_model_differences(model_differences(outcome), whole.total),
        empty="No trade's value differs between the models, or none was valued under both.",
    )
