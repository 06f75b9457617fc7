from __future__ import annotations

import math
import random
from dataclasses import replace

import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.contracts.book import Refusal
from pricer.core.issues import Severity
from pricer.report import tables
from pricer.report.frames import short_reason, summaries, underlying_deltas
from pricer.report.rates import Rates
from pricer.report.totals import GROUPINGS, book_total, group_totals
from pricer.run.outcome import Delta, Interval, Status, UnderlyingFacts, Verdict
from tests.unit.report_outcomes import TO_EUR, WARNINGS, empty, issue, outcome, refusals, valuation

NUMBERS = [
    *("value", "standard_error", "lower", "upper", "unpaid_premium", "reporting_value", "reporting_standard_error"),
    *("sampled_value", "sampled_standard_error", "paths", "randomisations", "degrees_of_freedom", "time_steps"),
    *("model_difference", "model_difference_standard_error"),
]


@pytest.fixture(scope="module")
def run():
    return outcome()


@pytest.fixture(scope="module")
def frames(run):
    return tables(run)


def simple(trade_id: str, value: float, error: float, **changes):
    """A trade in euros with numbers that are easy to add up."""
    numbers = {"value": value, "standard_error": error, "lower": value - 3.0, "upper": value + 3.0}
    both = {"reporting_value": value, "reporting_standard_error": error}
    base = {"trade_id": trade_id, "currency": "EUR", "notional": 100.0, "unpaid_premium": 0.0, "deltas": ()}
    return valuation(1, **{**base, **numbers, **both, **changes})


def delta(underlying: str, shares: float, error: float, gamma: float | None = None, vega: float = 0.0) -> Delta:
    return Delta(underlying, shares, error, gamma, None if gamma is None else 0.3, vega, 0.1, 50.0, "pathwise")


def test_every_trade_has_one_row_and_refused_ones_come_last(run, frames):
    ids = [*(v.trade_id for v in run.valuations), *(r.trade_id for r in run.refusals)]
    assert list(frames["valuations"]["trade_id"]) == ids


def test_a_trade_that_was_not_priced_has_a_status_a_reason_and_no_number(frames):
    missing = frames["valuations"].query("status == 'not priced'")
    assert list(missing["trade_id"]) == ["SMF-2001", "SMF-2002", "SMF-2003"]
    assert missing[NUMBERS].isna().all(axis=None)
    assert list(missing["product"]) == ["worst of put", "", "basket call"]
    assert 'column "currency" (cell C13): found "EURO"' in missing["ending"].iloc[1]


def test_a_valuation_marked_not_priced_shows_no_number_and_counts_in_no_total():
    failed = simple("B", 5.0, 1.0, status=Status.NOT_PRICED, ending="stopped", deltas=(delta("ALDERMOOR", 1.0, 0.1),))
    run = empty(valuations=(simple("A", 10.0, 1.0), failed))
    frames = tables(run)
    assert frames["valuations"][NUMBERS].iloc[1].isna().all()
    assert book_total(run).total.value == 10.0
    assert book_total(run).total.not_priced == 1
    assert frames["deltas"].empty
    assert list(frames["not_priced"]["reasons"]) == ["stopped"]


def test_valuations_carry_the_numbers_of_the_outcome(run, frames):
    row, source = frames["valuations"].iloc[7], run.valuations[7]
    for name in NUMBERS:
        assert row[name] == getattr(source, name)
    assert row["interval"] == str(source.interval)
    assert row["expiry_date"] == pd.Timestamp(source.expiry_date)
    assert row["reporting_currency"] == "EUR"


def test_times_are_kept_out_of_every_table_but_their_own(run, frames):
    slower = replace(run, valuations=tuple(replace(v, seconds=v.seconds + 1.0) for v in run.valuations))
    for name, frame in tables(slower).items():
        if name != "seconds":
            pd.testing.assert_frame_equal(frame, frames[name])
    assert list(frames["seconds"]["seconds"]) == [v.seconds for v in run.valuations]


