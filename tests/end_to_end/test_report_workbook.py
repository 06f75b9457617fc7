"""The workbook opened again: what a person sees, prints and sorts."""

from __future__ import annotations

import json
import re
import zipfile
from dataclasses import replace
from datetime import datetime

import openpyxl
import pandas as pd
import pytest
from openpyxl.utils import get_column_letter, range_boundaries

from pricer.contracts.book import Refusal
from pricer.report import columns, market_columns, tables, write_report
from pricer.report.explanations import CAUTION
from pricer.report.text import looks_like_formula
from pricer.report.widths import heading_lines, heading_width
from pricer.run.outcome import MarketFacts
from tests.unit.report_outcomes import WARNINGS, empty, facts, issue, outcome, refusals, valuation

SHEETS = [
    *("Summary", "Events", "Valuations", "Deltas by trade", "Deltas by underlying", "Cross-check"),
    *("Why not priced", "Problems"),
    *("Market", "Calibration", "Smiles", "Curves", "Forwards", "Credit, funding, agreements", "Run"),
]
TABLE_SHEETS = {
    "Valuations": ("valuations", columns.VALUATIONS),
    "Deltas by trade": ("deltas", columns.DELTAS),
    "Deltas by underlying": ("underlying_deltas", columns.UNDERLYING_DELTAS),
    "Cross-check": ("cross_check", columns.CROSS_CHECK),
    "Why not priced": ("refusal_causes", columns.REFUSAL_CAUSES),
    "Problems": ("problems", columns.PROBLEMS),
    "Calibration": ("calibration", market_columns.CALIBRATION),
    "Curves": ("curves", market_columns.CURVES),
    "Forwards": ("forwards", market_columns.FORWARDS),
}
FROZEN = {"Deltas by trade": "C5", "Calibration": "D5", "Forwards": "C5"}
HEADING = 4


def opened(run, folder):
    return openpyxl.load_workbook(write_report(run, folder) / "report.xlsx")


def column_of(sheet, header):
    found = [cell.column for cell in sheet[HEADING] if cell.value == header]
    assert len(found) == 1, f"{header}: {[cell.value for cell in sheet[HEADING]]}"
    return found[0]


def texts(sheet):
    return [cell.value for row in sheet.iter_rows() for cell in row if isinstance(cell.value, str)]


def beside(sheet, label):
    """The first number right of the cell that holds ``label``."""
    for row in sheet.iter_rows():
        for cell in row:
            if cell.value == label:
                numbers = (c.value for c in sheet[cell.row][cell.column :] if isinstance(c.value, int | float))
                return next(numbers)
    raise AssertionError(f"no cell says {label!r}")


@pytest.fixture(scope="module")
def run():
    return outcome()


@pytest.fixture(scope="module")
def folder(run, tmp_path_factory):
    return write_report(run, tmp_path_factory.mktemp("reports") / "may")


@pytest.fixture(scope="module")
def workbook(folder):
    return openpyxl.load_workbook(folder / "report.xlsx")


def test_the_sheets_come_in_the_order_of_reading(workbook):
    assert workbook.sheetnames == SHEETS
    assert workbook.active.title == "Summary"
    assert all(sheet.sheet_state == "visible" for sheet in workbook)


def test_the_summary_leads_with_the_total_and_what_it_leaves_out(workbook, folder):
    summary = workbook["Summary"]
    total = json.loads((folder / "run.json").read_text())["total"]
    assert beside(summary, "total value (EUR)") == total["value"]
    assert beside(summary, "standard error (EUR)") == total["standard_error"]
    assert beside(summary, "99 % sampling interval, to (EUR)") == total["upper_99"]
    assert beside(summary, "trades in the book") == 43
    assert beside(summary, "priced, precision not reached") == 2
    assert beside(summary, "priced from a failing volatility surface") == 2
    assert beside(summary, "volatility surfaces that fail, of 5") == 1
    assert beside(summary, "local volatility less lognormal, 36 trades (EUR)") == total["model_difference"]
    assert beside(summary, "not priced, left out of every total") == 3
    assert beside(summary, "cross-checks that disagree, of 120 made") == 2
    assert summary["B1"].value == "Saltmarsh & Fen, structured desk"
    assert any("Read the cautions on the sheet Run" in text for text in texts(summary))


