"""What a trade depends on, by the market's names, and the cell that named it."""

from __future__ import annotations

from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.core.source import Place
from pricer.market.findings import Locate


def names_of(trade: Trade) -> tuple[str, ...]:
    """The trade's underlyings and, if its writer defaults by them, the writer's assets; each once."""
    structural = structural_default(trade)
    assets = () if structural is None else (structural.assets,)
    return tuple(dict.fromkeys((*trade.contract.underlyings, *assets)))


def writer_of(trade: Trade) -> Writer | None:
    """Who may not pay; None where nobody doubts it."""
    return trade.contract.writer if isinstance(trade.contract, Contract) else None


def structural_default(trade: Trade) -> StructuralDefault | None:
    """The writer's default as told by the value of its assets, if it is."""
    writer = writer_of(trade)
    return None if writer is None else writer.structural


def cell_of(name: str, place: Locate) -> Place | None:
    """The cell that names an underlying, or the writer's assets."""
    return place(f"underlying:{name}") or place("assets")