def test_cash_delta_and_lots_follow_from_shares_spot_lot_and_rate():
    facts = UnderlyingFacts("TARNWELL", "CHF", 50.0, 20.0, 1.1)
    trade = simple("A", 1.0, 0.1, currency="JPY", deltas=(delta("TARNWELL", 300.0, 2.0, vega=7.0),))
    row = tables(empty(valuations=(trade,), underlyings=(facts,)))["deltas"].iloc[0]
    assert row["lots"] == 15.0
    assert row["cash_delta"] == 15_000.0
    assert row["cash_delta_standard_error"] == 100.0
    assert row["reporting_cash_delta"] == pytest.approx(16_500.0, rel=1e-15)
    assert (row["underlying_currency"], row["vega_currency"]) == ("CHF", "JPY")
    assert math.isnan(row["gamma"])


def test_deltas_of_one_underlying_add_up_and_their_errors_in_quadrature():
    facts = UnderlyingFacts("TARNWELL", "CHF", 50.0, 20.0, 1.1)
    first = simple("A", 1.0, 0.1, deltas=(delta("TARNWELL", 300.0, 3.0, gamma=2.0, vega=5.0),))
    second = simple("B", 1.0, 0.1, deltas=(delta("TARNWELL", -100.0, 4.0, vega=-1.0),))
    row = tables(empty(valuations=(first, second), underlyings=(facts,)))["underlying_deltas"].iloc[0]
    assert (row["delta"], row["standard_error"], row["lots"], row["trades"]) == (200.0, 5.0, 10.0, 2)
    assert row["cash_delta"] == 10_000.0
    assert row["reporting_cash_delta"] == pytest.approx(11_000.0, rel=1e-15)
    assert row["reporting_cash_delta_standard_error"] == pytest.approx(275.0, rel=1e-15)
    assert (row["gamma"], row["gamma_standard_error"], row["trades_without_gamma"]) == (2.0, 0.3, 1)
    assert row["reporting_vega_per_vol_point"] == 4.0
    assert row["reporting_vega_per_vol_point_standard_error"] == pytest.approx(0.1 * math.sqrt(2.0))


def test_underlyings_come_largest_cash_delta_first_and_unknown_ones_last():
    trade = simple(
        "A", 1.0, 0.1, deltas=(delta("X", 9.0, 0.1), delta("ALDERMOOR", 1.0, 0.1), delta("MARWICK", -5.0, 0.1))
    )
    frame = tables(outcome(0, refused=(), valuations=(trade,)))["underlying_deltas"]
    assert list(frame["underlying"]) == ["MARWICK", "ALDERMOOR", "X"]
    assert math.isnan(frame["reporting_cash_delta"].iloc[-1])
    assert frame["cash_delta"].iloc[-1] == 450.0


def test_the_book_total_adds_values_and_squares_of_errors():
    run = empty(
        valuations=(
            simple("A", 10.0, 3.0),
            simple("B", -4.0, 4.0, unpaid_premium=-2.5),
            simple("C", 7.0, 0.0, interval=Interval.EXACT, lower=6.75, upper=7.25),
        ),
        refusals=refusals(),
    )
    headline = book_total(run)
    assert (headline.total.value, headline.total.standard_error) == (13.0, 5.0)
    assert headline.unsampled_error == 0.25
    assert headline.unpaid_premium == -2.5
    assert (headline.total.trades, headline.total.priced, headline.total.not_priced) == (6, 3, 3)
    assert headline.upper - 13.0 == pytest.approx(13.0 - headline.lower)


@pytest.mark.parametrize(("degrees", "quantile"), [(14, 2.9768), (9, 3.2498)])
def test_the_interval_of_a_book_of_one_trade_is_students(degrees, quantile):
    """Two-sided 99 % quantiles from the common table of Student's t."""
    trade = valuation(1, degrees_of_freedom=degrees)
    headline = book_total(empty(valuations=(trade,)))
    reach = (headline.upper - trade.reporting_value) / trade.reporting_standard_error
    assert reach == pytest.approx(quantile, abs=5e-5)