def test_the_summary_lists_what_was_not_priced_and_why(workbook):
    found = texts(workbook["Summary"])
    assert {"SMF-2001", "SMF-2002", "SMF-2003"} <= set(found)
    assert any('row 12, column "strike" (cell H12): found 0; expected a price above 0' in text for text in found)


def test_the_parts_on_the_summary_add_up_to_the_total(workbook, folder):
    summary = workbook["Summary"]
    total = json.loads((folder / "run.json").read_text())["total"]["value"]
    rows = list(summary.iter_rows())
    for grouping in ("currency", "product", "strategy", "counterparty", "model"):
        places = [cell for row in rows for cell in row if str(cell.value).startswith(f"Value by {grouping}")]
        head = places[-1]  # the first one of "Value by strategy" is the chart's
        values = []
        row = head.row + 3
        while summary.cell(row, head.column).value != "total":
            values.append(summary.cell(row, head.column + 4).value)
            row += 1
        assert summary.cell(row, head.column + 4).value == pytest.approx(total)
        assert sum(value for value in values if value is not None) == pytest.approx(total)


@pytest.mark.parametrize("title", TABLE_SHEETS)
def test_every_sheet_shows_its_whole_table_under_headings_with_units(workbook, run, title):
    sheet, (name, shown) = workbook[title], TABLE_SHEETS[title]
    frame = tables(run)[name]
    assert [cell.value for cell in sheet[HEADING]] == [c.header.format(reporting="EUR") for c in shown]
    for i, column in enumerate(shown, 1):
        if column.name not in frame:
            continue
        for j, wanted in enumerate(frame[column.name]):
            found = sheet.cell(HEADING + 1 + j, i).value
            if column.name == "method" and name == "valuations" and frame["status"][j] == "not priced":
                continue  # the reason stands there
            if pd.isna(wanted) or wanted == "":
                assert found is None
            elif isinstance(found, datetime):
                assert found == wanted
            else:
                assert found == wanted, (title, column.name, j)


def test_units_stand_in_every_heading_of_a_number(workbook):
    for title, (_, shown) in TABLE_SHEETS.items():
        for cell, column in zip(workbook[title][HEADING], shown, strict=True):
            if column.kind.numeric:
                assert re.search(r"\(.+\)$", cell.value), cell.value


def test_expiries_are_dates_and_numbers_are_numbers(workbook, run):
    sheet = workbook["Valuations"]
    expiry = sheet.cell(HEADING + 1, column_of(sheet, "expiry"))
    assert expiry.value.date() == run.valuations[0].expiry_date
    assert expiry.number_format == "yyyy-mm-dd"
    value = sheet.cell(HEADING + 1, column_of(sheet, "value (trade currency)"))
    assert value.data_type == "n"
    assert value.number_format in {"#,##0.00", "#,##0"}
    assert (
        sheet.cell(HEADING + 1, column_of(sheet, "standard error (trade currency)")).number_format
        == value.number_format
    )


def test_rows_without_a_value_are_marked_by_a_tint_and_a_bold_word(workbook):
    sheet = workbook["Valuations"]
    status = column_of(sheet, "status")
    marks = {}
    for row in range(HEADING + 1, sheet.max_row + 1):
        cell = sheet.cell(row, status)
        marks.setdefault(cell.value, set()).add((cell.fill.fgColor.rgb, cell.font.bold))
        assert sheet.cell(row, 1).fill.fgColor.rgb == cell.fill.fgColor.rgb
    assert all(len(found) == 1 for found in marks.values())
    assert marks["failing surface"] == marks["precision not reached"]
    (plain,), (coarse,), (missing,) = (marks[s] for s in ("priced", "precision not reached", "not priced"))
    assert len({plain[0], coarse[0], missing[0]}) == 3
    assert (plain[1], coarse[1], missing[1]) == (False, True, True)


