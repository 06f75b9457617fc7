"""From rows to a market: one bad item costs itself and nothing else, and nothing is silent."""

from __future__ import annotations

import math
from datetime import date

import openpyxl
import pytest

from pricer.core.issues import InputError, Severity
from pricer.loader import load_market, write_tables
from tests.unit.market_tables import small_market


@pytest.fixture
def tables():
    return small_market()


@pytest.fixture
def load(tmp_path):
    def loaded(tables, ending=".xlsx", **settings):
        path = tmp_path / f"market{ending}"
        write_tables(tables, path)
        return load_market(path, **settings)

    return loaded


def codes(issues):
    return [(issue.code, str(issue.severity)) for issue in issues]


def test_a_small_market_has_everything_and_no_issue(load, tables):
    market = load(tables)
    assert market.issues == () and market.rejected == {}
    assert (market.valuation_date, market.reporting_currency, market.name) == (date(2026, 3, 31), "EUR", "market")
    assert list(market.underlyings) == ["ORLUMA", "TESKIR", "VADRONE"]
    teskir = market.underlyings["TESKIR"]
    assert (teskir.currency, teskir.spot, teskir.lot_size, teskir.calendar) == ("EUR", 212.5, 1.0, "TARGET")
    assert [dividend.fraction for dividend in teskir.dividends.proportional] == [0.018, 0.018]
    assert teskir.volatility.volatility(date(2026, 6, 19)) == pytest.approx(0.262, rel=1e-14)
    assert market.correlation.sub(["ORLUMA", "VADRONE"])[0, 1] == 0.48
    assert sorted(market.curves) == [("EUR", ""), ("EUR", "USD")]
    assert market.curves["EUR", "USD"].discount_factor(date(2027, 3, 31)) == pytest.approx(0.9812, rel=1e-14)
    assert market.fx.rate("EUR", "USD") == 1.1032
    assert [source.name for source in market.sources] == ["market.xlsx"]


def test_tenors_are_counted_on_the_curves_calendar_by_its_day_count(load, tables):
    # By hand: one year after 31 March 2026 is 31 March 2027, a TARGET business day; 365 days, so exp(-0.0205).
    factor = load(tables).curves["EUR", ""].discount_factor(date(2027, 3, 31))
    assert factor == pytest.approx(math.exp(-0.0205), rel=1e-14)


def test_the_same_tables_as_csv_files_give_the_same_market(load, tables):
    one, other = load(tables), load(tables, "")
    assert dict(one.underlyings) == dict(other.underlyings)
    assert dict(one.curves) == dict(other.curves)
    assert (one.correlation.matrix == other.correlation.matrix).all()


def test_another_valuation_date_is_used_and_told(load, tables):
    market = load(tables, valuation_date=date(2026, 4, 30))
    assert market.valuation_date == date(2026, 4, 30)
    assert codes(market.issues) == [("other-valuation-date", "warning")]


@pytest.mark.parametrize("table", ["snapshot", "underlyings", "curves", "curve_points"])
def test_a_market_without_a_needed_table_is_unusable(load, tables, table):
    del tables[table]
    with pytest.raises(InputError) as caught:
        load(tables)
    assert ("missing-sheet", "fatal") in codes(caught.value.issues)


def test_a_market_without_volatilities_or_correlations_is_told_and_goes_on(load, tables):
    del tables["volatilities"], tables["correlations"]
    market = load(tables)
    assert codes(market.issues) == [("missing-sheet", "error"), ("missing-sheet", "error")]
    assert market.correlation is None
    assert market.underlyings["ORLUMA"].volatility is None


def test_fx_may_be_absent_and_dividends_may_be_empty(load, tables):
    del tables["fx"]
    tables["dividends"] = []
    assert load(tables).issues == ()


def test_a_market_without_the_table_of_dividends_says_that_none_are_known(load, tables):
    del tables["dividends"]
    market = load(tables)
    assert [(str(issue), issue.severity) for issue in market.issues] == [
        (
            "market.xlsx: found no table dividends; expected a table named dividends, which may be empty. No discrete "
            "dividends are known: forwards fall by dividend yields only. Add the table, empty if there are none.",
            Severity.WARNING,
        )
    ]
    assert market.underlyings["TESKIR"].dividends.proportional == ()


