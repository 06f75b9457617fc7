"""Trades with a past, read from files beside a market's fixings: admitted, refused at their cells, and listed ahead."""

from copy import deepcopy
from datetime import date

import pytest

from pricer.contracts.life_cycle import Status
from pricer.loader import load_book, load_market, write_tables
from pricer.market.standing import standing
from pricer.run.admission import admit
from pricer.run.events import events
from tests.unit.market_tables import small_market

NOTE = {
    "trade_id": "N-1", "product": "note", "direction": "short", "underlying_level": "performance",
    "notional": 2_000_000.0, "aggregate": "worst of", "put_strike": 1.0, "expiry_date": date(2027, 3, 19),
    "settlement_lag_days": 2.0, "currency": "EUR", "trade_date": date(2025, 3, 19), "counterparty": "Guldmar Bank",
}  # fmt: skip
EXPIRED = {
    "trade_id": "E-1", "product": "european option", "direction": "long", "underlying_level": "price",
    "quantity": 1000.0, "aggregate": "weighted sum", "profile": "call", "strike": 80.0,
    "expiry_date": date(2026, 3, 30), "settlement_lag_days": 2.0, "currency": "EUR",
}  # fmt: skip
BOOK = {
    "trades": [NOTE, EXPIRED],
    "constituents": [
        {"trade_id": "N-1", "underlying": "ORLUMA", "initial_fixing": 80.0},
        {"trade_id": "N-1", "underlying": "TESKIR", "initial_fixing": 210.0},
        {"trade_id": "E-1", "underlying": "ORLUMA", "weight": 1.0},
    ],
    "schedules": [
        {"trade_id": "N-1", "purpose": "call", "date": day, "level": 1.0, "amount": 1.05}
        for day in (date(2025, 9, 19), date(2026, 3, 19), date(2026, 4, 7), date(2026, 9, 18))
    ],
}
PAST = [
    ("ORLUMA", date(2025, 9, 19), 78.0), ("TESKIR", date(2025, 9, 19), 215.0),
    ("ORLUMA", date(2026, 3, 19), 79.0), ("TESKIR", date(2026, 3, 19), 216.0),
    ("ORLUMA", date(2026, 3, 30), 83.5),
]  # fmt: skip


@pytest.fixture
def loaded(tmp_path):
    def load(rows):
        fixings = [{"underlying": name, "date": day, "level": level} for name, day, level in rows]
        write_tables(deepcopy(BOOK), tmp_path / "book.xlsx")
        write_tables(small_market() | {"fixings": fixings}, tmp_path / "market.xlsx")
        book, market = load_book(tmp_path / "book.xlsx"), load_market(tmp_path / "market.xlsx")
        assert (book.issues, book.refusals) == ((), ())
        return book, market

    return load


def test_with_all_fixings_every_trade_is_admitted_and_the_week_is_listed(loaded):
    book, market = loaded(PAST)
    admitted = admit(book, market)
    assert (len(admitted), admitted.issues) == (2, ())
    assert [standing(trade, market).status for trade in admitted] == [Status.LIVE, Status.TO_BE_PAID]
    assert [(row.trade_id, row.day, row.what, row.amount) for row in events(book, market)] == [
        ("E-1", date(2026, 4, 1), "payment: final payoff", pytest.approx(3500.0)),
        ("N-1", date(2026, 4, 7), "call", pytest.approx(-2_100_000.0)),
    ]


def test_missing_fixings_cost_the_trades_that_need_them_at_their_cells(loaded):
    book, market = loaded(PAST[:3])
    admitted = admit(book, market)
    assert len(admitted) == 0
    assert [(i.trade_id, i.sheet, i.row, i.column, i.found) for i in admitted.issues] == [
        ("N-1", "schedules", 3, "date", "no fixing of TESKIR on 2026-03-19"),
        ("E-1", "trades", 3, "expiry_date", "no fixing of ORLUMA on 2026-03-30"),
    ]
    assert admitted.issues[0].mend.startswith(
        "Add a row to the market's fixings table: underlying TESKIR, date 2026-03-19, and the official level"
    )
    assert [(row.trade_id, row.day, row.what) for row in events(book, market)] == [
        ("N-1", date(2026, 3, 19), "fixing missing"),
        ("E-1", date(2026, 3, 30), "fixing missing"),
    ]


def test_a_note_that_was_called_is_settled_and_stays_in_the_book(loaded):
    book, market = loaded([("ORLUMA", date(2025, 9, 19), 81.0), *PAST[1:2], PAST[-1]])
    admitted = admit(book, market)
    assert (len(admitted), admitted.issues) == (2, ())
    assert standing(admitted.trades[0], market).status is Status.SETTLED
