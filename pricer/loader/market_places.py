"""Where the market's items stand, by the keys of :func:`pricer.market.quality.gates`."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from functools import cache
from typing import Any

from pricer.core.source import Place
from pricer.loader.correlations import CorrelationTable
from pricer.loader.price_history import PriceHistory
from pricer.loader.table import Table
from pricer.loader.underlying_rows import VolatilityRow
from pricer.market.market import Market

#: Strikes that differ by less, relatively, are one strike that was worked out in two ways.
SAME_STRIKE = 1e-9


class Places:
    """Answers the cell of an item, or None; of several rows of an item, the first.

    A quoted volatility is found by its strike in currency, however the row gives it: "volatility:ID:EXPIRY:STRIKE".
    """

    def __init__(self, correlations: CorrelationTable | PriceHistory | None) -> None:
        self._cells: dict[str, Place | None] = {}
        self._correlations = correlations
        self._quotes: dict[str, list[tuple[float, Place | None]]] = defaultdict(list)

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

    def add_quotes(self, table: Table[VolatilityRow] | None, market: Market) -> None:
        """Remember the strikes of the quotes from which the market's surfaces are made."""
        if table is None:
            return
        forward = cache(market.forward)
        for row in table.rows:
            quote = row.value
            if quote is None or quote.underlying not in market.surfaces or quote.expiry_date <= market.valuation_date:
                continue
            strike = quote.strike
            if quote.strike_of_forward_decimal is not None:
                strike = quote.strike_of_forward_decimal * forward(quote.underlying, quote.expiry_date)
            if strike is not None:
                place = table.place(row.number, "volatility_decimal")
                self._quotes[f"volatility:{quote.underlying}:{quote.expiry_date}"].append((strike, place))

    def _quote(self, key: str) -> Place | None:
        expiry, _, strike = key.rpartition(":")
        for own, place in self._quotes.get(expiry, ()):
            if math.isclose(own, float(strike), rel_tol=SAME_STRIKE):
                return place
        return None

    def __call__(self, key: str) -> Place | None:
        kind, _, rest = key.partition(":")
        if kind == "volatility" and key not in self._cells:
            return self._quote(key)
        if kind != "correlation" or self._correlations is None:
            return self._cells.get(key)
        first, _, second = rest.partition(":")
        if isinstance(self._correlations, PriceHistory):
            return self._correlations.place(first)
        return self._correlations.place(first, second)
