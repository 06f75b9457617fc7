"""Underlyings with their dividends and repo rates, from three tables."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date

from pricer.core.issues import Issue
from pricer.loader.findings import Findings, by_own_id, by_owner, repeated_dates
from pricer.loader.market_rows import UnderlyingRow
from pricer.loader.table import Row, Table
from pricer.loader.two_sided_rates import read_repo
from pricer.loader.underlying_rows import DividendRow, RepoRow
from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.repo import RepoCurve
from pricer.market.underlying import Underlying


def read_underlyings(
    table: Table[UnderlyingRow],
    dividends: Table[DividendRow] | None,
    repo: Table[RepoRow] | None,
    valuation_date: date,
    findings: Findings,
) -> tuple[dict[str, Underlying], dict[str, RepoCurve]]:
    """The usable underlyings by id, without volatilities, and their repo curves.

    A faulty row, dividend or repo rate costs the underlying.
    """
    rows = by_own_id(table, "underlying", findings)
    paid = {} if dividends is None else by_owner(dividends, "underlying", rows, findings)
    if dividends is not None:
        for name, payments in paid.items():
            findings.reject(name, _repeated(dividends, payments))
    repo_curves = read_repo(repo, rows, valuation_date, findings)
    out: dict[str, Underlying] = {}
    for name, own in rows.items():
        row = own.value
        if findings.is_rejected(name) or row is None or row.calendar is None:
            continue
        given = [payment.value for payment in paid.get(name, ()) if payment.value is not None]
        out[name] = Underlying(
            underlying_id=name,
            currency=row.currency,
            spot=row.spot,
            calendar=row.calendar,
            lot_size=row.lot_size,
            dividends=_dividends(row.dividend_yield_decimal, given),
        )
    return out, {name: curve for name, curve in repo_curves.items() if name in out}


def _dividends(yield_rate: float, rows: Sequence[DividendRow]) -> Dividends:
    ordered = sorted(rows, key=lambda row: row.ex_date)
    return Dividends(
        yield_rate,
        tuple(
            ProportionalDividend(row.ex_date, row.fraction_of_spot_decimal)
            for row in ordered
            if row.fraction_of_spot_decimal is not None
        ),
        tuple(CashDividend(row.ex_date, row.cash_amount) for row in ordered if row.cash_amount is not None),
    )


def _repeated(table: Table[DividendRow], rows: Sequence[Row[DividendRow]]) -> list[Issue]:
    """Two dividends of one kind on one date; a special one in cash may go with a proportional one."""
    kinds: tuple[list[Row[DividendRow]], list[Row[DividendRow]]] = ([], [])
    for row in rows:
        kinds[row.value is not None and row.value.cash_amount is not None].append(row)
    return [issue for kind in kinds for issue in repeated_dates(table, kind, "ex_date")]
