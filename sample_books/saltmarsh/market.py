"""Tonight's market of the sample: every table that a market may have, and every way of quoting in one of them.

- Curves: EUR from deposits and overnight swaps; USD and GBP, and EUR under USD collateral, from zero
  rates; GBP under EUR collateral from discount factors.
- Dividends: near ones as cash amounts, later ones as parts of the price; three underlyings have a
  yield. Repo for four.
- Smiles: by strike in currency, by strike in per cent of the forward, by parameters, and one
  underlying without a smile; see :data:`QUOTED`.
- Exchange rates: three pairs, of which two have a volatility and correlations; the third follows.
- Credit default swaps of the desk and its counterparties, the desk's funding, its agreements, and a history
  of closing levels that the snapshot does not use (it says "table"; "price history" would).
"""

from __future__ import annotations

import math
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.market.affine_price import AffineLevel, AffinePrice
from pricer.market.calendars import add_tenor, roll, year_fraction
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.quoted_curves import QuoteKind, RateQuote
from pricer.market.repo import RepoCurve
from saltmarsh.facts import COUNTERPARTIES, DESK, FX_SPOTS, UNDERLYINGS, VALUATION_DATE, Row, Tables
from saltmarsh.history import price_history
from saltmarsh.smiles import Dynamics, parameters, volatility

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
_PAYERS: dict[str, tuple[tuple[tuple[int, int], ...], float, float, int, float]] = {
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

EXPIRIES = (date(2026, 12, 18), date(2027, 1, 15), date(2027, 3, 19), date(2027, 6, 18), date(2027, 12, 17),
            date(2028, 12, 15), date(2029, 12, 21), date(2031, 12, 19))  # fmt: skip
STRIKE, OF_FORWARD, PARAMETERS, FLAT = "strike", "of forward", "parameters", "flat"
#: How each underlying's volatilities are quoted, and how skewed they are (1: usual).
QUOTED = {
    "ORLUMA": (STRIKE, 1.10),
    "TESKIR": (STRIKE, 0.95),
    "VADRONE": (STRIKE, 1.20),
    "PELLOMAR": (OF_FORWARD, 0.80),
    "KRUNTEL": (STRIKE, 1.00),
    "SORBEQ": (OF_FORWARD, 1.05),
    "MIZZANT": (PARAMETERS, 0.70),
    "HALQUIN": (OF_FORWARD, 1.30),
    "DRUVEX": (STRIKE, 1.10),
    "YONNARD": (PARAMETERS, 0.90),
    "FENTRICK": (OF_FORWARD, 0.85),
    "WEXMOOR": (FLAT, 0.0),
}
#: Strikes in standard deviations from the forward.
_DEVIATIONS = (-2.2, -1.6, -1.1, -0.6, -0.2, 0.2, 0.7, 1.2, 1.8)

#: Yearly volatility of the pairs that have one, and the correlation of the two.
FX_VOLATILITIES = {"EURUSD": 0.0780, "EURGBP": 0.0640}
_FX_CORRELATION = 0.42
#: Correlation of each pair with the common factor of a region: euros fall and sterling falls more when shares do.
_FX_AND_REGION = {
    "EURUSD": {"EUR": -0.12, "USD": 0.18, "GBP": 0.02},
    "EURGBP": {"EUR": -0.22, "USD": -0.20, "GBP": 0.15},
}
_BETWEEN_REGIONS = 0.55

#: Spreads by name at 1, 2, 3, 5, 7 and 10 years, and recovery.
CREDIT_TENORS = ("1Y", "2Y", "3Y", "5Y", "7Y", "10Y")
CREDIT = {
    DESK: ("EUR", 0.40, (0.0042, 0.0053, 0.0064, 0.0085, 0.0098, 0.0109)),
    "Ostrevane Pension Trust": ("EUR", 0.40, (0.0018, 0.0023, 0.0029, 0.0041, 0.0050, 0.0058)),
    "Guldmar Bank": ("EUR", 0.40, (0.0036, 0.0047, 0.0058, 0.0079, 0.0091, 0.0102)),
    "Thrayle Insurance": ("GBP", 0.40, (0.0029, 0.0039, 0.0050, 0.0071, 0.0084, 0.0095)),
    "Pennifold Capital": ("USD", 0.35, (0.0155, 0.0182, 0.0205, 0.0238, 0.0251, 0.0260)),
    "Ambervale Fund": ("USD", 0.30, (0.0340, 0.0352, 0.0361, 0.0375, 0.0380, 0.0384)),  # almost flat, and high
}
FUNDING = {"3M": (0.0048, 0.0009), "1Y": (0.0060, 0.0011), "2Y": (0.0071, 0.0012), "3Y": (0.0080, 0.0013),
           "5Y": (0.0094, 0.0014), "7Y": (0.0103, 0.0014)}  # fmt: skip


def market_tables() -> Tables:
    """The market of the valuation date."""
    names = [*UNDERLYINGS, *FX_VOLATILITIES]
    matrix = correlation_matrix()
    return {
        "snapshot": [
            {
                "valuation_date": VALUATION_DATE,
                "reporting_currency": "EUR",
                "correlation_source": "table",
                "correlation_half_life_days": 60,
            }
        ],
        "underlyings": [
            {
                "underlying": u,
                "currency": currency,
                "spot": spot,
                "calendar": calendar,
                "lot_size": lot,
                "dividend_yield_decimal": dividend,
            }
            for u, (currency, spot, calendar, lot, dividend, _, _) in UNDERLYINGS.items()
        ],
        "dividends": [
            {"underlying": u, "ex_date": d.ex_date, "cash_amount": d.amount}
            if isinstance(d, CashDividend)
            else {"underlying": u, "ex_date": d.ex_date, "fraction_of_spot_decimal": d.fraction}
            for u in _PAYERS
            for d in sorted((*dividends(u).cash, *dividends(u).proportional), key=lambda d: d.ex_date)
        ],
        "repo": [
            {"underlying": u, "date": day, "long_rate_decimal": paid, "short_rate_decimal": earned}
            for u, rates in REPO.items()
            for day, (paid, earned) in zip(REPO_DATES, rates, strict=True)
        ],
        "volatilities": [row for u in UNDERLYINGS for row in _volatilities(u)],
        "correlations": [
            {"underlying": a, **{b: float(matrix[i, j]) for j, b in enumerate(names)}} for i, a in enumerate(names)
        ],
        "price_history": price_history(names, matrix, _yearly_volatilities()),
        "curves": [
            {"curve": name, "currency": ccy, "collateral": collateral, "day_count": count, "calendar": calendar}
            for name, (ccy, collateral, count, calendar) in CURVES.items()
        ],
        "curve_points": [row for name in CURVES for row in _points(name)],
        "fx": [{"pair": pair, "spot": spot} for pair, spot in FX_SPOTS.items()],
        "fx_volatilities": [
            {"pair": pair, "expiry_date": day, "volatility_decimal": round(level * (0.97 + 0.02 * _years(day)), 4)}
            for pair, level in FX_VOLATILITIES.items()
            for day in EXPIRIES[1:]
        ],
        "credit": [
            {"name": name, "tenor": tenor, "cds_spread_decimal": spread, "recovery_decimal": recovery, "currency": ccy}
            for name, (ccy, recovery, spreads) in CREDIT.items()
            for tenor, spread in zip(CREDIT_TENORS, spreads, strict=True)
        ],
        "funding": [
            {"tenor": tenor, "borrowing_spread_decimal": paid, "lending_spread_decimal": earned}
            for tenor, (paid, earned) in FUNDING.items()
        ],
        "agreements": _agreements(),
    }


def dividends(underlying: str) -> Dividends:
    """Yield, cash amounts of the next years, and fractions of the price after them."""
    rate = UNDERLYINGS[underlying][4]
    if underlying not in _PAYERS:
        return Dividends(rate)
    days, amount, growth, proportional_from, fraction = _PAYERS[underlying]
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


def correlation_matrix() -> NDArray[np.float64]:
    """Correlations of underlyings and pairs, to three decimals: (n, n).

    One factor per currency's region, the regions correlated with each other and with the rates.
    """
    regions = ("EUR", "USD", "GBP")
    common = np.eye(len(regions) + len(FX_VOLATILITIES))
    for i, region in enumerate(regions):
        for j in range(i):
            common[i, j] = common[j, i] = _BETWEEN_REGIONS
        for j, pair in enumerate(FX_VOLATILITIES, start=len(regions)):
            common[i, j] = common[j, i] = _FX_AND_REGION[pair][region]
    common[-1, -2] = common[-2, -1] = _FX_CORRELATION
    loadings = np.zeros((len(UNDERLYINGS) + len(FX_VOLATILITIES), len(common)))
    for i, (region, *_, loading) in enumerate(UNDERLYINGS.values()):
        loadings[i, regions.index(region)] = loading
    for j in range(len(FX_VOLATILITIES)):
        loadings[len(UNDERLYINGS) + j, len(regions) + j] = 1.0
    matrix: NDArray[np.float64] = np.round(loadings @ common @ loadings.T, 3)
    np.fill_diagonal(matrix, 1.0)
    return matrix


def _yearly_volatilities() -> list[float]:
    return [*(row[5] for row in UNDERLYINGS.values()), *FX_VOLATILITIES.values()]


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


def _points(curve: str) -> list[Row]:
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
            {"curve": curve, "date": day, "discount_factor": round(math.exp(-rate * _years(day)), 8)}
            for day, rate in days.items()
        ]
    return [{"curve": curve, "tenor": tenor, "zero_rate_decimal": rate} for tenor, rate in rates.items()]


