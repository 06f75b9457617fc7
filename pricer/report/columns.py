"""The columns of the workbook's tables: name, heading with its unit, kind of content, meaning.

One list serves the headings, the number formats and the explanations on the run sheet, so they cannot drift apart.
``{reporting}`` stands for the reporting currency.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum


class Kind(Enum):
    """What a column holds, and so how it is aligned and formatted."""

    TEXT = "text"
    STATUS = "status"  # text that says how the row stands: bold where the row is marked
    PROSE = "prose"  # sentences, wrapped
    DATE = "date"
    COUNT = "count"
    AMOUNT = "amount"  # as many decimals as the column's size asks for
    FIXED = "fixed"  # two decimals
    FINE = "fine"  # four decimals
    FACTOR = "factor"  # six decimals
    PRICE = "price"  # two decimals, more where the price has them

    @property
    def numeric(self) -> bool:
        """Whether cells are numbers, set to the right."""
        return self in (Kind.COUNT, Kind.AMOUNT, Kind.PRICE) or self in FIXED_DECIMALS


FIXED_DECIMALS = {Kind.FIXED: 2, Kind.FINE: 4, Kind.FACTOR: 6}


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a sheet.

    ``like`` names the column whose decimals an amount shares; ``printed`` is False for what
    is kept for the screen, right of the print area; ``widest`` caps the width, in characters.
    """

    name: str
    header: str
    kind: Kind
    meaning: str
    like: str = ""
    printed: bool = True
    widest: int = 24


def text_column(name: str, header: str, meaning: str, widest: int = 24, printed: bool = True) -> Column:
    """A column of text."""
    return Column(name, header, Kind.TEXT, meaning, widest=widest, printed=printed)


_TRADE = text_column("trade_id", "trade", "The trade's id in the book.", 18)
_PRODUCT = text_column("product", "product", "The trade's everyday name, formed from its aggregate and profile.", 26)

