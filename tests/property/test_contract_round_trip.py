"""Options and notes on a path, written as rows with explicit dates and read again, are the same contracts."""

from __future__ import annotations

import tempfile
from datetime import date, timedelta
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import NOTHING, Barrier, BarrierKind
from pricer.contracts.book import Book, Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.observation import Observation
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.loader import load_book, write_book
from pricer.loader.barrier_assembly import without_put
from pricer.market.calendars import advance

START, LENGTH, SETTING = date(2026, 1, 5), 60, 4
DAYS = tuple(START + timedelta(days=i) for i in range(LENGTH + 1))
EXPIRY = Observation(DAYS[-1], advance("TARGET", DAYS[-1], 2))

levels = st.floats(0.05, 1.9)
amounts = st.floats(0.0, 0.9)
maybe = st.none() | st.floats(-0.9, 0.9).filter(bool)


def some_days(draw, least=1, most=6):
    return tuple(sorted(draw(st.sets(st.sampled_from(DAYS[SETTING:]), min_size=least, max_size=most))))


def some_observations(draw, least=1, most=6):
    return tuple(Observation(d, d + timedelta(days=draw(st.integers(0, 9)))) for d in some_days(draw, least, most))


@st.composite
def weights(draw, n):
    shares = [draw(st.floats(0.1, 1.0)) for _ in range(n)]
    return tuple(share / sum(shares) for share in shares)


@st.composite
def aggregates(draw, n):
    kind = draw(st.sampled_from(AggregateKind))
    match kind:
        case AggregateKind.WEIGHTED_SUM:
            return Aggregate.weighted_sum(draw(weights(n)))
        case AggregateKind.GEOMETRIC:
            return Aggregate.geometric(draw(weights(n)))
        case AggregateKind.BEST_OF:
            return Aggregate.best_of(n)
        case AggregateKind.WORST_OF:
            return Aggregate.worst_of(n)
        case AggregateKind.KTH_BEST:
            return Aggregate.kth_best(draw(st.integers(1, n)), n)
        case AggregateKind.RANK_WEIGHTED:
            return Aggregate.rank_weighted(draw(weights(n)))


@st.composite
def statistics(draw, n):
    """A statistic, and the aggregate that the row of the trade names."""
    aggregate = draw(aggregates(n))
    days = some_days(draw, 3, 8)
    low = draw(st.floats(-0.5, 0.0))
    local = Profile(ProfileKind.FORWARD, 1.0, floor=low, cap=low + draw(st.floats(0.01, 0.5)))
    sums = PerformanceSum(days, aggregate, local)
    own = tuple(draw(st.just(0.0) | st.floats(0.1, 2.0)) for _ in range(n))
    found = [
        (ExpiryLevel(DAYS[-1], aggregate), aggregate),
        (Average(days, aggregate, draw(st.sampled_from(AverageOf))), aggregate),
        (sums, aggregate),
        (RealisedVariance(days, aggregate, (*own, -1.0), draw(st.booleans()), draw(st.floats(1.0, 365.0))), aggregate),
    ]
    rank = draw(st.integers(1, n))
    found.append((LockedIn(days[:n], n, rank), Aggregate.kth_best(rank, n)))
    if n > 1:
        shares = draw(weights(n))
        found.append((RealisedCorrelation(days, shares, draw(st.booleans())), Aggregate.weighted_sum(shares)))
    return draw(st.sampled_from(found))


@st.composite
def triggers(draw, aggregate, scales=None):
    n, direction = len(aggregate.weights), draw(st.sampled_from(Direction))
    found = [Trigger.any_underlying(direction, n, scales), Trigger.every_underlying(direction, n, scales)]
    if scales is None:
        found.append(Trigger(direction, aggregate, at_level_counts=draw(st.booleans())))
    return draw(st.sampled_from(found))


@st.composite
def coupons(draw, aggregate):
    paid = some_observations(draw)
    if draw(st.booleans()):
        made = tuple(Coupon(o.day, o.payment_date, draw(amounts), draw(st.none() | levels)) for o in paid)
        has_level = any(coupon.level is not None for coupon in made)
        return Coupons(made, draw(triggers(aggregate)) if has_level else None, draw(st.booleans()))
    last, accrued = DAYS[SETTING - 1], []
    for o in paid:
        days = tuple(d for d in DAYS if last < d <= o.day)
        level = draw(levels)
        accrued.append(
            Coupon(o.day, o.payment_date, draw(amounts), level, days, draw(st.none() | st.just(level + 0.5)))
        )
        last = o.day
    return Coupons(tuple(accrued), Trigger(Direction.UP, aggregate))


