"""Tonight's market of the sample: every table that a market may have, and every way of quoting in one of them.

- Curves: EUR from deposits and overnight swaps; USD and GBP, and EUR under USD collateral, from zero
  rates; GBP under EUR collateral from discount factors.
- Dividends: near ones as cash amounts, later ones as parts of the price; three underlyings have a
  yield. Repo for four.
- Smiles: by strike in currency, by strike in per cent of the forward, by parameters, and one
  underlying without a smile; see :data:`saltmarsh.volatilities.QUOTED`.
- Exchange rates: three pairs, of which two have a volatility and correlations; the third follows.
- Credit default swaps of the desk and its counterparties, the desk's funding, its agreements, and a history
  of closing levels that the snapshot does not use (it says "table"; "price history" would).
"""

from __future__ import annotations

from pricer.market.dividends import CashDividend
from saltmarsh.correlations import FX_VOLATILITIES, correlation_matrix
from saltmarsh.credit import CREDIT, CREDIT_TENORS, FUNDING, agreements
from saltmarsh.facts import FX_SPOTS, UNDERLYINGS, VALUATION_DATE, Tables, years_to
from saltmarsh.history import fixings, price_history
from saltmarsh.rates import CURVES, PAYERS, REPO, REPO_DATES, curve_points, dividends
from saltmarsh.volatilities import EXPIRIES, volatilities


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
            for u in PAYERS
            for d in sorted((*dividends(u).cash, *dividends(u).proportional), key=lambda d: d.ex_date)
        ],
        "repo": [
            {"underlying": u, "date": day, "long_rate_decimal": paid, "short_rate_decimal": earned}
            for u, rates in REPO.items()
            for day, (paid, earned) in zip(REPO_DATES, rates, strict=True)
        ],
        "volatilities": [row for u in UNDERLYINGS for row in volatilities(u)],
        "correlations": [
            {"underlying": a, **{b: float(matrix[i, j]) for j, b in enumerate(names)}} for i, a in enumerate(names)
        ],
        "price_history": price_history(names),
        "fixings": fixings(names),
        "curves": [
            {"curve": name, "currency": ccy, "collateral": collateral, "day_count": count, "calendar": calendar}
            for name, (ccy, collateral, count, calendar) in CURVES.items()
        ],
        "curve_points": [row for name in CURVES for row in curve_points(name)],
        "fx": [{"pair": pair, "spot": spot} for pair, spot in FX_SPOTS.items()],
        "fx_volatilities": [
            {"pair": pair, "expiry_date": day, "volatility_decimal": round(level * (0.97 + 0.02 * years_to(day)), 4)}
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
        "agreements": agreements(),
    }
