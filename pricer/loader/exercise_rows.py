"""The table exercises: rights to end a trade early."""

from __future__ import annotations

from datetime import date
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.exercise import ExercisedBy, ExerciseStyle
from pricer.loader.columns import Column
from pricer.loader.days import Day
from pricer.loader.faults import check_paid_after, unwanted
from pricer.loader.names import Choice
from pricer.loader.trigger_columns import FeatureRow


class ExerciseRow(FeatureRow):
    """A right of the holder to the payoff on an earlier day, or of the issuer to redeem."""

    by: Annotated[
        ExercisedBy,
        Column(
            Choice.of(ExercisedBy),
            "who has the right",
            "holder",
            "the holder takes the trade's payoff, the issuer redeems the amounts in the table schedules",
        ),
    ]
    style: Annotated[
        ExerciseStyle,
        Column(
            Choice.of(ExerciseStyle),
            "when it may be used",
            "bermudan",
            "on the dates of the table schedules, or on any business day from the first of them to the last",
        ),
    ]
    start_date: Annotated[
        date | None,
        Column(
            Day(),
            "the first day of an american right without dates in the table schedules",
            "2026-03-02",
            "it lasts until expiry",
            None,
            "for the trade date, and for a bermudan right",
        ),
    ]
    exercised_date: Annotated[
        date | None,
        Column(Day(), "the day on which the right was used", "2026-03-30", "", None, "while it is not used"),
    ]
    exercised_payment_date: Annotated[
        date | None,
        Column(
            Day(), "the day on which an exercise is paid", "2026-04-01", "", None,
            "for the trade's settlement lag, and while the right is not used",
        ),
    ]  # fmt: skip

    @field_validator("start_date")
    @classmethod
    def check_start(cls, start: date | None, info: ValidationInfo) -> date | None:
        if start is not None and info.data.get("style") is ExerciseStyle.BERMUDAN:
            raise unwanted(start, "american rights", "style")
        return start

    @field_validator("exercised_payment_date")
    @classmethod
    def check_payment(cls, paid: date | None, info: ValidationInfo) -> date | None:
        if "exercised_date" in info.data:
            used = info.data["exercised_date"]
            check_paid_after(paid, used, "the exercise", "rights that were used", "exercised_date")
        return paid
