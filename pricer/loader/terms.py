"""Rules between a trade and its constituents. Each is silent where a cell it needs could not be read."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterator, Sequence

from pricer.contracts.aggregate import RANKED, AggregateKind
from pricer.contracts.profile import ProfileKind
from pricer.core.issues import Issue, Severity
from pricer.loader.book_rows import AnyTradeRow, ConstituentRow
from pricer.loader.columns import columns_of
from pricer.loader.faults import Fault, blank_cell, number_in_words, unwanted
from pricer.loader.numbers import as_percentage_points
from pricer.loader.statistic_columns import StatisticKind
from pricer.loader.table import UNREAD, Row, Table
from pricer.loader.text import quoted
from pricer.loader.trade_words import NOTE, OPTION, PERFORMANCE, PRICE, WEIGHTED
from pricer.loader.triggers import HIGHEST_PERFORMANCE

#: Strikes of statistics that are no levels: beyond these, percentage points were typed where a decimal belongs.
HIGHEST_STRIKES = {
    StatisticKind.CLIQUET: 4.0,
    StatisticKind.VARIANCE: 1.0,
    StatisticKind.VOLATILITY: 2.0,
    StatisticKind.CORRELATION: 1.0,
}
#: A variance above this, a volatility of 40 %, is rarely agreed: was its root meant?
HIGH_VARIANCE = 0.16
#: Weights of a performance or a geometric aggregate that miss 1 by more than this are reported.
WEIGHT_ROUNDING = 1e-3

_TradeRow = Row[AnyTradeRow]
_Leg = Row[ConstituentRow]


def check_terms(
    trades: Table[AnyTradeRow], row: _TradeRow, constituents: Table[ConstituentRow], legs: Sequence[_Leg]
) -> list[Issue]:
    """Everything that does not fit between the row of a trade and those of its constituents."""
    if not legs:
        fault = Fault(
            "no-constituents",
            "a trade without rows in the table constituents",
            "at least one underlying",
            "Add its underlyings to the table constituents, under the same trade_id.",
        )
        return [trades.issue(row.number, "trade_id", fault)]
    columns = columns_of(ConstituentRow)
    times = Counter(leg.get("underlying") for leg in legs)
    return [
        *(
            constituents.issue(leg.number, column, columns[column].completed(fault))
            for leg in legs
            for column, fault in _leg_faults(row, leg, times[leg.get("underlying")])
        ),
        *(trades.issue(row.number, column, fault) for column, fault in _rank_faults(row, len(legs))),
        *(trades.issue(row.number, column, fault) for column, fault in _weight_faults(row, legs)),
        *(trades.issue(row.number, column, note, Severity.WARNING) for column, note in _weight_notes(row, legs)),
    ]


def _leg_faults(row: _TradeRow, leg: _Leg, times: int) -> Iterator[tuple[str, Fault]]:
    """Faults of one constituent, by column; its underlying occurs ``times`` times in the trade."""
    aggregate, level = row.get("aggregate"), row.get("underlying_level")
    name, weight, fixing = leg.get("underlying"), leg.get("weight"), leg.get("initial_fixing")
    if name is not UNREAD and times > 1:
        found = f"{quoted(name)}, {times} times in this trade"
        yield "underlying", Fault("duplicate-underlying", found, "each underlying once", "Join its rows into one.")
    if weight is not UNREAD and aggregate is not UNREAD:
        if aggregate in WEIGHTED and weight is None:
            yield "weight", blank_cell(f"the trade's aggregate is {aggregate}")
        elif aggregate in RANKED and weight is not None:
            yield "weight", unwanted(weight, "weighted sum and geometric aggregates", "the trade's aggregate")
        elif aggregate is AggregateKind.GEOMETRIC and weight < 0.0:
            because = "the trade's aggregate is geometric"
            yield "weight", Fault("out-of-range", number_in_words(weight), "a number above 0", because=because)
    # An option or note on a path may have its fixings set by dates, see contract_assembly.
    if fixing is None and level == PERFORMANCE and row.get("product") not in (OPTION, NOTE):
        yield "initial_fixing", blank_cell("the trade is a performance option")
    if fixing is not UNREAD and level == PRICE and fixing is not None:
        yield "initial_fixing", unwanted(fixing, "performance options", "the trade's underlying_level")


def _rank_faults(row: _TradeRow, n: int) -> Iterator[tuple[str, Fault]]:
    """Ranks and their weights against the number of underlyings."""
    rank, weights = row.get("rank"), row.get("rank_weights")
    if isinstance(rank, int) and rank > n:
        mend = "Correct the rank, or add the missing underlyings to the table constituents."
        yield "rank", Fault("terms-do-not-fit", str(rank), f"a rank from 1 to {n}, the number of underlyings", mend)
    if isinstance(weights, tuple) and len(weights) != n:
        mend = "Give one weight per underlying, best first, or correct the table constituents."
        found = f"{len(weights)} weight{'s' if len(weights) != 1 else ''}"
        yield "rank_weights", Fault("terms-do-not-fit", found, f"{n}, one per underlying", mend)


def _weight_faults(row: _TradeRow, legs: Sequence[_Leg]) -> Iterator[tuple[str, Fault]]:
    """Weights against the profile, and amounts against the size that weights give the aggregate."""
    weights = _weights(row, legs)
    if weights is None:
        return
    if row.get("profile") is ProfileKind.EXCHANGE and not (len(weights) == 2 and weights[0] * weights[1] < 0.0):
        found = f"an exchange option with the weights {'; '.join(map(number_in_words, weights))}"
        expected = "two underlyings, one with a positive and one with a negative weight"
        yield "profile", Fault("terms-do-not-fit", found, expected, "Correct the table constituents, or the profile.")
    statistic = row.get("statistic")
    for column in ("strike", "cash_level"):
        amount = row.get(column)
        if not isinstance(amount, float):
            continue
        if column == "strike" and statistic in HIGHEST_STRIKES:
            highest = HIGHEST_STRIKES[statistic]
            if abs(amount) > highest:
                expected = f"a decimal {statistic} (0.04 = 4 %) of at most {highest:g}"
                yield column, as_percentage_points(amount, expected, highest)
            continue
        if amount < 0.0 and min(weights) >= 0.0:
            expected = "a number of at least 0, as no weight is negative"
            yield column, Fault("out-of-range", number_in_words(amount), expected, "Correct the sign.")
        limit = HIGHEST_PERFORMANCE * sum(map(abs, weights))
        if row.get("underlying_level") == PERFORMANCE and abs(amount) > limit:
            expected = f"a decimal performance (1.00 = 100 %) of at most {limit:g}"
            yield column, as_percentage_points(amount, expected, limit)


def _weight_notes(row: _TradeRow, legs: Sequence[_Leg]) -> Iterator[tuple[str, Fault]]:
    """What is allowed, but rarely meant, by the column to look at."""
    strike, whole = row.get("strike"), row.get("aggregate_weight")
    if row.get("statistic") is StatisticKind.VARIANCE and isinstance(strike, float) and strike > HIGH_VARIANCE:
        found = f"{number_in_words(strike)}, the variance of a volatility of {100.0 * math.sqrt(strike):.1f} %"
        mend = f"Used as given. Enter {strike * strike:.6g} if {number_in_words(strike)} is the volatility."
        if whole is None or whole > 0.0:
            yield "strike", Fault("high-variance", found, "a variance (0.04 is that of 20 %)", mend)
    weights, aggregate = _weights(row, legs), row.get("aggregate")
    on_performance = row.get("underlying_level") == PERFORMANCE
    # Prices are weighted by numbers of shares, except in a geometric mean.
    if weights is None or not (on_performance or aggregate is AggregateKind.GEOMETRIC):
        return
    total = sum(weights)
    if min(weights) >= 0.0 and abs(total - 1.0) > WEIGHT_ROUNDING:
        expected = f"{'performance' if on_performance else 'geometric'} weights that add up to 1"
        mend = "Used as given. Check the weights: 25 % is entered as 0.25."
        column = "rank_weights" if aggregate is AggregateKind.RANK_WEIGHTED else "trade_id"
        yield column, Fault("weights-off-one", f"weights that add up to {total:g}", expected, mend)


def _weights(row: _TradeRow, legs: Sequence[_Leg]) -> tuple[float, ...] | None:
    """The aggregate's weights, per underlying or per rank; None where they are not known for certain."""
    aggregate = row.get("aggregate")
    if aggregate is UNREAD:
        return None
    if aggregate is AggregateKind.RANK_WEIGHTED:
        weights = row.get("rank_weights")
        return weights if isinstance(weights, tuple) else None
    if aggregate in RANKED:
        return (1.0,)
    given = tuple(leg.get("weight") for leg in legs)
    return given if all(isinstance(weight, float) for weight in given) else None
