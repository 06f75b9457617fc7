"""The tables trades and constituents: one row model per product, put together from groups of columns."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from datetime import date
from types import MappingProxyType
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.book import Model
from pricer.contracts.option import Conversion
from pricer.loader.aggregate_columns import AggregateColumns
from pricer.loader.columns import Column, TableRow, columns_of
from pricer.loader.days import Day
from pricer.loader.expiry_columns import ExpiryColumns
from pricer.loader.faults import Fault, blank_cell, unwanted
from pricer.loader.names import Choice, Currency, FreeText, Identifier
from pricer.loader.numbers import Number
from pricer.loader.profile_columns import ProfileColumns
from pricer.loader.redemption_columns import RedemptionColumns
from pricer.loader.statistic_columns import StatisticColumns
from pricer.loader.trade_words import EUROPEAN_OPTION, LEVEL_UNIT, LONG, NOTE, OPTION, PRODUCTS, SHORT


class TradeRow(TableRow):
    """What every trade has, whatever its product."""

    trade_id: Annotated[str, Column(Identifier(), "the trade's own id", "T-0001")]
    product: Annotated[str, Column(Choice.of(PRODUCTS), "the product", EUROPEAN_OPTION)]
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


class EuropeanOptionRow(ExpiryColumns, ProfileColumns, AggregateColumns, TradeRow):
    """A European multi-asset option."""


class OptionRow(StatisticColumns, ExpiryColumns, ProfileColumns, AggregateColumns, TradeRow):
    """An option on a statistic of the path, with whatever features the other tables give it."""


class NoteRow(RedemptionColumns, StatisticColumns, ExpiryColumns, AggregateColumns, TradeRow):
    """A note: it redeems its capital less a put and plus a call."""


#: A row of the table trades, whatever its product.
AnyTradeRow = EuropeanOptionRow | OptionRow | NoteRow


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
            "for a price option, and where dates of purpose reference set it",
        ),
    ]
    barrier_level: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True),
            "the level of this underlying at which it meets a barrier that has no level of its own",
            "0.60",
            LEVEL_UNIT,
            None,
            "where barriers have their own levels",
        ),
    ]
    variance_weight: Annotated[
        float | None,
        Column(
            Number(not_zero=True, percent=True),
            "the weight of this underlying's own variance in a dispersion",
            "0.25",
            "",
            None,
            "for 0",
        ),
    ]


#: The model of a row of the table trades, by its product.
TRADE_ROWS: Mapping[str, type[AnyTradeRow]] = MappingProxyType(
    {EUROPEAN_OPTION: EuropeanOptionRow, OPTION: OptionRow, NOTE: NoteRow}
)


def trade_columns() -> dict[str, Column]:
    """All columns of the table trades: what identifies a trade, its terms, the desk's bookkeeping, paths and notes."""
    shared = columns_of(TradeRow)
    first = {name: shared[name] for name in ("trade_id", "product", "direction")}
    plain = {name: column for name, column in columns_of(EuropeanOptionRow).items() if name not in shared}
    every = {name: column for model in TRADE_ROWS.values() for name, column in columns_of(model).items()}
    return {name: _in_books(name, column) for name, column in (first | plain | shared | every | plain | shared).items()}


def _in_books(name: str, column: Column) -> Column:
    """The column as the whole table has it: one that a product lacks may be blank, but is still looked for."""
    if column.is_required and not all(name in columns_of(model) for model in TRADE_ROWS.values()):
        return replace(column, blank=None, blank_words="for a note", must_exist=True)
    return column
