"""Whether the market knows the credit of a writer who may not pay, and for long enough."""

from __future__ import annotations

from collections.abc import Iterator

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.market.findings import Locate, did_you_mean, error, markets_reason, warning
from pricer.market.market import Market
from pricer.market.trade_names import writer_of


def writer_coverage(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the credit of the trade's writer; one who defaults by the value of its assets needs none."""
    writer = writer_of(trade)
    if writer is None or writer.structural is not None:
        return
    credit, here = market.credit.get(writer.name), place("writer")
    if credit is None:
        yield error(
            here,
            "no-writer-credit",
            f'writer "{writer.name}", whose hazard rates the market does not know',
            "a writer with credit spreads, or with assets and liabilities",
            markets_reason(market.rejected.get(f"credit:{writer.name}", ()))
            or f"{did_you_mean(writer.name, market.credit)}Correct the name, or add it to the credit table of the "
            "market.",
        )
        return
    last = trade.contract.payment_date
    if credit.is_extrapolated(last):
        yield warning(
            here,
            "beyond-credit",
            f'payment date {last}, after {credit.last_date}, where the spreads of writer "{writer.name}" end',
            "credit spreads that reach the payment date",
            "The last hazard rate is used beyond its date; add a longer tenor to the credit table.",
        )
