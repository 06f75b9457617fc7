from dataclasses import replace
from datetime import date

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import ExercisedBy, ExerciseStyle
from pricer.contracts.levels import Levels
from pricer.contracts.notes import knock_in
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form import best_exact, references
from pricer.engines.contract_exercise import ExerciseSettings, NotCovered, why_not
from pricer.engines.contract_exercise.functions import best, joined, plus, summed
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.engines.selector import Interval
from pricer.market.dividends import CashDividend, Dividends, ProportionalDividend
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.exercise_cases import (
    END,
    HALF_YEARS,
    RATE,
    SMALL,
    SURE,
    VOLATILITY,
    YIELD,
    flat_market,
    same_day,
    terms_of,
    trade,
    value_of,
)
from tests.unit.markets import TODAY

WORST, BASKET = Aggregate.worst_of(2), Aggregate.weighted_sum((0.5, 0.5))
PUT = Profile(ProfileKind.PUT, 1.0)
NEVER = (9.0,) * 4


def years(day: date) -> float:
    return (day - TODAY).days / 365.0


def european(aggregate: Aggregate, payoff: PiecewiseLinear, day: date, correlation: float = 0.5) -> float:
    """The exact value on the flat market of what is paid on ``day``."""
    n, t = len(aggregate.weights), years(day)
    law = JointLognormal(
        np.full(n, np.exp((RATE - YIELD) * t)),
        t * VOLATILITY**2 * (correlation + (1.0 - correlation) * np.eye(n)),
    )
    found = best_exact(references(EuropeanProblem(law, aggregate, payoff, float(np.exp(-RATE * t)))))
    assert found is not None
    return found.value


corners = st.lists(st.tuples(st.integers(-4, 4), st.integers(-3, 3), st.integers(-3, 3)), max_size=3)


@st.composite
def functions(draw):
    found = {knot: (bend, jump) for knot, bend, jump in draw(corners)}
    knots = tuple(sorted(found))
    bends, jumps = tuple(float(found[k][0]) for k in knots), tuple(float(found[k][1]) for k in knots)
    start = float(draw(st.integers(-3, 3))), float(draw(st.integers(-2, 2)))
    return PiecewiseLinear(*start, tuple(map(float, knots)), bends, jumps)


@given(functions(), functions(), st.integers(-4, 4))
def test_functions_are_put_together_point_by_point(one, other, level):
    at = np.linspace(-9.03, 9.03, 173)  # no knot is among them
    assert np.allclose(summed([one, other])(at), one(at) + other(at))
    assert np.allclose(joined(one, float(level), other)(at), np.where(at > level, other(at), one(at)))
    assert np.allclose(best(one, other)(at), np.maximum(one(at), other(at)))
    assert np.allclose(plus(one, 2.0)(at), one(at) + 2.0)


def test_a_note_that_is_never_called_is_its_bond_its_coupons_and_its_put():
    """Fixed and conditional coupons and a knock-in at expiry, against closed forms."""
    fixed = Coupons(tuple(Coupon(day, day, 0.02) for day in HALF_YEARS))
    trigger = Trigger(Direction.UP, WORST)
    conditional = Coupons(tuple(Coupon(day, day, 0.03, 0.8) for day in HALF_YEARS), trigger)
    barrier = knock_in(WORST, same_day(END), 0.7)
    deal = trade(
        WORST,
        Redemption(1.0, 1.0),
        by=ExercisedBy.ISSUER,
        amounts=NEVER,
        before=(fixed, conditional),
        after=(barrier,),
    )
    found = value_of(deal)
    redeemed = PiecewiseLinear(0.0, 1.0, (0.7,), (-1.0,), (0.3,))
    exact = european(WORST, redeemed, END) + sum(0.02 * np.exp(-RATE * years(day)) for day in HALF_YEARS)
    for day in HALF_YEARS:
        exact += european(WORST, PiecewiseLinear(0.0, 0.0, (0.8,), (0.0,), (0.03,)), day)
    assert found.headline.value == pytest.approx(exact, abs=SURE * found.headline.standard_error + 1e-5)
    assert found.headline.lower < exact < found.headline.upper
    assert found.headline.standard_error < 2e-3
    assert found.life is not None
    assert found.life.expected_life == pytest.approx(years(END))
    assert all(chance.probability == 0.0 for chance in found.life.ends)


