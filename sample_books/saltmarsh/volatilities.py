"""Quoted volatilities of the sample: at which expiries and strikes, and in which way."""

from __future__ import annotations

import math
from datetime import date

from pricer.market.affine_price import AffineLevel
from saltmarsh.facts import UNDERLYINGS, Row, years_to
from saltmarsh.rates import affine_price
from saltmarsh.smiles import Dynamics, parameters, volatility

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


def quoted_volatility(underlying: str, expiry: date, relative_strike: float) -> float:
    """What an underlying with a smile is quoted at, to 0.01 volatility points, at a strike over its forward."""
    dynamics = Dynamics.around(UNDERLYINGS[underlying][5], QUOTED[underlying][1])
    level = affine_price(underlying).at(expiry)
    return round(volatility(dynamics, level, relative_strike * level.forward, years_to(expiry)), 4)


def volatilities(underlying: str) -> list[Row]:
    """The rows of an underlying in the table volatilities."""
    level = UNDERLYINGS[underlying][5]
    how, skewness = QUOTED[underlying]
    price = affine_price(underlying)
    rows: list[Row] = []
    for day in EXPIRIES:
        years = years_to(day)
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
