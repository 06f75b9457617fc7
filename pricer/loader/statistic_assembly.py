"""The statistic that a trade is paid on, from its row and its dates."""

from __future__ import annotations

from typing import Any

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Statistic
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import BUSINESS_DAYS_PER_YEAR, RealisedVariance
from pricer.loader.book_models import CONSTITUENTS
from pricer.loader.faults import Fault, unwanted
from pricer.loader.schedule_rows import Purpose
from pricer.loader.series import AllSeries
from pricer.loader.statistic_columns import OF_PERIODS, VARIANCES, StatisticKind
from pricer.loader.table import UNREAD
from pricer.loader.trade_parts import TradeParts
from pricer.loader.trade_words import PERFORMANCE, PRICE


def statistic_of(parts: TradeParts, series: AllSeries, aggregate: Aggregate) -> Statistic[Any] | None:
    """The trade's statistic; None where something is wrong with it, which is told."""
    kind = parts.get("statistic") or StatisticKind.EXPIRY_LEVEL
    _check_variance_weights(parts, kind)
    dates = series.get(Purpose.OBSERVATION)
    if kind is StatisticKind.EXPIRY_LEVEL:
        if (Purpose.OBSERVATION, 1) in series.first_rows:
            _tell_unused(parts, series)
        return ExpiryLevel(parts.get("expiry_date"), aggregate)
    if not _fits(parts, kind, aggregate) or dates is None:
        if not series.is_given(Purpose.OBSERVATION):
            words = f"the statistic {kind} without dates of purpose observation"
            expected = "its dates in the table schedules or schedule_rules"
            parts.tell_trade("statistic", Fault("no-dates", words, expected, "Add them under the same trade_id."))
        return None
    try:
        return _made(parts, kind, dates.days, aggregate)
    except ValueError as unfit:
        fault = Fault("terms-do-not-fit", str(unfit), f"dates that fit the statistic {kind}", "Correct the dates.")
        parts.tell(dates.table, dates.rows[0], "purpose", fault)
        return None


def _made(parts: TradeParts, kind: StatisticKind, days: tuple[Any, ...], aggregate: Aggregate) -> Statistic[Any]:
    n = len(aggregate.weights)
    match kind:
        case StatisticKind.AVERAGE:
            return Average(days, aggregate, parts.get("average_of") or AverageOf.UNDERLYINGS)
        case StatisticKind.CLIQUET:
            limits = {"floor": parts.get("local_floor"), "cap": parts.get("local_cap")}
            return PerformanceSum(days, aggregate, Profile(ProfileKind.FORWARD, 1.0, **limits))
        case StatisticKind.LOCKED_IN:
            return LockedIn(days, n, aggregate.weights.index(1.0) + 1)
        case StatisticKind.CORRELATION:
            return RealisedCorrelation(days, aggregate.weights, parts.get("demeaned") is not False)
        case _:
            own = tuple(leg.get("variance_weight") or 0.0 for leg in parts.legs)
            whole = parts.get("aggregate_weight")
            return RealisedVariance(
                days,
                aggregate,
                (*own, 1.0 if whole is None else whole),
                kind is StatisticKind.VOLATILITY,
                parts.get("returns_per_year") or BUSINESS_DAYS_PER_YEAR,
            )


def _fits(parts: TradeParts, kind: StatisticKind, aggregate: Aggregate) -> bool:
    """Whether levels and aggregate suit the statistic; what does not is told."""
    count = len(parts.issues)
    if kind in OF_PERIODS and not parts.on_performance:
        mend = "Give a notional, and initial fixings in the table constituents."
        fault = Fault("terms-do-not-fit", PRICE, f"{PERFORMANCE}, as a {kind} is a pure number", mend)
        parts.tell_trade("underlying_level", fault)
    if kind is StatisticKind.LOCKED_IN and aggregate.cash is not None:
        parts.tell_trade("cash_level", unwanted(aggregate.cash, "trades without a locked-in statistic", "statistic"))
    if kind in (*VARIANCES, StatisticKind.CORRELATION) and min(aggregate.weights) < 0.0:
        words = f"a {kind} with a negative weight"
        fault = Fault("terms-do-not-fit", words, "weights above 0", "Correct the weights, or the statistic.")
        of_rows = aggregate.kind is AggregateKind.WEIGHTED_SUM
        parts.tell_trade("statistic" if of_rows else "rank_weights", fault)
    return len(parts.issues) == count


def _check_variance_weights(parts: TradeParts, kind: StatisticKind) -> None:
    for leg in parts.legs:
        weight = leg.get("variance_weight")
        if weight is not None and weight is not UNREAD and kind not in VARIANCES:
            fault = unwanted(weight, "variances and volatilities", "the trade's statistic")
            parts.tell(CONSTITUENTS, leg.number, "variance_weight", fault)


def _tell_unused(parts: TradeParts, series: AllSeries) -> None:
    table, row = series.first_rows[Purpose.OBSERVATION, 1]
    words = "dates of purpose observation of a trade on its expiry level"
    mend = "Name the statistic in the table trades, or delete the dates."
    parts.tell(table, row, "purpose", Fault("terms-do-not-fit", words, "a trade on a statistic of the path", mend))