def test_a_trade_that_was_not_priced_says_why_in_print(workbook):
    sheet = workbook["Valuations"]
    _, _, last_printed, _ = range_boundaries(sheet.print_area.split("!")[1].replace("$", ""))
    row = next(row for row in sheet.iter_rows() if row[0].value == "SMF-2001")
    assert "strike: found 0; expected a price above 0" in [cell.value for cell in row[:last_printed]]


def test_amounts_of_cross_checks_say_that_they_leave_the_premium_out(workbook):
    headings = [cell.value for cell in workbook["Cross-check"][HEADING]]
    for what in ("engine", "reference"):
        assert f"{what} without premium (trade currency)" in headings


@pytest.mark.parametrize("title", ["Deltas by trade", "Deltas by underlying"])
def test_a_spot_is_shown_with_the_decimals_that_it_has(workbook, title):
    """In these formats a # is a digit shown only where there is one (ECMA-376, part 1, 18.8.31)."""
    sheet = workbook[title]
    cell = sheet.cell(HEADING + 1, column_of(sheet, "spot (underlying's currency)"))
    assert cell.number_format == "#,##0.00####"


@pytest.mark.parametrize("title", TABLE_SHEETS)
def test_headings_do_not_touch_and_their_row_is_no_taller_than_they_need(workbook, title):
    sheet = workbook[title]
    tallest = 0
    for cell, column in zip(sheet[HEADING], TABLE_SHEETS[title][1], strict=True):
        width, indent = sheet.column_dimensions[cell.column_letter].width, 0.0 if column.kind.numeric else 1.3
        lines = heading_lines(cell.value, width, indent)
        assert max(map(heading_width, lines)) < width - indent - 1.0, cell.value
        tallest = max(tallest, len(lines) if column.printed else 0)
    assert sheet.row_dimensions[HEADING].height < 13.0 * (tallest + 1)


def test_disagreements_lead_the_cross_checks_and_are_marked(workbook):
    sheet = workbook["Cross-check"]
    verdict = column_of(sheet, "verdict")
    assert [sheet.cell(HEADING + i, verdict).value for i in (1, 2)] == ["differs", "outside bound"]
    assert [sheet.cell(HEADING + i, verdict).font.bold for i in (1, 2, 3)] == [True, True, False]
    assert sheet.cell(HEADING + 1, 1).fill.fill_type == "solid"


def test_totals_by_underlying_stand_below_the_filter(workbook, run):
    sheet = workbook["Deltas by underlying"]
    last = sheet.max_row
    assert sheet.cell(last, 1).value == "total"
    assert sheet.cell(last, 1).font.bold
    column = column_of(sheet, "cash delta (EUR)")
    amounts = [sheet.cell(row, column).value for row in range(HEADING + 1, last)]
    assert sheet.cell(last, column).value == pytest.approx(sum(amounts))
    for heading in ("standard error of cash delta (EUR)", "standard error of vega (EUR per vol point)"):
        column = column_of(sheet, heading)
        assert sheet.cell(last, column).value is None  # underlyings share draws
        assert sheet.cell(last - 1, column).value > 0.0
    assert sheet.auto_filter.ref == f"A4:{get_column_letter(sheet.max_column)}{last - 1}"


@pytest.mark.parametrize("title", TABLE_SHEETS)
def test_headings_stay_in_view_repeat_in_print_and_filter_all_rows(workbook, title):
    sheet = workbook[title]
    assert sheet.freeze_panes == FROZEN.get(title, "B5")
    assert sheet.print_title_rows == "$4:$4"
    _, first, last_column, last_row = range_boundaries(sheet.auto_filter.ref)
    assert (first, last_column) == (HEADING, sheet.max_column)
    assert last_row == sheet.max_row - (title == "Deltas by underlying")
    assert sheet.calculate_dimension() == f"A1:{get_column_letter(sheet.max_column)}{sheet.max_row}"


