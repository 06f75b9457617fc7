"""Random contracts with a random past, for hypothesis."""

from datetime import date, timedelta

import numpy as np
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.observation import Observation
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger

START, LENGTH = date(2026, 1, 5), 40
DAYS = tuple(START + timedelta(days=i) for i in range(LENGTH + 1))
SETTING = 4  # references are set within the first days, everything else is observed after them

numbers = st.floats(0.7, 1.3)
kinds = st.sampled_from(["sum", "geometric", "best", "worst", "second"])


def observation(day):
    return Observation(day, day + timedelta(days=2))


@st.composite
def aggregates(draw, n):
    weights = tuple(draw(st.floats(0.2, 1.0)) for _ in range(n))
    total = sum(weights)
    return {
        "sum": Aggregate.weighted_sum(tuple(w / total for w in weights)),
        "geometric": Aggregate.geometric(tuple(w / total for w in weights)),
        "best": Aggregate.best_of(n),
        "worst": Aggregate.worst_of(n),
        "second": Aggregate.kth_best(min(2, n), n),
    }[draw(kinds)]


def some_days(draw, least=1, most=6):
    days = st.sets(st.sampled_from(DAYS[SETTING:]), min_size=least, max_size=max(most, least))
    return tuple(sorted(draw(days)))


@st.composite
def triggers(draw, n):
    return Trigger(draw(st.sampled_from(Direction)), draw(aggregates(n)), at_level_counts=draw(st.booleans()))


@st.composite
def statistics(draw, n):
    aggregate = draw(aggregates(n))
    days = some_days(draw, 3, 8)
    local = Profile(ProfileKind.FORWARD, 1.0, floor=-0.05, cap=0.05)
    choices = [
        ExpiryLevel(DAYS[-1], aggregate),
        Average(days, aggregate, draw(st.sampled_from(AverageOf))),
        PerformanceSum(days, aggregate, local),
        RealisedVariance(days, aggregate, (*(0.5,) * n, -0.5), draw(st.booleans())),
        LockedIn(days[:n], n, draw(st.integers(1, n))),
    ]
    if n > 1:
        choices.append(RealisedCorrelation(days, (0.5,) * n, draw(st.booleans())))
    return draw(st.sampled_from(choices))


@st.composite
def coupons(draw, n):
    days = some_days(draw)
    if draw(st.booleans()):
        whole = tuple(Coupon(day, day, 0.02, draw(st.none() | numbers)) for day in days)
        return Coupons(whole, draw(triggers(n)), draw(st.booleans()))
    made, last = [], DAYS[SETTING - 1]
    for day in days:
        accrued = tuple(d for d in DAYS if last < d <= day)
        made.append(Coupon(day, day, 0.02, draw(numbers), accrued, 1.4))
        last = day
    return Coupons(tuple(made), Trigger(Direction.UP, draw(aggregates(n))))


@st.composite
def barriers(draw, n):
    schedule = tuple(map(observation, some_days(draw, 1, 30)))
    kind = draw(st.sampled_from(BarrierKind))
    rebate = draw(st.none() | st.just(0.05)) if kind is BarrierKind.OUT else None
    levels = (draw(numbers),) * len(schedule)
    return Barrier(kind, draw(triggers(n)), schedule, levels, Redemption(capital=0.1), rebate)


@st.composite
def autocalls(draw, n):
    schedule = tuple(map(observation, some_days(draw)))
    levels = tuple(sorted((draw(numbers) for _ in schedule), reverse=True))
    return Autocall(schedule, draw(triggers(n)), levels, tuple(1.0 + 0.01 * k for k in range(len(schedule))))


@st.composite
def exercises(draw, n):
    rights = tuple(map(observation, some_days(draw)))
    used = draw(st.none() | st.sampled_from(rights))
    return Exercise(ExercisedBy.HOLDER, rights, draw(aggregates(n)), Redemption(put_strike=1.0), exercised=used)


@st.composite
def seasoned_contracts(draw):
    n = draw(st.integers(1, 3))
    names = ("A", "B", "C")[:n]
    setting = draw(st.none() | st.just(DAYS[:SETTING]) | st.just(DAYS[1:2]))
    levels = Levels(names, None, setting) if setting else Levels(names, tuple(draw(st.floats(80, 120)) for _ in names))
    kinds = draw(st.lists(st.sampled_from([coupons, autocalls, barriers, exercises]), max_size=3))
    payout = draw(st.sampled_from([Redemption(put_strike=1.0), Profile(ProfileKind.CASH_DIGITAL_CALL, 1.0, 0.1)]))
    features = tuple(draw(kind(n)) for kind in kinds)
    return Contract(levels, draw(statistics(n)), payout, observation(DAYS[-1]), features)


def path(seed, n):
    """Prices (n_days, n) of a driftless walk with a volatility of 3 % a day."""
    moves = 0.03 * np.random.default_rng(seed).standard_normal((len(DAYS), n))
    return 100.0 * np.exp(np.cumsum(moves, axis=0))


def rows(prices, names):
    return [
        Fixing(name, day, float(level))
        for day, row in zip(DAYS, prices, strict=True)
        for name, level in zip(names, row, strict=True)
    ]


def record(prices, names):
    return Fixings.from_rows(rows(prices, names))