def quoted_volatility(underlying: str, expiry: date, relative_strike: float) -> float:
    """What an underlying with a smile is quoted at, to 0.01 volatility points, at a strike over its forward."""
    dynamics = Dynamics.around(UNDERLYINGS[underlying][5], QUOTED[underlying][1])
    level = _price(underlying).at(expiry)
    return round(volatility(dynamics, level, relative_strike * level.forward, _years(expiry)), 4)


def _price(underlying: str) -> AffinePrice:
    return AffinePrice.of(underlying, UNDERLYINGS[underlying][1], dividends(underlying), growth_curve(underlying))


def _volatilities(underlying: str) -> list[Row]:
    level = UNDERLYINGS[underlying][5]
    how, skewness = QUOTED[underlying]
    price = _price(underlying)
    rows: list[Row] = []
    for day in EXPIRIES:
        years = _years(day)
        if how == FLAT:
            rows.append({"volatility_decimal": round(level * (1.0 + 0.07 * math.exp(-1.5 * years)), 4)})
        elif how == PARAMETERS:
            middle, skew, curvature = parameters(Dynamics.around(level, skewness), price.at(day), years)
            rows.append(
                {
                    "volatility_decimal": round(middle, 4),
                    "skew_decimal": round(skew, 4),
                    "curvature_decimal": round(curvature, 3),
                }
            )
        else:
            rows += _by_strike(Dynamics.around(level, skewness), price.at(day), level, years, how)
        for row in rows:
            row.setdefault("expiry_date", day)
    return [{"underlying": underlying, **row} for row in rows]


