"""Discount curves, repo and dividends of the sample: what forwards are made of."""

from __future__ import annotations

import math
from datetime import date

from pricer.market.affine_price import AffinePrice
from pricer.market.calendars import add_tenor, roll
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.quoted_curves import QuoteKind, RateQuote
from pricer.market.repo import RepoCurve
from saltmarsh.facts import UNDERLYINGS, VALUATION_DATE, Row, years_to

#: Curves and what stands for them: currency, collateral, day count, calendar.
CURVES = {
    "EUR-STANDARD": ("EUR", "", "ACT/365F", "TARGET"),
    "USD-STANDARD": ("USD", "", "ACT/365F", "US"),
    "GBP-STANDARD": ("GBP", "", "ACT/365F", "UK"),
    "EUR-USD-CASH": ("EUR", "USD", "ACT/365F", "TARGET"),
    "GBP-EUR-CASH": ("GBP", "EUR", "ACT/365F", "UK"),
}
TENORS = {"1W": 0.02, "1M": 0.08, "3M": 0.25, "6M": 0.5, "1Y": 1.0, "2Y": 2.0, "3Y": 3.0, "5Y": 5.0, "7Y": 7.0}
#: Short and long rate of the curves given by zero rates, or by discount factors.
ZERO_RATES = {
    "USD-STANDARD": (0.0365, 0.0338),
    "GBP-STANDARD": (0.0372, 0.0359),
    "EUR-USD-CASH": (0.0179, 0.0226),
    "GBP-EUR-CASH": (0.0366, 0.0351),
}
DEPOSITS = {"1D": 0.01885, "1W": 0.01890, "1M": 0.01902, "3M": 0.01921, "6M": 0.01948}
OVERNIGHT_SWAPS = {"1Y": 0.01987, "18M": 0.02032, "2Y": 0.02071, "3Y": 0.02139, "4Y": 0.02194, "5Y": 0.02241,
                   "7Y": 0.02318}  # fmt: skip
#: Long and short repo rates at half a year, two years and six.
REPO_DATES = (date(2027, 5, 31), date(2028, 11, 30), date(2032, 11, 30))
REPO = {
    "ORLUMA": ((0.0197, 0.0186), (0.0208, 0.0196), (0.0229, 0.0216)),
    "PELLOMAR": ((0.0150, 0.0085), (0.0172, 0.0112), (0.0205, 0.0155)),  # hard to borrow
    "KRUNTEL": ((0.0366, 0.0351), (0.0357, 0.0341), (0.0346, 0.0329)),
    "DRUVEX": ((0.0374, 0.0362), (0.0368, 0.0355), (0.0363, 0.0348)),
}

_YEARS = (2027, 2028, 2029, 2030, 2031)
#: Payments a year of those with discrete dividends: month and day of the ex dates, cash amount of
#: each, growth a year, first year of proportional ones, fraction of each from then on.
PAYERS: dict[str, tuple[tuple[tuple[int, int], ...], float, float, int, float]] = {
    "ORLUMA": (((5, 12),), 1.80, 0.03, 2029, 0.0210),
    "TESKIR": (((4, 21),), 2.60, 0.04, 2028, 0.0120),
    "VADRONE": (((5, 5), (11, 3)), 0.62, 0.02, 2029, 0.0170),
    "KRUNTEL": (((2, 11), (5, 13), (8, 12), (11, 11)), 0.31, 0.05, 2029, 0.0020),
    "SORBEQ": (((3, 10), (6, 9), (9, 8), (12, 8)), 0.38, 0.02, 2028, 0.0062),
    "DRUVEX": (((4, 8), (10, 7)), 0.108, 0.02, 2029, 0.0205),
    "FENTRICK": (((6, 17), (12, 9)), 0.049, 0.01, 2028, 0.0180),
    "PELLOMAR": (((5, 12),), 0.0, 0.0, 2027, 0.0185),
    "MIZZANT": (((3, 3), (9, 1)), 0.0, 0.0, 2027, 0.0035),
}


def curve_points(curve: str) -> list[Row]:
    """The rows of a curve in the table curve_points."""
    if curve == "EUR-STANDARD":
        return [
            *({"curve": curve, "tenor": tenor, "deposit_rate_decimal": rate} for tenor, rate in DEPOSITS.items()),
            *(
                {"curve": curve, "tenor": tenor, "overnight_swap_rate_decimal": rate}
                for tenor, rate in OVERNIGHT_SWAPS.items()
            ),
        ]
    rates = _zero_rates(curve)
    if curve == "GBP-EUR-CASH":
        days = {add_tenor("UK", VALUATION_DATE, tenor): rate for tenor, rate in rates.items()}
        return [
            {"curve": curve, "date": day, "discount_factor": round(math.exp(-rate * years_to(day)), 8)}
            for day, rate in days.items()
        ]
    return [{"curve": curve, "tenor": tenor, "zero_rate_decimal": rate} for tenor, rate in rates.items()]


def dividends(underlying: str) -> Dividends:
    """Yield, cash amounts of the next years, and fractions of the price after them."""
    rate = UNDERLYINGS[underlying][4]
    if underlying not in PAYERS:
        return Dividends(rate)
    days, amount, growth, proportional_from, fraction = PAYERS[underlying]
    calendar = UNDERLYINGS[underlying][2]
    coming = [(year, roll(calendar, date(year, *day))) for year in (2026, *_YEARS) for day in days]
    coming = [(year, day) for year, day in coming if day > VALUATION_DATE]
    cash = [
        CashDividend(day, round(amount * (1.0 + growth) ** (year - 2026), 4))
        for year, day in coming
        if year < proportional_from and amount
    ]
    later = [ProportionalDividend(day, fraction) for year, day in coming if year >= proportional_from]
    return Dividends(rate, tuple(later), tuple(cash))


def growth_curve(underlying: str) -> DiscountCurve:
    """The curve at which the spot grows: the mid of its repo rates, or its currency's."""
    currency = UNDERLYINGS[underlying][0]
    if underlying not in REPO:
        return _standard_curve(currency)
    paid, earned = zip(*REPO[underlying], strict=True)
    return RepoCurve.from_zero_rates(underlying, currency, VALUATION_DATE, REPO_DATES, paid, earned).mid


def _standard_curve(currency: str) -> DiscountCurve:
    name = f"{currency}-STANDARD"
    if name in ZERO_RATES:
        days = [add_tenor(CURVES[name][3], VALUATION_DATE, tenor) for tenor in TENORS]
        return DiscountCurve.from_zero_rates(name, currency, "", VALUATION_DATE, days, list(_zero_rates(name).values()))
    return DiscountCurve.from_quotes(name, currency, "", VALUATION_DATE, euro_quotes())


def euro_quotes() -> list[RateQuote]:
    """The deposits and overnight swaps of the euro curve."""
    return [
        *(RateQuote(QuoteKind.DEPOSIT, tenor, rate) for tenor, rate in DEPOSITS.items()),
        *(RateQuote(QuoteKind.OVERNIGHT_SWAP, tenor, rate) for tenor, rate in OVERNIGHT_SWAPS.items()),
    ]


def _zero_rates(curve: str) -> dict[str, float]:
    short, long = ZERO_RATES[curve]
    return {tenor: round(long + (short - long) * math.exp(-years / 1.8), 5) for tenor, years in TENORS.items()}


def affine_price(underlying: str) -> AffinePrice:
    """The underlying's price on all dates."""
    return AffinePrice.of(underlying, UNDERLYINGS[underlying][1], dividends(underlying), growth_curve(underlying))
