"""Columns of a note: what it redeems."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Annotated, ClassVar

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.faults import Fault, unwanted
from pricer.loader.numbers import Number, as_percentage_points
from pricer.loader.trade_words import PERFORMANCE, PRICE

#: Strikes, capital, leverage and participation beyond these are percentage points typed where a decimal belongs.
HIGHEST_TERMS = {"capital": 3.0, "put_strike": 4.0, "leverage": 10.0, "call_strike": 4.0, "participation": 10.0}

_OF_NOTIONAL = "as a decimal (1.00 = 100 %)"


class RedemptionColumns(TableRow):
    """``capital - leverage (put_strike - level)+ + participation (level - call_strike)+``, held to floor and cap."""

    highest_payoffs: ClassVar[Mapping[str, float]] = MappingProxyType({"floor": 3.0, "cap": 10.0})

    capital: Annotated[
        float | None,
        Column(Number(percent=True), "what a note redeems", "1.00", _OF_NOTIONAL, None, "for 1.00, and for an option"),
    ]
    put_strike: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True),
            "the strike of the put that a note is short",
            "1.00",
            _OF_NOTIONAL,
            None,
            "for a note without a put, and for an option",
        ),
    ]
    leverage: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True),
            "the number of puts that a note is short, per unit",
            "1.25",
            "1.25 for a put struck at 0.80 that may cost the whole capital",
            None,
            "for 1, and without a put",
        ),
    ]
    call_strike: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True),
            "the level above which a note takes part in the rise",
            "1.00",
            _OF_NOTIONAL,
            None,
            "for a note without a call, and for an option",
        ),
    ]
    participation: Annotated[
        float | None,
        Column(
            Number(not_zero=True, percent=True),
            "a note's share of the rise",
            "0.80",
            _OF_NOTIONAL,
            None,
            "for 1, and without a call",
        ),
    ]

    @field_validator("underlying_level", check_fields=False)
    @classmethod
    def check_levels(cls, level: str) -> str:
        if level == PRICE:
            mend = f"Write {PERFORMANCE}, with initial fixings in the table constituents."
            raise Fault("terms-do-not-fit", level, f"{PERFORMANCE}, as the product is a note", mend)
        return level

    @field_validator(*HIGHEST_TERMS)
    @classmethod
    def check_decimal(cls, term: float | None, info: ValidationInfo) -> float | None:
        limit = HIGHEST_TERMS[info.field_name or ""]
        if term is not None and abs(term) > limit:
            raise as_percentage_points(term, f"a decimal (1.00 = 100 %) of at most {limit:g}", limit)
        return term

    @field_validator("leverage", "participation")
    @classmethod
    def check_has_strike(cls, factor: float | None, info: ValidationInfo) -> float | None:
        strike, owner = ("put_strike", "a put") if info.field_name == "leverage" else ("call_strike", "a call")
        if factor is not None and strike in info.data and info.data[strike] is None:
            raise unwanted(factor, f"notes with {owner}", strike)
        return factor
