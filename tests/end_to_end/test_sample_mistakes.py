"""The sample's broken book: every mistake is told at its cell, and costs the trade that it is made in alone."""

from __future__ import annotations

from functools import lru_cache

import pytest

from pricer.contracts.book import Book
from pricer.core.issues import Severity
from pricer.loader import load_book, load_market
from pricer.loader.schema import BOOK
from pricer.run.admission import admit
from tests.end_to_end.desk import SAMPLE

#: Trade, table, cell and code of every mistake.
TOLD = {
    ("SMD-0001", "trades", "K2", "not-a-number"),
    ("SMD-0003", "trades", "S4", "unknown-currency"),
    ("SMD-0004", "trades", "C5", "unknown-word"),
    ("SMD-0006", "trades", "A6", "duplicate-trade"),
    ("SMD-0006", "trades", "A7", "duplicate-trade"),
    ("SMD-0006", "trades", "E7", "out-of-range"),
    ("SMD-0005", "constituents", "A6", "unknown-trade"),  # its rows are left over once it is called SMD-0006
    ("SMD-0007", "trades", "P8", "ambiguous-date"),
    ("SMD-0008", "trades", "F9", "blank-cell"),
    ("SMD-0009", "trades", "G10", "unknown-word"),
    ("SMD-0010", "trades", "AA11", "no-collateral-curve"),
    ("SMD-0011", "trades", "K12", "error-cell"),
    ("SMD-0014", "constituents", "C34", "blank-cell"),
    ("SMD-0015", "constituents", "B37", "unknown-underlying"),
    ("SMD-0086", "trades", "AD22", "unknown-word"),
    ("SMD-0088", "schedules", "D2", "missing-fixing"),  # a reference on Good Friday
    ("SMD-0098", "barriers", "E2", "not-a-decimal"),
    ("SMD-0099", "barriers", "M3", "dates-out-of-order"),
    ("SMD-0103", "constituents", "E75", "blank-cell"),
    ("SMD-0104", "barriers", "C7", "unknown-word"),
    ("SMD-0107", "barriers", "H8", "no-dates"),  # a barrier on dates that nobody gives
    ("SMD-0109", "trades", "AF32", "not-a-decimal"),
    ("SMD-0110", "schedule_rules", "F5", "not-a-tenor"),
    ("SMD-0114", "schedule_rules", "K7", "not-a-decimal"),
    ("SMD-0116", "calls", "B2", "no-dates"),
    ("SMD-0118", "schedule_rules", "M9", "not-a-decimal"),
    ("SMD-0119", "coupons", "F4", "unknown-word"),
    ("SMD-0120", "coupons", "B5", "no-dates"),
    ("SMD-0121", "schedules", "D12", "dates-out-of-order"),
    ("SMD-0128", "trades", "AH43", "not-a-decimal"),
    ("SMD-0132", "trades", "AK45", "unwanted-value"),
    ("SMD-0137", "exercises", "B2", "no-dates"),
    ("SMD-0140", "exercises", "C3", "unknown-word"),
    ("SMD-0145", "exercises", "F4", "dates-out-of-order"),
    ("SMD-0147", "writers", "B2", "no-writer-credit"),
    ("SMD-0148", "writers", "E3", "blank-cell"),
    ("SMD-0151", "trades", "AD51", "no-dates"),
    ("SMD-0153", "constituents", "F126", "not-a-number"),
}
#: Trades that nothing is wrong with, or something that costs nothing: SMD-0002 has expired and was paid.
LEFT = {
    *("SMD-0002", "SMD-0012", "SMD-0013", "SMD-0016", "SMD-0017", "SMD-0018", "SMD-0019", "SMD-0020"),
    *("SMD-0089", "SMD-0100", "SMD-0101", "SMD-0125", "SMD-0126", "SMD-0127", "SMD-0129", "SMD-0156"),
}


@lru_cache
def admitted() -> Book:
    return admit(load_book(SAMPLE / "broken_book.xlsx"), load_market(SAMPLE / "market.xlsx"))


def told() -> set[tuple[str, str | None, str | None, str]]:
    return {
        (refusal.trade_id, issue.sheet, issue.cell, issue.code)
        for refusal in admitted().refusals
        for issue in refusal.issues
        if issue.severity is Severity.ERROR
    }


def test_every_mistake_is_told_at_its_cell_and_none_is_made_up():
    assert told() == TOLD


def test_a_mistake_costs_its_own_trade_alone():
    assert {trade.trade_id for trade in admitted()} == LEFT
    assert {refusal.trade_id for refusal in admitted().refusals} == {trade_id for trade_id, *_ in TOLD}


def test_every_table_of_a_book_has_a_mistake():
    assert {table for _, table, _, _ in TOLD} == set(BOOK)


@pytest.mark.parametrize(
    ("trade_id", "words"),
    [
        (
            "SMD-0098",
            'broken_book.xlsx, sheet barriers, row 2, column "level" (cell E2): found 70; expected a decimal '
            "performance (1.00 = 100 %) of at most 4. Did you mean 0.7 (70 %)?",
        ),
        (
            "SMD-0121",
            'broken_book.xlsx, sheet schedules, row 12, column "date" (cell D12): found the date 2029-12-03; expected '
            "a date up to the expiry date 2029-09-03. Correct one of the two.",
        ),
        (
            "SMD-0120",
            'broken_book.xlsx, sheet coupons, row 5, column "feature" (cell B5): found coupons without dates of '
            "purpose coupon; expected their dates and amounts in the table schedules or schedule_rules. Add them under "
            "the same trade_id and feature, or delete the row.",
        ),
        (
            "SMD-0147",
            'broken_book.xlsx, sheet writers, row 2, column "writer" (cell B2): found writer "Pennyfold Capital", '
            "whose hazard rates the market does not know; expected a writer with credit spreads, or with assets and "
            'liabilities. Did you mean "Pennifold Capital"? Correct the name, or add it to the credit table of the '
            "market.",
        ),
        (
            "SMD-0151",
            'broken_book.xlsx, sheet trades, row 51, column "statistic" (cell AD51): found the statistic variance '
            "without dates of purpose observation; expected its dates in the table schedules or schedule_rules. Add "
            "them under the same trade_id.",
        ),
    ],
)
def test_mistakes_on_a_path_are_told_in_full(trade_id, words):
    (refusal,) = [refusal for refusal in admitted().refusals if refusal.trade_id == trade_id]
    assert [str(issue) for issue in refusal.issues] == [words]


def test_a_missing_fixing_says_which_one_to_enter():
    (refusal,) = [refusal for refusal in admitted().refusals if refusal.trade_id == "SMD-0088"]
    assert len(refusal.issues) == 3
    assert "found no fixing of KRUNTEL on 2026-04-03; expected a fixing for every observation up to now." in str(
        refusal.issues[0]
    )
