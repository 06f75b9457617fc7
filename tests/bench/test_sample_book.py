"""The whole sample book at default settings: seconds, by kind of trade; all priced, nothing disputed."""

from collections import Counter
from pathlib import Path

import pytest

from pricer import Settings, load_book, load_market, price
from pricer.contracts.contract import Contract
from pricer.run.outcome import Status

SAMPLE = Path(__file__).parents[2] / "sample_books" / "saltmarsh_desk"


@pytest.mark.bench
def test_the_sample_book_is_priced_whole():
    book = load_book(SAMPLE / "book.xlsx")
    outcome = price(book, load_market(SAMPLE / "market.xlsx"), Settings(workers=2))
    timings = dict(outcome.facts.timings)
    paths = {trade.trade_id for trade in book if isinstance(trade.contract, Contract)}
    by_kind: Counter[str] = Counter()
    for valuation in outcome.valuations:
        by_kind["contracts with a path" if valuation.trade_id in paths else "European options"] += valuation.seconds
    print(f"\n{len(book)} trades: {timings}; summed by kind {dict(by_kind)}")
    for valuation in sorted(outcome.valuations, key=lambda v: -v.seconds)[:12]:
        print(f"  {valuation.trade_id} {valuation.product:50} {valuation.seconds:5.1f} s  {valuation.ending}")
    assert not outcome.refusals
    assert all(valuation.status is not Status.DISPUTED for valuation in outcome.valuations)
