"""A contract as rows: the way back from its parts to the tables of features, every date written out."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from typing import Any

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import NOTHING, Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Payout
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Trigger
from pricer.loader.barrier_assembly import without_put
from pricer.loader.barrier_rows import Monitoring, RebatePaid
from pricer.loader.book_models import BARRIERS, CALLS, COUPONS, EXERCISES, SCHEDULES, WRITERS
from pricer.loader.schedule_rows import Purpose
from pricer.loader.statistic_columns import StatisticKind
from pricer.loader.trigger_columns import WatchedOn

Rows = dict[str, list[dict[str, object]]]


def aggregate_of_contract(contract: Contract) -> Aggregate:
    """The aggregate that the table trades names; statistics without one have theirs in other words."""
    statistic, n = contract.statistic, len(contract.underlyings)
    if isinstance(statistic, LockedIn):
        return Aggregate.kth_best(statistic.rank, n)
    if isinstance(statistic, RealisedCorrelation):
        return Aggregate.weighted_sum(statistic.weights)
    if isinstance(statistic, ExpiryLevel | Average | PerformanceSum | RealisedVariance):
        return statistic.aggregate
    raise ValueError(f"no row of the table trades says {type(statistic).__name__}")


def statistic_cells(contract: Contract) -> dict[str, object]:
    """The cells of the table trades that tell the statistic."""
    statistic = contract.statistic
    match statistic:
        case ExpiryLevel():
            _must(statistic.day == contract.expiry.day, "a level observed on another day than the expiry")
            return {}
        case Average():
            return {"statistic": str(StatisticKind.AVERAGE), "average_of": str(statistic.of)}
        case PerformanceSum(local=Profile(kind=ProfileKind.FORWARD, strike=1.0, floor=floor, cap=cap)):
            return {"statistic": str(StatisticKind.CLIQUET), "local_floor": floor, "local_cap": cap}
        case LockedIn():
            return {"statistic": str(StatisticKind.LOCKED_IN)}
        case RealisedVariance():
            kind = StatisticKind.VOLATILITY if statistic.as_volatility else StatisticKind.VARIANCE
            return {
                "statistic": str(kind),
                "aggregate_weight": statistic.weights[-1],
                "returns_per_year": statistic.returns_per_year,
            }
        case RealisedCorrelation():
            return {"statistic": str(StatisticKind.CORRELATION), "demeaned": _yes(statistic.demeaned)}
    raise ValueError("no row of the table trades says a cliquet of other performances than those from 1.0")


def redemption_cells(payout: Redemption) -> dict[str, object]:
    """The cells of the table trades that tell what a note redeems."""
    has_put, has_call = payout.put_strike is not None, payout.call_strike is not None
    _must(has_put or payout.leverage == 1.0, "leverage without a put")
    _must(has_call or payout.participation == 1.0, "a participation without a call")
    return {
        "capital": payout.capital,
        "put_strike": payout.put_strike,
        "leverage": payout.leverage if has_put else None,
        "call_strike": payout.call_strike,
        "participation": payout.participation if has_call else None,
        "floor": payout.floor,
        "cap": payout.cap,
    }


def barrier_scales(contract: Contract) -> tuple[float, ...] | None:
    """The barrier levels of the underlyings themselves; None for none."""
    scales = {f.trigger.scales for f in contract.features if isinstance(f, Barrier) and f.trigger.scales is not None}
    _must(len(scales) <= 1, "barriers with different levels of the underlyings")
    return next(iter(scales), None)


def feature_rows(trade_id: str, contract: Contract) -> Rows:
    """The rows of all tables of features.

    Raises ValueError for a contract that these tables cannot say: features in another order than
    coupons, calls, exercises and barriers; triggers and payouts that are not the trade's own.
    """
    rows: Rows = defaultdict(list)
    aggregate = aggregate_of_contract(contract)
    for day in contract.levels.reference_dates:
        rows[SCHEDULES].append({"purpose": str(Purpose.REFERENCE), "date": day})
    if not isinstance(contract.statistic, ExpiryLevel):
        rows[SCHEDULES] += [{"purpose": str(Purpose.OBSERVATION), "date": day} for day in contract.statistic.dates]
    order = (Coupons, Autocall, Exercise, Barrier)
    kinds = [next((i for i, kind in enumerate(order) if isinstance(f, kind)), len(order)) for f in contract.features]
    _must(kinds == sorted(kinds) and len(order) not in kinds, "features in an order of their own")
    for at, feature in enumerate(contract.features):
        number = kinds[: at + 1].count(kinds[at])
        made = _rows_of(feature, number, aggregate, contract.payout)
        for table, found in made.items():
            rows[table] += [{"feature": number, **row} for row in found]
    if contract.writer is not None:
        rows[WRITERS].append(_writer(contract))
    return {table: [{"trade_id": trade_id, **row} for row in found] for table, found in rows.items()}


def _rows_of(
    feature: Any, number: int, aggregate: Aggregate, payout: Payout
) -> Mapping[str, Iterable[dict[str, object]]]:
    match feature:
        case Coupons():
            return _coupons(feature, aggregate)
        case Autocall():
            return _calls(feature, aggregate)
        case Exercise():
            return _exercise(feature, aggregate, payout)
        case _:
            return _barrier(feature, aggregate, payout)


def _coupons(coupons: Coupons, aggregate: Aggregate) -> Rows:
    has_level = any(coupon.level is not None for coupon in coupons.coupons)
    _must(has_level is (coupons.trigger is not None), "a trigger of coupons without a level")
    accrual = [day for coupon in coupons.coupons for day in coupon.accrual_dates]
    cells: dict[str, object] = {} if coupons.trigger is None else _trigger(coupons.trigger, aggregate)
    _must(coupons.trigger is None or coupons.trigger.scales is None, "coupons on levels of the underlyings")
    dates: list[dict[str, object]] = [{"purpose": str(Purpose.ACCRUAL), "date": day} for day in accrual]
    dates += [
        {
            "purpose": str(Purpose.COUPON),
            "date": coupon.day,
            "payment_date": coupon.payment_date,
            "level": coupon.level,
            "amount": coupon.amount,
            "ceiling": coupon.ceiling,
        }
        for coupon in coupons.coupons
    ]
    return {SCHEDULES: dates, COUPONS: [{**cells, "memory": _yes(coupons.memory)}]}


def _calls(call: Autocall, aggregate: Aggregate) -> Rows:
    _must(call.trigger.scales is None, "calls on levels of the underlyings")
    dates = _dated(Purpose.CALL, call.schedule, call.levels, call.amounts)
    return {SCHEDULES: dates, CALLS: [_trigger(call.trigger, aggregate)]}


def _exercise(right: Exercise, aggregate: Aggregate, payout: Payout) -> Rows:
    issuer = right.by is ExercisedBy.ISSUER
    _must(right.aggregate == aggregate, "an exercise on another aggregate")
    _must(issuer is (right.amounts is not None), "an exercise at amounts that are not the issuer's")
    _must(issuer or right.payout == payout, "an exercise into another payoff")
    n = len(right.rights)
    dates = _dated(Purpose.EXERCISE, right.rights, (None,) * n, right.amounts or (None,) * n)
    used = right.exercised
    row: dict[str, object] = {
        "by": str(right.by),
        "style": str(ExerciseStyle(right.style)),
        "exercised_date": None if used is None else used.day,
        "exercised_payment_date": None if used is None else used.payment_date,
    }
    return {SCHEDULES: dates, EXERCISES: [row]}


def _barrier(barrier: Barrier, aggregate: Aggregate, payout: Payout) -> Rows:
    scaled = barrier.trigger.scales is not None
    _must(not scaled or set(barrier.levels) == {1.0}, "a barrier with levels by date and by underlying")
    levels = (None,) * len(barrier.levels) if scaled else barrier.levels
    hit = barrier.recorded_hit
    row: dict[str, object] = {
        "kind": str(barrier.kind),
        **_trigger(barrier.trigger, aggregate),
        "monitoring": str(Monitoring.CONTINUOUS if barrier.continuous else Monitoring.DATES),
        **_rebate(barrier, payout),
        "recorded_hit_date": None if hit is None else hit.day,
        "recorded_payment_date": None if hit is None else hit.payment_date,
        "clear_until": barrier.clear_until,
    }
    dates = _dated(Purpose.BARRIER, barrier.schedule, levels, (None,) * len(levels))
    return {SCHEDULES: dates, BARRIERS: [row]}


def _rebate(barrier: Barrier, payout: Payout) -> dict[str, object]:
    instead, at_hit = barrier.instead, barrier.rebate_at_hit
    if at_hit is not None:
        _must(instead == NOTHING, "a rebate at hit and another payout at expiry")
        return {"rebate": at_hit, "rebate_paid": str(RebatePaid.AT_HIT)}
    if isinstance(payout, Redemption) and instead == without_put(payout):
        return {}
    _must(
        isinstance(instead, Redemption) and instead == Redemption(capital=instead.capital), "a barrier between payouts"
    )
    amount = instead.capital if isinstance(instead, Redemption) else 0.0
    if amount == 0.0 and barrier.kind is BarrierKind.IN and not isinstance(payout, Redemption):
        return {}
    return {"rebate": amount, "rebate_paid": str(RebatePaid.AT_EXPIRY)}


def _trigger(trigger: Trigger, aggregate: Aggregate) -> dict[str, object]:
    n, direction = len(aggregate.weights), trigger.direction
    watched = {
        WatchedOn.ANY: Trigger.any_underlying(direction, n).aggregate,
        WatchedOn.EVERY: Trigger.every_underlying(direction, n).aggregate,
    }
    if trigger.scales is None:
        watched = {WatchedOn.AGGREGATE: aggregate, **watched}
    on = next((words for words, found in watched.items() if found == trigger.aggregate), None)
    _must(on is not None, "a trigger on another aggregate than the trade's")
    return {"direction": str(direction), "watched_on": str(on), "at_level_counts": _yes(trigger.at_level_counts)}


def _writer(contract: Contract) -> dict[str, object]:
    writer = contract.writer
    assert writer is not None
    structural = writer.structural
    _must(structural is None or writer.recovery is None, "a recovery besides the writer's assets")
    return {
        "writer": writer.name,
        "recovery_decimal": writer.recovery,
        "assets": None if structural is None else structural.assets,
        "liabilities": None if structural is None else structural.liabilities,
        "deadweight_cost_decimal": None if structural is None else structural.deadweight_cost,
        "defaulted_on": writer.defaulted_on,
    }


def _dated(
    purpose: Purpose, schedule: Iterable[Any], levels: Iterable[float | None], amounts: Iterable[float | None]
) -> list[dict[str, object]]:
    return [
        {
            "purpose": str(purpose),
            "date": observation.day,
            "payment_date": observation.payment_date,
            "level": level,
            "amount": amount,
        }
        for observation, level, amount in zip(schedule, levels, amounts, strict=True)
    ]


def _yes(answer: bool) -> str:
    return "yes" if answer else "no"


def _must(holds: bool, otherwise: str) -> None:
    if not holds:
        raise ValueError(f"the tables of a book cannot say {otherwise}")