def test_accrued_coupons_are_paid_by_day_in_range_and_past_days_count():
    """Two of six days have been seen tonight; the issuer may call on the coupon's day only."""
    days = (date(2027, 1, 29), date(2027, 2, 26), date(2027, 3, 31), date(2027, 4, 30))
    coupons = Coupons((Coupon(HALF_YEARS[0], HALF_YEARS[0], 0.04, 0.8, days, 1.2),), Trigger(Direction.UP, WORST))
    deal = trade(WORST, Redemption(1.0), by=ExercisedBy.ISSUER, amounts=NEVER, before=(coupons,))
    found = value_of(deal)
    exact = np.exp(-RATE * years(END))
    for day in days:
        inside = PiecewiseLinear(0.0, 0.0, (0.8, 1.2), (0.0, 0.0), (0.01, -0.01))
        exact += european(WORST, inside, day) * np.exp(-RATE * (years(HALF_YEARS[0]) - years(day)))
    assert found.headline.value == pytest.approx(exact, abs=SURE * found.headline.standard_error + 1e-6)
    within = trade(
        WORST, Redemption(1.0), rights=(days[1], END), by=ExercisedBy.ISSUER, amounts=(1.0, 1.0), before=(coupons,)
    )
    assert "within an accrual period" in (why_not(terms_of(within, flat_market())) or "")


def test_a_call_that_costs_nothing_is_used_at_once_and_pays_the_coupon_of_its_day():
    coupons = Coupons(tuple(Coupon(day, day, 0.02) for day in HALF_YEARS))
    before = trade(WORST, Redemption(1.0), by=ExercisedBy.ISSUER, amounts=(0.1,) * 4, before=(coupons,))
    after = trade(WORST, Redemption(1.0), by=ExercisedBy.ISSUER, amounts=(0.1,) * 4, after=(coupons,))
    discount = np.exp(-RATE * years(HALF_YEARS[0]))
    first, second = value_of(before), value_of(after)
    assert first.headline.value == pytest.approx(0.12 * discount, abs=1e-6)
    assert second.headline.value == pytest.approx(0.1 * discount, abs=1e-6)
    assert first.life is not None
    assert first.life.ends[0].probability == 1.0
    assert (first.life.ends[0].day, first.life.ends[0].what) == (HALF_YEARS[0], "called")


def test_the_holders_right_is_worth_more_than_none_and_the_issuers_less():
    holder = value_of(trade(BASKET, PUT))
    exact = european(BASKET, PUT.payoff(), END)
    (bound,) = holder.references
    assert bound.kind is ReferenceKind.LOWER_BOUND
    assert bound.value == pytest.approx(exact, rel=1e-6)
    assert exact < holder.headline.lower < holder.headline.upper
    assert holder.headline.interval is Interval.CERTIFIED
    note = trade(BASKET, Redemption(1.0, 1.0), rights=HALF_YEARS[:3], by=ExercisedBy.ISSUER, amounts=(0.8,) * 3)
    issuer = value_of(note)
    (bound,) = issuer.references
    assert bound.kind is ReferenceKind.UPPER_BOUND
    assert issuer.headline.upper < bound.value


def test_exercise_tonight_counts():
    """A put far in the money under a high rate: nothing is gained by waiting."""
    deal = trade(BASKET, Profile(ProfileKind.PUT, 3.0), rights=(TODAY, *HALF_YEARS))
    found = value_of(deal)
    assert (found.headline.lower, found.headline.value, found.headline.upper) == (2.0, 2.0, 2.0)
    assert np.allclose(found.ratios.deltas, [-0.5 / 100.0, -0.5 / 50.0])
    assert found.life is not None
    assert found.life.expected_life == 0.0
    assert found.life.ends[0].day == TODAY


def test_an_announced_exercise_is_a_european_payment():
    day = date(2027, 5, 31)
    deal = trade(BASKET, PUT, exercised=same_day(day)[0])
    found = value_of(deal)
    exact = european(BASKET, PUT.payoff(), day)
    assert found.headline.value == pytest.approx(exact, abs=SURE * found.headline.standard_error)


@pytest.mark.parametrize("aggregate", [Aggregate.worst_of(2), Aggregate.kth_best(1, 2), BASKET], ids=str)
def test_cash_dividends_are_known_parts_of_the_levels(aggregate):
    """With a single right, at expiry, against plain sampling of the same law."""
    dividends = Dividends(0.0, (), (CashDividend(date(2027, 6, 1), 8.0), CashDividend(date(2029, 6, 1), 8.0)))
    market = flat_market(dividends)
    deal = trade(aggregate, PUT, rights=(END,))
    terms = terms_of(deal, market)
    assert terms.has_floors
    found = value_of(deal, market)
    moves = np.random.default_rng(1).multivariate_normal([0.0, 0.0], terms.covariances[-1], 400_000)
    growth = np.exp(moves - 0.5 * np.diag(terms.covariances[-1]))
    levels = (terms.forwards[-1] * growth + terms.floors[-1]) / np.array([100.0, 50.0])
    paid = np.exp(-RATE * years(END)) * PUT.payoff()(aggregate(levels))
    error = np.hypot(paid.std() / np.sqrt(len(paid)), found.headline.standard_error)
    assert found.headline.value == pytest.approx(paid.mean(), abs=SURE * error)


