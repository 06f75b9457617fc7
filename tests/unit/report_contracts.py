"""Contracts with a past for the report's tests: one of every part, as they stand on 29 May 2026, and what is due."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Premium, Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.notes import autocallable, knock_in
from pricer.contracts.observation import Observation
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.run.outcome import ChanceRow, ContractFacts, CrossCheck, EventRow, Interval, Outcome, Valuation, Verdict
from tests.unit.report_outcomes import VALUATION_DATE, outcome, valuation

NAMES = ("ALDERMOOR", "BRANDWEIL", "CORVANTO")
INITIAL = (50.0, 120.0, 12.0)
SPOTS = dict(zip(NAMES, (48.25, 131.8, 12.065), strict=True))
WORST = Aggregate.worst_of(3)
MONTHS = tuple(date(2026 + (m - 1) // 12, (m - 1) % 12 + 1, 15) for m in range(1, 25))  # of 2026 and 2027


def observed(day: date) -> Observation:
    return Observation(day, day + timedelta(days=5))


def fixings() -> Fixings:
    """Every day of 2026 up to the valuation date: 96 %, 105 % and 100 % of the initial fixings, wobbling a little."""
    days = [date(2026, 1, 1) + timedelta(days=k) for k in range((VALUATION_DATE - date(2026, 1, 1)).days + 1)]
    return Fixings.from_rows(
        Fixing(name, day, round(initial * share * (1.0 + 0.01 * ((k * step) % 7 - 3)), 6))
        for name, initial, share, step in zip(NAMES, INITIAL, (0.96, 1.05, 1.0), (1, 2, 3), strict=True)
        for k, day in enumerate(days)
    )


def _on_performance(**parts) -> Contract:
    """On the worst of three, a call of twelve months unless told otherwise."""
    last = MONTHS[11]
    base = {
        "levels": Levels(NAMES, INITIAL),
        "statistic": ExpiryLevel(last, WORST),
        "payout": Profile(ProfileKind.CALL, 1.0),
        "expiry": observed(last),
    }
    return Contract(**{**base, **parts})


def contracts() -> dict[str, Contract]:
    up, down = Trigger(Direction.UP, WORST), Trigger(Direction.DOWN, WORST)
    calls = tuple(observed(day) for day in MONTHS[2:12:3])
    coupons = Coupons(
        tuple(Coupon(day, day + timedelta(days=5), 0.0275, level=0.97) for day in MONTHS[2:12:3]), up, memory=True
    )
    note = autocallable(
        Levels(NAMES, INITIAL),
        WORST,
        observed(MONTHS[11]),
        calls,
        (1.02, 1.0, 0.98, 0.96),
        (1.0,) * 4,
        Redemption(put_strike=1.0, leverage=1.25, floor=0.1),
        coupons,
        knock_in(WORST, calls, 0.6),
    )
    accrual = Coupons((Coupon(MONTHS[5], MONTHS[5], 0.04, level=0.8, accrual_dates=MONTHS[:6], ceiling=1.2),), up)
    basket = Aggregate.weighted_sum((0.5, 0.3, 0.2))
    daily = tuple(observed(MONTHS[0] + timedelta(days=k)) for k in range(334))
    called = autocallable(
        Levels(NAMES, INITIAL), WORST, observed(MONTHS[11]), (observed(date(2026, 5, 27)),), (0.5,), (1.035,),
        Redemption(put_strike=1.0),
    )  # fmt: skip
    return {
        "note": note,
        "accrual": _on_performance(features=(accrual,), payout=Redemption()),
        "average": _on_performance(statistic=Average(MONTHS[:12], basket)),
        "average of baskets": _on_performance(statistic=Average(MONTHS[:12], basket, AverageOf.AGGREGATE)),
        "cliquet": _on_performance(
            statistic=PerformanceSum(MONTHS[:12], basket, Profile(ProfileKind.FORWARD, 1.0, floor=-0.02, cap=0.03)),
            payout=Profile(ProfileKind.CALL, 0.0, floor=0.05),
        ),
        "locked in": _on_performance(statistic=LockedIn((MONTHS[3], MONTHS[7], MONTHS[11]), 3)),
        "variance": _on_performance(
            statistic=RealisedVariance(MONTHS[:12], basket, (0.5, 0.3, 0.2, -1.0), returns_per_year=12.0),
            payout=Profile(ProfileKind.FORWARD, 0.04),
        ),
        "correlation": _on_performance(
            statistic=RealisedCorrelation(MONTHS[:12], (0.5, 0.3, 0.2)), payout=Profile(ProfileKind.FORWARD, 0.6)
        ),
        "knock-out": _on_performance(
            features=(Barrier(BarrierKind.OUT, down, daily, (0.7,) * 334, rebate_at_hit=0.01, continuous=True,
                              clear_until=VALUATION_DATE),),
        ),
        "rebate": _on_performance(
            features=(Barrier(BarrierKind.OUT, Trigger.any_underlying(Direction.UP, 3, (1.3, 1.2, 1.25)),
                              calls, (1.0,) * 4, instead=Redemption(capital=0.02)),),
        ),
        "bermudan": Contract(
            Levels.of_prices(NAMES[:1]), ExpiryLevel(MONTHS[11], Aggregate.weighted_sum((1.0,))),
            Profile(ProfileKind.PUT, 50.0), observed(MONTHS[11]),
            (Exercise(ExercisedBy.HOLDER, calls[1:], Aggregate.weighted_sum((1.0,)), Profile(ProfileKind.PUT, 50.0)),),
        ),
        "callable": _on_performance(
            features=(Exercise(ExercisedBy.ISSUER, calls[1:], WORST, amounts=(1.0, 1.01, 1.02)),), payout=Redemption()
        ),
        "forward start": _on_performance(levels=Levels(NAMES, None, (MONTHS[6],))),
        "averaging in": _on_performance(levels=Levels(NAMES, None, MONTHS[:8])),
        "vulnerable": _on_performance(writer=Writer("Norrbank", structural=StructuralDefault("HOLMVIK", 15.0, 0.2))),
        "doubtful": _on_performance(writer=Writer("Norrbank", recovery=0.35)),
        "called": called,
    }  # fmt: skip


def trades() -> tuple[Trade, ...]:
    """One of each contract, in turns long and short."""
    return tuple(
        Trade(
            f"PST-{100 + i}", contract, (1_000_000.0 if contract.on_performance else 20_000.0) * (-1.0) ** i, "EUR",
            trade_date=date(2026, 1, 7), counterparty="Hjelm & Dahl",
            premium=Premium(12_500.0, date(2026, 6, 3)) if i == 0 else None,
        )
        for i, contract in enumerate(contracts().values())
    )  # fmt: skip


def facts() -> tuple[ContractFacts, ...]:
    known = fixings()
    return tuple(_facts(trade, known) for trade in trades())


def _facts(trade: Trade, known: Fixings) -> ContractFacts:
    found = as_of(trade.contract, VALUATION_DATE, known, SPOTS)
    days = [day for day in trade.contract.dates if day <= (found.progress.ended_on or VALUATION_DATE)]
    prices = known.matrix(trade.contract.underlyings, days).tolist()
    return ContractFacts(trade, found, tuple(zip(days, map(tuple, prices), strict=True)))


def events() -> tuple[EventRow, ...]:
    """Two tomorrow, which is a Monday, one of today, a series and others."""
    monday, names = date(2026, 6, 1), NAMES

    def row(trade_id: str, day: date, what: str, **more) -> EventRow:
        return EventRow(trade_id, "worst of call", day, what, names, "Hjelm & Dahl", currency="EUR", **more)

    trigger = {"level": 1.0, "current": 0.965, "distance": 0.0363, "met_today": False}
    return (
        row("PST-101", date(2026, 6, 4), "payment: coupon", amount=27_500.0, payment_date=date(2026, 6, 4)),
        row("PST-100", monday, "call", **trigger, deviations=2.1, amount=-1e6, payment_date=date(2026, 6, 8)),
        row("PST-103", monday, "knock-in", level=0.98, current=0.965, distance=0.0155, deviations=0.4, met_today=True),
        row("PST-108", date(2026, 5, 30), "knock-out", last_day=date(2026, 6, 5), level=0.7, current=0.965,
            distance=-0.275, deviations=-6.3, met_today=False),
        row("PST-104", VALUATION_DATE, "cliquet observed"),
        row("PST-105", date(2026, 6, 5), "expiry", payment_date=date(2026, 6, 10)),
    )  # fmt: skip


def contract_valuation(i: int, item: ContractFacts) -> Valuation:
    """A value for each, some with chances, an interval of early exercise or an overhedge."""
    trade, contract = item.trade, item.as_of.contract
    base = valuation(
        3 * i + 1, trade_id=trade.trade_id, product=contract.product, currency="EUR", counterparty=trade.counterparty,
        expiry_date=contract.expiry_date, notional=1e6, life_status=str(item.as_of.status),
    )  # fmt: skip
    base = replace(base, reporting_value=base.value, reporting_standard_error=base.standard_error)
    if item.as_of.ending is not None:
        return replace(base, standard_error=0.0, reporting_standard_error=0.0, expected_life=0.0, deltas=())
    if i == 0:
        chances = (ChanceRow(MONTHS[5], "call", 0.4, 0.0007), ChanceRow(MONTHS[8], "call", 0.125, 0.0005))
        return replace(
            base, expected_life=0.41, expected_life_standard_error=0.0004, call_probability=0.525,
            knock_probability=0.08, chances=chances, overhedge_cost=-1850.0,
        )  # fmt: skip
    if i == 10:
        ends = {"lower": base.value - 900.0, "upper": base.value + 900.0}
        return replace(base, interval=Interval.CERTIFIED, standard_error=50.0, **ends)
    return replace(base, expected_life=0.55, knock_probability=0.25 if i in (8, 9) else None)


def sample_check(v: Valuation) -> CrossCheck:
    """An independent sample that agrees."""
    error = 1.4 * v.sampled_standard_error
    return CrossCheck(
        v.trade_id, v.product, v.model, v.sampled_value, v.sampled_standard_error, "every path observed day by day",
        "independent sample", v.sampled_value - 0.5 * error, v.sampled_standard_error, 0.5 * error, 0.01, 0.5,
        6.0 * error, Verdict.AGREES, "the contract's own rules",
    )  # fmt: skip


def seasoned(n_trades: int = 12, **changes) -> Outcome:
    """A book of European options and every contract above."""
    found = facts()
    values = tuple(contract_valuation(i, item) for i, item in enumerate(found))
    base = outcome(n_trades)
    return replace(
        base,
        valuations=(*base.valuations, *values),
        cross_checks=(*base.cross_checks, *map(sample_check, values[:5])),
        contracts=found,
        events=events(),
        **changes,
    )
