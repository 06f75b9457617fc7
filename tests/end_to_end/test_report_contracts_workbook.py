"""The workbook of a book with a past: what a person sees of what is due, of lives and of terms."""

from __future__ import annotations

import csv
import zipfile
from dataclasses import replace
from datetime import datetime

import openpyxl
import pytest
from openpyxl.utils import range_boundaries

from pricer.contracts.book import Trade
from pricer.report import contract_columns as k
from pricer.report import tables, write_report
from pricer.report.summary_events import SHOWN
from pricer.report.text import looks_like_formula
from pricer.report.widths import heading_lines, heading_width
from pricer.run.outcome import ContractFacts, EventRow
from tests.unit.report_contracts import events, facts, seasoned
from tests.unit.report_outcomes import VALUATION_DATE, outcome

HEADING = 4
SHEETS = {"Events": ("events", k.EVENTS), "Life": ("life", k.LIFE), "Contracts": ("contracts", k.CONTRACTS)}


@pytest.fixture(scope="module")
def run():
    return seasoned()


@pytest.fixture(scope="module")
def folder(run, tmp_path_factory):
    return write_report(run, tmp_path_factory.mktemp("seasoned") / "may")


@pytest.fixture(scope="module")
def workbook(folder):
    return openpyxl.load_workbook(folder / "report.xlsx")


def texts(sheet):
    return [cell.value for row in sheet.iter_rows() for cell in row if isinstance(cell.value, str)]


def row_of(sheet, text, column=1):
    return next(row for row in sheet.iter_rows() if row[column - 1].value == text)


def test_what_is_due_comes_right_after_the_summary_and_terms_before_the_market(workbook):
    names = workbook.sheetnames
    assert names[:3] == ["Summary", "Events", "Valuations"]
    assert names.index("Problems") + 1 == names.index("Life") == names.index("Contracts") - 1
    assert names.index("Contracts") + 1 == names.index("Market")


@pytest.mark.parametrize("title", SHEETS)
def test_every_sheet_of_contracts_shows_its_whole_table(workbook, run, title):
    name, shown = SHEETS[title]
    sheet, frame = workbook[title], tables(run)[name]
    assert [cell.value for cell in sheet[HEADING]] == [column.header for column in shown]
    assert sheet.max_row == HEADING + len(frame)
    for i, column in enumerate(shown, 1):
        for j, wanted in enumerate(frame[column.name]):
            found = sheet.cell(HEADING + 1 + j, i).value
            missing = wanted == "" or wanted != wanted or str(wanted) == "NaT"
            assert found is None if missing else found == wanted, (column.name, j, found, wanted)
            assert not isinstance(found, datetime) or sheet.cell(HEADING + 1 + j, i).number_format == "yyyy-mm-dd"


@pytest.mark.parametrize("title", [*SHEETS, "Valuations"])
def test_headings_and_numbers_fit_and_what_is_for_paper_prints(workbook, title):
    sheet = workbook[title]
    shown = SHEETS[title][1] if title in SHEETS else None
    for i, cell in enumerate(sheet[HEADING]):
        width = sheet.column_dimensions[cell.column_letter].width
        indent = 0.0 if shown and shown[i].kind.numeric else 1.3
        lines = heading_lines(cell.value, width, indent)
        if shown:
            assert max(map(heading_width, lines)) < width - indent - 1.0, cell.value
    for column in sheet.iter_cols(min_row=HEADING + 1):
        width = sheet.column_dimensions[column[0].column_letter].width
        for cell in column:
            if isinstance(cell.value, int | float):
                places = len(cell.number_format.partition(".")[2])
                assert len(f"{cell.value:,.{places}f}") < width, cell.coordinate
    if shown:
        _, _, last_column, _ = range_boundaries(sheet.print_area.split("!")[1].replace("$", ""))
        assert last_column == sum(column.printed for column in shown)


def test_what_is_due_by_tomorrow_is_marked_by_a_tint_and_a_bold_word(workbook):
    sheet = workbook["Events"]
    looks = {
        sheet.cell(row, 1).value: (sheet.cell(row, 1).font.bold, sheet.cell(row, 1).fill.fill_type)
        for row in range(HEADING + 1, sheet.max_row + 1)
    }
    assert looks == {"today": (True, "solid"), "tomorrow": (True, "solid"), "later": (False, None)}
    assert "today 1; tomorrow 3; later 2" in sheet["A2"].value


def test_the_summary_tells_what_is_due_and_which_triggers_are_near(workbook):
    found = texts(workbook["Summary"])
    title = next(text for text in found if text.startswith("What is due"))
    assert (
        title
        == "What is due: 4 by tomorrow, 2 later; triggers within 1 standard deviation, and calls and barriers met: 1"
    )
    first = found.index(title)
    ids = [text for text in found[first:] if text.startswith("PST-")][:6]
    assert ids == ["PST-103", "PST-104", "PST-108", "PST-100", "PST-101", "PST-105"]  # the near trigger leads
    assert "2026-05-30 to 2026-06-05" in found


