"""The table schedules: the dates of a trade's references, statistic and features, one row each."""

from __future__ import annotations

import datetime as dt
from enum import StrEnum
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import Fault, blank_cell, unwanted
from pricer.loader.names import Choice, Identifier
from pricer.loader.numbers import Number, WholeNumber


class Purpose(StrEnum):
    """What a date is for."""

    REFERENCE = "reference"  # sets the initial fixings
    OBSERVATION = "observation"  # is one of the statistic's
    BARRIER = "barrier"
    CALL = "call"
    COUPON = "coupon"
    ACCRUAL = "accrual"  # counts for the next coupon
    EXERCISE = "exercise"


#: Purposes whose dates only show a level: nothing is paid for them.
SILENT = frozenset({Purpose.REFERENCE, Purpose.OBSERVATION, Purpose.ACCRUAL})
#: Columns that only some purposes have.
WITH = {
    "level": frozenset({Purpose.BARRIER, Purpose.CALL, Purpose.COUPON}),
    "amount": frozenset({Purpose.CALL, Purpose.COUPON, Purpose.EXERCISE}),
    "ceiling": frozenset({Purpose.COUPON}),
}
_PERFORMED = "in the strike's unit"


def trade_reference() -> Column:
    """The id of the trade that a row belongs to."""
    return Column(Identifier(), "the id of a trade in the table trades", "T-0001")


def feature_number() -> Column:
    """The number of a feature among those of its kind."""
    return Column(
        WholeNumber(1, 100), "the number of the feature, where a trade has several of a kind", "2", "", 1, "for 1"
    )


def purpose_column() -> Column:
    """What dates are for."""
    return Column(Choice.of(Purpose), "what the dates are for", "call")


def level_column() -> Column:
    """The level of triggers."""
    unit = f"{_PERFORMED}; a coupon without one is paid whatever happens"
    return Column(Number(percent=True), "the level of the barrier, call or coupon", "0.95", unit, None, "for none")


def amount_column() -> Column:
    """The amount that dates decide."""
    unit = "per unit of the trade (0.0175 = 1.75 % of notional); of a call the whole redemption"
    return Column(Number(percent=True), "what is paid", "1.06", unit, None, "for a note's capital, and where none is")


def ceiling_column() -> Column:
    """The upper end of a range."""
    meaning = "the upper end of the range in which a coupon accrues"
    return Column(Number(percent=True), meaning, "1.20", _PERFORMED, None, "for none")


def check_has(column: str, value: float | None, purpose: Purpose | None) -> None:
    """Raise the fault of a number in ``column`` that dates of this purpose cannot have, or lack."""
    if purpose is None:
        return
    if value is not None and purpose not in WITH[column]:
        raise unwanted(value, f"dates of purpose {' or '.join(sorted(WITH[column]))}", "purpose")
    if value is None and (purpose, column) in ((Purpose.CALL, "level"), (Purpose.COUPON, "amount")):
        raise blank_cell(f"a {purpose} needs one")


class ScheduleRow(TableRow):
    """One date of a trade."""

    trade_id: Annotated[str, trade_reference()]
    purpose: Annotated[Purpose, purpose_column()]
    feature: Annotated[int, feature_number()]
    date: Annotated[dt.date, Column(Day(), "the date", "2027-03-19")]
    payment_date: Annotated[
        dt.date | None,
        Column(
            Day(),
            "the date on which what it decides is paid",
            "2027-03-23",
            "",
            None,
            "for the trade's settlement lag, and for dates that decide nothing",
        ),
    ]
    level: Annotated[float | None, level_column()]
    amount: Annotated[float | None, amount_column()]
    ceiling: Annotated[float | None, ceiling_column()]

    @field_validator("payment_date")
    @classmethod
    def check_payment(cls, paid: dt.date | None, info: ValidationInfo) -> dt.date | None:
        purpose, day = info.data.get("purpose"), info.data.get("date")
        if paid is not None and purpose in SILENT:
            raise unwanted(paid, "dates on which something is decided", "purpose")
        if paid is not None and day is not None and paid < day:
            expected = f"a date from {day} on"
            raise Fault("dates-out-of-order", f"the date {paid}", expected, "Correct one of the two dates.")
        return paid

    @field_validator("level", "amount", "ceiling")
    @classmethod
    def check_number(cls, value: float | None, info: ValidationInfo) -> float | None:
        check_has(info.field_name or "", value, info.data.get("purpose"))
        return value
