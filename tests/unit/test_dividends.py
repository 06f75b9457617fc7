"""What dividends leave of a forward."""

import math
from datetime import date

import pytest

from pricer.market.dividends import Dividends, ProportionalDividend

TODAY = date(2026, 11, 30)


def test_yield_and_proportional_dividends_multiply():
    dividends = Dividends(
        0.02, (ProportionalDividend(date(2027, 5, 12), 0.03), ProportionalDividend(date(2028, 5, 10), 0.01))
    )
    between, after = date(2027, 11, 30), date(2028, 11, 29)
    assert dividends.growth(TODAY, between) == pytest.approx(math.exp(-0.02) * 0.97, rel=1e-15)
    assert dividends.growth(TODAY, after) == pytest.approx(math.exp(-0.04) * 0.97 * 0.99, rel=1e-15)


def test_an_ex_date_counts_from_its_own_day_on_and_todays_not_at_all():
    dividends = Dividends(0.0, (ProportionalDividend(TODAY, 0.5), ProportionalDividend(date(2026, 12, 2), 0.1)))
    assert dividends.growth(TODAY, date(2026, 12, 1)) == 1.0
    assert dividends.growth(TODAY, date(2026, 12, 2)) == 0.9


def test_a_published_forward_on_an_asset_with_a_yield():
    """Hull, Options, Futures and Other Derivatives, chapter 5, forward on an asset paying a known yield:
    spot 25, rate 10 %, yield 3.96 % (both continuous), six months: 25.77 (from memory).

    Half the rates over a whole year, because no date lies half of 365 days ahead."""
    growth = Dividends(0.0396 / 2).growth(date(2026, 1, 1), date(2027, 1, 1))
    assert 25.0 * growth * math.exp(0.10 / 2) == pytest.approx(25.77, abs=0.005)


def test_no_dividends_leave_all():
    assert Dividends().growth(TODAY, date(2036, 1, 1)) == 1.0


def test_impossible_dividends_are_refused():
    for fraction in (-0.01, 1.0, math.nan):
        with pytest.raises(ValueError, match="must be a fraction from 0 to below 1"):
            ProportionalDividend(TODAY, fraction)
    with pytest.raises(ValueError, match="must be a finite number"):
        Dividends(math.inf)
    with pytest.raises(ValueError, match="lies before the valuation date"):
        Dividends().growth(TODAY, date(2026, 11, 29))