def test_a_valuation_date_on_a_weekend_is_told_at_its_cell_unless_another_was_asked_for(load, tables):
    tables["snapshot"][0]["valuation_date"] = date(2026, 3, 28)
    (issue,) = load(tables).issues
    assert (issue.code, issue.cell) == ("weekend-valuation", "A2")
    assert codes(load(tables, valuation_date=date(2026, 3, 27)).issues) == [("other-valuation-date", "warning")]
    issues = load(tables, valuation_date=date(2026, 3, 29)).issues
    assert [(issue.code, issue.cell) for issue in issues] == [
        ("other-valuation-date", "A2"),
        ("weekend-valuation", None),
    ]


def test_an_implausible_dividend_yield_is_told_at_its_cell(load, tables):
    tables["underlyings"][2]["dividend_yield_decimal"] = 0.34
    market = load(tables)
    assert [(issue.code, issue.cell) for issue in market.issues] == [("implausible-dividend-yield", "F4")]
    assert market.underlyings["VADRONE"].dividends.yield_rate == 0.34


@pytest.mark.parametrize("rows", [[], [{"valuation_date": date(2026, 3, 31), "reporting_currency": "EUR"}] * 2])
def test_the_snapshot_has_exactly_one_row(load, tables, rows):
    tables["snapshot"] = rows
    with pytest.raises(InputError) as caught:
        load(tables)
    assert codes(caught.value.issues) == [("not-one-row", "fatal")]
    (issue,) = caught.value.issues
    assert (issue.found, issue.mend) == (
        ("2 rows", "Keep the row of this market.") if rows
        else ("no row", "Add the row of this market below the header.")
    )  # fmt: skip


def test_a_snapshot_without_a_date_is_unusable_and_all_its_faults_are_told(load, tables):
    tables["snapshot"][0].update(valuation_date="31/03/2026", reporting_currency="EURO")
    with pytest.raises(InputError) as caught:
        load(tables)
    assert codes(caught.value.issues) == [("not-a-date", "fatal"), ("unknown-currency", "fatal")]


@pytest.mark.parametrize("spot", [0.0, -84.2, "n/a", None])
def test_a_bad_spot_costs_that_underlying_only(load, tables, spot):
    tables["underlyings"][0]["spot"] = spot
    market = load(tables)
    assert list(market.underlyings) == ["TESKIR", "VADRONE"]
    assert list(market.rejected) == ["ORLUMA"]
    assert market.rejected["ORLUMA"] == market.issues
    assert market.issues[0].cell == "C2"


def test_an_underlying_that_is_listed_twice_is_rejected(load, tables):
    tables["underlyings"].append(dict(tables["underlyings"][0], spot=99.0))
    market = load(tables)
    assert "ORLUMA" not in market.underlyings
    assert codes(market.rejected["ORLUMA"]) == [("duplicate-underlying", "error")]


def test_no_usable_underlying_is_fatal(load, tables):
    for row in tables["underlyings"]:
        row["spot"] = -1.0
    with pytest.raises(InputError) as caught:
        load(tables)
    assert codes(caught.value.issues) == [("out-of-range", "error")] * 3 + [("no-underlyings", "fatal")]


def test_no_usable_curve_is_fatal(load, tables):
    tables["curve_points"] = []
    with pytest.raises(InputError) as caught:
        load(tables)
    assert ("no-curves", "fatal") in codes(caught.value.issues)


@pytest.mark.parametrize(
    "change", [{"fraction_of_spot_decimal": 1.8}, {"fraction_of_spot_decimal": None}, {"ex_date": date(2027, 5, 12)}]
)
def test_a_bad_dividend_costs_its_underlying_for_its_forward_would_be_wrong(load, tables, change):
    tables["dividends"][0].update(change)
    market = load(tables)
    assert "TESKIR" not in market.underlyings
    assert list(market.rejected) == ["TESKIR"]


def test_a_bad_volatility_costs_the_volatility_of_its_underlying_only(load, tables):
    tables["volatilities"][2]["volatility_decimal"] = 26.2
    market = load(tables)
    assert market.underlyings["TESKIR"].volatility is None
    assert market.underlyings["ORLUMA"].volatility is not None
    assert [issue.mend for issue in market.rejected["TESKIR"]] == ["Did you mean 0.262 (26.2 %)?"]


def test_two_volatilities_for_one_expiry_are_refused(load, tables):
    tables["volatilities"][3]["expiry_date"] = date(2026, 6, 19)
    market = load(tables)
    assert codes(market.rejected["TESKIR"]) == [("repeated-date", "error")]


