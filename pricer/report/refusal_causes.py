"""Why trades have no price, one line a cause: a market item that many of them need is told once, with what it costs."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from pricer.contracts.book import Refusal
from pricer.core.issues import Issue, Severity
from pricer.run.outcome import Outcome, Status

#: What is found where a trade meets the market, and is mended there.
MARKET_CODES = frozenset(
    {
        *("rejected-underlying", "unknown-underlying", "no-volatility", "failing-surface"),
        *("cash-dividends-exceed-spot", "volatility-against-dividends"),
        *("no-correlations", "missing-correlation", "no-fx-correlation"),
        *("no-fx-rate", "no-fx-route", "no-fx-volatility"),
        *("no-standard-curve", "no-collateral-curve", "unknown-currency"),
        *("missing-fixing", "no-writer-credit"),
    }
)


class Side(StrEnum):
    """Which input most likely needs mending."""

    BOOK = "book"
    MARKET = "market"  # which lacks what trades need


@dataclass(frozen=True, slots=True)
class RefusalCause:
    """One cause. ``trades`` have no price because of it, perhaps for other causes too; ``alone`` of them for no other.

    ``first_trade`` and ``place`` are those of the first of them.
    """

    trades: int
    alone: int
    kind: str
    found: str
    expected: str
    mend: str
    first_trade: str
    place: str
    side: Side
    code: str

    @property
    def words(self) -> str:
        """Where, what, and how to mend it; the place only where one trade is concerned."""
        text = f"found {self.found}; expected {self.expected}. {self.mend}"
        return f"{self.place}: {text}" if self.place and self.trades == 1 else text


def refusal_causes(outcome: Outcome) -> list[RefusalCause]:
    """The causes that cost most trades first; those of one trade in the order of the book."""
    causes: dict[tuple[str, str, str], dict[str, Issue]] = {}
    n_causes: dict[str, int] = {}
    for trade_id, issue in _errors(outcome):
        members = causes.setdefault((issue.code, issue.found, issue.mend), {})
        if trade_id not in members:
            members[trade_id] = issue
            n_causes[trade_id] = n_causes.get(trade_id, 0) + 1
    found = []
    for members in causes.values():
        first_trade, first = next(iter(members.items()))
        found.append(
            RefusalCause(
                trades=len(members),
                alone=sum(n_causes[trade_id] == 1 for trade_id in members),
                kind=first.code.replace("-", " "),
                found=first.found,
                expected=first.expected,
                mend=first.mend,
                first_trade=first_trade,
                place=first.place(),
                side=Side.MARKET if first.code in MARKET_CODES else Side.BOOK,
                code=first.code,
            )
        )
    return sorted(found, key=lambda cause: -cause.trades)


def _errors(outcome: Outcome) -> list[tuple[str, Issue]]:
    """What keeps each trade from having a price."""
    failed = [
        (v.trade_id, Issue("no-value", v.ending, "a value", "See the trade's ending.", trade_id=v.trade_id))
        for v in outcome.valuations
        if v.status is Status.NOT_PRICED
    ]
    return [*failed, *((r.trade_id, issue) for r in outcome.refusals for issue in _told(r))]


def _told(refusal: Refusal) -> tuple[Issue, ...]:
    errors = tuple(issue for issue in refusal.issues if issue.severity is not Severity.WARNING)
    nothing = Issue("no-reason", "no reason that was recorded", "a reason", "Report the case.", Severity.ERROR)
    return errors or (nothing,)