def test_many_events_share_lines_by_kind_and_near_triggers_have_one_each(tmp_path):
    payment = events()[0]
    many = tuple(replace(payment, trade_id=f"T-{i}") for i in range(30))
    others = tuple(replace(payment, trade_id=f"U-{i}", what=f"kind {i}") for i in range(9))
    near = EventRow("NEAR", "note", payment.day, "call", level=1.0, current=0.99, distance=0.01, deviations=0.3,
                    met_today=False)  # fmt: skip
    path = write_report(outcome(3, events=(*many, *others, near)), tmp_path / "may") / "report.xlsx"
    found = texts(openpyxl.load_workbook(path)["Summary"])
    lines = [text for text in found if text == "NEAR" or text.startswith(("T-", "U-"))]
    assert len(lines) == SHOWN
    assert lines[:2] == ["NEAR", "T-0 and 29 more"]
    assert f"and {40 - 30 - 1 - (SHOWN - 2)} more: sheet Events" in found


def test_the_summary_lets_fixings_to_enter_and_decisive_triggers_lead(tmp_path):
    day = events()[0].day
    today = outcome(3).facts.valuation_date

    def trigger(trade_id, what, deviations, met):
        return EventRow(trade_id, "note", day, what, level=1.0, current=1.2, distance=-0.1, deviations=deviations,
                        met_today=met, underlyings=("ALDERMOOR",))  # fmt: skip

    rows = (
        trigger("E-1", "accrual", -5.8, True),  # met from afar, and ends nothing
        trigger("E-2", "call", -3.0, True),
        trigger("E-3", "knock-in", -1.2, False),
        EventRow("E-4", "note", today, "fixing due: ALDERMOOR"),
    )
    path = write_report(outcome(3, events=rows), tmp_path / "led") / "report.xlsx"
    found = texts(openpyxl.load_workbook(path)["Summary"])
    assert next(text for text in found if text.startswith("What is due")).endswith("barriers met: 1")
    assert [text for text in found if text.startswith("E-")] == ["E-4", "E-2", "E-1", "E-3"]


def test_a_book_without_contracts_has_neither_lives_nor_terms_and_says_that_nothing_is_due(tmp_path):
    workbook = openpyxl.load_workbook(write_report(outcome(3), tmp_path / "may") / "report.xlsx")
    assert not {"Life", "Contracts"} & set(workbook.sheetnames)
    assert "Nothing is due in the days ahead." in texts(workbook["Events"])
    assert not any("What is due" in text for text in texts(workbook["Summary"]))
    assert "expected life (years)" not in [cell.value for cell in workbook["Valuations"][HEADING]]


def test_valuations_print_lives_and_the_cost_of_the_overhedge(workbook):
    sheet = workbook["Valuations"]
    headings = [cell.value for cell in sheet[HEADING]]
    _, _, last_printed, _ = range_boundaries(sheet.print_area.split("!")[1].replace("$", ""))
    note = row_of(sheet, "PST-100")
    for heading, value in (
        ("expected life (years)", 0.41),
        ("ends before expiry (%)", 52.5),
        ("barrier is hit (%)", 8.0),
        ("overhedge cost (EUR)", -1850.0),
    ):
        i = headings.index(heading)
        assert i < last_printed
        assert note[i].value == value
    ended = row_of(sheet, "PST-116")
    assert ended[headings.index("life")].value == "ended, to be paid"
    assert ended[headings.index("checked, under its model, by")].value == "nothing to check"
    assert row_of(sheet, "PST-110")[headings.index("kind of interval")].value == "certified bounds"


def test_independent_samples_stand_among_the_cross_checks(workbook):
    sheet = workbook["Cross-check"]
    headings = [cell.value for cell in sheet[HEADING]]
    kind = headings.index("kind of reference")
    kinds = [row[kind].value for row in sheet.iter_rows(min_row=HEADING + 1)]
    assert kinds.count("independent sample") == 5


def test_the_run_sheet_explains_the_new_words(workbook):
    found = texts(workbook["Run"])
    for words in ("overhedge cost", "events", "certified bounds", "probabilities and expected lives"):
        assert words in found
    assert any(text.startswith("Columns of Events") for text in found)


def test_no_text_of_a_contract_becomes_a_formula(tmp_path):
    evil = "=1+1"
    rows = tuple(replace(event, trade_id=evil, what="@x", counterparty="-1", underlyings=("+1",)) for event in events())
    terms = tuple(
        ContractFacts(replace(item.trade, trade_id=evil, counterparty=evil), item.as_of) for item in facts()[:3]
    )
    run = replace(seasoned(), events=rows, contracts=terms)
    folder = write_report(run, tmp_path / "may")
    workbook = openpyxl.load_workbook(folder / "report.xlsx")
    for title in ("Summary", *SHEETS):
        for row in workbook[title].iter_rows():
            for cell in row:
                if isinstance(cell.value, str):
                    assert bool(cell.quotePrefix) == looks_like_formula(cell.value), cell.value
    with zipfile.ZipFile(folder / "report.xlsx") as package:
        assert not any(b"<f>" in package.read(name) for name in package.namelist() if "worksheets" in name)
    for name in ("events", "contracts", "contract_dates"):
        with (folder / f"{name}.csv").open(encoding="utf-8", newline="") as file:
            assert all(text[:1] not in {"=", "@", "+"} for row in csv.DictReader(file) for text in row.values())


def test_plain_tables_of_contracts_hold_every_number(folder, run):
    with (folder / "events.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == len(run.events)
    assert {row["day"] for row in rows} >= {VALUATION_DATE.isoformat(), "2026-06-01"}
    with (folder / "life.csv").open(encoding="utf-8", newline="") as file:
        note = [row for row in csv.DictReader(file) if row["trade_id"] == "PST-100"]
    assert sum(float(row["probability_percent"]) for row in note) == pytest.approx(100.0)
    assert isinstance(run.contracts[0].trade, Trade)
