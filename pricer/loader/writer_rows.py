"""The table writers: who pays a trade, where they may default."""

from __future__ import annotations

from datetime import date
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import blank_cell, unwanted
from pricer.loader.names import FreeText, Identifier
from pricer.loader.numbers import Number
from pricer.loader.schedule_rows import trade_reference


class WriterRow(TableRow):
    """The writer of a trade, who may default before paying."""

    trade_id: Annotated[str, trade_reference()]
    writer: Annotated[
        str, Column(FreeText(), "the writer's name, as in the market's table credit", "Guldmar Bank")
    ]  # fmt: skip
    recovery_decimal: Annotated[
        float | None,
        Column(
            Number(at_least=0.0, percent=True, decimal_limit=1.0),
            "the share of a claim that is recovered after a default",
            "0.35",
            "as a decimal (0.35 = 35 %)",
            None,
            "for the market's recovery",
        ),
    ]
    assets: Annotated[
        str | None,
        Column(
            Identifier(),
            "the id under which the market quotes the value of the writer's assets, as an underlying",
            "GULDMAR-ASSETS",
            "the writer then defaults at expiry if they are worth less than its liabilities",
            None,
            "for a default by the market's hazard rates",
        ),
    ]
    liabilities: Annotated[
        float | None,
        Column(
            Number(above=0.0),
            "the writer's liabilities at expiry",
            "80",
            "in the unit of its assets",
            None,
            "for a default by the market's hazard rates",
        ),
    ]
    deadweight_cost_decimal: Annotated[
        float | None,
        Column(
            Number(at_least=0.0, below=1.0, percent=True, decimal_limit=1.0),
            "the share of the assets that a default destroys",
            "0.25",
            "as a decimal (0.25 = 25 %)",
            None,
            "for 0, and for a default by the market's hazard rates",
        ),
    ]
    defaulted_on: Annotated[
        date | None, Column(Day(), "the day of the writer's default", "2026-03-30", "", None, "while there is none")
    ]

    @field_validator("assets")
    @classmethod
    def check_recovery(cls, assets: str | None, info: ValidationInfo) -> str | None:
        recovery = info.data.get("recovery_decimal")
        if assets is not None and recovery is not None:
            raise unwanted(assets, "writers without a recovery, as their assets are recovered,", "recovery_decimal")
        return assets

    @field_validator("liabilities", "deadweight_cost_decimal")
    @classmethod
    def check_structure(cls, value: float | None, info: ValidationInfo) -> float | None:
        if "assets" not in info.data:
            return value
        assets = info.data["assets"]
        if value is not None and assets is None:
            raise unwanted(value, "writers whose assets are given", "assets")
        if value is None and assets is not None and info.field_name == "liabilities":
            raise blank_cell("the writer's assets are given")
        return value
