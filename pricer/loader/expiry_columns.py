"""Columns of a trade: the limits of its payoff, its expiry and its settlement."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date
from types import MappingProxyType
from typing import Annotated, ClassVar

from pydantic import ValidationInfo, field_validator

from pricer.contracts.aggregate import AggregateKind
from pricer.loader.columns import Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import Fault, blank_cell, number_in_words, unwanted
from pricer.loader.names import CalendarName
from pricer.loader.numbers import Number, WholeNumber, as_percentage_points
from pricer.loader.sheets import Cell
from pricer.loader.text import quoted
from pricer.loader.trade_words import LEVEL_UNIT, PAYOFF_UNIT, PERFORMANCE, PRICE
from pricer.market.calendars import CURRENCY_CALENDARS


class ExpiryColumns(TableRow):
    """The cash level, the payoff's limits, and the days on which it is fixed and paid."""

    #: Payoffs of a performance beyond these sizes are percentage points typed where a decimal belongs.
    highest_payoffs: ClassVar[Mapping[str, float]] = MappingProxyType({"cash_amount": 3.0, "floor": 1.0, "cap": 10.0})

    cash_level: Annotated[
        float | None,
        Column(
            Number(at_least=0.0, percent=True),
            "the cash level that competes with the underlyings of a best of or worst of",
            "1.00",
            LEVEL_UNIT,
            None,
            "for none",
        ),
    ]
    floor: Annotated[
        float | None, Column(Number(percent=True), "the least payoff", "0.02", PAYOFF_UNIT, None, "for no floor")
    ]
    cap: Annotated[
        float | None, Column(Number(percent=True), "the largest payoff", "0.30", PAYOFF_UNIT, None, "for no cap")
    ]
    expiry_date: Annotated[date, Column(Day(), "the expiry date", "2027-06-18")]
    settlement_lag_days: Annotated[
        int,
        Column(WholeNumber(0, 60), "the payment's delay after expiry", "2", "in business days", 2, "for 2 days"),
    ]
    settlement_calendar: Annotated[
        str | None,
        Column(
            CalendarName(),
            "the calendar whose business days count until payment",
            "TARGET",
            "",
            None,
            "for the currency's own calendar",
        ),
    ]

    @field_validator("strike", "cash_amount", "cash_level", "floor", "cap", mode="before", check_fields=False)
    @classmethod
    def refuse_percent_of_price(cls, cell: Cell, info: ValidationInfo) -> Cell:
        if isinstance(cell, str) and cell.rstrip().endswith("%") and info.data.get("underlying_level") == PRICE:
            expected = "an amount of currency, as the trade is a price option"
            raise Fault("not-a-number", quoted(cell), expected, "Write it without the percent sign.")
        return cell

    @field_validator("cash_amount", "floor", "cap", check_fields=False)
    @classmethod
    def check_payoff_is_decimal(cls, payoff: float | None, info: ValidationInfo) -> float | None:
        limit = cls.highest_payoffs[info.field_name or ""]
        if payoff is not None and payoff > limit and info.data.get("underlying_level") == PERFORMANCE:
            raise as_percentage_points(payoff, f"a decimal payoff (0.08 = 8 %) of at most {limit:g}", limit)
        return payoff

    @field_validator("cash_level")
    @classmethod
    def check_cash_level(cls, level: float | None, info: ValidationInfo) -> float | None:
        aggregate = info.data.get("aggregate")
        if level is not None and aggregate not in (None, AggregateKind.BEST_OF, AggregateKind.WORST_OF):
            raise unwanted(level, "best of and worst of aggregates", "aggregate")
        return level

    @field_validator("cap")
    @classmethod
    def check_cap(cls, cap: float | None, info: ValidationInfo) -> float | None:
        floor = info.data.get("floor")
        if cap is not None and floor is not None and cap <= floor:
            expected = f"a cap above the floor {number_in_words(floor)}"
            raise Fault("terms-do-not-fit", number_in_words(cap), expected, "Correct the cap or the floor.")
        return cap

    @field_validator("expiry_date")
    @classmethod
    def check_expiry(cls, expiry: date, info: ValidationInfo) -> date:
        traded = info.data.get("trade_date")
        if traded is not None and expiry < traded:
            expected = f"a date from the trade date {traded} on"
            raise Fault("dates-out-of-order", f"the date {expiry}", expected, "Correct one of the two dates.")
        return expiry

    @field_validator("settlement_calendar")
    @classmethod
    def check_calendar(cls, calendar: str | None, info: ValidationInfo) -> str | None:
        currency = info.data.get("currency")
        if calendar is None and currency is not None and currency not in CURRENCY_CALENDARS:
            raise blank_cell(f"none is known for {currency}")
        return calendar
