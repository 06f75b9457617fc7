"""Where the market's items stand, by the keys of :func:`pricer.market.quality.gates`."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from pricer.core.source import Place
from pricer.loader.correlations import CorrelationTable
from pricer.loader.price_history import PriceHistory
from pricer.loader.table import Table


class Places:
    """Answers the cell of an item, or None; of several rows of an item, the first."""

    def __init__(self, correlations: CorrelationTable | PriceHistory | None) -> None:
        self._cells: dict[str, Place | None] = {}
        self._correlations = correlations

    def add(self, kind: str, table: Table[Any] | None, id_columns: Sequence[str], shown: str) -> None:
        """Remember the first row of each "kind:id", the id being the values of ``id_columns`` joined by colons.

        The cell is in the column ``shown``.
        """
        if table is None:
            return
        for row in table.rows:
            key = ":".join([kind, *(str(row.get(column)) for column in id_columns)])
            if key not in self._cells:
                self._cells[key] = table.place(row.number, shown)

    def __call__(self, key: str) -> Place | None:
        kind, _, rest = key.partition(":")
        if kind != "correlation" or self._correlations is None:
            return self._cells.get(key)
        first, _, second = rest.partition(":")
        if isinstance(self._correlations, PriceHistory):
            return self._correlations.place(first)
        return self._correlations.place(first, second)