VALUATIONS: tuple[Column, ...] = (
    _TRADE,
    _PRODUCT,
    text_column("counterparty", "counterparty", "As stated in the book.", 20),
    text_column("strategy", "strategy", "The book's own tag for grouping.", 18),
    Column("expiry_date", "expiry", Kind.DATE, "The date on which the payoff is fixed."),
    text_column("currency", "trade currency", "The currency of value, errors, notional and premium.", 9),
    Column("notional", "notional (trade currency)", Kind.AMOUNT, "The amount that basis points refer to."),
    Column(
        "value",
        "value (trade currency)",
        Kind.AMOUNT,
        "Value of the position as the desk holds it, premium still to be paid or received included.",
    ),
    Column(
        "standard_error",
        "standard error (trade currency)",
        Kind.AMOUNT,
        "Sampling error of the value, one standard deviation; 0 where nothing was sampled.",
        like="value",
    ),
    Column(
        "lower", "lower end (trade currency)", Kind.AMOUNT, "Lower end of the interval named beside it.", like="value"
    ),
    Column(
        "upper", "upper end (trade currency)", Kind.AMOUNT, "Upper end of the interval named beside it.", like="value"
    ),
    Column("reporting_value", "value ({reporting})", Kind.AMOUNT, "The value in the reporting currency."),
    Column(
        "reporting_model_difference",
        "model difference ({reporting})",
        Kind.AMOUNT,
        "Value under local volatility less value under lognormal levels, whichever leads, in the reporting currency; 0 "
        "where no underlying has a smile, blank where the trade was valued under one model only.",
    ),
    Column(
        "model_difference_bp",
        "model difference (bp of notional)",
        Kind.FIXED,
        "The same in basis points of the notional.",
    ),
    Column("status", "status", Kind.STATUS, "How the pricing of the trade ended, in one word.", widest=22),
    text_column("model", "model", "How the underlyings' levels move in the value shown.", 16),
    text_column(
        "checked",
        "checked, under its model, by",
        "Which independent reference under the same model stands beside the value. The status tells whether it "
        "disagrees.",
        18,
    ),
    text_column(
        "method",
        "method, or why not priced",
        "How the value was obtained. For a trade without a value the first reason in short; the plain file leaves it "
        "blank and has every reason under ending.",
        60,
    ),
    text_column("interval", "kind of interval", "What the lower and upper ends mean; see below.", 16, printed=False),
    Column(
        "reporting_standard_error",
        "standard error ({reporting})",
        Kind.AMOUNT,
        "The standard error in the reporting currency.",
        like="reporting_value",
        printed=False,
    ),
    Column(
        "model_difference",
        "model difference (trade currency)",
        Kind.AMOUNT,
        "Local volatility less lognormal, in the trade's currency.",
        printed=False,
    ),
    Column(
        "model_difference_standard_error",
        "standard error of model difference (trade currency)",
        Kind.AMOUNT,
        "Sampling error of the difference of the two values.",
        like="model_difference",
        printed=False,
    ),
    Column(
        "reporting_model_difference_standard_error",
        "standard error of model difference ({reporting})",
        Kind.AMOUNT,
        "The same in the reporting currency.",
        like="reporting_model_difference",
        printed=False,
    ),
    Column(
        "unpaid_premium",
        "unpaid premium (trade currency)",
        Kind.AMOUNT,
        "Discounted premium already inside the value; negative where the desk owes it.",
        like="value",
        printed=False,
    ),
    Column(
        "sampled_value",
        "sampled value (trade currency)",
        Kind.AMOUNT,
        "What sampling alone gives; it is the value itself where no exact method applies.",
        like="value",
        printed=False,
    ),
    Column(
        "sampled_standard_error",
        "standard error of sampled value (trade currency)",
        Kind.AMOUNT,
        "Sampling error of the sampled value.",
        like="value",
        printed=False,
    ),
    text_column("netting_set", "netting set", "As stated in the book.", printed=False),
    Column("paths", "paths (number)", Kind.COUNT, "Paths sampled in all.", printed=False),
    Column(
        "randomisations",
        "randomisations (number)",
        Kind.COUNT,
        "Independent scramblings of the points, from whose spread the standard error comes.",
        printed=False,
    ),
    Column(
        "degrees_of_freedom",
        "degrees of freedom (number)",
        Kind.COUNT,
        "Of the sampled standard error: those of Student's quantile in a sampling interval.",
        printed=False,
    ),
    Column(
        "time_steps",
        "time steps (number)",
        Kind.COUNT,
        "Steps of a path from the valuation date to expiry; 0 where levels are drawn at expiry alone.",
        printed=False,
    ),
    Column("seconds", "time (seconds)", Kind.FIXED, "Time spent on the trade.", printed=False),
    text_column(
        "ending", "how the work ended", "In words; for a trade without a value, every reason.", 60, printed=False
    ),
)

DELTAS: tuple[Column, ...] = (
    _TRADE,
    text_column("underlying", "underlying", "The underlying's id in the market snapshot.", 18),
    Column("delta", "delta (shares)", Kind.AMOUNT, "Change of the position's value per unit change of the price."),
    Column(
        "standard_error", "standard error of delta (shares)", Kind.AMOUNT, "Sampling error of the delta.", like="delta"
    ),
    Column("lots", "delta (lots)", Kind.FIXED, "Delta divided by the underlying's lot size."),
    text_column("underlying_currency", "underlying's currency", "The currency of the underlying's price.", 12),
    Column("spot", "spot (underlying's currency)", Kind.PRICE, "The price used."),
    Column("cash_delta", "cash delta (underlying's currency)", Kind.AMOUNT, "Delta times spot."),
    Column(
        "cash_delta_standard_error",
        "standard error of cash delta (underlying's currency)",
        Kind.AMOUNT,
        "Standard error of delta times spot.",
        like="cash_delta",
    ),
    Column("reporting_cash_delta", "cash delta ({reporting})", Kind.AMOUNT, "Cash delta in the reporting currency."),
    Column(
        "gamma",
        "gamma (shares per unit of underlying's currency)",
        Kind.AMOUNT,
        "Change of delta per unit change of the price; blank where the payoff's switching between underlyings "
        "makes the pathwise second derivative wrong.",
    ),
    Column(
        "gamma_standard_error",
        "standard error of gamma (shares per unit of underlying's currency)",
        Kind.AMOUNT,
        "Sampling error of the gamma.",
        like="gamma",
    ),
    text_column("vega_currency", "trade currency", "The currency of vega.", 9),
    Column(
        "vega_per_vol_point",
        "vega (trade currency per vol point)",
        Kind.AMOUNT,
        "Change of the position's value when the underlying's volatility rises by one point, say from 20 % to 21 %.",
    ),
    Column(
        "vega_per_vol_point_standard_error",
        "standard error of vega (trade currency per vol point)",
        Kind.AMOUNT,
        "Sampling error of the vega.",
        like="vega_per_vol_point",
    ),
    text_column("method", "method", "How the sensitivities were obtained.", 44, printed=False),
)

