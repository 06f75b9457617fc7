"""Whether the market knows the netting sets and counterparties of a book's trades; each is told once."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.findings import did_you_mean, warning
from pricer.market.market import Market

#: Answers from which cell a column ("netting_set", "counterparty") of a trade was read, or None.
LocateOfTrade = Callable[[Trade, str], Place | None]

#: What these gaps cost tonight.
HARMLESS = "No value in this report depends on it; valuation adjustments will."


def netting_coverage(trades: Iterable[Trade], market: Market, place: LocateOfTrade) -> Iterator[Issue]:
    """Warnings about netting sets without agreement, or with another counterparty's, and names without credit.

    Silent where the market has no agreements, or no credit, at all.
    """
    sets: dict[str, list[Trade]] = {}
    names: dict[str, list[Trade]] = {}
    for trade in trades:
        if trade.netting_set:
            sets.setdefault(trade.netting_set, []).append(trade)
        if trade.counterparty:
            names.setdefault(trade.counterparty, []).append(trade)
    if market.agreements:
        for name, own in sets.items():
            yield from _agreement(name, own, market, place)
    if market.credit:
        for name, own in names.items():
            if name not in market.credit and f"credit:{name}" not in market.rejected:
                yield warning(
                    place(own[0], "counterparty"),
                    "no-credit",
                    f'counterparty "{name}" ({_count(own)}), which the credit table does not hold',
                    "a counterparty with credit spreads",
                    f"{did_you_mean(name, market.credit)}Correct the name, or add it to the credit table. {HARMLESS}",
                )


def _agreement(name: str, own: list[Trade], market: Market, place: LocateOfTrade) -> Iterator[Issue]:
    agreement = market.agreements.get(name)
    if agreement is None:
        if f"agreements:{name}" not in market.rejected:
            yield warning(
                place(own[0], "netting_set"),
                "no-agreement",
                f'netting set "{name}" ({_count(own)}), which has no agreement',
                "a netting set of the agreements table",
                f"{did_you_mean(name, market.agreements)}Correct the name, or add its agreement to the market. "
                f"{HARMLESS}",
            )
        return
    others = [trade for trade in own if trade.counterparty not in ("", agreement.counterparty)]
    if others:
        yield warning(
            place(others[0], "counterparty"),
            "agreement-of-another",
            f'counterparty "{others[0].counterparty}" in netting set "{name}" ({_count(others)}), whose agreement is '
            f'with "{agreement.counterparty}"',
            "one counterparty for a netting set",
            f"Correct the counterparty or the netting set. {HARMLESS}",
        )


def _count(trades: list[Trade]) -> str:
    return f"{len(trades)} trades" if len(trades) > 1 else "1 trade"