def test_falling_total_variance_is_refused_at_the_later_quote(load, tables):
    tables["volatilities"][1]["volatility_decimal"] = 0.05
    market = load(tables)
    (issue,) = market.rejected["ORLUMA"]
    assert (issue.code, issue.cell) == ("calendar-arbitrage", "C3")
    assert market.underlyings["ORLUMA"].volatility is None


def test_volatilities_that_have_expired_are_left_out_with_a_warning(load, tables):
    tables["volatilities"].append(
        {"underlying": "VADRONE", "expiry_date": date(2026, 3, 20), "volatility_decimal": 0.4}
    )
    market = load(tables)
    assert codes(market.issues) == [("expired-quote", "warning")]
    assert market.underlyings["VADRONE"].volatility.volatility(date(2026, 6, 1)) == pytest.approx(0.188, rel=1e-14)


def test_rows_for_an_underlying_that_is_not_listed_are_told_once_and_cost_nothing(load, tables):
    for year in (2027, 2028):
        tables["volatilities"].append({"underlying": "ZZZ", "expiry_date": date(year, 1, 4), "volatility_decimal": 0.4})
    market = load(tables)
    assert [(issue.code, issue.found, issue.severity) for issue in market.issues] == [
        ("unknown-underlying", '"ZZZ" (and 1 more rows)', Severity.ERROR)
    ]
    assert market.rejected == {}


@pytest.mark.parametrize("table", ["dividends", "volatilities"])
def test_a_misspelt_underlying_far_from_its_own_rows_costs_the_one_it_is_like(load, tables, table):
    for row in [dict(row) for row in tables[table] if row["underlying"] == "TESKIR"]:
        row["underlying"] = "TESKYR"
        row.update({name: day.replace(year=2029) for name, day in row.items() if isinstance(day, date)})
        tables[table] = [*tables[table], {**row, "underlying": "VADRONE"}, row]
    tables[table].reverse()  # the odd rows stand between those of VADRONE
    market = load(tables)
    (issue,) = market.rejected["TESKIR"]
    assert issue in market.issues
    assert (issue.code, issue.severity, issue.found) == (
        "unknown-underlying", Severity.ERROR, '"TESKYR" (and 1 more rows)'
    )  # fmt: skip
    assert issue.mend == ('Did you mean "TESKIR"? Correct the id, or add it to its own table, or delete these rows.')
    assert ("TESKIR" in market.underlyings) == (table == "volatilities")
    assert not market.has_volatility("TESKIR")


def test_a_misspelt_underlying_costs_the_one_that_lost_a_row(load, tables):
    tables["volatilities"][3]["underlying"] = "TESKIRR"
    market = load(tables)
    assert codes(market.rejected["TESKIR"]) == [("unknown-underlying", "error")]
    assert market.underlyings["TESKIR"].volatility is None


def test_a_point_that_cannot_be_read_costs_its_curve_only(load, tables):
    tables["curve_points"][1]["zero_rate_decimal"] = 2.05
    market = load(tables)
    assert sorted(market.curves) == [("EUR", "USD")]
    assert [issue.mend for issue in market.rejected["EUR-STANDARD"]] == ["Did you mean 0.0205 (2.05 %)?"]


@pytest.mark.parametrize(
    ("point", "code"),
    [
        ({"tenor": "2Y", "discount_factor": 0.96}, "mixed-quotes"),
        ({"date": date(2027, 3, 31), "zero_rate_decimal": 0.02}, "repeated-date"),
        ({"date": date(2028, 3, 31), "tenor": "2Y", "zero_rate_decimal": 0.02}, "unwanted-value"),
        ({"tenor": "2Y"}, "blank-cell"),
    ],
)
def test_points_of_one_curve_must_fit_together(load, tables, point, code):
    tables["curve_points"].append({"curve": "EUR-STANDARD", **point})
    market = load(tables)
    assert code in [issue.code for issue in market.rejected["EUR-STANDARD"]]
    assert ("EUR", "") not in market.curves


def test_points_that_are_not_in_the_future_are_left_out_with_a_warning(load, tables):
    tables["curve_points"].append({"curve": "EUR-STANDARD", "date": date(2026, 3, 30), "zero_rate_decimal": 0.02})
    tables["curve_points"].append({"curve": "EUR-USD-CASH", "date": date(2026, 3, 31), "discount_factor": 1.0})
    market = load(tables)
    assert len(market.curves) == 2
    assert codes(market.issues) == [("stale-point", "warning"), ("stale-point", "warning")]


