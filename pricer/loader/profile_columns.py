"""Columns of an option: its payoff profile."""

from __future__ import annotations

from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.profile import ProfileKind
from pricer.loader.columns import Column, TableRow
from pricer.loader.faults import Fault, only_for
from pricer.loader.names import Choice
from pricer.loader.numbers import Number
from pricer.loader.trade_words import CASH_DIGITALS, LEVEL_UNIT, PAYOFF_UNIT


class ProfileColumns(TableRow):
    """The profile, with its strike and the amount of a cash digital."""

    profile: Annotated[ProfileKind, Column(Choice.of(ProfileKind), "the payoff profile", "put")]
    strike: Annotated[
        float | None,
        Column(Number(percent=True), "the strike", "1.00", LEVEL_UNIT, None, "for an exchange option", must_exist=True),
    ]
    cash_amount: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True),
            "what a cash digital pays",
            "0.08",
            PAYOFF_UNIT,
            None,
            "unless it is a cash digital",
        ),
    ]

    @field_validator("profile")
    @classmethod
    def check_profile(cls, profile: ProfileKind, info: ValidationInfo) -> ProfileKind:
        aggregate = info.data.get("aggregate")
        if profile is ProfileKind.EXCHANGE and aggregate not in (None, AggregateKind.WEIGHTED_SUM):
            raise Fault(
                "terms-do-not-fit",
                f"an exchange option on the aggregate {aggregate}",
                "a weighted sum of two underlyings, one weight positive and one negative",
                "Set aggregate to weighted sum, or choose another profile.",
            )
        return profile

    @field_validator("strike", "cash_amount")
    @classmethod
    def check_amount(cls, amount: float | None, info: ValidationInfo) -> float | None:
        profile = info.data.get("profile")
        if profile is not None and info.field_name == "strike":
            only_for("profiles other than exchange", profile is not ProfileKind.EXCHANGE, amount, "profile")
        elif profile is not None:
            only_for("cash digitals", profile in CASH_DIGITALS, amount, "profile")
        return amount
