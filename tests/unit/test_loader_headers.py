"""Sheets and columns found by name, and what is said when they are not."""

from __future__ import annotations

import pytest

from pricer.core.issues import Severity
from pricer.loader.book_rows import trade_columns
from pricer.loader.columns import columns_of
from pricer.loader.headers import find_sheet, match_header, unread_sheets
from pricer.loader.market_rows import CurveRow, FxRow
from pricer.loader.sheets import Merged, Sheet, Sheets
from pricer.loader.underlying_rows import VolatilityRow

FX, CURVES = columns_of(FxRow), columns_of(CurveRow)


def sheet(*rows, name="fx", typed=True, **facts) -> Sheet:
    numbered = [
        (number, list(cells)) for number, cells in enumerate(rows, start=1) if any(c is not None for c in cells)
    ]
    return Sheet("market.xlsx", name, numbered, typed, **facts)


def sheets(*found: Sheet, unread=()) -> Sheets:
    by_name: dict[str, list[Sheet]] = {}
    for one in found:
        by_name.setdefault(one.name.casefold().replace("_", "").replace(" ", ""), []).append(one)
    return Sheets("market", "market.xlsx", by_name, tuple(unread), ())


def test_columns_are_found_whatever_their_order_case_and_separators():
    header, issues = match_header(sheet([" SPOT ", "Pair"]), FX)
    assert header.positions == {"pair": 1, "spot": 0}
    assert issues == []
    header, issues = match_header(sheet(["Day-Count", "CURVE", "Currency"]), CURVES)
    assert header.positions == {"curve": 1, "currency": 2, "day_count": 0}


def test_a_missing_column_is_told_with_what_to_add():
    header, issues = match_header(sheet(["pair", "remark"]), FX)
    assert header is None
    assert [str(issue) for issue in issues if issue.severity is Severity.FATAL] == [
        "market.xlsx, sheet fx, row 1: found no column spot; expected a column spot. Add it: the rate, e.g. 1.1032."
    ]


def test_a_misspelt_column_is_told_with_the_name_that_was_meant():
    header, issues = match_header(sheet(["pair", "spott"]), FX)
    assert header is None
    assert [str(issue) for issue in issues] == [
        'market.xlsx, sheet fx, row 1, column "spott" (cell B1): found the column "spott"; expected a column spot. '
        'Did you mean "spot"? Rename the column.'
    ]


def test_an_optional_column_that_is_surely_meant_is_not_ignored():
    header, issues = match_header(sheet(["curve", "currency", "day_count", "colateral"]), CURVES)
    assert header is None
    assert [(issue.code, issue.severity) for issue in issues] == [("misspelt-column", Severity.FATAL)]


@pytest.mark.parametrize(
    ("text", "meant"),
    [
        ("kap", "cap"),
        ("flor", "floor"),
        ("folor", "floor"),
        ("rnak", "rank"),
        ("Caps", "cap"),
        ("notonial", "notional"),
        ("qantty", "quantity"),
        ("premum-dates", "premium_date"),
        ("stratgey", "strategy"),
    ],
)
def test_one_slip_in_a_short_optional_name_and_two_in_a_longer_one_are_not_ignored(text, meant):
    names = [name for name in trade_columns() if name != meant]
    header, issues = match_header(sheet([*names, text], name="trades"), trade_columns())
    assert header is None
    assert [(issue.code, issue.severity, issue.column) for issue in issues] == [
        ("misspelt-column", Severity.FATAL, text)
    ]
    assert issues[0].mend == f'Did you mean "{meant}"? Rename the column, or delete it.'


@pytest.mark.parametrize(("text", "absent"), [("gaps", "cap"), ("books", "rank"), ("desk", "cap"), ("amount", "floor")])
def test_a_column_of_the_desks_own_is_not_taken_for_a_slip(text, absent):
    names = [name for name in trade_columns() if name != absent]
    header, issues = match_header(sheet([*names, text], name="trades"), trade_columns())
    assert header is not None
    assert [issue.code for issue in issues] == ["unknown-column"]


def test_an_unknown_column_is_ignored_with_a_warning():
    header, issues = match_header(sheet(["pair", "spot", "remark"]), FX)
    assert header is not None
    assert [(issue.code, issue.severity, issue.cell) for issue in issues] == [
        ("unknown-column", Severity.WARNING, "C1")
    ]


def test_a_repeated_column_is_refused_with_both_cells():
    header, issues = match_header(sheet(["pair", "spot", "Spot"]), FX)
    assert header is None
    assert issues[0].cell == "C1"
    assert issues[0].expected == "one column spot, as in cell B1"


def test_a_title_above_the_header_is_recognised_as_no_header():
    _, issues = match_header(sheet(["Rates of the day"], ["pair", "spot"]), FX)
    assert [issue.code for issue in issues] == ["no-header"]


def test_a_header_below_blank_rows_is_found():
    header, issues = match_header(sheet([None], [None], ["pair", "spot"]), FX)
    assert header.row == 3
    assert issues == []


def test_an_empty_sheet_is_told():
    _, issues = match_header(sheet(), FX)
    assert [issue.code for issue in issues] == ["empty-sheet"]


def test_merged_column_names_are_refused_with_their_range():
    header, issues = match_header(sheet(["pair", "spot"], merged=(Merged("A1:B1", 1, 1, 1, 2),)), FX)
    assert header is None
    assert issues[0].found == "the merged cells A1:B1"