def test_a_discount_factor_tonight_that_is_not_one_costs_its_curve(load, tables):
    tables["curve_points"].append({"curve": "EUR-USD-CASH", "date": date(2026, 3, 31), "discount_factor": 0.99})
    assert list(load(tables).rejected) == ["EUR-USD-CASH"]


def test_two_curves_for_one_currency_and_collateral_are_both_rejected(load, tables):
    tables["curves"].append({"curve": "EUR-2", "currency": "EUR", "collateral": "USD", "day_count": "ACT/360"})
    tables["curve_points"].append({"curve": "EUR-2", "tenor": "1Y", "discount_factor": 0.98})
    market = load(tables)
    assert sorted(market.curves) == [("EUR", "")]
    assert sorted(market.rejected) == ["EUR-2", "EUR-USD-CASH"]


def test_a_curve_without_points_is_rejected(load, tables):
    tables["curves"].append({"curve": "USD", "currency": "USD", "day_count": "ACT/360"})
    assert codes(load(tables).rejected["USD"]) == [("no-curve-points", "error")]


@pytest.mark.parametrize(
    ("rows", "code"),
    [
        ([{"pair": "EURUSD", "spot": -1.0}], "out-of-range"),
        ([{"pair": "EURUSD", "spot": 1.1}, {"pair": "EURUSD", "spot": 1.2}], "duplicate-pair"),
        ([{"pair": "EURUSD", "spot": 1.1}, {"pair": "USDEUR", "spot": 0.9}], "pair-both-ways"),
    ],
)
def test_a_doubtful_exchange_rate_is_left_out(load, tables, rows, code):
    tables["fx"] = rows
    market = load(tables)
    assert market.fx.quotes == {}
    assert code in [issue.code for issue in market.rejected["EURUSD"]]


def set_pair(tables, a, b, there, back):
    for row in tables["correlations"]:
        if row["underlying"] == a:
            row[b] = there
        if row["underlying"] == b:
            row[a] = back


def test_half_a_correlation_matrix_is_enough(load, tables):
    for i, row in enumerate(tables["correlations"]):
        for name in list(row)[1 + i :]:
            row[name] = None
    market = load(tables)
    assert market.issues == ()
    assert market.correlation.sub(["ORLUMA", "TESKIR"]).tolist() == [[1.0, 0.55], [0.55, 1.0]]


@pytest.mark.parametrize(
    ("there", "back", "code"),
    [
        (0.55, 0.56, "not-symmetric"),
        (None, None, "blank-cell"),
        ("high", 0.55, "not-a-number"),
        (1.2, 1.2, "out-of-range"),
        (55.0, 55.0, "not-a-decimal"),
    ],
)
def test_a_bad_correlation_costs_its_pair_only(load, tables, there, back, code):
    set_pair(tables, "TESKIR", "ORLUMA", there, back)
    market = load(tables)
    assert {issue.code for issue in market.issues} == {code}
    assert len(market.rejected) == 1
    assert market.why_unknown("TESKIR", "ORLUMA") == market.why_unknown("ORLUMA", "TESKIR") == market.issues
    assert market.correlation.ids == ("ORLUMA", "TESKIR", "VADRONE")
    assert market.correlation.sub(["VADRONE", "ORLUMA", "TESKIR"])[0].tolist() == [1.0, 0.48, 0.41]
    day = date(2027, 3, 31)
    assert market.log_covariance(["ORLUMA", "VADRONE"], day)[0, 1] > 0.0
    with pytest.raises(LookupError, match="the correlation of ORLUMA with TESKIR is not known"):
        market.log_covariance(["ORLUMA", "TESKIR"], day)


def test_a_pair_without_any_correlation_is_told_with_what_to_enter(load, tables):
    set_pair(tables, "TESKIR", "ORLUMA", None, None)
    assert [str(issue) for issue in load(tables).issues] == [
        'market.xlsx, sheet correlations, row 3, column "ORLUMA" (cell B3): found a blank cell, and so is its mirror '
        "image; expected the correlation in at least one of the two. Enter the correlation as a decimal in either, "
        "e.g. 0.45."
    ]


def test_an_id_without_a_single_usable_correlation_is_left_out(load, tables):
    for other in ("ORLUMA", "VADRONE"):
        set_pair(tables, "TESKIR", other, None, None)
    market = load(tables)
    assert market.correlation.ids == ("ORLUMA", "VADRONE")
    assert {name: len(issues) for name, issues in market.rejected.items()} == {"correlations:TESKIR": 2}