UNDERLYING_DELTAS: tuple[Column, ...] = (
    text_column("underlying", "underlying", "The underlying's id in the market snapshot.", 18),
    text_column("currency", "underlying's currency", "The currency of the underlying's price.", 12),
    Column("spot", "spot (underlying's currency)", Kind.PRICE, "The price used."),
    Column("trades", "trades (number)", Kind.COUNT, "Priced trades that depend on the underlying."),
    Column("delta", "delta (shares)", Kind.AMOUNT, "Sum of the trades' deltas."),
    Column(
        "standard_error", "standard error of delta (shares)", Kind.AMOUNT, "Errors added in quadrature.", like="delta"
    ),
    Column("lot_size", "lot size (shares)", Kind.AMOUNT, "Shares in one lot."),
    Column("lots", "delta (lots)", Kind.FIXED, "Delta divided by the lot size."),
    Column("cash_delta", "cash delta (underlying's currency)", Kind.AMOUNT, "Delta times spot."),
    Column("reporting_cash_delta", "cash delta ({reporting})", Kind.AMOUNT, "Cash delta in the reporting currency."),
    Column(
        "reporting_cash_delta_standard_error",
        "standard error of cash delta ({reporting})",
        Kind.AMOUNT,
        "Errors added in quadrature.",
        like="reporting_cash_delta",
    ),
    Column(
        "gamma",
        "gamma (shares per unit of underlying's currency)",
        Kind.AMOUNT,
        "Sum over the trades that have a gamma; the next columns say how exact and how complete it is.",
    ),
    Column(
        "gamma_standard_error",
        "standard error of gamma (shares per unit of underlying's currency)",
        Kind.AMOUNT,
        "Errors added in quadrature.",
        like="gamma",
    ),
    Column("trades_without_gamma", "trades without gamma (number)", Kind.COUNT, "Trades that the gamma leaves out."),
    Column(
        "reporting_vega_per_vol_point",
        "vega ({reporting} per vol point)",
        Kind.AMOUNT,
        "Sum of the trades' vegas, converted from the trades' currencies.",
    ),
    Column(
        "reporting_vega_per_vol_point_standard_error",
        "standard error of vega ({reporting} per vol point)",
        Kind.AMOUNT,
        "Errors added in quadrature.",
        like="reporting_vega_per_vol_point",
    ),
    Column(
        "trades_without_delta",
        "trades without delta (number)",
        Kind.COUNT,
        "Trades whose delta could not be had; where there is one, the book's delta is unknown and left blank.",
        printed=False,
    ),
    Column(
        "trades_without_vega",
        "trades without vega (number)",
        Kind.COUNT,
        "Trades whose vega could not be had; where there is one, the book's vega is unknown and left blank.",
        printed=False,
    ),
)

