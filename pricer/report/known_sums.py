"""Columns of sums over the trades that have a delta or a vega, shown beside the book's where some trade lacks one."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pricer.report.columns import UNDERLYING_DELTAS, Column, Kind

if TYPE_CHECKING:
    import pandas

_DELTA_LACKING = "trades_without_delta"
_VEGA_LACKING = "trades_without_vega"

OF_DELTA: tuple[Column, ...] = (
    Column(
        "known_delta",
        "delta of trades that have one (shares)",
        Kind.AMOUNT,
        "Sum over the trades whose delta is known. It is not the book's delta where a trade lacks one.",
    ),
    Column(
        "known_reporting_cash_delta",
        "cash delta of trades that have one ({reporting})",
        Kind.AMOUNT,
        "The same times spot, in the reporting currency.",
    ),
)
OF_VEGA: tuple[Column, ...] = (
    Column(
        "known_reporting_vega_per_vol_point",
        "vega of trades that have one ({reporting} per vol point)",
        Kind.AMOUNT,
        "Sum over the trades whose vega is known. It is not the book's vega where a trade lacks one.",
    ),
)


def underlying_columns(frame: pandas.DataFrame) -> tuple[Column, ...]:
    """The columns of deltas by underlying; with sums over known numbers, and how many lack, where any is missing."""
    no_delta, no_vega = bool(frame[_DELTA_LACKING].sum()), bool(frame[_VEGA_LACKING].sum())
    shown: list[Column] = []
    for column in UNDERLYING_DELTAS:
        if (column.name, True) in ((_DELTA_LACKING, no_delta), (_VEGA_LACKING, no_vega)):
            continue
        shown.append(column)
        if column.name == "reporting_cash_delta_standard_error" and no_delta:
            shown += [*OF_DELTA, _printed(_DELTA_LACKING)]
        if column.name == "reporting_vega_per_vol_point_standard_error" and no_vega:
            shown += [*OF_VEGA, _printed(_VEGA_LACKING)]
    return tuple(shown)


def _printed(name: str) -> Column:
    found = next(column for column in UNDERLYING_DELTAS if column.name == name)
    return Column(found.name, found.header, found.kind, found.meaning)
