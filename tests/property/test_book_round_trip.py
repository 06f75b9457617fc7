"""A book that is written and read again is the same book, to the last bit of every number."""

from __future__ import annotations

import tempfile
from datetime import date, timedelta
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.book import Book, Model, Premium, Trade
from pricer.contracts.option import Conversion, EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind
from pricer.core.issues import Severity
from pricer.loader import load_book, write_book, write_tables
from pricer.loader.contract_examples import WHOLE_BOOK
from pricer.loader.schema import BOOK
from pricer.loader.text import clean, half_width
from pricer.market.calendars import CURRENCY_CALENDARS, advance

DIGITALS = (ProfileKind.CASH_DIGITAL_CALL, ProfileKind.CASH_DIGITAL_PUT)


def readable(text: str) -> bool:
    """Text as it is kept: no outer, double or invisible spaces."""
    return text == clean(text)[0]


# Formula starts, quotation marks and separators are the characters most likely to go wrong.
names = st.one_of(
    st.text(alphabet=st.characters(codec="utf-8", exclude_categories=("C",)), min_size=1, max_size=12),
    st.text(alphabet="=+-@'\";,_x0041 A1.\t", min_size=1, max_size=10),
).filter(lambda text: text and readable(text))
ids = names.filter(lambda text: text == half_width(text))
days = st.dates(date(2026, 1, 1), date(2060, 12, 31))
positive = st.floats(1e-6, 1e12)
small = st.floats(1e-3, 3.0)


@st.composite
def aggregates(draw, n: int, profile: ProfileKind) -> Aggregate:
    signed = st.floats(0.01, 5.0).flatmap(lambda size: st.sampled_from([size, -size]))
    if profile is ProfileKind.EXCHANGE:
        return Aggregate.weighted_sum((draw(st.floats(0.01, 5.0)), -draw(st.floats(0.01, 5.0))))
    kind = draw(st.sampled_from(AggregateKind))
    match kind:
        case AggregateKind.WEIGHTED_SUM:
            return Aggregate.weighted_sum(tuple(draw(st.lists(signed, min_size=n, max_size=n))))
        case AggregateKind.GEOMETRIC:
            return Aggregate.geometric(tuple(draw(st.lists(st.floats(0.01, 5.0), min_size=n, max_size=n))))
        case AggregateKind.BEST_OF:
            return Aggregate.best_of(n, draw(st.none() | small))
        case AggregateKind.WORST_OF:
            return Aggregate.worst_of(n, draw(st.none() | small))
        case AggregateKind.KTH_BEST:
            return Aggregate.kth_best(draw(st.integers(1, n)), n)
        case AggregateKind.RANK_WEIGHTED:
            return Aggregate.rank_weighted(tuple(draw(st.lists(signed, min_size=n, max_size=n))))


@st.composite
def trades(draw, trade_id: str) -> Trade:
    kind = draw(st.sampled_from(ProfileKind))
    n = 2 if kind is ProfileKind.EXCHANGE else draw(st.integers(1, 4))
    aggregate = draw(aggregates(n, kind))
    on_performance = draw(st.booleans())
    scale = sum(map(abs, aggregate.weights))
    floor = draw(st.none() | st.floats(-1.0, 1.0))
    profile = Profile(
        kind,
        strike=0.0 if kind is ProfileKind.EXCHANGE else draw(st.floats(0.0, 4.0)) * scale,
        cash_amount=draw(small) if kind in DIGITALS else 1.0,
        floor=floor,
        cap=draw(st.none() | st.floats(1.5, 10.0)),
    )
    currency = draw(st.sampled_from(sorted(CURRENCY_CALENDARS)))
    expiry = draw(days)
    contract = EuropeanOption(
        underlyings=tuple(draw(st.lists(ids, min_size=n, max_size=n, unique=True))),
        reference_levels=tuple(draw(positive) for _ in range(n)) if on_performance else (1.0,) * n,
        aggregate=aggregate,
        profile=profile,
        expiry_date=expiry,
        payment_date=advance(CURRENCY_CALENDARS[currency], expiry, draw(st.integers(0, 15))),
        on_performance=on_performance,
        conversion=draw(st.none() | st.sampled_from(Conversion)),
    )
    trade_date = draw(st.none() | st.integers(0, 2000).map(lambda back: expiry - timedelta(days=back)))
    paid = (trade_date or expiry) + timedelta(days=draw(st.integers(0, 30)))
    return Trade(
        trade_id=trade_id,
        contract=contract,
        position=draw(positive) * draw(st.sampled_from([1.0, -1.0])),
        currency=currency,
        collateral=draw(st.just("") | ids),
        trade_date=trade_date,
        premium=draw(st.none() | st.floats(-1e9, 1e9).map(lambda amount: Premium(amount, paid))),
        counterparty=draw(st.just("") | names),
        netting_set=draw(st.just("") | names),
        strategy=draw(st.just("") | names),
        model=draw(st.none() | st.sampled_from(Model)),
    )


books = st.lists(ids, min_size=1, max_size=4, unique=True).flatmap(
    lambda trade_ids: st.tuples(*(trades(trade_id) for trade_id in trade_ids)).map(lambda found: Book("any", found))
)


@pytest.mark.parametrize("name", ["book.xlsx", "book"])
@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(book=books)
def test_a_book_that_is_written_and_read_again_is_the_same(name, book):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / name
        write_book(book, path)
        again = load_book(path)
    assert again.refusals == ()
    assert again.trades == book.trades


# What people, and other programs, put into cells
cells = st.one_of(
    st.none(),
    st.booleans(),
    st.floats(allow_nan=False, allow_infinity=False),
    st.integers(-(10**18), 10**18),
    days,
    names,
    st.sampled_from(
        [
            "#N/A",
            "nan",
            "1,5",
            "1,000",
            "50%",
            "03/04/2026",
            "2026-02-30",
            "EX-1",
            "EX-99",
            "EUR",
            "GBp",
            "; ;",
            "yes",
            "option",
            "note",
            "call",
            "barrier",
            "accrual",
            "1D",
            "average",
            "daily",
            "dates",
            "at hit",
        ]
    ),
)
places = st.sampled_from(
    [
        (table, row, column)
        for table, rows in WHOLE_BOOK.items()
        for row in range(len(rows))
        for column in BOOK[table].columns
    ]
)


@pytest.mark.parametrize("name", ["book.xlsx", "book"])
@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(changes=st.lists(st.tuples(places, cells), min_size=1, max_size=6))
def test_whatever_stands_in_the_cells_every_row_is_a_trade_or_a_refusal(name, changes):
    tables = {table: [dict(row) for row in rows] for table, rows in WHOLE_BOOK.items()}
    for (table, row, column), value in changes:
        tables[table][row][column] = value
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / name
        write_tables(tables, path)
        book = load_book(path)
    rows = sum(any(value not in (None, "") for value in row.values()) for row in tables["trades"])
    listed = [trade.trade_id for trade in book] + [refusal.trade_id for refusal in book.refusals]
    assert len(listed) >= rows
    assert len({trade.trade_id for trade in book}) == len(book)
    legs = sum(len(trade.contract.underlyings) for trade in book)
    assert legs <= len(tables["constituents"])
    assert all(any(issue.severity is not Severity.WARNING for issue in refusal.issues) for refusal in book.refusals)
    assert all(issue.found and issue.expected and issue.mend.endswith((".", "?")) for issue in book.issues)
