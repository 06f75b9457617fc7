"""The market's tables: errors of quotes, problems by kind, curves, forwards and terms."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import date

import pandas as pd
import pytest

from pricer.core.issues import Issue, Severity
from pricer.core.source import SourceFile
from pricer.loader.book_models import BOOK_COLUMNS
from pricer.loader.market_rows import MARKET_ROWS
from pricer.report import tables
from pricer.report.market_problems import BOOK_SHEETS, market_problems
from pricer.report.market_sheet import market_note
from pricer.report.smile_sheet import shown_expiries, worst_surfaces
from pricer.report.surface_fits import Reach, mean_pull, reach, simulated_error, surface_fit, surface_fits
from pricer.run.outcome import CurvePoint, ForwardPoint, MarketFacts, SurfaceFacts, UnderlyingStanding
from tests.unit.report_markets import FAILING, NOT_SIMULATED, market_facts, quote
from tests.unit.report_outcomes import WARNINGS, empty, issue, outcome, refusals

MARKET_TABLES = {
    *("market_problems", "surfaces", "violations", "calibration", "curves", "forwards", "credit", "funding"),
    "agreements",
}
FILES = (SourceFile("may_book.xlsx", ""), SourceFile("may_market.xlsx", ""))


def missed_by(vol_points: float, fitted_by: float = 0.0, **changes):
    """A quote at 20 % that the simulation misses by so many vol points, and the fit by ``fitted_by``."""
    numbers = {"quoted": 0.2, "fitted": 0.2 + fitted_by / 100.0, "simulated": 0.2 + vol_points / 100.0}
    return quote(**{**numbers, "counts": True, **changes})


def surface(*quotes, **changes) -> SurfaceFacts:
    return replace(SurfaceFacts("ALDERMOOR", True, (), (), quotes), **changes)


@pytest.fixture(scope="module")
def frames():
    return tables(outcome())


def test_a_quote_meets_the_target_up_to_and_including_it():
    """0.2 + 0.0005 is a little more than 0.2005 in binary: rounding must not turn 0.05 into a miss."""
    assert simulated_error(missed_by(0.05)) != 0.05
    assert reach(missed_by(0.05)) is reach(missed_by(-0.05)) is Reach.WITHIN
    assert reach(missed_by(0.0501)) is reach(missed_by(-0.0501)) is Reach.BEYOND
    assert reach(missed_by(math.nan)) is Reach.BEYOND


def test_no_target_is_asked_of_the_wings_nor_of_what_was_not_simulated():
    assert reach(missed_by(3.0, counts=False)) is Reach.OUTSIDE
    assert reach(missed_by(3.0, simulated=None)) is Reach.NOT_SIMULATED


def test_the_worst_errors_are_taken_apart_for_middle_and_wings():
    fit = surface_fit(
        surface(
            missed_by(0.02, fitted_by=-0.04),
            missed_by(-0.08, fitted_by=0.01, expiry=date(2027, 5, 28)),
            missed_by(0.7, fitted_by=-0.6, counts=False),
        )
    )
    assert fit.worst_fit_error_middle == pytest.approx(0.04)
    assert fit.worst_simulated_error_middle == pytest.approx(0.08)
    assert fit.worst_fit_error_wings == pytest.approx(0.6)
    assert fit.worst_simulated_error_wings == pytest.approx(0.7)
    assert (fit.expiries, fit.quotes, fit.fit_beyond_target, fit.beyond_target) == (2, 3, 0, 1)


def test_a_surface_that_was_not_simulated_has_fit_errors_alone():
    fit = surface_fit(surface(missed_by(9.0, fitted_by=0.06, simulated=None)))
    assert (fit.fit_beyond_target, fit.beyond_target) == (1, 0)
    assert fit.worst_fit_error_middle == pytest.approx(0.06)
    assert math.isnan(fit.worst_simulated_error_middle)


def test_a_surface_says_why_it_fails_and_else_what_its_first_violation_is():
    assert surface_fit(surface(passes=False, failures=("a", "b"), violations=("v", "w"))).why == "a; b"
    assert surface_fit(surface(violations=("v", "w"))).why == "v"
    assert surface_fit(surface()).why == ""


def test_failing_surfaces_lead_and_then_those_that_miss_the_target():
    good, missing = surface(missed_by(0.0)), surface(missed_by(0.3), underlying="B")
    failing = surface(underlying="C", passes=False, failures=("why",))
    run = empty(market=MarketFacts(surfaces=(good, missing, failing)))
    assert [fit.underlying for fit in surface_fits(run)] == ["C", "B", "ALDERMOOR"]
    assert list(tables(run)["surfaces"]["verdict"]) == ["fails", "misses target", "passes"]


def test_the_smiles_drawn_are_those_of_failing_surfaces_and_then_the_worst_fits():
    small, large = surface(missed_by(0.01)), surface(missed_by(0.3), underlying="B")
    unsimulated = surface(missed_by(9.0, fitted_by=0.1, simulated=None), underlying="C")
    failing, empty_one = surface(missed_by(0.0), underlying="D", passes=False), surface(underlying="E")
    market = MarketFacts(surfaces=(small, large, unsimulated, failing, empty_one))
    assert [each.underlying for each in worst_surfaces(market, 3)] == ["D", "B", "C"]
    assert len(worst_surfaces(market, 9)) == 4  # one has no quotes


def test_the_expiries_drawn_are_the_first_the_last_and_the_worst_between():
    days = [date(2026, 6, 26), date(2026, 8, 28), date(2026, 11, 27), date(2027, 5, 28)]
    sizes = (0.9, 0.01, 0.04, 0.8)
    quotes = [missed_by(size, expiry=day) for day, size in zip(days, sizes, strict=True)]
    quotes.append(missed_by(5.0, expiry=days[1], counts=False))  # no target applies to it
    quotes.append(missed_by(0.0, expiry=days[1], simulated=None))
    assert shown_expiries(surface(*quotes)) == [days[0], days[2], days[3]]
    assert shown_expiries(surface(quotes[0], quotes[3])) == [days[0], days[3]]
    assert shown_expiries(surface(quotes[2])) == [days[2]]


def test_the_calibration_has_a_row_for_every_quote_in_percent_and_vol_points(frames):
    frame = frames["calibration"]
    assert len(frame) == sum(len(s.quotes) for s in market_facts().surfaces)
    q = market_facts().surfaces[1].quotes[7]
    row = frame[(frame["underlying"] == q.underlying) & (frame["strike"] == q.strike)].iloc[0]
    assert row["expiry_date"] == pd.Timestamp(q.expiry_date)
    assert row["strike_percent_of_forward"] == pytest.approx(110.0)
    assert row["delta_percent"] == pytest.approx(100.0 * q.delta)
    assert row["quoted_volatility_percent"] == pytest.approx(100.0 * q.quoted)
    assert row["fit_error_vol_points"] == pytest.approx(100.0 * (q.fitted - q.quoted))
    assert row["simulated_error_vol_points"] == pytest.approx(100.0 * (q.simulated - q.quoted))
    assert row["simulated_standard_error_vol_points"] == pytest.approx(100.0 * q.simulated_standard_error)
    apart = frame[frame["underlying"] == NOT_SIMULATED]
    assert set(apart["target"]) == {"not simulated"}
    assert apart[["simulated_volatility_percent", "simulated_error_vol_points"]].isna().all(axis=None)


def test_the_calibration_is_in_order_of_underlying_expiry_and_strike(frames):
    keys = frames["calibration"][["underlying", "expiry_date", "strike"]].itertuples(index=False, name=None)
    keys = list(keys)
    assert keys == sorted(keys)


def test_a_curve_point_shows_how_closely_its_quote_is_met():
    made = CurvePoint("C", "EUR", "USD", date(2027, 5, 28), 0.0212, 0.979, "overnight swap", 0.0215, 0.0216)
    bare = replace(made, instrument="", quoted_rate=None, repriced_rate=None)
    frame = tables(empty(market=MarketFacts(curves=(made, bare))))["curves"]
    assert frame["zero_rate_percent"][0] == pytest.approx(2.12)
    assert frame["quoted_rate_percent"][0] == pytest.approx(2.15)
    assert frame["repricing_difference_bp"][0] == pytest.approx(1.0)
    assert frame.loc[1, ["quoted_rate_percent", "repriced_rate_percent", "repricing_difference_bp"]].isna().all()


def test_a_simulated_forward_is_off_in_basis_points_and_in_standard_errors():
    point = ForwardPoint("A", date(2027, 5, 28), 200.0, 1.5, 3.0, 200.01, 0.005)
    exact = replace(point, simulated=200.0, simulated_standard_error=0.0)
    frame = tables(empty(market=MarketFacts(forwards=(point, exact))))["forwards"]
    assert frame["simulated_error_bp"][0] == pytest.approx(0.5)
    assert frame["simulated_standard_error_bp"][0] == pytest.approx(0.25)
    assert frame["simulated_error_standard_errors"][0] == pytest.approx(2.0)
    assert math.isnan(frame["simulated_error_standard_errors"][1])


def test_terms_are_in_percent_and_basis_points(frames):
    assert frames["credit"].iloc[0][["recovery_percent", "hazard_rate_percent"]].tolist() == [40.0, 0.85]
    assert frames["funding"]["borrowing_spread_bp"][0] == pytest.approx(45.0)
    row = frames["agreements"].iloc[0]
    assert (row["collateral"], row["close_out"], row["margin_period_days"]) == ("two-way", "risk-free mark", 10)
    assert row["collateral_spread_bp"] == pytest.approx(5.0)


def test_violations_are_listed_one_by_one(frames):
    assert list(frames["violations"]["underlying"]) == [FAILING, FAILING]
    assert "1.93 vol points" in frames["violations"]["violation"][0]


def test_a_flat_market_gives_empty_tables_with_all_columns(frames):
    flat = tables(empty())
    for name in MARKET_TABLES:
        assert len(flat[name]) == 0
        assert list(flat[name]) == list(frames[name])


def test_the_sheets_of_a_book_are_known_by_name():
    assert set(BOOK_COLUMNS) == BOOK_SHEETS
    assert not BOOK_SHEETS & set(MARKET_ROWS)


def test_problems_of_the_market_are_counted_by_kind_the_gravest_first():
    bad = issue(file="may_market.xlsx", sheet="volatilities", code="calendar-arbitrage", trade_id=None)
    found = market_problems(
        (
            *WARNINGS,
            bad.for_trade("A"),
            bad.for_trade("B"),
            replace(bad, row=13),
            issue(file="may_market.xlsx", sheet="curves", severity=Severity.FATAL, code="no-curve"),
            *(found for refusal in refusals() for found in refusal.issues),  # of the book
        ),
        FILES,
    )
    assert [(p.severity, p.kind, p.number) for p in found] == [
        (Severity.FATAL, "no curve", 1),
        (Severity.ERROR, "calendar arbitrage", 2),
        (Severity.WARNING, "stale spot", 1),
        (Severity.WARNING, "correlation repaired", 1),
    ]
    assert found[1].place == 'may_market.xlsx, sheet volatilities, row 12, column "strike" (cell H12)'


@pytest.mark.parametrize(
    ("files", "file", "sheet", "belongs"),
    [
        (("book.xlsx", "market.xlsx"), "market.xlsx", "fx", True),
        (("book.xlsx", "market.xlsx"), "book.xlsx", "trades", False),
        (("book.xlsx", "market.xlsx"), "book.xlsx", "notes", False),
        (("book.xlsx", "market.xlsx"), None, None, True),
        (("book/trades.csv", "book/notes.csv", "market/fx.csv"), "book/notes.csv", "notes", False),
        (("book/trades.csv", "market/fx.csv"), "market/fx.csv", "fx", True),
        (("same.xlsx", "same.xlsx"), "same.xlsx", "fx", True),
        (("same.xlsx", "same.xlsx"), "same.xlsx", "trades", False),
    ],
)
def test_a_problem_belongs_to_the_input_in_which_it_was_found(files, file, sheet, belongs):
    found = Issue("x", "a", "b", "C.", file=file, sheet=sheet)
    assert bool(market_problems([found], [SourceFile(name, "") for name in files])) is belongs


def test_a_problem_of_one_trade_without_a_place_is_not_the_markets():
    assert market_problems([Issue("engine-failed", "a", "b", "C.", trade_id="T")], FILES) == []


def test_derived_points_are_judged_like_quotes_and_not_counted_as_such():
    facts = surface(missed_by(0.0), missed_by(0.3, derived=True), missed_by(0.01, derived=True))
    fit = surface_fit(facts)
    assert (fit.quotes, fit.derived, fit.beyond_target, fit.verdict) == (1, 2, 1, "misses target")
    run = empty(market=MarketFacts(surfaces=(facts,)))
    assert sorted(tables(run)["calibration"]["origin"]) == ["derived", "derived", "quote"]
    assert market_note(run.market) == (
        "1 volatility surfaces, 0 failing. 1 quotes, 1 of them between 10 and 90 delta: simulated error beyond 0.05 "
        "vol points for 0, and for 1 of 2 derived points."
    )


def test_the_mean_pull_tells_a_common_bias():
    points = [quote(fitted=0.2, simulated=0.2 + pull * 1e-4, simulated_standard_error=1e-4) for pull in (1.0, 2.0)]
    assert mean_pull([*points, quote(simulated=None, simulated_standard_error=None)]) == pytest.approx(1.5)
    assert math.isnan(mean_pull([]))


def test_an_underlying_without_a_surface_has_a_row_with_why_and_what_it_costs():
    standings = (
        UnderlyingStanding("ALDERMOOR", 4, 0, ()),
        UnderlyingStanding("LOST", 3, 3, ("no volatility in the volatilities table of the market",)),
        UnderlyingStanding("PLAIN", 2, 0, ()),
    )
    run = empty(market=MarketFacts(surfaces=(surface(missed_by(0.0)),), underlyings=standings))
    frame = tables(run)["surfaces"].set_index("underlying")
    assert list(frame.index) == ["LOST", "ALDERMOOR", "PLAIN"]
    assert list(frame["verdict"]) == ["cannot be used", "passes", "no smile"]
    assert list(frame["trades_refused"]) == [3, 0, 0]
    assert frame.loc["LOST", "why"] == "no volatility in the volatilities table of the market"


def test_numbers_of_the_surfaces_have_their_unit_in_their_name(frames):
    assert [name for name in frames["surfaces"] if name.startswith("worst_")] == [
        "worst_fit_error_middle_vol_points",
        "worst_fit_error_wings_vol_points",
        "worst_simulated_error_middle_vol_points",
        "worst_simulated_error_wings_vol_points",
    ]


def test_problems_of_one_kind_are_told_table_by_table():
    levels = [issue(file="may_market.xlsx", sheet="price_history", row=row, trade_id=None) for row in range(2, 52)]
    rate = issue(file="may_market.xlsx", sheet="fx", trade_id=None)
    found = market_problems([*levels, rate], FILES)
    assert [(p.table, p.number) for p in found] == [("price_history", 50), ("fx", 1)]
