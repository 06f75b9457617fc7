"""Two-asset options under local volatility by QuantLib's two-dimensional finite differences."""

from __future__ import annotations

import numpy as np
import QuantLib as ql

from pricer.market.local_vol_surface import LocalVolSurface

TODAY = ql.Date(30, 11, 2026)
DAYS = ql.Actual365Fixed()

PAYOFFS = {
    "basket": lambda plain: ql.AverageBasketPayoff(plain, ql.Array([0.5, 0.5])),
    "spread": ql.SpreadBasketPayoff,
    "best of": ql.MaxBasketPayoff,
    "worst of": ql.MinBasketPayoff,
}


def process(spot: float, rate: float, dividend: float, volatility: float, exponent: float, cap: float, years: float):
    """Local volatility ``min(volatility (S / spot)^(exponent - 1), cap)``, tabulated at 600 prices."""
    strikes = spot * np.exp(volatility * np.sqrt(years) * np.linspace(-8.0, 8.0, 600))
    sigma = np.minimum(volatility * (strikes / spot) ** (exponent - 1.0), cap)
    matrix = ql.Matrix(600, 2)
    for i, value in enumerate(sigma):
        matrix[i][0] = matrix[i][1] = float(value)
    surface = ql.FixedLocalVolSurface(TODAY, [0.0, years + 1.0], strikes.tolist(), matrix, DAYS)
    curves = [ql.YieldTermStructureHandle(ql.FlatForward(TODAY, r, DAYS)) for r in (dividend, rate)]
    flat = ql.BlackVolTermStructureHandle(ql.BlackConstantVol(TODAY, ql.NullCalendar(), volatility, DAYS))
    spot_handle = ql.QuoteHandle(ql.SimpleQuote(spot))
    return ql.GeneralizedBlackScholesProcess(spot_handle, *curves, flat, ql.LocalVolTermStructureHandle(surface))


def value(shape: str, kind: int, strike: float, days: int, processes, correlation: float, size: int) -> float:
    """Value on a ``size`` by ``size`` grid with half as many time steps."""
    ql.Settings.instance().evaluationDate = TODAY
    option = ql.BasketOption(PAYOFFS[shape](ql.PlainVanillaPayoff(kind, strike)), ql.EuropeanExercise(TODAY + days))
    scheme = ql.FdmSchemeDesc.Hundsdorfer()
    engine = ql.Fd2dBlackScholesVanillaEngine(*processes, correlation, size, size, size // 2, 0, scheme, True)
    option.setPricingEngine(engine)
    return float(option.NPV())


def extrapolated(*arguments, size: int) -> tuple[float, float]:
    """Value for grids without end, from two sizes, and half of what the finer one is off (Richardson 1911)."""
    coarse, fine = (value(*arguments, size=s) for s in (size // 2, size))
    return fine + (fine - coarse) / 3.0, abs(fine - coarse) / 6.0


def tabulated_in_quantlib(local: LocalVolSurface, today: ql.Date) -> ql.FixedLocalVolSurface:
    """Our table as QuantLib's. Each cell twice, at both of its ends: QuantLib is linear in time between given times."""
    times, strikes, columns = [], [], []
    for cell, (start, end) in enumerate(zip(local.times[:-1], local.times[1:], strict=True)):
        for moment in (start + 1e-6, end):
            times.append(float(moment))
            strikes.append([float(x) for x in np.exp(local.nodes(cell))])
            columns.append(local.values[cell])
    matrix = ql.Matrix(local.values.shape[1], len(times))
    for j, column in enumerate(columns):
        for i, value in enumerate(column):
            matrix[i][j] = float(value)
    table = ql.FixedLocalVolSurface(today, times, strikes, matrix, DAYS)
    table.enableExtrapolation()
    return table