def test_an_american_right_on_few_days_is_on_all_of_them():
    rights = (date(2028, 11, 20), END)
    deal = trade(BASKET, PUT, rights=rights, style=ExerciseStyle.AMERICAN)
    found = value_of(deal)
    assert "every business day" in found.headline.method
    assert found.life is not None
    assert date(2028, 11, 25) not in [chance.day for chance in found.life.ends]  # a Saturday


def test_an_american_right_is_worth_more_than_a_bermudan_one():
    bermudan, american = (
        value_of(trade(BASKET, PUT)),
        value_of(trade(BASKET, PUT, rights=(date(2027, 5, 31), END), style=ExerciseStyle.AMERICAN)),
    )
    assert american.headline.upper > bermudan.headline.upper
    assert american.headline.value > bermudan.headline.lower
    assert "business days between" in american.headline.method
    assert american.life is not None
    assert len(american.life.ends) <= 12


def test_answers_repeat_to_the_last_bit():
    deal = trade(WORST, PUT)
    one, other = value_of(deal), value_of(deal, settings=replace(SMALL, threads=2))
    assert one.headline == other.headline
    assert np.array_equal(one.ratios.deltas, other.ratios.deltas)


REFUSED = {
    "coupons with memory": trade(
        WORST,
        Redemption(1.0),
        by=ExercisedBy.ISSUER,
        amounts=NEVER,
        before=(
            Coupons(tuple(Coupon(d, d, 0.03, 0.8) for d in HALF_YEARS), Trigger(Direction.UP, WORST), memory=True),
        ),
    ),
    "watched before expiry": trade(WORST, PUT, after=(knock_in(WORST, same_day(*HALF_YEARS), 0.7),)),
    "another aggregate than the payout's": trade(WORST, PUT, after=(knock_in(BASKET, same_day(END), 0.7),)),
    "beside the feature autocallable": trade(
        WORST, PUT, before=(Autocall(same_day(END), Trigger(Direction.UP, WORST), (1.0,), (1.0,)),)
    ),
    "references are still to be set": trade(
        WORST, PUT, levels=Levels(("ARVENNE", "BELCOR"), None, (date(2027, 1, 4),))
    ),
}


@pytest.mark.parametrize("reason", REFUSED)
def test_what_is_not_priced_says_why(reason):
    deal, market = REFUSED[reason], flat_market()
    assert reason in (why_not(terms_of(deal, market)) or "")
    with pytest.raises(NotCovered, match=reason):
        value_of(deal, market)


def test_an_average_beside_a_right_is_not_priced():
    deal = trade(WORST, PUT)
    contract = deal.contract
    averaged = replace(deal, contract=replace(contract, statistic=Average(HALF_YEARS, WORST)))
    assert "statistic" in (why_not(terms_of(averaged, flat_market())) or "")
    assert why_not(terms_of(deal, flat_market())) is None


def test_both_sides_of_an_ex_date_are_looked_at_however_few_the_days():
    """A put is held until the price has fallen: intervals on few and on more days must agree."""
    dividends = Dividends(0.0, (ProportionalDividend(date(2027, 5, 12), 0.06),))
    market = flat_market(dividends)
    deal = trade(BASKET, Profile(ProfileKind.PUT, 2.0), rights=(TODAY, END), style=ExerciseStyle.AMERICAN)
    found = [value_of(deal, market, replace(SMALL, american_days=days)).headline for days in (9, 21)]
    assert found[0].lower < found[1].upper
    assert found[1].lower < found[0].upper
    assert min(headline.lower for headline in found) > 1.0
    # a sure gain: the price falls by 6 %, less the interest lost on the strike until then
    discount = float(np.exp(-RATE * years(date(2027, 5, 12))))
    assert found[0].lower > 2.0 * discount - 0.94 - 1e-3


@pytest.mark.parametrize("days", [3, 44])
def test_days_that_cannot_be_halved_are_refused(days):
    with pytest.raises(ValueError, match="an odd number of days"):
        ExerciseSettings(american_days=days)