def test_hidden_parts_are_read_with_a_warning():
    table = sheet(
        ["pair", "spot"], ["EURUSD", 1.1], ["EURGBP", 0.9], hidden_rows=(2, 3, 7), hidden_columns=(2, 9), hidden=True
    )
    header, issues = match_header(table, FX)
    assert header is not None
    assert [(issue.code, issue.found) for issue in issues] == [
        ("hidden-sheet", "a hidden sheet"),
        ("hidden-rows", "hidden rows: 2-3"),
        ("hidden-columns", "hidden columns: B"),
    ]
    assert {issue.severity for issue in issues} == {Severity.WARNING}


def test_values_outside_the_named_columns_are_told():
    _, issues = match_header(sheet(["pair", "spot", None], ["EURUSD", 1.1, None, "stray"]), FX)
    assert [str(issue) for issue in issues] == [
        "market.xlsx, sheet fx: found values outside the named columns, in cell D2; expected values below a column "
        "name only. Ignored. Name their column, or clear them."
    ]


def test_many_values_outside_the_named_columns_are_one_warning():
    notes = [["EURUSD", 1.1, None, "note", "note"] for _ in range(4)]
    _, issues = match_header(sheet(["pair", "spot"], *notes), FX)
    assert [issue.found for issue in issues] == [
        "values outside the named columns, in cells D2, E2, D3, E3, D4 and 3 more"
    ]


def test_in_csv_files_a_row_that_is_too_wide_is_told_as_that_and_a_note_of_its_own_as_a_note():
    rows = (["pair", "spot", None], ["EURUSD", "1", "1"], ["EURGBP", "0", "9", "8"], [None, None, None, "note"])
    _, issues = match_header(sheet(*rows, typed=False), FX)
    assert [issue.found for issue in issues] == ["values outside the named columns, in cells C2, C3, D4"]


def test_a_missing_sheet_is_told_with_the_nearest_name():
    found, issues = find_sheet(sheets(unread=["curvs", "notes"]), "curves", required=Severity.FATAL)
    assert found is None
    assert [str(issue) for issue in issues] == [
        'market.xlsx: found no table curves, but "curvs", "notes"; expected a table named curves. Did you mean '
        '"curvs"? Rename it.'
    ]


def test_an_optional_sheet_may_be_missing_but_not_misspelt():
    assert find_sheet(sheets(unread=["notes"]), "dividends", required=None) == (None, [])
    _, issues = find_sheet(sheets(unread=["dividend"]), "dividends", required=None)
    assert [issue.severity for issue in issues] == [Severity.FATAL]


def test_sheets_that_differ_by_case_only_are_refused():
    found, issues = find_sheet(sheets(sheet(name="fx"), sheet(name="FX")), "fx", required=None)
    assert found is None
    assert [(issue.code, issue.severity) for issue in issues] == [("duplicate-sheet", Severity.FATAL)]


def test_sheets_that_nobody_asked_for_are_named():
    assert [issue.sheet for issue in unread_sheets(sheets(unread=["old fx"]))] == ["old fx"]


QUOTES = ["underlying", "expiry_date", "volatility_decimal", "strike"]


@pytest.mark.parametrize(
    ("text", "meant", "unit"),
    [
        ("skew", "skew_decimal", "as a decimal (-0.12: a strike 1 % lower has about 0.12 vol points more)"),
        ("Curvature (%)", "curvature_decimal", "as a decimal"),
        ("strike_of_forward_percent", "strike_of_forward_decimal", "as a decimal (0.95 = 95 %)"),
        ("strike of forward pct", "strike_of_forward_decimal", "as a decimal (0.95 = 95 %)"),
    ],
)
def test_a_column_without_its_unit_or_with_another_is_refused_and_not_ignored(text, meant, unit):
    header, issues = match_header(sheet([*QUOTES, text], name="volatilities"), columns_of(VolatilityRow))
    assert header is None
    assert [str(issue) for issue in issues] == [
        f'market.xlsx, sheet volatilities, row 1, column "{text}" (cell E1): found the column "{text}"; expected a '
        f'column {meant}. Did you mean "{meant}"? Rename the column, with values {unit}, or delete it.'
    ]
    assert issues[0].severity is Severity.FATAL


def test_a_column_that_differs_by_its_unit_is_told_apart_from_one_that_is_merely_alike():
    names = [*QUOTES, "skew_pct", "curvature"]
    _, issues = match_header(sheet(names, name="volatilities"), columns_of(VolatilityRow))
    assert {issue.column: issue.expected for issue in issues} == {
        "skew_pct": "a column skew_decimal",
        "curvature": "a column curvature_decimal",
    }


@pytest.mark.parametrize("text", ["remark", "source", "skewness of the desk", "decimal"])
def test_a_column_that_is_no_other_still_is_ignored_with_a_warning(text):
    header, issues = match_header(sheet([*QUOTES, text], name="volatilities"), columns_of(VolatilityRow))
    assert header is not None
    assert [(issue.code, issue.severity) for issue in issues] == [("unknown-column", Severity.WARNING)]


def test_a_missing_table_beside_no_other_is_told_without_more_words():
    _, issues = find_sheet(sheets(), "correlations", required=Severity.ERROR)
    assert [str(issue) for issue in issues] == [
        "market.xlsx: found no table correlations; expected a table named correlations. Add it; the command template "
        "writes an empty one."
    ]
