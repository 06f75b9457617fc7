"""What a market lacks for a contract with a past: only what is still to come matters."""

from dataclasses import replace
from datetime import date, timedelta

import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Book, Premium
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.correlation import checked
from pricer.market.coverage import coverage
from pricer.market.credit import HazardCurve
from pricer.market.doubt_coverage import doubts
from pricer.run.admission import admit
from tests.unit.markets import CORRELATION, TODAY, basket, small_market, volatility

NAMES = ("ARVENNE", "BELCOR")
EXPIRY, PAID = date(2027, 12, 17), date(2027, 12, 21)
PAST, COMING = date(2026, 9, 16), date(2027, 3, 17)
PLACES = {
    column: Place("book.xlsx", "trades" if column == "expiry_date" else column.partition(":")[0], 7, column, "C7")
    for column in ("expiry_date", "schedule:call", "schedule:observation", "barrier", "coupon", "writer", "assets")
}


def contract(*features, names=NAMES, references=(100.0, 50.0), payout=None, writer=None, statistic=None, expiry=EXPIRY):
    worst = Aggregate.worst_of(len(names))
    return Contract(
        Levels(names, references),
        statistic or ExpiryLevel(expiry, worst),
        payout or Redemption(put_strike=1.0),
        Observation(expiry, expiry + (PAID - EXPIRY)),
        tuple(features),
        writer,
    )


def trade(*features, **terms):
    return replace(basket(*NAMES), contract=contract(*features, **terms), position=1e6)


def told(trade, market=None):
    return [(i.code, i.severity, i.found) for i in coverage(trade, market or small_market(), PLACES.get)]


def codes(trade, market=None):
    return [code for code, *_ in told(trade, market)]


def call(*days, level=1.0):
    n = len(days)
    schedule = tuple(Observation(day, day + timedelta(days=4)) for day in days)
    return Autocall(schedule, Trigger(Direction.UP, Aggregate.worst_of(2)), (level,) * n, (1.05,) * n)


def fixed(*rows):
    return small_market(fixings=Fixings.from_rows(Fixing(name, day, level) for name, day, level in rows))


BELOW = (("ARVENNE", PAST, 90.0), ("BELCOR", PAST, 45.0))
ABOVE = (("ARVENNE", PAST, 101.0), ("BELCOR", PAST, 55.0))


def test_a_note_whose_past_is_known_raises_nothing():
    assert told(trade(call(PAST, COMING)), fixed(*BELOW)) == []


def test_a_missing_fixing_is_told_at_the_schedule_that_asks_for_it():
    (issue,) = coverage(trade(call(PAST, COMING)), fixed(BELOW[0]), PLACES.get)
    assert (issue.code, issue.severity, issue.sheet, issue.trade_id) == (
        "missing-fixing", Severity.ERROR, "schedule", "T1",
    )  # fmt: skip
    assert issue.found == "no fixing of BELCOR on 2026-09-16"
    assert issue.mend == (
        "Add a row to the market's fixings table: underlying BELCOR, date 2026-09-16, and the official level; where a "
        "day itself had none, the one that the trade's terms fall back on."
    )
    (averaged,) = coverage(trade(statistic=Average((PAST, COMING), Aggregate.worst_of(2))), fixed(BELOW[0]), PLACES.get)
    assert averaged.column == "schedule:observation"


def test_a_called_note_that_waits_for_its_payment_needs_nothing_but_currency_and_curve():
    called = trade(call(date(2026, 11, 27), COMING))
    fixings = [(name, date(2026, 11, 27), level) for name, _, level in ABOVE]
    market = fixed(*fixings)
    assert told(called, market) == []
    bare = {name: replace(each, volatility=None) for name, each in market.underlyings.items()}
    assert told(called, replace(market, underlyings=bare, correlation=None)) == []
    assert codes(replace(called, collateral="GBP"), market) == ["no-collateral-curve"]
    late = replace(called, premium=Premium(1.0, date(2040, 1, 2)))
    assert told(late, market) == [
        ("beyond-curve", Severity.WARNING, "premium date 2040-01-02, after 2031-11-28, where curve EUR-STD ends")
    ]


def test_a_settled_trade_is_admitted():
    book = Book("b", (trade(call(PAST, COMING)),))
    admitted = admit(book, fixed(*ABOVE))
    assert (len(admitted), admitted.refusals, admitted.issues) == (1, (), ())


