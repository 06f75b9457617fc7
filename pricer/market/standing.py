"""Where a trade stands tonight, by the market's fixings, spots and exchange rates."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import replace
from datetime import date
from itertools import pairwise

from pricer.contracts.ageing import days_between, start, walk
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.fixings import Fixings
from pricer.contracts.life_cycle import AsOf, as_of
from pricer.contracts.option import Conversion
from pricer.contracts.price_record import PriceRecord
from pricer.market.fx import FxRates
from pricer.market.market import Market


def standing(trade: Trade, market: Market) -> AsOf:
    """The trade's contract on the valuation date; what is missing is among the issues of the answer.

    A composite's levels are converted at fixings of the pair "USDEUR", found either way round, or else
    multiplied from those of the pairs that lead from one currency to the other. Underlyings that the
    market does not know have no price tonight.
    """
    record = price_record(trade, market)
    return as_of(record.contract, record.today, record.fixings, record.spots, record.exchange_rates)


def price_record(trade: Trade, market: Market) -> PriceRecord:
    """The prices, past and present, that the trade's contract looks at."""
    contract = whole_contract(trade)
    rates = conversion_pairs(trade, market)
    pairs = dict.fromkeys(rates.values())
    known = (market.underlyings[name] for name in contract.underlyings if name in market.underlyings)
    spots = {underlying.underlying_id: underlying.spot for underlying in known}
    for pair in pairs:
        try:
            spots[pair] = market.fx.rate(pair[:3], pair[3:])
        except LookupError:  # told with the conversion
            continue
    fixings = _with_crosses(market.fixings, pairs, market.fx)
    return PriceRecord(contract, fixings, spots, rates, market.valuation_date)


def whole_contract(trade: Trade) -> Contract:
    """The trade's contract; a European option as one."""
    contract = trade.contract
    return contract if isinstance(contract, Contract) else Contract.european(contract)


def conversion_pairs(trade: Trade, market: Market) -> dict[str, str]:
    """The pair that converts each underlying of a composite in another currency: ``{"CADMUS": "USDEUR"}``."""
    if trade.contract.conversion is not Conversion.COMPOSITE:
        return {}
    known = ((name, market.underlyings.get(name)) for name in trade.contract.underlyings)
    return {
        name: underlying.currency + trade.currency
        for name, underlying in known
        if underlying is not None and underlying.currency != trade.currency
    }


def missing_days(record: PriceRecord) -> tuple[date, ...]:
    """The days, valuation date included, that the contract looks at and the record has no price of."""
    days = days_between(record.contract, date.min, record.today)
    try:
        return walk(record.contract, start(record.contract), days, record.prices(days)).gaps
    except ValueError:  # nothing is missing: the levels form no final level
        return ()


def _with_crosses(fixings: Fixings, pairs: Iterable[str], fx: FxRates) -> Fixings:
    """Fixings to which those of ``pairs`` that are not fixed themselves are added, day by day, from their chains."""
    crosses = {pair: _cross(fixings, pair, fx) for pair in pairs if not _is_fixed(fixings, pair)}
    found = {pair: levels for pair, levels in crosses.items() if levels}
    return replace(fixings, levels={**fixings.levels, **found}) if found else fixings


def _is_fixed(fixings: Fixings, pair: str) -> bool:
    return pair in fixings.levels or pair[3:] + pair[:3] in fixings.levels


def _cross(fixings: Fixings, pair: str, fx: FxRates) -> dict[date, float]:
    try:
        legs = [first + second for first, second in pairwise(fx.chain(pair[:3], pair[3:]))]
    except LookupError:
        return {}
    if not all(_is_fixed(fixings, leg) for leg in legs):
        return {}
    days = [fixings.levels.get(leg) or fixings.levels[leg[3:] + leg[:3]] for leg in legs]
    common = set(days[0]).intersection(*days[1:])
    levels = {day: [fixings.level(leg, day) for leg in legs] for day in common}
    return {day: math.prod(rate for rate in row if rate is not None) for day, row in levels.items()}
