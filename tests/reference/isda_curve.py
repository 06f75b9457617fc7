"""The dollar curve of 21 May 2009 under which the published standard-model upfronts were computed.

Deposits and swaps as in QuantLib's test suite (creditdefaultswap.cpp, testIsdaEngine), which quotes
the values of the ISDA CDS Standard Model; from memory, and confirmed by the upfronts it gives.
"""

from __future__ import annotations

from datetime import date

import QuantLib as ql

from pricer.market.calendars import from_quantlib, to_quantlib
from pricer.market.curves import DiscountCurve
from pricer.market.evaluation_date import evaluation_date

TRADE_DATE = date(2009, 5, 21)
_DEPOSITS = ((1, 0.003081), (2, 0.005525), (3, 0.007163), (6, 0.012413), (9, 0.014), (12, 0.015488))
_SWAPS = (
    (2, 0.011907), (3, 0.01699), (4, 0.021198), (5, 0.02444), (6, 0.026937), (7, 0.028967), (8, 0.030504),
    (9, 0.031719), (10, 0.03279), (12, 0.034535), (15, 0.036217), (20, 0.036981), (25, 0.037246), (30, 0.037605),
)  # fmt: skip


def discount_curve() -> DiscountCurve:
    """Deposits on ACT/360 and three-month swaps with half-yearly 30/360, all on weekdays."""
    with evaluation_date(TRADE_DATE):
        nodes = _nodes(to_quantlib(TRADE_DATE))
    return DiscountCurve.from_discount_factors(
        "USD-2009", "USD", "", TRADE_DATE, [day for day, _ in nodes], [factor for _, factor in nodes]
    )


def _nodes(today):
    weekdays, rolled = ql.WeekendsOnly(), ql.ModifiedFollowing
    index = ql.IborIndex(
        "USD three months", ql.Period(3, ql.Months), 2, ql.USDCurrency(), weekdays, rolled, False, ql.Actual360()
    )
    helpers = [
        ql.DepositRateHelper(rate, ql.Period(months, ql.Months), 2, weekdays, rolled, False, ql.Actual360())
        for months, rate in _DEPOSITS
    ] + [
        ql.SwapRateHelper(
            rate, ql.Period(years, ql.Years), weekdays, ql.Semiannual, rolled,
            ql.Thirty360(ql.Thirty360.BondBasis), index,
        )
        for years, rate in _SWAPS
    ]  # fmt: skip
    nodes = ql.PiecewiseLogLinearDiscount(today, helpers, ql.Actual365Fixed()).nodes()
    return [(from_quantlib(day), factor) for day, factor in nodes]
