"""Barriers whose records lie ahead, and barriers that were hit from the start: told before anything is priced."""

from __future__ import annotations

from datetime import date

import pytest

from pricer.core.issues import Severity
from pricer.loader import load_book, load_market, write_tables
from pricer.loader.contract_examples import EXAMPLE_CONTRACTS
from pricer.loader.examples import EXAMPLE_MARKET
from pricer.run.admission import admit


@pytest.fixture
def admitted(tmp_path):
    def made(**changes):
        tables = {name: [dict(row) for row in rows] for name, rows in EXAMPLE_CONTRACTS.items()}
        next(row for row in tables["barriers"] if row["trade_id"] == "EX-8").update(changes)
        write_tables(tables, tmp_path / "book.xlsx")
        write_tables(EXAMPLE_MARKET, tmp_path / "market.xlsx")
        return admit(load_book(tmp_path / "book.xlsx"), load_market(tmp_path / "market.xlsx"))

    return made


TODAY = date(2026, 3, 31)  # by the spots, as there are no fixings yet
UNHIT = {"recorded_hit_date": None, "recorded_payment_date": None}


@pytest.mark.parametrize(
    ("changes", "found"),
    [
        ({"recorded_hit_date": date(2026, 6, 17), "recorded_payment_date": None}, "a hit recorded on 2026-06-17"),
        ({**UNHIT, "clear_until": date(2027, 3, 31)}, "a barrier known to be clear until 2027-03-31"),
    ],
)
def test_a_record_of_a_day_to_come_keeps_its_trade_from_being_priced(admitted, changes, found):
    (refusal,) = admitted(**changes).refusals
    (issue,) = (issue for issue in refusal.issues if issue.code != "missing-fixing")
    assert (refusal.trade_id, issue.code, issue.sheet) == ("EX-8", "record-of-later-day", "barriers")
    assert issue.found.startswith(found)


def test_records_up_to_tonight_are_taken(admitted):
    book = admitted()
    assert book.refusals == () and book.issues == ()


def test_a_barrier_hit_on_its_first_day_is_told(admitted):
    book = admitted(**UNHIT, direction="up", clear_until=None, start_date=TODAY)
    assert book.refusals == ()
    found = [issue for issue in book.issues if issue.code == "hit-from-the-start"]
    assert [(issue.trade_id, issue.severity) for issue in found] == [("EX-8", Severity.WARNING)]
    assert found[0].found == "a knock-in that was hit on 2026-03-31, the first day it was watched"
