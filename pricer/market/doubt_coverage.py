"""Whether a trade is priced from market data that the market's own gates doubt, or converted at rates they refuse."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise

from pricer.contracts.book import Trade
from pricer.contracts.option import Conversion
from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.findings import Locate, error, warning
from pricer.market.market import Market
from pricer.market.standing import conversion_pairs, whole_contract
from pricer.market.trade_names import cell_of, names_of


def refused_rates(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """An error per exchange rate that the trade is converted at though the market refuses it."""
    if any("".join(pair) in market.rejected for pair in market.fx.quotes):
        for pair, column in _rates(trade, market).items():
            if pair in market.rejected:
                yield _refused(market, pair, place(column) or place("currency"))


def doubts(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """A warning per item in ``market.doubts`` that the trade is priced from."""
    if not market.doubts:
        return
    for name in names_of(trade):
        here = cell_of(name, place)
        yield from _doubted(market, name, f'underlying "{name}"', here)
        yield from _doubted(market, f"repo:{name}", f'underlying "{name}"', here)
    yield from doubted_fixings(trade, market, place)
    for pair, column in _rates(trade, market).items():
        yield from _doubted(market, f"fx:{pair}", f"the rate {pair}", place(column) or place("currency"))
    for pair in dict.fromkeys(_volatilities(trade, market)):
        here = place("conversion") or place("currency")
        yield from _doubted(market, f"fx_volatilities:{pair}", f"the volatility of {pair}", here)


def doubted_fixings(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Those doubts that are of fixings which the trade looks at, of its underlyings or of pairs that convert them."""
    if not any(item.startswith("fixings:") for item in market.doubts):
        return
    days = [day for day in whole_contract(trade).dates if day <= market.valuation_date]
    pairs = conversion_pairs(trade, market).values()
    for name in dict.fromkeys((*trade.contract.underlyings, *pairs, *(pair[3:] + pair[:3] for pair in pairs))):
        here = place(f"underlying:{name}") or place("conversion")
        for day in days:
            yield from _doubted(market, f"fixings:{name}:{day}", f"the fixing of {name} on {day}", here)


def _doubted(market: Market, item: str, what: str, here: Place | None) -> Iterator[Issue]:
    issues = market.doubts.get(item, ())
    if issues:
        more = f" (and {len(issues) - 1} more)" if len(issues) > 1 else ""
        own = f" ({issues[0].place()})" if issues[0].place() else ""
        yield warning(
            here,
            "doubtful-market-data",
            f"{what}, of which the market warns: {issues[0].found}{more}",
            issues[0].expected,
            f"The trade is priced from it as given: see the market's own warning{own} before using the value.",
        )


def _refused(market: Market, pair: str, here: Place | None) -> Issue:
    issue = market.rejected[pair][0]
    own = f"{issue.place()}: " if issue.place() else ""
    return error(
        here,
        "refused-fx-rate",
        f"a conversion at {pair}, which the market quotes but which cannot be trusted",
        "exchange rates that agree with each other",
        f"Mend the market first: {own}found {issue.found}; expected {issue.expected}.",
    )


def _foreign(trade: Trade, market: Market) -> list[str]:
    """Currencies that the trade's conversion brings into its own."""
    if trade.contract.conversion is None:
        return []
    known = [market.underlyings[name].currency for name in names_of(trade) if name in market.underlyings]
    return [currency for currency in dict.fromkeys(known) if currency != trade.currency]


def _rates(trade: Trade, market: Market) -> dict[str, str]:
    """Quoted pairs at which the value, and the prices of a composite, are converted; the column that asks for it."""
    ways = [(trade.currency, market.reporting_currency, "currency")]
    if trade.contract.conversion is Conversion.COMPOSITE:
        ways += [(currency, trade.currency, "conversion") for currency in _foreign(trade, market)]
    out: dict[str, str] = {}
    for start, end, column in ways:
        try:
            chain = market.fx.chain(start, end)
        except LookupError:  # told elsewhere
            continue
        for first, second in pairwise(chain):
            out.setdefault(first + second if (first, second) in market.fx.quotes else second + first, column)
    return out


def _volatilities(trade: Trade, market: Market) -> Iterator[str]:
    for currency in _foreign(trade, market):
        try:
            yield from market.fx.log_factors(currency, trade.currency)
        except LookupError:  # told elsewhere
            continue
