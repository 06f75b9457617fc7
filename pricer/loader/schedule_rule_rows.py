"""The table schedule_rules: whole series of dates by frequency, calendar and roll."""

from __future__ import annotations

from datetime import date
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import Fault, unwanted
from pricer.loader.names import Choice, Tenor, YesNo
from pricer.loader.numbers import Number, WholeNumber
from pricer.loader.schedule_rows import (
    SILENT,
    Purpose,
    amount_column,
    ceiling_column,
    check_has,
    feature_number,
    level_column,
    purpose_column,
    trade_reference,
)
from pricer.market.calendars import CONVENTIONS
from pricer.market.schedules import Stub


def _step(of: str, example: str) -> Column:
    return Column(Number(percent=True), f"what is added to the {of} from each date to the next", example, "", None,
                  "for 0")  # fmt: skip


class ScheduleRuleRow(TableRow):
    """One series of dates of a trade."""

    trade_id: Annotated[str, trade_reference()]
    purpose: Annotated[Purpose, purpose_column()]
    feature: Annotated[int, feature_number()]
    start_date: Annotated[
        date | None,
        Column(
            Day(),
            "the start of the first period",
            "2026-03-02",
            "itself a date only of references, cliquets, variances, volatilities and correlations",
            None,
            "for the trade date",
        ),
    ]
    end_date: Annotated[
        date | None, Column(Day(), "the end of the last period", "2028-03-02", "", None, "for the expiry date")
    ]
    frequency: Annotated[
        str, Column(Tenor(), "the length of a period", "3M", "1D for every business day, 5D for every fifth")
    ]
    roll: Annotated[
        str | None,
        Column(
            Choice.of(CONVENTIONS),
            "where dates go that are no business days of the observation calendar",
            "following",
            "",
            None,
            "for modified following",
        ),
    ]
    stub: Annotated[
        Stub | None,
        Column(
            Choice.of(Stub), "where a period goes that is not as long as the others", "long last", "", None,
            "for short first",
        ),
    ]  # fmt: skip
    end_of_month: Annotated[
        bool | None,
        Column(YesNo(), "whether dates counted from a month's last day stay on last days", "yes", "", None, "for no"),
    ]
    payment_lag_days: Annotated[
        int | None,
        Column(
            WholeNumber(0, 60),
            "the payments' delay after their dates",
            "5",
            "in business days of the settlement calendar",
            None,
            "for the trade's settlement lag",
        ),
    ]
    level: Annotated[float | None, level_column()]
    level_step: Annotated[float | None, _step("level", "-0.05")]
    amount: Annotated[float | None, amount_column()]
    amount_step: Annotated[float | None, _step("amount", "0.015")]
    ceiling: Annotated[float | None, ceiling_column()]

    @field_validator("end_date")
    @classmethod
    def check_order(cls, end: date | None, info: ValidationInfo) -> date | None:
        start = info.data.get("start_date")
        if end is not None and start is not None and end <= start:
            expected = f"a date after the start date {start}"
            raise Fault("dates-out-of-order", f"the date {end}", expected, "Correct one of the two dates.")
        return end

    @field_validator("payment_lag_days")
    @classmethod
    def check_lag(cls, lag: int | None, info: ValidationInfo) -> int | None:
        if lag is not None and info.data.get("purpose") in SILENT:
            raise unwanted(lag, "dates on which something is decided", "purpose")
        return lag

    @field_validator("level", "amount", "ceiling")
    @classmethod
    def check_number(cls, value: float | None, info: ValidationInfo) -> float | None:
        check_has(info.field_name or "", value, info.data.get("purpose"))
        return value

    @field_validator("level_step", "amount_step")
    @classmethod
    def check_step(cls, step: float | None, info: ValidationInfo) -> float | None:
        of = (info.field_name or "").removesuffix("_step")
        if step is not None and of in info.data and info.data[of] is None:
            raise unwanted(step, f"rules with {'an' if of == 'amount' else 'a'} {of}", of)
        return step
