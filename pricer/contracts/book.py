"""The book: trades, the desk's side of each, and what could not be read."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from datetime import date
from enum import StrEnum

from pricer.contracts.contract import Contract
from pricer.contracts.option import EuropeanOption
from pricer.core.issues import Issue
from pricer.core.source import Place, SourceFile


class Model(StrEnum):
    """How the underlyings' levels move."""

    LOGNORMAL = "lognormal"  # at-the-forward volatilities by expiry, flat in strike
    LOCAL_VOLATILITY = "local volatility"  # by time and level, so that each underlying's smile is met


@dataclass(frozen=True, slots=True)
class Premium:
    """An agreed premium: ``amount`` in the trade's currency, paid by the long side."""

    amount: float
    payment_date: date


@dataclass(frozen=True, slots=True)
class Trade:
    """One position of the desk.

    ``position`` is signed: positive when the desk is long. It counts options for price
    options and is the notional in the trade's currency for performance options.
    ``collateral`` names the collateral whose discount curve applies (empty: the
    currency's standard curve). ``model`` is asked for by the trade itself; None leaves it to the run.
    """

    trade_id: str
    contract: EuropeanOption | Contract
    position: float
    currency: str
    collateral: str = ""
    trade_date: date | None = None
    premium: Premium | None = None
    counterparty: str = ""
    netting_set: str = ""
    strategy: str = ""
    model: Model | None = None


@dataclass(frozen=True, slots=True)
class Refusal:
    """A trade that cannot be priced, and why.

    What could be read of it stays readable, so that it is listed and counted, never lost. ``notional`` in the trade's
    currency, where the market allows to tell it.
    """

    trade_id: str
    issues: tuple[Issue, ...]
    product: str = ""
    currency: str = ""
    counterparty: str = ""
    strategy: str = ""
    netting_set: str = ""
    expiry_date: date | None = None
    notional: float | None = None


@dataclass(frozen=True, slots=True)
class Book:
    """The trades that could be read, those that could not, and everything found on the way."""

    name: str
    trades: tuple[Trade, ...]
    refusals: tuple[Refusal, ...] = ()
    issues: tuple[Issue, ...] = ()
    sources: tuple[SourceFile, ...] = ()
    places: Mapping[tuple[str, str], Place] = field(default_factory=dict)  # (trade id, column) -> cell

    def __len__(self) -> int:
        return len(self.trades)

    def __iter__(self) -> Iterator[Trade]:
        return iter(self.trades)