def _by_strike(dynamics: Dynamics, level: AffineLevel, about: float, years: float, how: str) -> list[Row]:
    """Seven to nine quotes of one expiry, at the strikes that are listed."""
    ratios = [math.exp(z * about * math.sqrt(years)) for z in _DEVIATIONS]
    if years < 0.1:
        ratios = ratios[1:-1]
    if how == STRIKE:
        step = _strike_step(level.forward)
        strikes = sorted({round(step * round(level.forward * ratio / step), 6) for ratio in ratios})
        return [
            {"strike": strike, "volatility_decimal": round(volatility(dynamics, level, strike, years), 4)}
            for strike in strikes
        ]
    step = 0.01 if years < 0.4 else 0.05
    relative = sorted({round(step * round(ratio / step), 6) for ratio in ratios})
    return [
        {
            "strike_of_forward_decimal": ratio,
            "volatility_decimal": round(volatility(dynamics, level, ratio * level.forward, years), 4),
        }
        for ratio in relative
    ]


def _strike_step(forward: float) -> float:
    """Listed strikes are about 1 % of the price apart, on round numbers."""
    power = 10.0 ** math.floor(math.log10(0.008 * forward))
    return next(power * size for size in (1.0, 2.0, 2.5, 5.0, 10.0) if power * size >= 0.008 * forward)


def _agreements() -> list[Row]:
    ostrevane, guldmar, thrayle, pennifold, ambervale = COUNTERPARTIES.items()
    return [
        _agreement(*ostrevane, "EUR", "one-way to counterparty", desk_threshold=2_000_000,
                   minimum_transfer_amount=100_000, margin_period_days=10),
        _agreement(*guldmar, "EUR", "two-way", minimum_transfer_amount=250_000, margin_period_days=10,
                   collateral_spread_decimal=-0.0005),
        _agreement(*thrayle, "GBP", "two-way", counterparty_threshold=5_000_000, desk_threshold=5_000_000,
                   minimum_transfer_amount=500_000, margin_period_days=10, close_out="replacement value"),
        _agreement(*pennifold, "USD", "none"),
        _agreement(*ambervale, "USD", "one-way to desk", minimum_transfer_amount=100_000, independent_amount=1_500_000,
                   margin_period_days=5),
    ]  # fmt: skip


def _agreement(counterparty: str, netting_set: str, currency: str, collateral: str, **terms: object) -> Row:
    return {
        "netting_set": netting_set,
        "counterparty": counterparty,
        "currency": currency,
        "collateral": collateral,
        **terms,
    }


def _years(day: date) -> float:
    return year_fraction(VALUATION_DATE, day)
