"""The tables about credit and cash: spreads of names, the desk's own funding, agreements of netting sets."""

from __future__ import annotations

from datetime import date
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.faults import unwanted
from pricer.loader.market_columns import DateOrTenor, not_above, point_date, point_tenor
from pricer.loader.names import Choice, Currency, FreeText, QuarterlyTenor
from pricer.loader.numbers import Number, WholeNumber
from pricer.market.agreements import CloseOut, Collateral

#: Decimals beyond this size are basis points or percentage points in the wrong place.
HIGHEST_SPREAD = 1.0
#: The longest margin period in business days: a year.
LONGEST_MARGIN_PERIOD = 260

_SPREAD = Number(percent=True, decimal_limit=HIGHEST_SPREAD, basis_points=True)
_IN_AGREEMENT_CURRENCY = "in the agreement's currency"


class CreditRow(TableRow):
    """A credit default swap spread of a name."""

    name: Annotated[str, Column(FreeText(), "the name of the counterparty or issuer", "Guldmar Bank")]
    tenor: Annotated[str, Column(QuarterlyTenor(), "the swap's tenor", "5Y")]
    cds_spread_decimal: Annotated[
        float,
        Column(
            Number(above=0.0, percent=True, decimal_limit=HIGHEST_SPREAD, basis_points=True),
            "the running spread per year",
            "0.0125",
            "as a decimal (0.0125 = 125 basis points)",
        ),
    ]
    recovery_decimal: Annotated[
        float,
        Column(
            Number(at_least=0.0, below=1.0, percent=True, decimal_limit=1.0),
            "the recovery, the same in all rows of a name",
            "0.4",
            "as a decimal (0.4 = 40 %)",
        ),
    ]
    currency: Annotated[
        str, Column(Currency(), "the currency of the swaps, whose standard curve discounts them", "EUR")
    ]


class FundingRow(DateOrTenor):
    """Spreads of the desk's own unsecured cash to one date, over the currency's standard curve."""

    date: Annotated[date | None, point_date()]
    tenor: Annotated[str | None, point_tenor()]
    borrowing_spread_decimal: Annotated[
        float,
        Column(
            _SPREAD,
            "the zero spread paid on borrowed cash",
            "0.0110",
            "continuously compounded, ACT/365F, as a decimal (0.0110 = 110 basis points)",
        ),
    ]
    lending_spread_decimal: Annotated[
        float,
        Column(
            _SPREAD,
            "the zero spread earned on lent cash",
            "0.0020",
            "continuously compounded, ACT/365F, as a decimal (0.0020 = 20 basis points)",
        ),
    ]

    @field_validator("lending_spread_decimal")
    @classmethod
    def check_order(cls, lending: float, info: ValidationInfo) -> float:
        return not_above(lending, info, "borrowing_spread_decimal", "spread paid")


class AgreementRow(TableRow):
    """The agreement under which a netting set is collateralised and closed out, seen from the desk."""

    netting_set: Annotated[str, Column(FreeText(), "the netting set, as in the trades", "GUL-1")]
    counterparty: Annotated[str, Column(FreeText(), "the counterparty", "Guldmar Bank")]
    currency: Annotated[str, Column(Currency(), "the currency of the collateral and of the amounts here", "EUR")]
    collateral: Annotated[Collateral, Column(Choice.of(Collateral), "who posts collateral", "two-way")]
    counterparty_threshold: Annotated[
        float,
        Column(
            Number(at_least=0.0),
            "the exposure that stays uncovered before the counterparty posts",
            "2000000",
            _IN_AGREEMENT_CURRENCY,
            0.0,
            "for none",
        ),
    ]
    desk_threshold: Annotated[
        float,
        Column(
            Number(at_least=0.0),
            "the counterparty's exposure that stays uncovered before the desk posts",
            "2000000",
            _IN_AGREEMENT_CURRENCY,
            0.0,
            "for none",
        ),
    ]
    minimum_transfer_amount: Annotated[
        float,
        Column(Number(at_least=0.0), "the smallest transfer", "250000", _IN_AGREEMENT_CURRENCY, 0.0, "for none"),
    ]
    independent_amount: Annotated[
        float,
        Column(
            Number(),
            "the amount that the desk holds whatever the exposure (negative: that it has posted)",
            "500000",
            _IN_AGREEMENT_CURRENCY,
            0.0,
            "for none",
        ),
    ]
    collateral_spread_decimal: Annotated[
        float,
        Column(
            _SPREAD,
            "what collateral earns its poster above the currency's standard curve",
            "-0.0010",
            "continuously compounded, as a decimal (-0.0010 = 10 basis points less)",
            0.0,
            "for nothing above it",
        ),
    ]
    margin_period_days: Annotated[
        int,
        Column(
            WholeNumber(0, LONGEST_MARGIN_PERIOD),
            "the business days from the last collateral received to the close-out",
            "10",
            "",
            0,
            "for none",
        ),
    ]
    close_out: Annotated[
        CloseOut,
        Column(
            Choice.of(CloseOut),
            "what a claim at close-out is measured by",
            "replacement value",
            "",
            CloseOut.RISK_FREE_MARK,
            "for the risk-free mark",
        ),
    ]

    @field_validator("counterparty_threshold", "desk_threshold", "minimum_transfer_amount", "margin_period_days")
    @classmethod
    def check_has_effect(cls, value: float, info: ValidationInfo) -> float:
        """A term without effect is more likely a mistake in the kind of collateral than meant."""
        collateral = info.data.get("collateral")
        if not value or collateral is None:
            return value
        if info.field_name == "counterparty_threshold":
            effective, owner = collateral.counterparty_posts, "agreements in which the counterparty posts"
        elif info.field_name == "desk_threshold":
            effective, owner = collateral.desk_posts, "agreements in which the desk posts"
        else:
            effective, owner = collateral is not Collateral.NONE, "agreements with collateral"
        if not effective:
            raise unwanted(float(value), owner, "collateral")
        return value
