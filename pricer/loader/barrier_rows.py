"""The table barriers."""

from __future__ import annotations

from datetime import date
from enum import StrEnum
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.barrier import BarrierKind
from pricer.contracts.trigger import Direction
from pricer.loader.columns import Column
from pricer.loader.days import Day
from pricer.loader.faults import Fault, check_paid_after, unwanted
from pricer.loader.names import Choice
from pricer.loader.numbers import Number
from pricer.loader.trigger_columns import FeatureRow, WatchedOn, at_level_counts, watched_on


class Monitoring(StrEnum):
    """When a barrier is watched."""

    EXPIRY = "expiry"
    DAILY = "daily"  # at every business day's fixing
    CONTINUOUS = "continuous"  # at all times
    DATES = "dates"  # of the table schedules


#: Barriers that are watched on days of their own, from a start to an end date.
OVER_TIME = (Monitoring.DAILY, Monitoring.CONTINUOUS)


class RebatePaid(StrEnum):
    """When a rebate is paid."""

    AT_HIT = "at hit"
    AT_EXPIRY = "at expiry"


class BarrierRow(FeatureRow):
    """A knock-in or knock-out barrier of a trade."""

    kind: Annotated[BarrierKind, Column(Choice.of(BarrierKind), "what a hit does to the payoff", "knock-in")]
    direction: Annotated[
        Direction, Column(Choice.of(Direction), "the side on which the barrier lies", "down", "down: hit from above")
    ]
    level: Annotated[
        float | None,
        Column(
            Number(percent=True),
            "the barrier",
            "0.60",
            "in the strike's unit",
            None,
            "where the table schedules has levels by date, or the table constituents by underlying",
        ),
    ]
    watched_on: Annotated[WatchedOn, watched_on()]
    at_level_counts: Annotated[bool, at_level_counts()]
    monitoring: Annotated[
        Monitoring,
        Column(
            Choice.of(Monitoring),
            "when the barrier is watched",
            "daily",
            "on every business day's fixing, at all times, at expiry only, or on the dates of the table schedules",
        ),
    ]
    start_date: Annotated[
        date | None,
        Column(
            Day(),
            "the first day of a daily or continuous barrier",
            "2026-03-02",
            "",
            None,
            "for the day after the trade date, or after the references are set",
        ),
    ]
    end_date: Annotated[
        date | None,
        Column(
            Day(), "the last day of a daily or continuous barrier", "2027-06-18", "", None, "for the expiry date",
        ),
    ]  # fmt: skip
    rebate: Annotated[
        float | None,
        Column(
            Number(percent=True),
            "what is paid where the barrier takes the payoff away, or never brings it",
            "0.02",
            "per unit of the trade",
            None,
            "for nothing, and for a note that then redeems without its put",
        ),
    ]
    rebate_paid: Annotated[
        RebatePaid | None,
        Column(Choice.of(RebatePaid), "when a rebate is paid", "at hit", "", None, "for at expiry, and without one"),
    ]
    recorded_hit_date: Annotated[
        date | None,
        Column(Day(), "the day on which the desk recorded a hit", "2026-03-18", "", None, "while none is recorded"),
    ]
    recorded_payment_date: Annotated[
        date | None,
        Column(
            Day(), "the payment date of the rebate of a recorded hit", "2026-03-20", "", None,
            "for the trade's settlement lag, and while no hit is recorded",
        ),
    ]  # fmt: skip
    clear_until: Annotated[
        date | None,
        Column(
            Day(), "the last day on which the desk knows the barrier to have been untouched", "2026-03-17", "", None,
            "where the fixings tell",
        ),
    ]  # fmt: skip

    @field_validator("start_date", "end_date")
    @classmethod
    def check_window(cls, day: date | None, info: ValidationInfo) -> date | None:
        monitoring, start = info.data.get("monitoring"), info.data.get("start_date")
        if day is not None and monitoring is not None and monitoring not in OVER_TIME:
            raise unwanted(day, "daily and continuous barriers", "monitoring")
        if info.field_name == "end_date" and day is not None and start is not None and day < start:
            expected = f"a date from the start date {start} on"
            raise Fault("dates-out-of-order", f"the date {day}", expected, "Correct one of the two dates.")
        return day

    @field_validator("rebate_paid")
    @classmethod
    def check_rebate(cls, paid: RebatePaid | None, info: ValidationInfo) -> RebatePaid | None:
        if paid is not None and "rebate" in info.data and info.data["rebate"] is None:
            raise unwanted(str(paid), "barriers with a rebate", "rebate")
        if paid is RebatePaid.AT_HIT and info.data.get("kind") is BarrierKind.IN:
            mend = "A knock-in knows only at expiry that there was no hit; write at expiry."
            raise Fault("terms-do-not-fit", str(paid), f"{RebatePaid.AT_EXPIRY}, as the barrier is a knock-in", mend)
        return paid

    @field_validator("recorded_payment_date")
    @classmethod
    def check_hit(cls, paid: date | None, info: ValidationInfo) -> date | None:
        if "recorded_hit_date" in info.data:
            hit, owner = info.data["recorded_hit_date"], "barriers with a recorded hit"
            check_paid_after(paid, hit, "the recorded hit", owner, "recorded_hit_date")
        return paid

    @field_validator("clear_until")
    @classmethod
    def check_clear(cls, clear: date | None, info: ValidationInfo) -> date | None:
        hit = info.data.get("recorded_hit_date")
        if clear is not None and hit is not None and hit <= clear:
            expected = f"a date before the recorded hit {hit}"
            raise Fault("dates-out-of-order", f"the date {clear}", expected, "Correct one of the two dates.")
        return clear