def test_a_trade_without_a_fixing_is_refused_with_its_notional():
    admitted = admit(Book("b", (trade(call(PAST, COMING)),), places={("T1", "schedule:call"): PLACES["schedule:call"]}),
                     fixed())  # fmt: skip
    (refusal,) = admitted.refusals
    assert len(admitted) == 0
    assert refusal.notional == 1e6
    assert [(issue.code, issue.sheet) for issue in refusal.issues] == [("missing-fixing", "schedule")] * 2


def test_todays_observation_without_a_fixing_takes_the_spot_and_says_so():
    assert told(trade(call(TODAY, COMING, level=1.05))) == [
        ("spot-for-fixing", Severity.WARNING, "an observation today, 2026-11-30, without a fixing of ARVENNE, BELCOR")
    ]


def test_a_note_that_ends_today_by_spots_still_needs_the_whole_market():
    ends = trade(call(TODAY, COMING, level=0.9))
    assert codes(ends) == ["spot-for-fixing"]
    assert set(codes(ends, small_market(correlation=None))) == {"spot-for-fixing", "no-correlations"}


def test_a_barrier_that_is_watched_at_all_times_and_not_recorded_is_told_at_its_row():
    schedule = (Observation(PAST, PAST), Observation(COMING, COMING))
    barrier = Barrier(
        BarrierKind.IN, Trigger(Direction.DOWN, Aggregate.worst_of(2)), schedule, (0.6, 0.6), Redemption(), None, True
    )
    (issue,) = coverage(trade(barrier), fixed(*BELOW), PLACES.get)
    assert (issue.code, issue.severity, issue.sheet) == ("touch-not-recorded", Severity.WARNING, "barrier")


def test_features_that_are_spent_are_not_looked_at():
    # Called on holidays and ex dates, at percent for decimals, long ago; and nothing of it is left.
    past = date(2026, 4, 3)  # Good Friday
    barrier = Barrier(
        BarrierKind.IN, Trigger(Direction.DOWN, Aggregate.worst_of(2)), (Observation(past, past),), (60.0,),
        Redemption(),
    )  # fmt: skip
    fixings = [(name, past, level) for name, _, level in BELOW]
    assert told(trade(barrier), fixed(*fixings)) == []


def test_holidays_and_ex_dates_among_the_observations_to_come_are_told_once_each():
    # BELCOR goes ex on 2027-05-12; Good Friday and Easter Monday are closed.
    days = (PAST, date(2027, 3, 26), date(2027, 5, 12), date(2027, 12, 27))
    coupons = Coupons(tuple(Coupon(day, day, 0.02) for day in days[:2]))
    found = told(trade(coupons, call(*days[:3])), fixed(*BELOW))
    assert found == [
        (
            "observed-on-ex-date",
            Severity.WARNING,
            "observations on ex dates: 2027-05-12 of BELCOR (3.00 % of its price)",
        ),
        ("observed-on-holiday", Severity.WARNING, "observations on days without trading: 2027-03-26 (TARGET)"),
    ]


def test_an_expiry_on_a_holiday_is_told_once():
    expiry = date(2027, 3, 26)
    assert codes(trade(call(PAST, expiry), expiry=expiry), fixed(*BELOW)) == ["expiry-on-holiday"]


def test_a_payment_of_a_feature_beyond_the_curve_is_told():
    far = Coupons((Coupon(COMING, date(2032, 1, 5), 0.02),))
    assert told(trade(far)) == [
        ("beyond-curve", Severity.WARNING, "payment date 2032-01-05, after 2031-11-28, where curve EUR-STD ends")
    ]
    lost = Coupons((Coupon(COMING, date(2232, 1, 5), 0.02),))
    assert codes(trade(lost)) == ["date-too-late"]


@pytest.mark.parametrize(
    ("features", "terms", "found"),
    [
        ((call(COMING, level=100.0),), {}, "call level 100 on 2027-03-17, where today's levels give 1"),
        ((), {"payout": Redemption(put_strike=100.0)}, "put strike 100, where today's levels give 1"),
        ((), {"payout": Profile(ProfileKind.CALL, 105.0)}, "strike 105, where today's levels give 1"),
    ],
)
def test_percent_points_for_decimals_are_told(features, terms, found):
    assert told(trade(*features, **terms)) == [("level-far-from-today", Severity.WARNING, found)]


def test_references_far_from_spot_are_told_whether_given_or_set():
    assert codes(trade(references=(100.0, 5000.0))) == ["fixing-far-from-spot", "level-far-from-today"]


