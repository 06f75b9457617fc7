"""What the report's tables say of contracts with a past: where they stand, how they may end, what is due."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import date, timedelta

import pandas as pd
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Refusal
from pricer.contracts.life_cycle import Status as Life
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.report import columns, tables
from pricer.report.contract_columns import MORE_OF_CONTRACTS, OF_CONTRACTS, valuations_columns
from pricer.report.contract_frames import Due, due, next_weekday
from pricer.report.contract_sheets import by_month
from pricer.report.known_sums import underlying_columns
from pricer.report.level_words import Words
from pricer.report.reference_coverage import Checked, checked, checked_total
from pricer.report.refusal_causes import Side, refusal_causes
from pricer.report.styles import Mark
from pricer.report.summary_tables import underlying_table
from pricer.report.totals import book_total
from pricer.report.verdicts import without_sampling
from pricer.run.outcome import ChanceRow, EventRow, Interval
from tests.unit.report_contracts import contracts, events, facts, sample_check, seasoned
from tests.unit.report_outcomes import VALUATION_DATE, checks_of, empty, issue, outcome, valuation

PERCENT = Words(("A", "B"), True, "EUR")
PRICES = Words(("A", "B"), False, "EUR")


@pytest.fixture(scope="module")
def run():
    return seasoned()


@pytest.fixture(scope="module")
def frames(run):
    return tables(run)


@pytest.fixture(scope="module")
def told(frames):
    """What was booked and where it stands, by name of the contract and part."""
    ids = {f"PST-{100 + i}": name for i, name in enumerate(contracts())}
    return {(ids[row.trade_id], row.part): (row.booked, row.tonight) for row in frames["contracts"].itertuples()}


@pytest.mark.parametrize(
    ("name", "part", "booked", "tonight"),
    [
        ("note", "trade", "premium 12,500 EUR on 2026-06-03", "live; 0.55 years to expiry"),
        ("note", "levels", "initial fixings ALDERMOOR 50, BRANDWEIL 120, CORVANTO 12", "today ALDERMOOR 96.5 %"),
        ("note", "payout", "100 % less 1.25 times the fall below 100 %, at least 10 %", "not decided yet"),
        ("note", "coupons", "2026-06-15: 97 %, pays 2.75 % on 2026-06-20", "1 of 4 decided; 2.75 % in memory"),
        ("note", "call", "2026-09-15: 98 %, pays 100 % on 2026-09-20", "not called on the first of 4 dates"),
        ("note", "knock-in", "is below the level, watched on 2026-03-15, 2026-06-15", "not hit on the first of 4"),
        ("accrual", "coupons", "share of 6 days from 2026-01-15 to 2026-06-15 within 80 % to 120 %", "5 of 5 days"),
        ("average", "final level", "of each one's mean over 2026-01-15", "5 of 12 dates fixed, means so far ALDERMOOR"),
        ("average of baskets", "final level", "mean over the dates of the weighted sum", "5 of 12 dates fixed, mean"),
        ("cliquet", "final level", "forward, strike 100 %, at least -2 %, at most 3 %", "4 of 11 periods ended"),
        ("locked in", "final level", "number 1 from the best of those left", "1 of 3 locked in:"),
        ("variance", "final level", "-1 that of the weighted sum of 0.5 ALDERMOOR", "4 of 11 returns known"),
        ("correlation", "final level", "less their means, pairs weighted by 0.5 ALDERMOOR", "4 of 11 returns known"),
        ("knock-out", "knock-out", "334 dates from 2026-01-15 to 2026-12-14: 70 %; a hit ends the contract and",
         "clear until 2026-05-29"),
        ("rebate", "knock-out", "first divided ALDERMOOR by 1.3, BRANDWEIL by 1.2, CORVANTO by 1.25",
         "not hit on the first of 4"),
        ("bermudan", "trade", "long 20,000 units, paid in EUR", "live"),
        ("bermudan", "levels", "prices of ALDERMOOR", "today ALDERMOOR 48.25"),
        ("bermudan", "right to exercise", "the holder may end it for put, strike 50 on ALDERMOOR, bermudan, on "
         "2026-06-15: paid on 2026-06-20", "not exercised"),
        ("callable", "right to exercise", "the issuer may end it for the amount of the date, bermudan, on 2026-06-15: "
         "100 % on 2026-06-20; 2026-09-15: 101 % on 2026-09-20", "not exercised"),
        ("forward start", "levels", "performance from the price on 2026-07-15", "references still to be set"),
        ("averaging in", "levels", "the mean of the prices on 2026-01-15", "5 of 8 reference dates fixed, mean so far"),
        ("vulnerable", "writer", "defaults at expiry if assets HOLMVIK are below 15; 20 % of them", "no default"),
        ("doubtful", "writer", "Norrbank; recovery 35 %", "no default on record"),
        ("called", "trade", "long 1,000,000 EUR notional", "ended, to be paid; called on 2026-05-27; decided and still "
         "to be paid: 103.5 % call on 2026-06-01"),
        ("called", "call", "2026-05-27: 50 %, pays 103.5 % on 2026-06-01", "called on 2026-05-27"),
        ("note", "prices so far", "every day looked at", "2026-03-15: ALDERMOOR 48, BRANDWEIL 129.78, CORVANTO 11.88"),
        ("knock-out", "prices so far", "every day looked at", "135 days from 2026-01-15 to 2026-05-29; the last: ALD"),
        ("called", "payout", "100 % less the fall below 100 %", "dropped"),
    ],
)  # fmt: skip
def test_a_contract_can_be_laid_beside_its_confirmation(told, name, part, booked, tonight):
    assert booked in told[name, part][0]
    assert tonight in told[name, part][1]


def test_numbers_of_the_past_follow_from_the_fixings(told):
    """Fixings of the 15th of January to May, days 14, 45, 73, 104 and 134 of the year: their wobble by hand.

    ALDERMOOR wobbles by (day mod 7) - 3 percent: -3, 0, 0, 3 and -2, so its mean is 0.96 (1 - 0.004).
    """
    assert "ALDERMOOR 95.616 %" in told["average", "final level"][1]
    # The references are 50 times as much.
    assert "ALDERMOOR 47.808" in told["averaging in", "levels"][1]


def test_every_part_of_every_contract_is_told_in_words(frames):
    parts = frames["contracts"]
    assert set(parts["trade_id"]) == {item.trade.trade_id for item in facts()}
    assert (parts[["part", "booked", "tonight"]] != "").all(axis=None)
    assert parts.groupby("trade_id")["part"].agg(list).map(lambda found: found[:4]).map(tuple).unique().tolist() == [
        ("trade", "levels", "final level", "payout")
    ]


def test_every_single_date_stands_in_the_plain_table(frames):
    dates = frames["contract_dates"]
    knock_out = dates[(dates["trade_id"] == "PST-108") & (dates["part"] == "knock-out")]
    assert len(knock_out) == 334
    assert set(knock_out["level"]) == {0.7}
    assert knock_out["standing"].value_counts().to_dict() == {"passed": 134, "today": 1, "to come": 199}
    calls = dates[(dates["trade_id"] == "PST-100") & (dates["part"] == "call")]
    assert calls["level"].tolist() == [1.02, 1.0, 0.98, 0.96]
    assert calls["payment_date"].iloc[0] == pd.Timestamp("2026-03-20")
    assert calls["prices"].tolist() == ["ALDERMOOR 48, BRANDWEIL 129.78, CORVANTO 11.88", "", "", ""]
    assert dates[(dates["trade_id"] == "PST-116")]["standing"].iloc[-1] == "dropped"  # its expiry: it was called before


@pytest.mark.parametrize(
    ("aggregate", "words"),
    [
        (Aggregate.weighted_sum((1.0, -0.5)), "weighted sum of 1 A, -0.5 B"),
        (Aggregate.geometric((0.4, 0.6)), "geometric of 0.4 A, 0.6 B"),
        (Aggregate.best_of(2, cash=1.05), "best of A, B and cash at 105 %"),
        (Aggregate.kth_best(2, 2), "number 2 from the best of A, B"),
        (Aggregate.rank_weighted((0.7, 0.3)), "0.7, 0.3 by rank, the best first, of A, B"),
    ],
)
def test_aggregates_are_named_with_their_weights(aggregate, words):
    assert PERCENT.aggregate(aggregate) == words


def test_levels_and_amounts_have_the_units_of_the_contract():
    digital = Profile(ProfileKind.CASH_DIGITAL_PUT, 0.9, cash_amount=0.05)
    assert PERCENT.payout(digital) == "cash digital put, strike 90 %, pays 5 %"
    assert PRICES.payout(Profile(ProfileKind.CALL, 1250.5, cap=80.0)) == "call, strike 1,250.5, at most 80 EUR"
    assert PRICES.payout(Profile(ProfileKind.EXCHANGE)) == "exchange"
    note = Redemption(capital=0.95, call_strike=1.0, participation=0.8, cap=1.4)
    assert PERCENT.payout(note) == "95 % plus 0.8 times the rise above 100 %, at most 140 %"


@pytest.mark.parametrize(
    ("trigger", "words"),
    [
        (Trigger.any_underlying(Direction.DOWN, 2), "worst of A, B is at or below"),
        (Trigger.every_underlying(Direction.DOWN, 2), "best of A, B is at or below"),
        (Trigger(Direction.UP, Aggregate.worst_of(2), at_level_counts=False), "worst of A, B is above"),
    ],
)
def test_a_trigger_says_on_which_side_it_is_met_and_whether_at_the_level(trigger, words):
    assert PERCENT.trigger(trigger) == words


def test_chances_add_up_to_one_with_expiry_as_what_they_leave(frames):
    note = frames["life"].query("trade_id == 'PST-100'")
    assert note["what"].tolist() == ["call", "call", "expiry"]
    assert note["probability_percent"].tolist() == pytest.approx([40.0, 12.5, 47.5])
    assert note["cumulative_percent"].tolist() == pytest.approx([40.0, 52.5, 100.0])
    assert note["probability_standard_error_percent"].isna().tolist() == [False, False, True]
    assert set(note["expected_life"]) == {0.41}
    assert set(note["knock_probability_percent"]) == {8.0}


def test_a_long_series_of_days_is_told_by_month():
    days = tuple(date(2026, 6, 1) + timedelta(days=k) for k in range(90))
    chances = tuple(ChanceRow(day, "knocked out", 0.001, 1e-5) for day in days)
    daily = valuation(1, trade_id="D", expected_life=1.0, expiry_date=date(2027, 1, 4), chances=chances)
    note = valuation(2, trade_id="N", expected_life=1.0, chances=chances[:3])
    found = tables(empty(valuations=(daily, note)))["life"]
    assert len(found) == 95
    shown = by_month(found)
    months, few = shown[shown["trade_id"] == "D"], shown[shown["trade_id"] == "N"]
    assert months["day"].dt.strftime("%m-%d").tolist() == ["06-30", "07-31", "08-29", "01-04"]
    assert months["probability_percent"].tolist() == pytest.approx([3.0, 3.1, 2.9, 91.0])
    assert months["cumulative_percent"].tolist() == pytest.approx([3.0, 6.1, 9.0, 100.0])
    assert months["probability_standard_error_percent"].isna().all()
    assert len(few) == 4


def test_a_contract_that_can_only_expire_has_no_life_to_show(frames):
    assert set(frames["life"]["trade_id"]) == {"PST-100", "PST-108", "PST-109"}


def test_valuations_carry_life_status_probabilities_and_the_cost_of_the_overhedge(frames):
    rows = frames["valuations"].set_index("trade_id")
    note, called, plain = rows.loc["PST-100"], rows.loc["PST-116"], rows.loc["SMF-1000"]
    assert note["ends_early_probability_percent"] == 52.5
    assert note["reporting_overhedge_cost"] == note["overhedge_cost"] == -1850.0
    assert (called["life_status"], called["standard_error"]) == (Life.TO_BE_PAID, 0.0)
    assert pd.isna(called["expected_life"])
    assert plain["life_status"] == "live"
    assert pd.isna(plain["expected_life"])
    assert rows.loc["SMF-2001", "life_status"] == ""


def test_columns_of_contracts_appear_only_where_some_trade_has_something_to_say(frames):
    assert valuations_columns(tables(outcome())["valuations"]) == columns.VALUATIONS
    shown = [column.name for column in valuations_columns(frames["valuations"])]
    assert {column.name for column in (*OF_CONTRACTS, *MORE_OF_CONTRACTS)} <= set(shown)
    without = frames["valuations"].assign(overhedge_cost=None, reporting_overhedge_cost=None)
    names = [column.name for column in valuations_columns(without)]
    assert "expected_life" in names
    assert not any("overhedge" in name for name in names)


def test_the_method_gives_way_to_columns_of_contracts(frames):
    shown = valuations_columns(frames["valuations"])
    beside = {column.name: column.widest for column in shown}["method"]
    assert beside < {column.name: column.widest for column in columns.VALUATIONS}["method"]


@pytest.mark.parametrize(
    ("today", "tomorrow"),
    [
        (date(2026, 5, 28), date(2026, 5, 29)),
        (date(2026, 5, 29), date(2026, 6, 1)),
        (date(2026, 5, 30), date(2026, 6, 1)),
    ],
)
def test_tomorrow_is_the_next_weekday(today, tomorrow):
    assert next_weekday(today) == tomorrow


def test_events_are_told_by_how_soon_they_are_and_a_weekends_belong_to_monday():
    days = {date(2026, 5, 28): Due.OVERDUE, VALUATION_DATE: Due.TODAY, date(2026, 5, 31): Due.TOMORROW,
            date(2026, 6, 1): Due.TOMORROW, date(2026, 6, 2): Due.LATER}  # fmt: skip
    for day, expected in days.items():
        assert due(EventRow("T", "note", day, "call"), VALUATION_DATE) is expected


def test_events_come_by_day_and_within_it_triggers_that_are_met_or_near_first(frames):
    found = frames["events"]
    assert found["trade_id"].tolist() == ["PST-104", "PST-108", "PST-103", "PST-100", "PST-101", "PST-105"]
    assert found["due"].tolist() == ["today", "tomorrow", "tomorrow", "tomorrow", "later", "later"]
    call = found.set_index("trade_id").loc["PST-100"]
    assert call["distance_percent"] == pytest.approx(3.63)
    assert (call["met_today"], call["amount"], call["currency"]) == ("no", -1e6, "EUR")
    assert call["underlyings"] == "ALDERMOOR, BRANDWEIL, CORVANTO"
    assert found.set_index("trade_id").loc["PST-101", "met_today"] == ""
    assert len(found) == len(events())


def test_amounts_of_events_carry_no_dust_of_binary_numbers_and_no_minus_before_a_zero():
    rows = tuple(
        EventRow(f"T-{i}", "note", VALUATION_DATE, "payment: call", amount=amount)
        for i, amount in enumerate((-3_000_000 * 1.0675, -3e6 * 0.0, None))
    )
    written = tables(empty(events=rows))["events"]["amount"].tolist()
    assert repr(written[:2]) == "[-3202500.0, 0.0]" and math.isnan(written[2])


def test_a_book_of_european_options_has_empty_tables_of_contracts():
    frames = tables(outcome())
    assert all(frames[name].empty for name in ("events", "life", "contracts", "contract_dates"))


def test_an_independent_sample_checks_a_value_and_stands_between_exact_references_and_bounds():
    trade = valuation(1)
    exact, below, _ = checks_of(trade)

    def found(*checks):
        return checked(empty(valuations=(trade,), cross_checks=checks))[trade.trade_id]

    assert found(sample_check(trade), below) is Checked.SAMPLE
    assert found(exact, sample_check(trade)) is Checked.EXACT


def test_a_sample_tests_an_exact_value_too():
    trade = valuation(1)
    check = replace(sample_check(trade), engine_standard_error=0.0)
    assert not without_sampling(check)
    assert without_sampling(replace(check, reference_kind="exact"))
    assert checked_total(empty(valuations=(trade,), cross_checks=(check,))).independent == 1


def test_a_trade_that_has_ended_does_not_count_as_unchecked():
    ended = valuation(1, life_status=str(Life.TO_BE_PAID), reporting_value=9.0)
    live = valuation(2, reporting_value=5.0)
    total = checked_total(empty(valuations=(ended, live)))
    assert total.unchecked_value == 5.0
    assert total.by == {Checked.EXACT: 0, Checked.BOUNDS: 0, Checked.NOTHING: 1, Checked.KNOWN: 1}
    assert total.trades == 2


def test_kinds_of_reference_that_do_not_occur_are_not_counted():
    assert list(checked_total(outcome()).by) == [Checked.EXACT, Checked.BOUNDS, Checked.NOTHING]


def test_what_certified_bounds_leave_open_beyond_the_sampling_error_is_added_up():
    """Half-width 900; two standard errors of 100 with 14 degrees of freedom reach 2.977 of them (Student's table)."""
    base = valuation(1, currency="EUR", value=0.0, lower=-900.0, upper=900.0, standard_error=100.0)
    sampled = book_total(empty(valuations=(base,)))
    certified = book_total(empty(valuations=(replace(base, interval=Interval.CERTIFIED),)))
    assert sampled.unsampled_error == 0.0
    assert certified.unsampled_error == pytest.approx(900.0 - 297.7, abs=0.1)


def test_a_missing_fixing_is_to_be_mended_in_the_market():
    missing = issue(code="missing-fixing", found="no fixing of ALDERMOOR on 2026-05-15")
    (cause,) = refusal_causes(empty(refusals=(Refusal("T1", (missing,)),)))
    assert (cause.side, cause.kind) == (Side.MARKET, "missing fixing")


def test_where_a_trade_lacks_a_delta_the_sum_over_the_others_stands_beside_the_books_unknown_one():
    whole = valuation(1, trade_id="A", currency="EUR")
    name = whole.deltas[0].underlying
    gap = replace(whole.deltas[0], delta=math.nan, standard_error=math.nan, vega=math.nan)
    lacking = replace(whole, trade_id="B", deltas=(gap,))
    frame = tables(outcome(0, refused=(), valuations=(whole, lacking)))["underlying_deltas"]
    row = frame.set_index("underlying").loc[name]
    assert math.isnan(row["delta"])
    assert row["known_delta"] == whole.deltas[0].delta
    assert row["known_reporting_vega_per_vol_point"] == pytest.approx(whole.deltas[0].vega)
    assert row["trades_without_delta"] == row["trades_without_vega"] == 1
    shown = {column.name: column.printed for column in underlying_columns(frame)}
    assert shown["known_reporting_cash_delta"]
    assert shown["trades_without_delta"]
    assert len(shown) == len(columns.UNDERLYING_DELTAS) + 3
    complete = tables(outcome(0, refused=(), valuations=(whole,)))["underlying_deltas"]
    assert underlying_columns(complete) == columns.UNDERLYING_DELTAS


def test_the_summary_shows_the_deltas_that_are_known_marked_and_says_how_many_trades_lack_one():
    whole = valuation(1, trade_id="A", currency="EUR")
    gap = replace(whole.deltas[0], delta=math.nan, standard_error=math.nan)
    run = outcome(0, refused=(), valuations=(whole, replace(whole, trade_id="B", deltas=(gap,))))
    table = underlying_table(run)
    assert table.title == "Cash delta by underlying, without 1 trade of unknown delta"
    lines = {line.name: line for line in table.lines}
    partial = lines[gap.underlying]
    assert partial.mark is Mark.LOOK
    assert partial.numbers[2] == whole.deltas[0].delta
    assert math.isnan(partial.numbers[-1])
    assert not math.isnan(lines["total"].numbers[3])
    assert underlying_table(outcome()).title == "Cash delta by underlying"
