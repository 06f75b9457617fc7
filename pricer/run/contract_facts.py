"""What the report is told of a contract: its terms, where it stands, and the prices that brought it there."""

from __future__ import annotations

from datetime import date

from pricer.contracts.ageing import days_between
from pricer.contracts.book import Trade
from pricer.contracts.life_cycle import AsOf
from pricer.market.market import Market
from pricer.market.standing import price_record
from pricer.run.outcome import ContractFacts


def contract_facts(trade: Trade, as_of: AsOf, market: Market) -> ContractFacts:
    """The facts, with the prices of every day up to the valuation date on which the contract, still alive, looked."""
    until = as_of.progress.ended_on or as_of.valuation_date
    days = days_between(as_of.contract, date.min, until)
    prices = price_record(trade, market).prices(days)
    return ContractFacts(trade, as_of, tuple(zip(days, map(tuple, prices.tolist()), strict=True)))