@pytest.mark.parametrize("title", SHEETS)
def test_every_sheet_prints_on_landscape_a4_one_page_wide_with_book_date_and_page(workbook, title):
    sheet = workbook[title]
    assert (sheet.page_setup.orientation, sheet.page_setup.paperSize) == ("landscape", 9)
    assert sheet.sheet_properties.pageSetUpPr.fitToPage
    assert (sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight) == (1, 0)
    assert sheet.oddFooter.left.text == "Saltmarsh && Fen, structured desk, valuation date 2026-05-29"
    assert sheet.oddFooter.right.text == "page &P of &N"
    assert sheet.oddHeader.right.text == "&A"
    assert sheet.print_area


def test_what_prints_of_a_table_ends_with_the_columns_meant_for_paper(workbook):
    for title, (_, shown) in TABLE_SHEETS.items():
        sheet = workbook[title]
        _, _, last_column, last_row = range_boundaries(sheet.print_area.split("!")[1].replace("$", ""))
        assert last_column == sum(column.printed for column in shown)
        assert last_row == sheet.max_row


@pytest.mark.parametrize("title", TABLE_SHEETS)
def test_every_number_fits_into_its_column(workbook, title):
    sheet = workbook[title]
    for column in sheet.iter_cols(min_row=HEADING + 1):
        width = sheet.column_dimensions[column[0].column_letter].width
        for cell in column:
            if isinstance(cell.value, int | float):
                places = len(cell.number_format.partition(".")[2])
                assert len(f"{cell.value:,.{places}f}") < width, cell.coordinate


def test_the_charts_draw_cells_of_this_workbook(workbook):
    strategy, cash_delta, scatter = workbook["Summary"]._charts
    summary, checks = workbook["Summary"], workbook["Cross-check"]

    def cells(reference):
        title, _, area = reference.rpartition("!")
        first_column, first, last_column, last = range_boundaries(area.replace("$", ""))
        assert first_column == last_column
        return [workbook[title.strip("'")].cell(row, first_column).value for row in range(first, last + 1)]

    for chart, known in ((strategy, {"dispersion", "tail hedge"}), (cash_delta, {"ALDERMOOR", "ISHIMORI"})):
        (series,) = chart.series
        names, values = cells(series.cat.strRef.f), cells(series.val.numRef.f)
        assert known <= set(names)
        assert "total" not in names
        assert all(isinstance(value, float) for value in values)
        assert [abs(value) for value in values] == sorted((abs(value) for value in values), reverse=True)
    lognormal, smiled, differs, upper, lower = scatter.series
    models = [checks.cell(row, column_of(checks, "model")).value for row in range(HEADING + 1, checks.max_row + 1)]
    verdicts = [checks.cell(row, column_of(checks, "verdict")).value for row in range(HEADING + 1, checks.max_row + 1)]
    for series, wanted in (
        (lognormal, [("agrees", "lognormal")]),
        (smiled, [("agrees", "local volatility")]),
        (differs, [("differs", "lognormal"), ("differs", "local volatility")]),
    ):
        drawn = cells(series.yVal.numRef.f)
        assert any(value is not None for value in drawn)
        assert [value is not None for value in drawn] == [p in wanted for p in zip(verdicts, models, strict=True)]
        assert len(cells(series.xVal.numRef.f)) == len(verdicts)
    assert cells(upper.yVal.numRef.f) == [1.0, 1.0]
    assert cells(lower.yVal.numRef.f) == [-1.0, -1.0]
    last_printed = int(summary.print_area.rpartition("$")[2])
    assert all(chart.anchor.to.row <= last_printed for chart in summary._charts)


def test_the_title_of_a_chart_counts_in_the_unit_of_its_scale(workbook):
    def words(title):
        return "".join(run.t for paragraph in title.tx.rich.p for run in paragraph.r or ())

    for chart in workbook["Summary"]._charts[:2]:
        assert words(chart.title).endswith(f"({words(chart.y_axis.title)})")
    assert words(workbook["Summary"]._charts[0].y_axis.title) == "thousand EUR"


