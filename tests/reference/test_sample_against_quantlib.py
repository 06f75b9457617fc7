"""Every European trade of the sample book that QuantLib can express, by QuantLib's own engines.

Under the lognormal model, quantos and composites included. Cash dividends still to come at expiry are known
amounts of a sum and move its strikes; ranked and geometric aggregates of such prices have no law that
QuantLib knows, and are left to the tests of sampling by paths.
"""

from __future__ import annotations

from functools import lru_cache
from pathlib import Path

import pytest

from pricer.contracts.option import EuropeanOption
from pricer.engines.closed_form import best_exact, references
from pricer.engines.monte_carlo import sample
from pricer.engines.unit_terms import UnitTerms
from pricer.loader import load_book, load_market
from tests.reference.quantlib_engines import can_express, independent_value

SAMPLE = Path(__file__).parents[2] / "sample_books" / "saltmarsh_desk"


@lru_cache
def desk():
    return load_book(SAMPLE / "book.xlsx"), load_market(SAMPLE / "market.xlsx")


TRADES = {trade.trade_id: trade for trade in desk()[0].trades if isinstance(trade.contract, EuropeanOption)}


@pytest.mark.parametrize("trade_id", TRADES)
def test_quantlib_agrees(trade_id):
    trade, market = TRADES[trade_id], desk()[1]
    terms = UnitTerms.of(trade, market)
    problem = terms.lognormal()
    if problem is None:
        pytest.skip("cash dividends still to come leave this aggregate without a lognormal law")
    if not can_express(problem):
        pytest.skip(f"QuantLib has no payoff on the aggregate '{problem.aggregate.kind}'")
    independent = independent_value(problem)
    notional = terms.unit_notional
    allowed = independent.resolution * max(notional, abs(independent.value))

    drawn = sample(problem, group=trade_id, seed=3, value_tolerance=1e-4 * notional, delta_tolerance=1e-2 * notional)
    # 6 standard errors: Student with 15 degrees of freedom, 85 trades, one failure in 500 runs
    assert abs(drawn.value - independent.value) <= 6.0 * drawn.standard_error + allowed, independent.engines

    exact = best_exact(references(problem))
    if exact is not None:
        assert abs(exact.value - independent.value) <= exact.error + allowed, (exact.method, independent.engines)


def test_most_of_the_sample_can_be_expressed():
    problems = [UnitTerms.of(trade, desk()[1]).lognormal() for trade in TRADES.values()]
    expressed = sum(problem is not None and can_express(problem) for problem in problems)
    assert expressed >= 55, f"{expressed} of {len(TRADES)}"
