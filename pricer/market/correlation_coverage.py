"""Whether the market knows the correlation of every pair that a trade depends on."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.market.findings import Locate, error, markets_reason, words
from pricer.market.market import CORRELATIONS, Market
from pricer.market.trade_names import cell_of, names_of, structural_default


def correlation_coverage(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """An error for every correlation among the trade's underlyings and exchange rates that is not known."""
    yield from _correlations(trade, market, place)
    yield from _unknown_pairs(trade, market, place)


def _correlations(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    names = [name for name in names_of(trade) if name in market.underlyings]
    if len(names) < 2:
        return
    if market.correlation is None:
        yield error(
            place("trade_id"),
            "no-correlations",
            "no usable correlation matrix",
            f"correlations among {words(names)}",
            markets_reason(market.rejected.get(CORRELATIONS, ()))
            or "Add the correlations of the trade's underlyings to the correlations table of the market.",
        )
        return
    told: set[str] = set()  # a pair is told once, at the first of the two
    for name in names:
        if name in market.correlation:
            continue
        told.add(name)
        others = [other for other in names if other not in told]
        if others:
            yield error(
                cell_of(name, place),
                "missing-correlation",
                f'no correlation of underlying "{name}" with {words(others)}',
                "a correlation for every pair of the trade's underlyings",
                markets_reason(market.rejected.get(f"{CORRELATIONS}:{name}", ()))
                or f'Add a row and a column "{name}" to the correlations table of the market.',
            )


def _unknown_pairs(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Pairs of the trade's underlyings and exchange rates whose cells in the matrix gave no number."""
    structural = structural_default(trade)
    ids = {} if structural is None else {structural.assets: "assets"}
    ids |= {name: f"underlying:{name}" for name in trade.contract.underlyings}
    ids = {name: ids[name] for name in names_of(trade) if name in market.underlyings}
    if trade.contract.conversion is not None:
        currencies = dict.fromkeys(market.underlyings[name].currency for name in ids)
        for currency in (other for other in currencies if other != trade.currency):
            try:
                factors = market.fx.log_factors(currency, trade.currency)
            except (LookupError, ValueError):
                continue  # told with the conversion
            ids |= {name: "conversion" for pair in factors for name in (pair, pair[3:] + pair[:3])}
    for first, second in combinations(ids, 2):
        why = market.why_unknown(first, second)
        if why:
            yield error(
                place(ids[first]) or place("currency"),
                "missing-correlation",
                f"no correlation of {first} with {second}",
                "a correlation for every pair that the trade depends on",
                markets_reason(why),
            )