def test_the_summary_takes_three_pages_and_the_run_sheet_prints_no_explanation_of_columns(workbook):
    assert len(workbook["Summary"].row_breaks.brk) == 2
    sheet = workbook["Run"]
    last = int(sheet.print_area.rpartition("$")[2])
    first = [cell.value for cell in sheet["A"]]
    assert any(str(text).startswith("Columns of") for text in first[last:])
    assert not any(str(text).startswith(("Columns of", "Methods")) for text in first[:last])
    assert len(sheet.row_breaks.brk) == 2
    for page in sheet.row_breaks.brk:  # a title stays with its lines: air, then the title
        assert sheet.cell(page.id + 1, 1).value is None
        assert sheet.cell(page.id + 2, 1).style == "section"


def test_no_page_break_cuts_a_chart(workbook):
    summary = workbook["Summary"]
    breaks = [found.id for found in summary.row_breaks.brk]
    assert breaks
    for chart in summary._charts:
        first, last = chart.anchor._from.row + 1, chart.anchor.to.row
        assert not [found for found in breaks if first <= found < last]


def test_the_run_sheet_has_what_is_needed_to_repeat_and_to_read_the_report(workbook, run):
    found = texts(workbook["Run"])
    assert CAUTION in found
    assert {source.sha256 for source in run.facts.sources} <= set(found)
    assert {"20000", "3.12.4", "28.41", "2026-05-29"} <= set(found)
    assert any("added in quadrature" in text for text in found)
    assert {"99 % sampling", "exact", "bounds"} <= set(found)
    for _, shown in TABLE_SHEETS.values():
        assert {column.meaning for column in shown} <= set(found)


def test_the_caution_stands_once_in_full_and_every_summary_points_to_it(workbook):
    assert sum(CAUTION in texts(sheet) for sheet in workbook) == 1


def test_no_cell_holds_a_formula_whatever_the_text(tmp_path):
    evil = ["=1+1", "+1", "-1", "@x", "\tx", "#N/A", "=cmd|'/c calc'!A0", "a\x00b", "<b>&</b>", "  two  "]
    run = empty(
        facts=facts(book_name="=2+2", settings=(("=a", "=b"),)),
        valuations=tuple(valuation(i, trade_id=t, strategy=t, counterparty=t, method=t) for i, t in enumerate(evil)),
        refusals=refusals(),
        issues=WARNINGS,
    )
    workbook = opened(run, tmp_path / "may")
    for sheet in workbook:
        for row in sheet.iter_rows():
            for cell in row:  # a cell so marked stays text when a person edits it
                if isinstance(cell.value, str):
                    assert bool(cell.quotePrefix) == looks_like_formula(cell.value), cell.value
    kinds = {
        cell.data_type for sheet in workbook for row in sheet.iter_rows() for cell in row if cell.value is not None
    }
    assert kinds <= {"s", "n", "d"}
    sheet = workbook["Valuations"]
    found = [sheet.cell(HEADING + 1 + i, 1).value for i in range(len(evil))]
    assert found == [text.replace("\x00", "\ufffd") for text in evil]
    assert workbook["Summary"]["B1"].value == "=2+2"
    with zipfile.ZipFile(tmp_path / "may" / "report.xlsx") as package:
        for name in package.namelist():
            if name.startswith("xl/worksheets/"):
                assert b"<f>" not in package.read(name)


def test_a_book_name_full_of_codes_stays_text_in_the_footer(tmp_path):
    workbook = opened(empty(facts=facts(book_name="12 A&B &P" + "x" * 300)), tmp_path / "may")
    left = workbook["Summary"].oddFooter.left.text
    assert left.startswith("12 A&&B &&P")
    assert left.endswith("valuation date 2026-05-29")
    assert len(left) < 140  # a footer holds 255 characters in all


