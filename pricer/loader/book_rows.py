"""The tables of a book: trades and their constituents."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date
from types import MappingProxyType
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.book import Model
from pricer.contracts.option import Conversion
from pricer.contracts.profile import ProfileKind
from pricer.loader.columns import Column, TableRow, columns_of
from pricer.loader.days import Day
from pricer.loader.faults import Fault, blank_cell, number_in_words, unwanted
from pricer.loader.names import CalendarName, Choice, Currency, FreeText, Identifier
from pricer.loader.numbers import Number, NumberList, WholeNumber, as_percentage_points
from pricer.loader.sheets import Cell
from pricer.loader.text import quoted
from pricer.market.calendars import CURRENCY_CALENDARS

LONG, SHORT = "long", "short"
PRICE, PERFORMANCE = "price", "performance"
EUROPEAN_OPTION = "european option"

CASH_DIGITALS = (ProfileKind.CASH_DIGITAL_CALL, ProfileKind.CASH_DIGITAL_PUT)
WEIGHTED = (AggregateKind.WEIGHTED_SUM, AggregateKind.GEOMETRIC)

#: Payoffs of a performance option beyond these sizes are percentage points typed where a decimal belongs.
HIGHEST_PAYOFFS = {"cash_amount": 3.0, "floor": 1.0, "cap": 10.0}

_LEVEL_UNIT = "in currency for price options, as a decimal (1.00 = 100 %) for performance options"
_PAYOFF_UNIT = "per unit of the option, in currency or as a decimal like the strike"


class TradeRow(TableRow):
    """What every trade has, whatever its product."""

    trade_id: Annotated[str, Column(Identifier(), "the trade's own id", "T-0001")]
    product: Annotated[str, Column(Choice.of([EUROPEAN_OPTION]), "the product", EUROPEAN_OPTION)]
    direction: Annotated[str, Column(Choice.of([LONG, SHORT]), "the desk's side", LONG)]
    currency: Annotated[str, Column(Currency(), "the currency that the trade pays in", "EUR")]
    conversion: Annotated[
        Conversion | None,
        Column(
            Choice.of(Conversion),
            "how prices quoted in other currencies are paid",
            "quanto",
            "quanto: one unit of theirs counts as one of the trade's; composite: converted at the expiry's exchange "
            "rate, with strike and initial fixings in the trade's currency",
            None,
            "if all underlyings are quoted in the trade's currency",
        ),
    ]
    trade_date: Annotated[date | None, Column(Day(), "the trade date", "2026-03-02", "", None, "if it is unknown")]
    premium: Annotated[
        float | None,
        Column(
            Number(),
            "the premium paid by the long side",
            "410000",
            "in the trade's currency, negative if the long side receives it",
            None,
            "for no premium",
        ),
    ]
    premium_date: Annotated[
        date | None, Column(Day(), "the date on which the premium is paid", "2026-03-04", "", None, "for no premium")
    ]
    counterparty: Annotated[str, Column(FreeText(), "the counterparty", "Ostrevane Trust", "", "", "for none")]
    netting_set: Annotated[str, Column(FreeText(), "the netting set", "OST-1", "", "", "for none")]
    strategy: Annotated[
        str, Column(FreeText(), "a tag that groups trades in reports", "basket hedges", "", "", "for none")
    ]
    collateral: Annotated[
        str,
        Column(
            Identifier(),
            "the collateral whose discount curve applies, as in the market's table of curves",
            "USD",
            "",
            "",
            "for the currency's standard curve",
        ),
    ]
    model: Annotated[
        Model | None,
        Column(Choice.of(Model), "the model of the underlyings", "local volatility", "", None, "for the run's choice"),
    ]

    @field_validator("premium_date")
    @classmethod
    def check_premium_date(cls, day: date | None, info: ValidationInfo) -> date | None:
        known = info.data
        if "premium" in known and known["premium"] is None and day is not None:
            raise unwanted(day, "trades with a premium", "premium")
        if known.get("premium") is not None and day is None:
            raise blank_cell("there is a premium")
        traded = known.get("trade_date")
        if day and traded and day < traded:
            expected = f"a date from the trade date {traded} on"
            raise Fault("dates-out-of-order", f"the date {day}", expected, "Correct one of the two dates.")
        return day


class EuropeanOptionRow(TradeRow):
    """A European multi-asset option."""

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
    profile: Annotated[ProfileKind, Column(Choice.of(ProfileKind), "the payoff profile", "put")]
    strike: Annotated[
        float | None,
        Column(
            Number(percent=True), "the strike", "1.00", _LEVEL_UNIT, None, "for an exchange option", must_exist=True
        ),
    ]
    cash_amount: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True),
            "what a cash digital pays",
            "0.08",
            _PAYOFF_UNIT,
            None,
            "unless it is a cash digital",
        ),
    ]
    cash_level: Annotated[
        float | None,
        Column(
            Number(at_least=0.0, percent=True),
            "the cash level that competes with the underlyings of a best of or worst of",
            "1.00",
            _LEVEL_UNIT,
            None,
            "for none",
        ),
    ]
    floor: Annotated[
        float | None, Column(Number(percent=True), "the least payoff", "0.02", _PAYOFF_UNIT, None, "for no floor")
    ]
    cap: Annotated[
        float | None, Column(Number(percent=True), "the largest payoff", "0.30", _PAYOFF_UNIT, None, "for no cap")
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

    @field_validator("strike", "cash_amount", "cash_level", "floor", "cap", mode="before")
    @classmethod
    def refuse_percent_of_price(cls, cell: Cell, info: ValidationInfo) -> Cell:
        if isinstance(cell, str) and cell.rstrip().endswith("%") and info.data.get("underlying_level") == PRICE:
            expected = "an amount of currency, as the trade is a price option"
            raise Fault("not-a-number", quoted(cell), expected, "Write it without the percent sign.")
        return cell

    @field_validator("quantity", "notional")
    @classmethod
    def check_size(cls, size: float | None, info: ValidationInfo) -> float | None:
        level = info.data.get("underlying_level")
        if level is not None:
            owner = PRICE if info.field_name == "quantity" else PERFORMANCE
            _only_for(f"{owner} options", level == owner, size, "underlying_level")
        return size

    @field_validator("rank", "rank_weights")
    @classmethod
    def check_rank(cls, value: object, info: ValidationInfo) -> object:
        aggregate = info.data.get("aggregate")
        if aggregate is not None:
            owner = AggregateKind.KTH_BEST if info.field_name == "rank" else AggregateKind.RANK_WEIGHTED
            _only_for(f"{owner} aggregates", aggregate is owner, value, "aggregate")
        return value

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
            _only_for("profiles other than exchange", profile is not ProfileKind.EXCHANGE, amount, "profile")
        elif profile is not None:
            _only_for("cash digitals", profile in CASH_DIGITALS, amount, "profile")
        return amount

    @field_validator("cash_amount", "floor", "cap")
    @classmethod
    def check_payoff_is_decimal(cls, payoff: float | None, info: ValidationInfo) -> float | None:
        limit = HIGHEST_PAYOFFS[info.field_name or ""]
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


class ConstituentRow(TableRow):
    """One underlying of a trade."""

    trade_id: Annotated[str, Column(Identifier(), "the id of a trade in the table trades", "T-0001")]
    underlying: Annotated[str, Column(Identifier(), "the underlying's id, as in the market", "ORLUMA")]
    weight: Annotated[
        float | None,
        Column(
            Number(not_zero=True, percent=True),
            "the weight",
            "0.25",
            "for a weighted sum or a geometric aggregate",
            None,
            "for a ranked aggregate",
        ),
    ]
    initial_fixing: Annotated[
        float | None,
        Column(
            Number(above=0.0),
            "the price that performance is measured from",
            "84.20",
            "for performance options, in the underlying's currency (for a composite in the trade's: price times "
            "exchange rate on the fixing day)",
            None,
            "for a price option",
        ),
    ]


#: The model of a row of the table trades, by its product.
TRADE_ROWS: Mapping[str, type[EuropeanOptionRow]] = MappingProxyType({EUROPEAN_OPTION: EuropeanOptionRow})


def trade_columns() -> dict[str, Column]:
    """All columns of the table trades: what identifies a trade, its terms, then the desk's bookkeeping."""
    shared = columns_of(TradeRow)
    terms = {name: c for row in TRADE_ROWS.values() for name, c in columns_of(row).items() if name not in shared}
    first = ("trade_id", "product", "direction")
    return {name: shared[name] for name in first} | terms | shared


def _only_for(owner: str, belongs: bool, value: object, governed_by: str) -> None:
    """Raise the fault of a value that ``owner`` alone must have, if it is missing or not theirs."""
    if belongs and value is None:
        raise blank_cell(f"{owner} need one")
    if not belongs and value is not None:
        raise unwanted(value, owner, governed_by)
