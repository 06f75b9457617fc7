"""Why trades have no price: a cause that many share is told once."""

from __future__ import annotations

from dataclasses import replace

from pricer.contracts.book import Refusal
from pricer.core.issues import Severity
from pricer.report import tables
from pricer.report.refusal_causes import Side, refusal_causes
from pricer.run.outcome import Status
from tests.unit.report_outcomes import empty, issue, valuation

LACKING = issue(code="no-volatility", sheet="constituents", found='underlying "A", which has no usable volatility')


def causes(*refused: Refusal):
    return refusal_causes(empty(refusals=refused))


def test_one_cause_is_counted_over_its_trades_whatever_their_cells():
    found = causes(Refusal("T1", (LACKING,)), Refusal("T2", (replace(LACKING, row=40, cell="B40"), issue())))
    assert [(c.trades, c.alone, c.kind, c.first_trade) for c in found] == [
        (2, 1, "no volatility", "T1"),
        (1, 0, "not positive", "T2"),
    ]
    assert [c.side for c in found] == [Side.MARKET, Side.BOOK]


def test_a_cause_told_twice_of_a_trade_counts_once():
    (found,) = causes(Refusal("T1", (LACKING, replace(LACKING, row=13))))
    assert (found.trades, found.alone) == (1, 1)


def test_another_item_is_another_cause():
    assert len(causes(Refusal("T1", (LACKING,)), Refusal("T2", (replace(LACKING, found="underlying B"),)))) == 2


def test_warnings_keep_no_trade_from_a_price():
    (found,) = causes(Refusal("T1", (replace(LACKING, severity=Severity.WARNING), issue())))
    assert found.kind == "not positive"


def test_a_cause_of_one_trade_is_told_with_its_place():
    (one,) = causes(Refusal("T1", (issue(),)))
    assert one.words == (
        'may_book.xlsx, sheet trades, row 12, column "strike" (cell H12): found 0; expected a price above 0. '
        "Enter the strike in currency, e.g. 95."
    )
    (shared,) = causes(Refusal("T1", (issue(),)), Refusal("T2", (issue(),)))
    assert shared.words == "found 0; expected a price above 0. Enter the strike in currency, e.g. 95."


def test_no_trade_without_a_price_lacks_a_cause():
    run = empty(
        valuations=(valuation(1, trade_id="V", status=Status.NOT_PRICED, ending="stopped"),),
        refusals=(Refusal("R", ()),),
    )
    assert [(c.first_trade, c.kind, c.found) for c in refusal_causes(run)] == [
        ("V", "no value", "stopped"),
        ("R", "no reason", "no reason that was recorded"),
    ]
    assert tables(run)["refusal_causes"]["trades"].tolist() == [1, 1]