@pytest.mark.parametrize(
    "run",
    [
        empty(),
        empty(refusals=refusals(), issues=WARNINGS),
        outcome(3, refused=(), cross_checks=(), issues=()),
        empty(valuations=(valuation(1, deltas=()),)),
    ],
    ids=["nothing read", "nothing priced", "nothing checked", "no sensitivities"],
)
def test_empty_parts_say_so(run, tmp_path):
    workbook = opened(run, tmp_path / "may")
    assert workbook.sheetnames == SHEETS
    for title, (name, _) in TABLE_SHEETS.items():
        sheet = workbook[title]
        if tables(run)[name].empty:
            assert sheet.cell(HEADING + 1, 1).value.endswith(".")
            assert not sheet.auto_filter.ref
        else:
            assert sheet.auto_filter.ref
    if not run.valuations:
        assert "no trade was priced" in texts(workbook["Summary"])
        assert workbook["Summary"]._charts == []


def test_a_large_book_shows_its_largest_groups_and_the_rest_in_one_line(tmp_path):
    trades = tuple(
        valuation(i, strategy=f"strategy {i % 20}", product=f"product {i % 13}", counterparty=f"name {i % 300}")
        for i in range(300)
    )
    run = empty(valuations=trades)
    found = texts(opened(run, tmp_path / "may")["Summary"])
    assert "other (8)" in found
    assert "other (288)" in found
    assert sum(text.startswith("strategy ") for text in found) == 12
    assert sum(text.startswith("product ") for text in found) == 13  # more than other tables have room for


def test_many_causes_are_counted_and_the_first_are_shown(tmp_path):
    many = tuple(Refusal(f"R-{i:03}", (issue(found=f"-{i}"),)) for i in range(40))
    workbook = opened(outcome(5, refused=many), tmp_path / "may")
    found = texts(workbook["Summary"])
    assert sum(text.startswith("R-") for text in found) == 5
    assert "and 35 more causes: sheet Why not priced" in found
    assert sum(text.startswith("R-") for text in texts(workbook["Valuations"])) == 40


def test_a_cause_that_many_trades_share_is_one_line_with_their_number(tmp_path):
    same = issue(code="no-volatility", sheet="constituents", found='underlying "A", which has no usable volatility')
    many = tuple(Refusal(f"R-{i:03}", (same, *((issue(found="-1"),) if i == 7 else ()))) for i in range(40))
    workbook = opened(outcome(5, refused=many), tmp_path / "may")
    assert "R-000 and 39 more" in texts(workbook["Summary"])
    sheet = workbook["Why not priced"]
    assert sheet["A2"].value.startswith("40 trades have no price, for 2 causes;")
    assert [cell.value for cell in sheet[HEADING + 1]][:5] == [40, 39, "market", "no volatility", same.found]
    assert [cell.value for cell in sheet[HEADING + 2]][:5] == [1, 0, "book", "not positive", "-1"]
    assert same.found in texts(workbook["Market"])  # under what the market lacks
    assert "-1" not in texts(workbook["Market"])


def test_a_value_that_is_not_a_number_is_never_passed_over_in_silence(tmp_path):
    nan, inf = float("nan"), float("inf")
    run = empty(
        valuations=(
            valuation(1, value=nan, reporting_value=nan, standard_error=nan),
            valuation(2, value=inf, reporting_value=inf),
            valuation(4),
        )
    )
    workbook = opened(run, tmp_path / "may")
    assert "not a number" in texts(workbook["Summary"])
    sheet = workbook["Valuations"]
    column = column_of(sheet, "value (trade currency)")
    assert [sheet.cell(HEADING + i, column).value for i in (1, 2)] == [None, "inf"]
    assert json.loads((tmp_path / "may" / "run.json").read_text())["total"]["value"] is None


