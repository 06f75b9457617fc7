"""Every European trade of the sample book that QuantLib can express, by QuantLib's own engines."""

from __future__ import annotations

from functools import lru_cache
from pathlib import Path

import numpy as np
import pytest

from pricer.engines.closed_form import best_exact, references
from pricer.engines.european import problem_of
from pricer.engines.monte_carlo import sample
from pricer.loader import load_book, load_market
from tests.reference.quantlib_engines import can_express, independent_value

SAMPLE = Path(__file__).parents[2] / "sample_books" / "saltmarsh_desk"


@lru_cache
def desk():
    return load_book(SAMPLE / "book.xlsx"), load_market(SAMPLE / "market.xlsx")


TRADES = [trade.trade_id for trade in desk()[0].trades]


@pytest.mark.parametrize("trade_id", TRADES)
def test_quantlib_agrees(trade_id):
    book, market = desk()
    trade = next(t for t in book.trades if t.trade_id == trade_id)
    problem = problem_of(trade, market)
    if not can_express(problem):
        pytest.skip(f"QuantLib has no payoff on the aggregate '{problem.aggregate.kind}'")
    independent = independent_value(problem)
    spots = np.array([market.underlyings[u].spot for u in trade.contract.underlyings])
    notional = trade.contract.unit_notional(spots)
    allowed = independent.resolution * max(notional, abs(independent.value))

    drawn = sample(problem, group=trade_id, seed=3, value_tolerance=1e-4 * notional, delta_tolerance=1e-2 * notional)
    # 6 standard errors: Student with 15 degrees of freedom, 60 trades, one failure in 700 runs
    assert abs(drawn.value - independent.value) <= 6.0 * drawn.standard_error + allowed, independent.engines

    exact = best_exact(references(problem))
    if exact is not None:
        assert abs(exact.value - independent.value) <= exact.error + allowed, (exact.method, independent.engines)


def test_most_of_the_sample_can_be_expressed():
    book, market = desk()
    expressed = sum(can_express(problem_of(trade, market)) for trade in book.trades)
    assert expressed >= 48, f"{expressed} of {len(book)}"