@pytest.mark.parametrize(
    ("strike", "as_volatility", "found"),
    [
        (0.04, False, None),
        (0.20, True, None),
        (0.20, False, "strike 0.2 on realised variance, a volatility of 44.7 %"),
        (0.04, True, "strike 0.04 on realised volatility, a volatility of 4.0 %"),
    ],
)
def test_a_volatility_for_a_variance_is_told(strike, as_volatility, found):
    days = (date(2026, 12, 16), COMING, EXPIRY)
    statistic = RealisedVariance(days, Aggregate.weighted_sum((1.0,)), (0.0, 1.0), as_volatility)
    swap = trade(
        names=("ARVENNE",), references=(100.0,), statistic=statistic, payout=Profile(ProfileKind.FORWARD, strike)
    )
    # 20 % until June 2027 and 21 % until December 2028: 20.66 % until December 2027, variance growing evenly.
    full = [] if found is None else [f"{found}, where 20.7 % is the highest implied"]
    assert [what for _, _, what in told(swap)] == full


def vulnerable(**writer):
    return trade(payout=Profile(ProfileKind.CALL, 1.0), writer=Writer("Guldmar", **writer))


def hazard(last):
    return {"Guldmar": HazardCurve.from_hazard_rates("Guldmar", TODAY, 0.4, [last], [0.02])}


def test_a_writer_needs_a_credit_curve_that_reaches_the_payment():
    assert told(vulnerable()) == [
        ("no-writer-credit", Severity.ERROR, 'writer "Guldmar", whose hazard rates the market does not know')
    ]
    assert told(vulnerable(), small_market(credit=hazard(date(2030, 1, 2)))) == []
    assert told(vulnerable(), small_market(credit=hazard(date(2027, 1, 4)))) == [
        (
            "beyond-credit",
            Severity.WARNING,
            'payment date 2027-12-21, after 2027-01-04, where the spreads of writer "Guldmar" end',
        )
    ]


def test_a_writer_that_the_market_refused_is_to_be_mended_there():
    why = Issue("spreads-crossed", "0", "a number above 0", "Enter it.", file="market.xlsx", sheet="credit", row=3)
    (issue,) = coverage(vulnerable(), small_market(rejected={"credit:Guldmar": (why,)}), PLACES.get)
    assert issue.mend == "Mend the market first: market.xlsx, sheet credit, row 3: found 0; expected a number above 0."


def test_a_writer_in_default_is_told_at_its_row():
    market = small_market(credit=hazard(date(2030, 1, 2)))
    (issue,) = coverage(vulnerable(defaulted_on=PAST), market, PLACES.get)
    assert (issue.code, issue.severity, issue.sheet) == ("writer-defaulted", Severity.ERROR, "writer")


def test_the_assets_of_a_structural_writer_are_an_underlying_like_others():
    doubtful = vulnerable(structural=StructuralDefault("HOUSE", 100.0))
    (issue,) = coverage(doubtful, small_market(), PLACES.get)
    assert (issue.code, issue.sheet) == ("unknown-underlying", "assets")
    market = small_market()
    house = replace(market.underlyings["ARVENNE"], underlying_id="HOUSE", volatility=volatility(0.15))
    market = replace(market, underlyings={**market.underlyings, "HOUSE": house})
    assert codes(doubtful, market) == ["missing-correlation"]
    assert (
        codes(doubtful, replace(market, underlyings={**market.underlyings, "HOUSE": replace(house, currency="USD")}))[0]
        == "other-currency"
    )
    ids, matrix = ("ARVENNE", "BELCOR", "HOUSE"), CORRELATION
    assert codes(doubtful, replace(market, correlation=checked(ids, matrix)[0])) == []


def test_a_doubtful_fixing_is_told_of_the_trades_that_look_at_it_alone():
    why = Issue("fixing-leaps", "a fixing 9", "at most 42 % up", "Check.", Severity.WARNING, file="market.xlsx")
    market = replace(fixed(*BELOW), doubts={f"fixings:BELCOR:{PAST}": (why,)})
    (issue,) = coverage(trade(call(PAST, COMING)), market, PLACES.get)
    assert (issue.code, issue.found) == (
        "doubtful-market-data", "the fixing of BELCOR on 2026-09-16, of which the market warns: a fixing 9",
    )  # fmt: skip
    assert list(doubts(trade(call(COMING)), market, PLACES.get)) == []
    assert codes(trade(call(PAST, COMING, level=0.8)), market) == ["doubtful-market-data"]  # settled by it