@st.composite
def barriers(draw, aggregate, payout, scales):
    schedule = some_observations(draw, 1, 20)
    kind = draw(st.sampled_from(BarrierKind))
    is_note = isinstance(payout, Redemption)
    otherwise = without_put(payout) if is_note else NOTHING
    # A barrier that changes nothing is refused.
    changes = otherwise != payout
    instead = draw(st.sampled_from([Redemption(capital=0.25), otherwise] if changes else [Redemption(capital=0.25)]))
    at_hit = draw(st.none() | amounts) if kind is BarrierKind.OUT else None
    prices = (1.0,) * len(schedule) if scales else tuple(draw(levels) for _ in schedule)
    hit = draw(st.none() | st.sampled_from(schedule))
    clear = draw(st.none() | st.just((hit or schedule[0]).day - timedelta(days=1)))
    trigger = draw(triggers(aggregate, scales))
    instead = NOTHING if at_hit is not None else instead
    return Barrier(kind, trigger, schedule, prices, instead, at_hit, draw(st.booleans()), hit, clear)


@st.composite
def autocalls(draw, aggregate):
    schedule = some_observations(draw)
    at = tuple(draw(levels) for _ in schedule)
    return Autocall(schedule, draw(triggers(aggregate)), at, tuple(1.0 + draw(amounts) for _ in schedule))


@st.composite
def exercises(draw, aggregate, payout):
    rights = some_observations(draw)
    used = draw(st.none() | st.sampled_from(rights))
    style = draw(st.sampled_from(ExerciseStyle))
    if draw(st.booleans()):
        paid = tuple(1.0 + draw(amounts) for _ in rights)
        return Exercise(ExercisedBy.ISSUER, rights, aggregate, None, paid, style, used)
    return Exercise(ExercisedBy.HOLDER, rights, aggregate, payout, None, style, used)


@st.composite
def payouts(draw):
    if draw(st.booleans()):
        return Profile(ProfileKind.CALL, draw(st.floats(0.01, 0.9)), floor=draw(maybe))
    put, call = draw(st.none() | levels), draw(st.none() | levels)
    leverage = 1.0 if put is None else draw(st.floats(0.5, 3.0))
    return Redemption(
        draw(st.floats(0.5, 1.5)), put, leverage, call, 1.0 if call is None else draw(levels), draw(maybe)
    )


@st.composite
def contracts(draw):
    n = draw(st.integers(1, 3))
    names = ("A", "B", "C")[:n]
    known = Levels(names, tuple(draw(st.floats(1.0, 1000.0)) for _ in names), draw(st.just(()) | st.just(DAYS[:2])))
    chosen = draw(st.sampled_from([known, Levels(names, None, DAYS[:SETTING])]))
    statistic, aggregate = draw(statistics(n))
    payout = draw(payouts())
    scales = draw(st.none() | st.just(tuple(draw(levels) for _ in names)))
    features = [
        *(draw(coupons(aggregate)) for _ in range(draw(st.integers(0, 2)))),
        *(draw(autocalls(aggregate)) for _ in range(draw(st.integers(0, 1)))),
        *(draw(exercises(aggregate, payout)) for _ in range(draw(st.integers(0, 1)))),
        *(draw(barriers(aggregate, payout, scales)) for _ in range(draw(st.integers(0, 2)))),
    ]
    writer = draw(st.sampled_from([None, Writer("X", 0.3), Writer("Y", structural=StructuralDefault("F", 80.0, 0.1))]))
    contract = Contract(chosen, statistic, payout, EXPIRY, tuple(features), writer)
    return contract if chosen.reference_dates else contract.as_european() or contract


books = st.lists(contracts(), min_size=1, max_size=3).map(
    lambda found: Book("any", tuple(Trade(f"T-{i}", c, 1e6 * (-1) ** i, "EUR") for i, c in enumerate(found)))
)


@pytest.mark.parametrize(("name", "examples"), [("book.xlsx", 15), ("book", 60)])
def test_contracts_that_are_written_and_read_again_are_the_same(name, examples):
    @settings(max_examples=examples, deadline=None, suppress_health_check=list(HealthCheck))
    @given(book=books)
    def check(book):
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / name
            write_book(book, path)
            again = load_book(path)
        assert [str(issue) for refusal in again.refusals for issue in refusal.issues] == []
        assert again.trades == book.trades

    check()


def test_a_contract_that_the_tables_cannot_say_is_not_written(tmp_path):
    basket = Aggregate.weighted_sum((0.5, 0.5))
    levels = Levels(("A", "B"), (1.0, 1.0))
    other = Trigger(Direction.UP, Aggregate.weighted_sum((0.4, 0.6)))
    call = Autocall((EXPIRY,), other, (1.0,), (1.0,))
    contract = Contract(levels, ExpiryLevel(DAYS[-1], basket), Redemption(), EXPIRY, (call,))
    with pytest.raises(ValueError, match="a trigger on another aggregate than the trade's"):
        write_book(Book("any", (Trade("T", contract, 1.0, "EUR"),)), tmp_path / "book")
