"""Whether the levels of a contract's payout and triggers have the size of tonight's: percent points are no decimals."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.life_cycle import AsOf
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.profile import Profile
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.core.issues import Issue
from pricer.market.findings import Locate, percent, warning
from pricer.market.market import Market
from pricer.market.size_coverage import PLAUSIBLE_FACTOR, differ

#: Realised volatilities that differ from the implied ones by more than this factor are reported.
PLAUSIBLE_VOLATILITY_FACTOR = 2.0


def level_coverage(trade: Trade, state: AsOf | None, market: Market, place: Locate) -> Iterator[Issue]:
    """Warnings about strikes and triggers still to come that lie far from today's levels, or implied volatilities.

    Of European options see :mod:`pricer.market.size_coverage`.
    """
    contract = trade.contract
    if isinstance(contract, Contract) and state is not None:
        yield from _levels(contract, state, place)
        yield from _variance(contract, market, place)


def _levels(contract: Contract, state: AsOf, place: Locate) -> Iterator[Issue]:
    """Strikes and triggers against what they are compared with at today's levels (1 where these start later)."""
    if state.levels is None and not contract.on_performance:
        return
    levels = np.ones(len(contract.underlyings)) if state.levels is None else np.array(state.levels)
    for column, strike in _strikes(contract):
        found = _aggregate_level(contract, levels)
        if strike > 0.0 and found is not None and differ(strike, found):
            yield _far(f"{column.replace('_', ' ')} {strike:g}", found, column, place)
    for i in range(len(contract.features)):
        compared: set[float] = set()  # a daily barrier has one level on many days
        for item in state.appointments(i):
            trigger, level = item.trigger, item.level
            if trigger is None or level is None or level in compared:
                continue
            compared.add(level)
            found = float(trigger.measure(levels)[0])
            if min(level, found, *trigger.aggregate.weights) >= 0.0 and level * found > 0.0 and differ(level, found):
                yield _far(f"{item.what} level {level:g} on {item.day}", found, _column(item.what), place)
                break  # once for a feature: its other levels are like it


def _variance(contract: Contract, market: Market, place: Locate) -> Iterator[Issue]:
    """The strike of a variance swap or the like, against the implied volatilities of its underlyings."""
    statistic, payout = contract.statistic, contract.payout
    if not isinstance(statistic, RealisedVariance) or not isinstance(payout, Profile) or min(statistic.weights) < 0.0:
        return
    try:
        curves = [market.pure_volatility(name) for name in contract.underlyings]
    except (LookupError, ValueError):  # told with the underlyings
        return
    implied = max(curve.volatility(contract.expiry_date) for curve in curves)
    struck = payout.strike / sum(statistic.weights)
    volatility = struck if statistic.as_volatility else math.sqrt(max(struck, 0.0))
    # A basket's volatility may lie far below those of its parts, but a swap is not struck far above them all.
    too_low = len(curves) == 1 and 0.0 < volatility < implied / PLAUSIBLE_VOLATILITY_FACTOR
    if too_low or volatility > PLAUSIBLE_VOLATILITY_FACTOR * implied:
        own = "volatility" if statistic.as_volatility else "variance"
        yield warning(
            place("strike") or place("trade_id"),
            "strike-far-from-volatility",
            f"strike {payout.strike:g} on realised {own}, a volatility of {percent(volatility, 1)}, where "
            f"{percent(implied, 1)} is the highest implied",
            f"a strike within a factor of {PLAUSIBLE_VOLATILITY_FACTOR:g} of implied volatility",
            "A strike on variance is the square of a volatility (20 % is 0.04), one on volatility a decimal (0.2). It "
            "is used as given.",
        )


def _column(what: str) -> str:
    """The table of a feature, by what it does."""
    return {"call": "call", "coupon": "coupon", "accrual": "coupon"}.get(what, "barrier")


def _far(what: str, found: float, column: str, place: Locate) -> Issue:
    return warning(
        place(column) or place(f"schedule:{column}") or place("trade_id"),
        "level-far-from-today",
        f"{what}, where today's levels give {found:g}",
        f"a level within a factor of {PLAUSIBLE_FACTOR:g} of today's",
        "Percent against decimals (0.6 = 60 %), pence against pounds, or a split? It is used as given.",
    )


def _strikes(contract: Contract) -> Iterator[tuple[str, float]]:
    """Columns and strikes of the payout."""
    payout = contract.payout
    if isinstance(payout, Profile):
        yield "strike", payout.strike
    elif isinstance(payout, Redemption):
        for column, strike in (("put_strike", payout.put_strike), ("call_strike", payout.call_strike)):
            if strike is not None:
                yield column, strike


def _aggregate_level(contract: Contract, levels: NDArray[np.float64]) -> float | None:
    """Today's level of what the payout looks at; None where that is no level, or may be small by nature."""
    statistic = contract.statistic
    if isinstance(statistic, LockedIn):  # the best of the rest on each date: any of the levels
        return float(levels.max())
    if not isinstance(statistic, ExpiryLevel | Average):
        return None
    aggregate: Aggregate = statistic.aggregate
    level = float(aggregate(levels))
    return level if level > 0.0 and min(aggregate.weights) >= 0.0 else None