def test_an_unknown_pair_moves_no_known_one(load, tables):
    """0 for the pair would contradict the others, and a repair would move what other trades hold."""
    set_pair(tables, "TESKIR", "ORLUMA", None, None)
    set_pair(tables, "VADRONE", "ORLUMA", 0.9, 0.9)
    set_pair(tables, "VADRONE", "TESKIR", 0.9, 0.9)
    market = load(tables)
    assert codes(market.issues) == [("blank-cell", "error")]
    assert market.correlation.sub(["VADRONE", "ORLUMA", "TESKIR"])[0].tolist() == [1.0, 0.9, 0.9]


def test_mirrored_correlations_that_differ_by_rounding_are_averaged_in_silence(load, tables):
    set_pair(tables, "TESKIR", "ORLUMA", 0.55, 0.55 + 8e-9)
    market = load(tables)
    assert market.issues == ()
    assert market.correlation.sub(["TESKIR", "ORLUMA"])[0, 1] == pytest.approx(0.55 + 4e-9, abs=1e-15)


def test_mirrored_correlations_that_differ_slightly_are_averaged_with_a_warning(load, tables):
    set_pair(tables, "TESKIR", "ORLUMA", 0.55, 0.55006)
    market = load(tables)
    assert [(str(issue), issue.severity) for issue in market.issues] == [
        (
            'market.xlsx, sheet correlations, row 3, column "ORLUMA" (cell B3): found 0.55, but 0.55006 in cell C2; '
            "expected the same correlation in both cells. Their average is used. Correct one of them, or clear it.",
            Severity.WARNING,
        )
    ]
    assert market.rejected == {}
    assert market.correlation.sub(["ORLUMA", "TESKIR"])[0, 1] == pytest.approx(0.55003, abs=1e-15)


def test_mirrored_correlations_that_differ_by_more_are_refused(load, tables):
    set_pair(tables, "TESKIR", "ORLUMA", 0.55, 0.5502)
    assert codes(load(tables).issues) == [("not-symmetric", "error")]


@pytest.mark.parametrize(
    ("a", "b", "there", "back", "code"),
    [
        ("TESKIR", "TESKIR", 0.9, 0.9, "out-of-range"),
    ],
)
def test_why_an_underlying_lost_its_correlations_is_kept(load, tables, a, b, there, back, code):
    set_pair(tables, a, b, there, back)
    market = load(tables)
    assert {name: [issue.code for issue in issues] for name, issues in market.rejected.items()} == {
        "correlations:TESKIR": [code]
    }


def test_why_an_underlying_with_two_rows_of_correlations_lost_them_is_kept(load, tables):
    tables["correlations"].append(dict(tables["correlations"][1]))
    market = load(tables)
    assert [issue.found for issue in market.rejected["correlations:TESKIR"]] == ['a second row "TESKIR"']


def test_correlations_of_which_none_is_left_are_explained_as_a_whole(load, tables):
    for row in tables["correlations"]:
        row[row["underlying"]] = 0.5
    market = load(tables)
    assert market.correlation is None
    assert [issue.expected for issue in market.rejected["correlations"]] == ["1 on the diagonal"] * 3


def test_a_diagonal_that_is_not_one_is_refused(load, tables):
    tables["correlations"][0]["ORLUMA"] = 0.9
    market = load(tables)
    assert market.correlation.ids == ("TESKIR", "VADRONE")
    assert market.issues[0].expected == "1 on the diagonal"


def test_rows_and_columns_must_be_the_same_underlyings(load, tables):
    tables["correlations"].pop()
    market = load(tables)
    assert market.correlation.ids == ("ORLUMA", "TESKIR")
    assert [(issue.code, issue.cell) for issue in market.issues] == [("not-square", "D1")]


def test_correlations_of_an_underlying_that_is_not_listed_are_ignored_with_a_warning(load, tables):
    tables["underlyings"].pop()
    tables["volatilities"].pop()
    market = load(tables)
    assert market.correlation.ids == ("ORLUMA", "TESKIR")
    assert codes(market.issues) == [("unknown-underlying", "warning")]