CROSS_CHECK: tuple[Column, ...] = (
    _TRADE,
    _PRODUCT,
    text_column("reference_method", "reference", "The method that the engine is compared with.", 52),
    text_column(
        "reference_kind",
        "kind of reference",
        "Whether it is exact, a bound, an approximation, or a sample that shares neither draws nor code with the "
        "engine.",
        18,
    ),
    text_column("model", "model", "The model of both values.", 16),
    text_column("currency", "trade currency", "The currency of the amounts.", 9),
    Column(
        "engine_value",
        "engine without premium (trade currency)",
        Kind.AMOUNT,
        "The sampled value of the position, without premium.",
    ),
    Column(
        "engine_standard_error",
        "standard error of engine (trade currency)",
        Kind.AMOUNT,
        "Its sampling error.",
        like="engine_value",
    ),
    Column(
        "reference_value",
        "reference without premium (trade currency)",
        Kind.AMOUNT,
        "The same position by the reference.",
        like="engine_value",
    ),
    Column(
        "difference",
        "difference (trade currency)",
        Kind.AMOUNT,
        "Engine minus reference.",
        like="engine_value",
    ),
    Column("difference_bp", "difference (bp of notional)", Kind.FIXED, "One basis point is 0.01 % of the notional."),
    Column(
        "difference_standard_errors",
        "difference (standard errors)",
        Kind.FIXED,
        "Difference over the engine's standard error, or over both errors where the reference is a sample; blank where "
        "there is none.",
    ),
    Column(
        "tolerance",
        "tolerance (trade currency)",
        Kind.AMOUNT,
        "What the verdict compares the difference with.",
        like="engine_value",
    ),
    Column("verdict", "verdict", Kind.STATUS, "What was found; see below.", widest=20),
    Column("tolerance_bp", "tolerance (bp of notional)", Kind.FIXED, "The tolerance again.", printed=False),
    Column(
        "reference_percent",
        "reference without premium (% of notional)",
        Kind.FIXED,
        "The reference value again: the horizontal axis of the summary's chart.",
        printed=False,
    ),
    Column(
        "agrees_local_volatility",
        "difference under local volatility where it agrees (tolerances)",
        Kind.FIXED,
        "Difference over tolerance, for the summary's chart.",
        printed=False,
    ),
    Column(
        "agrees_lognormal",
        "difference under lognormal levels where it agrees (tolerances)",
        Kind.FIXED,
        "Difference over tolerance, for the summary's chart.",
        printed=False,
    ),
    Column(
        "differs",
        "difference where it differs (tolerances)",
        Kind.FIXED,
        "Difference over tolerance, for the summary's chart.",
        printed=False,
    ),
    Column(
        "reference_error",
        "error of reference (trade currency)",
        Kind.AMOUNT,
        "Bound on the reference's own numerical error; of an independent sample its standard error.",
        printed=False,
    ),
    text_column("source", "source of reference", "Where the reference's formula was published.", 60, printed=False),
)

REFUSAL_CAUSES: tuple[Column, ...] = (
    Column("trades", "trades (number)", Kind.COUNT, "Trades that have no price because of it."),
    Column("alone", "for no other cause (number)", Kind.COUNT, "Those of them that would have a price without it."),
    text_column("side", "mend in", "The input that most likely needs mending: book or market.", 10),
    text_column("kind", "kind", "What is wrong, in a few words.", 26),
    Column("found", "found", Kind.PROSE, "What was found.", widest=44),
    Column("expected", "expected", Kind.PROSE, "What a trade needs.", widest=34),
    Column("mend", "how to mend it", Kind.PROSE, "What to do.", widest=56),
    text_column("first_trade", "first trade", "The first trade that it costs.", 18),
    Column("place", "its place", Kind.PROSE, "Where it was found for that trade.", widest=30),
    text_column("code", "code", "A short stable word for machines.", 24, printed=False),
)

PROBLEMS: tuple[Column, ...] = (
    Column(
        "severity",
        "severity",
        Kind.STATUS,
        "Fatal: nothing could be done. Error: one trade or market item cannot "
        "be used. Warning: used, but a person should look.",
    ),
    text_column("trade_id", "trade", "The trade that cannot be priced because of it, if there is one.", 18),
    text_column("file", "file", "The file in which it was found.", 26),
    text_column("sheet", "sheet", "The sheet.", 16),
    Column("row", "row (number)", Kind.COUNT, "Row of the sheet or of the CSV file, counted from 1."),
    text_column("column", "column", "The column's name.", 18),
    text_column("cell", "cell", "The spreadsheet reference.", 8),
    Column("found", "found", Kind.PROSE, "What stands there.", widest=34),
    Column("expected", "expected", Kind.PROSE, "What should stand there.", widest=34),
    Column("mend", "how to mend it", Kind.PROSE, "What to do.", widest=46),
    text_column("code", "code", "A short stable word for machines.", 24, printed=False),
)