def test_an_underlying_whose_delta_is_unknown_is_marked_and_makes_the_total_unknown(tmp_path):
    trade = valuation(1)
    broken = replace(trade, deltas=(replace(trade.deltas[0], delta=float("nan")), *trade.deltas[1:]))
    workbook = opened(outcome(0, refused=(), valuations=(broken,)), tmp_path / "may")
    sheet = workbook["Deltas by underlying"]
    last = sheet.max_row - 1
    assert sheet.cell(last, 1).value == trade.deltas[0].underlying
    assert sheet.cell(last, 1).fill.fill_type == "solid"
    column = column_of(sheet, "cash delta (EUR)")
    assert sheet.cell(last, column).value is None
    assert sheet.cell(last + 1, column).value is None
    assert workbook["Deltas by trade"].cell(HEADING + 1, 1).fill.fill_type == "solid"


def row_of(sheet, text):
    return next(row for row in sheet.iter_rows() if row[0].value == text)


def test_the_market_sheet_leads_with_what_was_wrong_and_goes_on_to_how_quotes_are_repriced(workbook):
    sheet = workbook["Market"]
    sections = [cell.value for cell in sheet["A"] if cell.style == "section"]
    assert sections == [
        "What was wrong with the snapshot",
        "What the market lacks for trades of the book",
        "The underlyings, and how well their quotes are repriced",
        "Violations of arbitrage",
    ]
    assert sheet["A2"].value.startswith(
        "5 volatility surfaces, 1 failing. 250 quotes, 160 of them between 10 and 90 delta"
    )
    repaired = [cell.value for cell in row_of(sheet, "correlation repaired")]
    assert repaired[1:5] == ["correlations", "warning", 1, "may_market.xlsx, sheet correlations"]
    assert any("the largest change is 0.012" in str(value) for value in repaired)


def test_a_failing_surface_is_marked_by_a_tint_and_a_bold_word_and_says_why(workbook):
    sheet = workbook["Market"]
    failing, passing = row_of(sheet, "DUNSMERE"), row_of(sheet, "ALDERMOOR")
    assert (failing[1].value, failing[1].font.bold) == ("fails", True)
    assert (passing[1].value, passing[1].font.bold) == ("passes", False)
    assert failing[0].fill.fgColor.rgb != passing[0].fill.fgColor.rgb
    assert "strike 80.0 % of the forward: 1.93 vol points" in failing[14].value
    assert failing[0].row < passing[0].row


def test_quotes_beyond_the_target_are_marked_by_a_tint_and_a_bold_word(workbook):
    sheet = workbook["Calibration"]
    target = column_of(sheet, "target of 0.05 vol points")
    looks = {}
    for row in range(HEADING + 1, sheet.max_row + 1):
        cell = sheet.cell(row, target)
        looks.setdefault(cell.value, set()).add((cell.font.bold, sheet.cell(row, 1).fill.fill_type))
    assert looks.pop("beyond target") == {(True, "solid")}
    assert set(looks) == {"within target", "outside 10 to 90 delta", "not simulated"}
    assert all(look == {(False, None)} for look in looks.values())


def test_curves_and_forwards_that_miss_are_marked(workbook):
    for title, heading, marked in (
        ("Curves", "repriced less quoted (bp)", [0.03]),
        ("Forwards", "simulated less forward (standard errors)", [8.0]),
    ):
        sheet = workbook[title]
        column = column_of(sheet, heading)
        tinted = [sheet.cell(r, column) for r in range(HEADING + 1, sheet.max_row + 1)]
        assert [cell.value for cell in tinted if cell.fill.fill_type] == pytest.approx(marked)