def test_correlations_that_contradict_each_other_far_are_refused(load, tables):
    set_pair(tables, "ORLUMA", "TESKIR", 0.9, 0.9)
    set_pair(tables, "ORLUMA", "VADRONE", 0.9, 0.9)
    set_pair(tables, "TESKIR", "VADRONE", -0.9, -0.9)
    market = load(tables)
    assert market.correlation is None
    assert codes(market.rejected["correlations"]) == [("inconsistent-correlations", "error")]
    assert market.rejected["correlations"][0].cell is not None


def test_correlations_that_contradict_each_other_little_are_repaired_with_a_warning(load, tables):
    set_pair(tables, "ORLUMA", "TESKIR", 0.90, 0.90)
    set_pair(tables, "ORLUMA", "VADRONE", 0.90, 0.90)
    set_pair(tables, "TESKIR", "VADRONE", 0.60, 0.60)
    market = load(tables)
    assert market.correlation is not None
    assert codes(market.issues) == [("correlation-repaired", "warning")]
    assert market.issues[0].sheet == "correlations"


def test_the_quality_gates_point_at_the_cells(load, tables):
    tables["fx"] += [{"pair": "USDGBP", "spot": 0.78}, {"pair": "EURGBP", "spot": 0.95}]
    market = load(tables)
    assert [(issue.code, issue.sheet) for issue in market.issues] == [("inconsistent-fx", "fx")]
    assert market.issues[0].cell is not None


def test_merged_correlations_are_refused_with_their_range(load, tables, tmp_path):
    load(tables)
    workbook = openpyxl.load_workbook(tmp_path / "market.xlsx")
    workbook["correlations"].merge_cells("B2:C2")
    workbook.save(tmp_path / "market.xlsx")
    market = load_market(tmp_path / "market.xlsx")
    assert market.correlation is None
    assert [issue.found for issue in market.rejected["correlations"]] == ["the merged cells B2:C2"]


def with_pair(tables, name, correlation, **own):
    """A row and a column of a currency pair in the correlations."""
    for row in tables["correlations"]:
        row[name] = correlation
    ids = [row["underlying"] for row in tables["correlations"]]
    tables["correlations"].append({"underlying": name, **dict.fromkeys(ids, correlation), name: 1.0, **own})


@pytest.mark.parametrize("name", ["EURUSD", "USDEUR"])
def test_the_correlations_may_hold_a_pair_that_has_a_rate_either_way_round(load, tables, name):
    with_pair(tables, name, -0.2)
    market = load(tables)
    assert market.issues == ()
    assert market.correlation.sub(["TESKIR", name])[0, 1] == -0.2


def test_a_pair_that_the_market_does_not_have_is_ignored_with_a_warning(load, tables):
    with_pair(tables, "AUDNZD", 0.1)
    market = load(tables)
    assert [str(issue) for issue in market.issues] == [
        'market.xlsx, sheet correlations, row 5, column "underlying" (cell A5): found "AUDNZD"; expected an underlying '
        "or a currency pair of the market. Ignored. Add it to the market, or delete it."
    ]


def test_of_a_pair_that_stands_both_ways_in_the_correlations_one_is_left_out(load, tables):
    with_pair(tables, "EURUSD", -0.2)
    with_pair(tables, "USDEUR", 0.2, EURUSD=-1.0)
    tables["correlations"][3]["USDEUR"] = -1.0
    market = load(tables)
    assert [str(issue) for issue in market.issues] == [
        'market.xlsx, sheet correlations, row 6, column "underlying" (cell A6): found the pair USDEUR, and its inverse '
        "in row 5; expected each pair of currencies in one direction. Delete one of the two rows."
    ]
    assert market.correlation.ids == ("ORLUMA", "TESKIR", "VADRONE", "EURUSD")
    assert list(market.rejected) == ["correlations:USDEUR"]


def test_what_a_surface_lacks_is_told_at_the_quote_that_causes_it(load, tables):
    for strike, volatility in ((80.0, 0.22), (84.0, 0.35), (88.0, 0.21)):
        tables["volatilities"].append(
            {
                "underlying": "ORLUMA",
                "expiry_date": date(2027, 3, 19),
                "volatility_decimal": volatility,
                "strike": strike,
            }
        )
    del tables["volatilities"][:2]
    market = load(tables)
    assert not market.surfaces["ORLUMA"].passes
    assert {(str(issue.severity), issue.sheet, issue.cell) for issue in market.issues} == {
        ("warning", "volatilities", "C6"),
        ("error", "volatilities", "C6"),
    }
