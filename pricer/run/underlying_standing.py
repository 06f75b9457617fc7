"""How tonight's market serves each underlying: whether trades on it can be priced, why not, and what that costs."""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Iterable

from pricer.contracts.book import Trade
from pricer.market.market import Market, MissingMarketDataError
from pricer.run.outcome import UnderlyingStanding

#: Tables of the market whose rows belong to an underlying; what else is rejected belongs to other items.
_TABLES = frozenset({"underlyings", "dividends", "repo", "volatilities"})


def underlying_standings(
    trades: Iterable[Trade], refused: Collection[str], market: Market, *, accept_failing_surfaces: bool
) -> tuple[UnderlyingStanding, ...]:
    """A standing for every underlying of ``trades``, and for those that the market rejected or quotes a smile of.

    ``trades`` are those that could be read, ``refused`` the ids of those without a price.
    """
    uses: Counter[str] = Counter()
    costs: Counter[str] = Counter()
    for trade in trades:
        names = set(trade.contract.underlyings)
        uses.update(names)
        if trade.trade_id in refused:
            costs.update(names)
    standings = []
    for name in sorted({*uses, *market.surfaces, *_rejected(market)}):
        why = _why_unusable(name, market)
        blocked = bool(why) or (
            name in market.surfaces and not market.surfaces[name].passes and not accept_failing_surfaces
        )
        standings.append(UnderlyingStanding(name, uses[name], costs[name] if blocked else 0, why))
    return tuple(standings)


def _rejected(market: Market) -> set[str]:
    """Underlyings of which the market gave something that cannot be used."""
    return {
        name
        for name, issues in market.rejected.items()
        if name in market.underlyings or any((issue.sheet or "").casefold() in _TABLES for issue in issues)
    }


def _why_unusable(name: str, market: Market) -> tuple[str, ...]:
    """Why no option on the underlying can be priced, in words; empty if one can."""
    told = tuple(str(issue) for issue in market.rejected.get(name, ()))
    if name not in market.underlyings:
        return told or ("not in the underlyings table of the market",)
    try:
        market.affine_price(name)
    except MissingMarketDataError:
        return (f"no standard discount curve of {market.underlyings[name].currency}",)
    except ValueError as refused:
        return (str(refused),)
    if not market.has_volatility(name):
        return told or ("no volatility in the volatilities table of the market",)
    return ()