def test_the_smiles_draw_every_quotes_error_and_the_first_and_last_expiry(workbook, run):
    errors, *smiles = workbook["Smiles"]._charts
    n_quotes = len(tables(run)["calibration"])
    for series, heading in zip(errors.series, ("fit error (vol points)", "simulated error (vol points)"), strict=False):
        title, _, area = series.yVal.numRef.f.rpartition("!")
        column, first, _, last = range_boundaries(area.replace("$", ""))
        assert title == "'Calibration'"
        assert column == column_of(workbook["Calibration"], heading)
        assert (first, last) == (HEADING + 1, HEADING + n_quotes)
    assert len(smiles) == 15
    titles = ["".join(r.t for p in chart.title.tx.rich.p for r in p.r or ()) for chart in smiles]
    assert titles[0] == "DUNSMERE, 2026-06-26, by strike (% of forward)"  # the surface that fails
    assert [title.split(", ")[1] for title in titles[::3]] == ["2026-06-26"] * 5
    assert [title.split(", ")[1] for title in titles[2::3]] == ["2028-05-26"] * 5
    fitted, quoted, simulated = smiles[0].series
    facts = next(s for s in run.market.surfaces if s.underlying == "DUNSMERE")
    wanted = [q for q in facts.quotes if q.expiry_date.isoformat() == "2026-06-26"]
    for series, name in ((fitted, "fitted"), (quoted, "quoted"), (simulated, "simulated")):
        _, _, area = series.yVal.numRef.f.rpartition("!")
        cells = [row[0].value for row in workbook["Smiles"][area.replace("$", "")]]
        assert cells == pytest.approx([100.0 * getattr(q, name) for q in wanted])


def test_the_smiles_print_on_two_pages_that_cut_no_chart(workbook):
    sheet = workbook["Smiles"]
    (found,) = sheet.row_breaks.brk
    for chart in sheet._charts:
        assert not chart.anchor._from.row + 1 <= found.id < chart.anchor.to.row
    assert all(chart.anchor.to.row <= int(sheet.print_area.rpartition("$")[2]) for chart in sheet._charts)


def test_terms_stand_in_three_tables_on_one_sheet(workbook, run):
    sheet = workbook["Credit, funding, agreements"]
    assert [cell.value for cell in sheet["A"] if cell.style == "section"] == [
        "Credit",
        "The desk's funding",
        "Agreements",
    ]
    found = [cell.value for cell in row_of(sheet, "NS-1")]
    assert found == ["NS-1", "Norrbank", "EUR", "two-way", 1e6, 2.5e6, 250_000, -100_000, 5, 10, "risk-free mark"]
    dates = [cell.value for cell in sheet["A"] if isinstance(cell.value, datetime)]
    assert [day.date() for day in dates] == [point.date for point in run.market.funding]


@pytest.mark.parametrize("title", ["Market", "Credit, funding, agreements"])
def test_every_number_of_a_stack_of_tables_fits_into_its_column(workbook, title):
    sheet = workbook[title]
    for row in sheet.iter_rows(min_row=3):
        for cell in row:
            if isinstance(cell.value, int | float):
                places = len(cell.number_format.partition(".")[2])
                assert len(f"{cell.value:,.{places}f}") < sheet.column_dimensions[cell.column_letter].width


def test_a_flat_market_says_so_on_every_sheet_of_the_market(tmp_path):
    workbook = opened(outcome(3, market=MarketFacts(), issues=()), tmp_path / "may")
    assert workbook.sheetnames == SHEETS
    for title in ("Market", "Calibration", "Smiles"):
        assert any("volatilities are flat in strike" in text for text in texts(workbook[title]))
    assert "Nothing was found wrong with the market snapshot." in texts(workbook["Market"])
    assert "The market has no funding curve." in texts(workbook["Credit, funding, agreements"])
    assert workbook["Smiles"]._charts == []


def test_many_violations_are_cut_and_the_rest_is_said_to_be_in_the_plain_table(tmp_path):
    run = outcome(1)
    many = tuple(f"butterfly arbitrage, number {i}" for i in range(100))
    surfaces = (replace(run.market.surfaces[0], violations=many), *run.market.surfaces[1:])
    workbook = opened(replace(run, market=replace(run.market, surfaces=surfaces)), tmp_path / "may")
    found = texts(workbook["Market"])
    assert "Violations of arbitrage, the first 60 of 102: the rest is in violations.csv" in found
    assert sum(text.startswith("butterfly arbitrage, number") for text in found) == 61  # the first once more as reason
    assert len((tmp_path / "may" / "violations.csv").read_text().splitlines()) == 103