def test_a_book_without_sampling_has_an_interval_of_no_width():
    headline = book_total(empty(valuations=(simple("A", 10.0, 0.0),)))
    assert (headline.lower, headline.upper) == (10.0, 10.0)


def test_a_delta_that_one_trade_lacks_is_not_passed_over_in_the_books():
    facts = UnderlyingFacts("TARNWELL", "CHF", 50.0, 20.0, 1.1)
    known = simple("A", 1.0, 0.1, deltas=(delta("TARNWELL", 300.0, 3.0, gamma=2.0),))
    unknown = simple("B", 1.0, 0.1, deltas=(delta("TARNWELL", math.nan, math.nan, gamma=math.nan, vega=1.0),))
    row = tables(empty(valuations=(known, unknown), underlyings=(facts,)))["underlying_deltas"].iloc[0]
    assert row[["delta", "lots", "cash_delta", "reporting_cash_delta"]].isna().all()
    assert (row["trades_without_delta"], row["trades_without_vega"], row["trades_without_gamma"]) == (1, 0, 1)
    assert row["gamma"] == 2.0
    assert row["reporting_vega_per_vol_point"] == 1.0


def test_the_interval_of_a_large_book_is_the_normal_one():
    """A two-sided 99 % interval of a normal law reaches 2.5758 standard deviations (common table value)."""
    headline = book_total(outcome(800))
    reach = (headline.upper - headline.total.value) / headline.total.standard_error
    assert 2.5758 < reach < 1.005 * 2.5758  # Student's with the hundreds of degrees of freedom pooled


@pytest.mark.parametrize("grouping", GROUPINGS)
def test_the_parts_of_every_grouping_add_up_to_the_book(run, grouping):
    whole, parts = book_total(run).total, group_totals(run, grouping)
    valued = [part for part in parts if not math.isnan(part.value)]
    assert sum(part.trades for part in parts) == whole.trades
    assert sum(part.not_priced for part in parts) == whole.not_priced
    assert math.fsum(part.value for part in valued) == pytest.approx(whole.value, rel=1e-12)
    assert math.hypot(*(part.standard_error for part in valued)) == pytest.approx(whole.standard_error, rel=1e-12)


def test_a_disputed_trade_is_in_the_total_and_counted_by_its_own_name():
    run = empty(valuations=(simple("A", 10.0, 3.0), simple("B", -4.0, 4.0, status=Status.DISPUTED)))
    whole = book_total(run).total
    assert whole.value == 6.0
    assert (whole.trades, whole.priced, whole.disputed, whole.not_priced) == (2, 1, 1, 0)


def test_the_short_reason_names_column_and_fault_and_counts_the_others():
    short = [short_reason(refusal) for refusal in refusals()]
    assert short[0] == "strike: found 0; expected a price above 0"
    assert short[1] == 'expiry_date: found "31/02/2027"; expected a date (and 1 more)'
    assert all(len(text) <= 62 for text in short)
    assert short_reason(simple("A", 1.0, 0.1, status=Status.NOT_PRICED, ending="stopped")) == "stopped"
    assert short_reason(Refusal("A", ())) == "no reason was recorded"


def test_a_group_without_a_price_has_no_value_instead_of_zero():
    run = empty(refusals=(Refusal("A", (issue(),), strategy="carry"),))
    assert math.isnan(group_totals(run, "strategy")[0].value)
    assert math.isnan(book_total(run).total.value)


