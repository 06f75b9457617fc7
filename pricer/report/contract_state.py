"""Where a contract's parts stand tonight, in words."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date

import numpy as np

from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average, AverageOf, AverageState
from pricer.contracts.barrier import Barrier
from pricer.contracts.coupons import Coupons
from pricer.contracts.exercise import Exercise
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Ending
from pricer.contracts.life_cycle import AsOf
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance, VarianceState
from pricer.report.level_words import Words

_NOTHING_YET = "nothing observed yet"


def levels_state(as_of: AsOf, words: Words) -> str:
    """References set so far, and today's levels."""
    told = []
    levels, sums = as_of.contract.levels, as_of.progress.references
    if levels.references is None:
        n, known = len(levels.reference_dates), as_of.references
        if known is not None:
            told.append(f"references set: {_named(words, known.tolist(), '{:,.10g}')}")
        elif sums.count:
            means = [total / sums.count for total in sums.sums]
            told.append(f"{sums.count} of {n} reference dates fixed, mean so far {_named(words, means, '{:,.10g}')}")
        else:
            told.append("references still to be set")
    if as_of.levels is not None:
        today = ", ".join(
            f"{name} {words.level(level)}" for name, level in zip(words.underlyings, as_of.levels, strict=True)
        )
        told.append(f"today {today}")
    return "; ".join(told)


def statistic_state(as_of: AsOf, words: Words) -> str:
    """What is known of the final level."""
    statistic, state = as_of.contract.statistic, as_of.progress.statistic
    n = len(statistic.dates)
    match statistic:
        case ExpiryLevel():
            if state is None:
                return "not observed yet" if as_of.ending is None else "dropped"
            return f"observed: {words.level(state)}"
        case Average():
            return _average(statistic, state, n, words)
        case PerformanceSum():
            if state.period_start is None:
                return _NOTHING_YET
            start = _named(words, state.period_start, "{:.6f}")
            told = f"{state.periods} of {n - 1} periods ended, sum so far {100.0 * state.total:,.8g} %"
            return told if state.periods == n - 1 else f"{told}; the current one started at levels {start}"
        case LockedIn():
            gone = (f"{words.underlyings[s.index]} at {words.level(s.level)}" for s in state)
            return f"{len(state)} of {n} locked in: {', '.join(gone)}" if state else _NOTHING_YET
        case RealisedVariance():
            return _variance(statistic, state, n)
        case RealisedCorrelation():
            return _NOTHING_YET if state.last is None else f"{state.returns} of {n - 1} returns known"
    return ""


def feature_state(as_of: AsOf, i: int, words: Words) -> str:
    """What has come of feature ``i``."""
    feature, state = as_of.contract.features[i], as_of.progress.features[i]
    payments = as_of.progress.payments
    match feature:
        case Coupons():
            told = [f"{state.decided} of {len(feature.coupons)} decided"]
            paid = [p for p in payments if p.reason == "coupon" and p.amount and p.observed_on in _own_days(as_of, i)]
            if paid:
                told.append(f"paid {', '.join(f'{words.amount(p.amount)} on {p.payment_date}' for p in paid)}")
            if state.memory:
                told.append(f"{words.amount(state.memory)} in memory")
            if state.days_seen:
                told.append(f"{state.days_in_range} of {state.days_seen} days of this period in the range")
            return "; ".join(told)
        case Autocall():
            if as_of.ending is Ending.CALLED and as_of.progress.ended_on == feature.dates[state - 1]:
                return f"called on {as_of.progress.ended_on}"
            return _seen("called", state, len(feature.schedule))
        case Barrier():
            if state.hit_on is not None:
                return f"hit on {state.hit_on}"
            clear = "" if feature.clear_until is None else f", on record as clear until {feature.clear_until}"
            return _seen("hit", state.seen, len(feature.schedule)) + clear
        case Exercise():
            return "not exercised" if feature.exercised is None else f"exercised on {feature.exercised.day}"
    return ""


def _seen(what: str, seen: int, n: int) -> str:
    """That nothing has come of a trigger on the dates so far."""
    dates = f"{n:,} dates" if n > 1 else "1 date"
    if not seen:
        return f"none of {dates} seen yet"
    return f"not {what} on the first {seen:,} of {dates}" if seen > 1 else f"not {what} on the first of {dates}"


def _own_days(as_of: AsOf, i: int) -> set[date]:
    """Days on which the coupons of feature ``i`` alone are decided: a payment does not tell whose it is."""
    days = [
        {coupon.day for coupon in feature.coupons} if isinstance(feature, Coupons) else set[date]()
        for feature in as_of.contract.features
    ]
    return days[i].difference(*(other for j, other in enumerate(days) if j != i))


def _average(statistic: Average, state: AverageState, n: int, words: Words) -> str:
    means = statistic.running_mean(state)
    if not means:
        return _NOTHING_YET
    count = state.count
    if statistic.of is AverageOf.AGGREGATE:
        return f"{count} of {n} dates fixed, mean so far {words.level(means[0])}"
    each = ", ".join(f"{name} {words.level(mean)}" for name, mean in zip(words.underlyings, means, strict=True))
    level = words.level(float(statistic.aggregate(np.array(means))))
    return f"{count} of {n} dates fixed, means so far {each}, which make {level}"


def _variance(statistic: RealisedVariance, state: VarianceState, n: int) -> str:
    if not state.returns:
        return _NOTHING_YET
    so_far = np.sqrt(np.array(state.squares) * statistic.returns_per_year / state.returns)
    shown = ", ".join(f"{100.0 * volatility:.2f} %" for volatility in so_far)
    return f"{state.returns} of {n - 1} returns known; annual volatilities so far, the aggregate's last: {shown}"


def _named(words: Words, numbers: Sequence[float], form: str) -> str:
    pairs = zip(words.underlyings, numbers, strict=True)
    return ", ".join(f"{name} {form.format(number)}" for name, number in pairs)
