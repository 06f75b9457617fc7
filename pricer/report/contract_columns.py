"""The columns of what a book with a past shows besides: how long trades live, what is due, what was booked."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from pricer.report.columns import VALUATIONS, Column, Kind, text_column

if TYPE_CHECKING:
    import pandas

_TRADE = text_column("trade_id", "trade", "The trade's id in the book.", 18)
_PRODUCT = text_column("product", "product", "The trade's everyday name, formed from its parts.", 44)
_EXPECTED_LIFE = Column(
    "expected_life",
    "expected life (years)",
    Kind.FIXED,
    "Mean time from tonight until the contract is called, exercised, knocked out with a rebate at once, or expires, "
    "under the pricing measure.",
)
_KNOCK = Column(
    "knock_probability_percent",
    "barrier is hit (%)",
    Kind.FIXED,
    "Probability, under the pricing measure, that a barrier is hit before the contract ends; 100 where it has been.",
)

#: Shown among the valuations where some trade has a value in them.
OF_CONTRACTS: tuple[Column, ...] = (
    _EXPECTED_LIFE,
    Column(
        "ends_early_probability_percent",
        "ends before expiry (%)",
        Kind.FIXED,
        "Probability, under the pricing measure, that it is called, exercised or knocked out with a rebate at once.",
    ),
    _KNOCK,
    Column(
        "reporting_overhedge_cost",
        "overhedge cost ({reporting})",
        Kind.AMOUNT,
        "What the position is worth less if booked with the spreads and shifts asked for, in the reporting currency: 0 "
        "or negative. It is not inside the value.",
    ),
)
#: The same, for the screen.
MORE_OF_CONTRACTS: tuple[Column, ...] = (
    text_column(
        "life_status",
        "life",
        "Live; ended, to be paid: what is decided is still to be paid, and is the value; settled: nothing is.",
        20,
        printed=False,
    ),
    Column(
        "expected_life_standard_error",
        "standard error of expected life (years)",
        Kind.FINE,
        "Sampling error of the expected life.",
        printed=False,
    ),
    Column(
        "overhedge_cost",
        "overhedge cost (trade currency)",
        Kind.AMOUNT,
        "The cost of the overhedge in the trade's currency.",
        printed=False,
    ),
)
_METHOD_BESIDE = 54  # characters of a method that stands beside columns of contracts

EVENTS: tuple[Column, ...] = (
    Column(
        "due",
        "due",
        Kind.STATUS,
        "Overdue: a fixing of the past is missing. Today: one of today is. Tomorrow: up to the next weekday, whose "
        "holidays are not looked at. Later: the days after it.",
        widest=10,
    ),
    Column("day", "day", Kind.DATE, "The day of the event, or the first of a daily series."),
    Column("last_day", "last day of series", Kind.DATE, "For a daily series the last day listed; else blank."),
    _TRADE,
    text_column("product", "product", "The trade's everyday name.", 26),
    text_column("what", "what", "What happens, or may happen.", 24),
    text_column("underlyings", "underlyings", "What the trade depends on.", 34),
    Column("level", "trigger level (its own unit)", Kind.FINE, "The level at which it happens; 1 is 100 %."),
    Column("current", "level today (same unit)", Kind.FINE, "What is compared with it, at today's prices."),
    Column(
        "distance_percent",
        "move that remains (% of level today)",
        Kind.FIXED,
        "From today's level to the trigger: negative for a fall, whichever side the trigger is on.",
    ),
    Column(
        "deviations",
        "move that remains (standard deviations)",
        Kind.FIXED,
        "The same in standard deviations until that day, of a series until its last, without drift.",
    ),
    text_column("met_today", "met at today's level", "Whether today's level would meet the trigger.", 8),
    Column(
        "amount",
        "amount (trade currency)",
        Kind.AMOUNT,
        "What the desk receives, or pays where negative; blank where it depends on a level.",
    ),
    text_column("currency", "trade currency", "The currency of the amount.", 9),
    Column("payment_date", "paid on", Kind.DATE, "When it is paid."),
    text_column("counterparty", "counterparty", "As stated in the book.", 20),
)

LIFE: tuple[Column, ...] = (
    _TRADE,
    _PRODUCT,
    _EXPECTED_LIFE,
    Column(
        "expected_life_standard_error",
        "standard error of expected life (years)",
        Kind.FINE,
        "Sampling error of the expected life.",
    ),
    _KNOCK,
    Column("day", "day", Kind.DATE, "A day on which the contract may end."),
    text_column("what", "how it ends", "Called, exercised or knocked out; expiry: none of them came before.", 34),
    Column("probability_percent", "probability (%)", Kind.FIXED, "That it ends so on that day."),
    Column(
        "probability_standard_error_percent",
        "standard error of probability (%)",
        Kind.FINE,
        "Sampling error of the probability; none is known for the row of expiry, which is what the others leave.",
    ),
    Column("cumulative_percent", "ended by then (%)", Kind.FIXED, "Sum of the probabilities up to that row."),
)

CONTRACTS: tuple[Column, ...] = (
    _TRADE,
    _PRODUCT,
    text_column("part", "part", "The part of the contract; features come in the order in which they are observed.", 18),
    Column("booked", "as booked", Kind.PROSE, "To be laid beside the confirmation.", widest=110),
    Column("tonight", "tonight", Kind.PROSE, "What has come of it, fixings of tonight included.", widest=70),
)

CONTRACT_DATES: tuple[Column, ...] = (
    _TRADE,
    text_column("part", "part", "The part of the contract that looks at the market on that day.", 18),
    Column("day", "day", Kind.DATE, "The day of the observation."),
    Column("payment_date", "paid on", Kind.DATE, "When what it decides is paid; blank where it decides nothing alone."),
    Column("level", "level (its own unit)", Kind.FACTOR, "The trigger's level; of an accrual the lower end."),
    Column("ceiling", "upper level (its own unit)", Kind.FACTOR, "The upper end of an accrual's range."),
    Column("amount", "amount (per unit)", Kind.FACTOR, "The amount per unit of notional, or per option."),
    text_column("standing", "standing", "Passed, today, to come; dropped: the contract has ended before.", 10),
    text_column("prices", "prices", "The underlyings' prices of that day, as the contract has them.", 60),
)


def valuations_columns(frame: pandas.DataFrame) -> tuple[Column, ...]:
    """The columns of the valuations, with those of contracts in which some trade has something to say."""
    live = frame["life_status"].isin(["", "live"]).all()
    wanted = [c for c in OF_CONTRACTS if not frame[c.name].isna().all()]
    more = [c for c in MORE_OF_CONTRACTS if not (live if c.name == "life_status" else frame[c.name].isna().all())]
    names = [column.name for column in VALUATIONS]
    i, method = names.index("status"), names.index("method")
    # What a trade is worth comes first, then how it may end; the method gives way, so that the page stays as wide.
    narrow = replace(VALUATIONS[method], widest=_METHOD_BESIDE) if wanted else VALUATIONS[method]
    return (*VALUATIONS[:i], *wanted, *VALUATIONS[i:method], narrow, *VALUATIONS[method + 1 :], *more)