def test_only_a_group_in_one_currency_has_a_value_in_that_currency(run, frames):
    frame = frames["summaries"]
    by_currency = frame[(frame["grouping"] == "currency") & (frame["group"] != "")]
    assert list(by_currency["currency"]) == list(by_currency["group"])
    for _, row in by_currency.iterrows():
        own = [v.value for v in run.valuations if v.currency == row["group"]]
        assert row["value"] == pytest.approx(math.fsum(own), rel=1e-12)
    for _, row in frame[frame["grouping"] == "product"].iterrows():
        one = len({v.currency for v in run.valuations if v.product == row["group"]}) == 1
        assert (row["currency"] != "") == one
        assert math.isnan(row["value"]) != one


def test_rates_come_from_underlyings_and_else_from_a_trades_two_values():
    priced = simple("A", 4.0, 0.1, currency="SEK", reporting_value=0.36)
    rates = Rates.from_outcome(outcome(0, valuations=(priced,)))
    assert rates.per_unit["SEK"] == pytest.approx(0.09)
    assert {name: rates.per_unit[name] for name in TO_EUR} == TO_EUR
    assert math.isnan(rates.reporting(1.0, "NOK"))
    assert rates.reporting(0.0, "NOK") == 0.0


def test_disagreements_lead_the_cross_checks(frames):
    verdicts = list(frames["cross_check"]["verdict"])
    assert verdicts[:2] == [Verdict.DIFFERS, Verdict.OUTSIDE_BOUND]
    assert list(dict.fromkeys(verdicts)) == [
        *(Verdict.DIFFERS, Verdict.OUTSIDE_BOUND, Verdict.AGREES, Verdict.WITHIN_BOUND, Verdict.FAR, Verdict.CLOSE)
    ]
    assert verdicts == sorted(verdicts, key=verdicts.index)  # equal verdicts stand together


def test_a_cross_check_says_its_tolerance_in_basis_points_and_its_difference_in_tolerances(run, frames):
    row = frames["cross_check"].iloc[0]
    trade = next(v for v in run.valuations if v.trade_id == row["trade_id"])
    assert row["tolerance_bp"] == pytest.approx(1e4 * row["tolerance"] / trade.notional)
    assert row["difference_tolerances"] == pytest.approx(row["difference"] / row["tolerance"])
    assert abs(row["difference_tolerances"]) > 1.0
    assert row["reference_percent"] == pytest.approx(100.0 * row["reference_value"] / trade.notional)
    assert row["currency"] == trade.currency


def test_each_problem_is_listed_once_and_names_its_trade(frames):
    problems = frames["problems"]
    assert list(problems["severity"]) == ["error"] * 4 + ["warning"] * 2
    assert list(problems["trade_id"]) == ["SMF-2001", "SMF-2002", "SMF-2002", "SMF-2003", "", ""]
    assert problems["row"].isna().sum() == 1


def test_a_problem_shared_by_two_trades_is_listed_for_each():
    shared = issue(trade_id=None)
    run = empty(refusals=(Refusal("A", (shared.for_trade("A"),)), Refusal("B", (shared,))), issues=(shared, *WARNINGS))
    assert list(tables(run)["problems"]["trade_id"]) == ["A", "B", "", ""]


def test_a_fatal_problem_comes_first():
    run = empty(issues=(*WARNINGS, issue(), issue(severity=Severity.FATAL, found="no sheet trades")))
    assert list(tables(run)["problems"]["severity"]) == ["fatal", "error", "warning", "warning"]


def test_an_empty_run_gives_empty_tables_with_all_columns(frames):
    for name, frame in tables(empty()).items():
        assert len(frame) == 0
        assert list(frame) == list(frames[name])


@settings(max_examples=20, deadline=None)  # every example makes both tables twice
@given(st.integers(0, 12), st.randoms(use_true_random=False))
def test_reordering_the_book_changes_no_total(n_trades, shuffler):
    run = outcome(n_trades)
    order = random.Random(shuffler.random())
    mixed = replace(run, valuations=tuple(order.sample(run.valuations, n_trades)))
    for table in (summaries, underlying_deltas):
        pd.testing.assert_frame_equal(table(mixed), table(run), check_exact=True)
