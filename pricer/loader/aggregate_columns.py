"""Columns of a trade: its size, and how the underlyings' levels make one."""

from __future__ import annotations

from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.aggregate import AggregateKind
from pricer.loader.columns import Column, TableRow
from pricer.loader.faults import only_for
from pricer.loader.names import Choice
from pricer.loader.numbers import Number, NumberList, WholeNumber
from pricer.loader.trade_words import PERFORMANCE, PRICE


class AggregateColumns(TableRow):
    """Levels, size and aggregate."""

    underlying_level: Annotated[
        str, Column(Choice.of([PRICE, PERFORMANCE]), "what is compared with the strike", PERFORMANCE)
    ]
    quantity: Annotated[
        float | None,
        Column(
            Number(above=0.0), "the number of options", "20000", "for price options", None, "for a performance option"
        ),
    ]
    notional: Annotated[
        float | None,
        Column(
            Number(above=0.0),
            "the notional",
            "5000000",
            "in the trade's currency, for performance options",
            None,
            "for a price option",
        ),
    ]
    aggregate: Annotated[
        AggregateKind, Column(Choice.of(AggregateKind), "how the underlyings' levels make one level", "worst of")
    ]
    rank: Annotated[
        int | None,
        Column(
            WholeNumber(1, 1000), "which of the levels counts, 1 the best", "2", "", None, "unless it is a k-th best"
        ),
    ]
    rank_weights: Annotated[
        tuple[float, ...] | None,
        Column(
            NumberList(),
            "the weights of the sorted levels, best first",
            "0.6; 0.3; 0.1",
            "one per underlying",
            None,
            "unless it is rank weighted",
        ),
    ]

    @field_validator("quantity", "notional")
    @classmethod
    def check_size(cls, size: float | None, info: ValidationInfo) -> float | None:
        level = info.data.get("underlying_level")
        if level is not None:
            owner = PRICE if info.field_name == "quantity" else PERFORMANCE
            only_for(f"{owner} options", level == owner, size, "underlying_level")
        return size

    @field_validator("rank", "rank_weights")
    @classmethod
    def check_rank(cls, value: object, info: ValidationInfo) -> object:
        aggregate = info.data.get("aggregate")
        if aggregate is not None:
            owner = AggregateKind.KTH_BEST if info.field_name == "rank" else AggregateKind.RANK_WEIGHTED
            only_for(f"{owner} aggregates", aggregate is owner, value, "aggregate")
        return value
