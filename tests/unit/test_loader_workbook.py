"""Workbooks read from their XML, checked against the library that wrote them and against the format's rules."""

from __future__ import annotations

import io
from datetime import date, datetime
from zipfile import ZIP_DEFLATED, ZipFile

import openpyxl
import pytest
from openpyxl.styles.numbers import is_date_format
from openpyxl.utils.datetime import CALENDAR_MAC_1904, CALENDAR_WINDOWS_1900, from_excel

from pricer.loader.sheets import ErrorValue, Merged, UncalculatedFormula, UnreadableError, coordinates, letters
from pricer.loader.workbook import read_workbook, shows_date
from pricer.loader.worksheet import date_of_serial, parse_sheet, parse_strings

MAIN = 'xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"'


def parsed(rows: str, *, strings=(), dates=(), from_1904=False, after="", before=""):
    xml = f"<worksheet {MAIN}>{before}<sheetData>{rows}</sheetData>{after}</worksheet>"
    return parse_sheet(io.BytesIO(xml.encode()), list(strings), frozenset(dates), from_1904=from_1904)


def saved(workbook: openpyxl.Workbook) -> bytes:
    stream = io.BytesIO()
    workbook.save(stream)
    return stream.getvalue()


def rows_of(data: bytes, name="trades"):
    sheets, _ = read_workbook(data, "book.xlsx", [name])
    return sheets[0].rows


def test_every_type_of_cell_has_its_value():
    content = parsed(
        '<row r="2"><c r="A2" t="s"><v>1</v></c><c r="B2" t="inlineStr"><is><t>in</t><r><t>line</t></r></is></c>'
        '<c r="C2"><v>1.5</v></c><c r="D2" t="b"><v>1</v></c><c r="E2" t="e"><v>#N/A</v></c>'
        '<c r="F2" t="str"><f>A2</f><v>text</v></c><c r="G2" s="3"><v>46000</v></c>'
        '<c r="H2" s="3"><v>46000.5</v></c><c r="I2" t="d"><v>2026-03-04</v></c></row>',
        strings=["zero", "one"],
        dates=["3"],
    )
    day = date(2025, 12, 9)
    moment = datetime(2025, 12, 9, 12)
    expected = ["one", "inline", 1.5, True, ErrorValue("#N/A"), "text", day, moment, date(2026, 3, 4)]
    assert content.rows == [(2, expected)]


def test_gaps_between_cells_and_rows_keep_their_places():
    content = parsed('<row r="3"><c r="C3"><v>1</v></c></row><row r="9"><c r="A9"><v>2</v></c></row>')
    assert content.rows == [(3, [None, None, 1.0]), (9, [2.0])]


def test_cells_and_rows_without_references_follow_each_other():
    content = parsed("<row><c><v>1</v></c><c><v>2</v></c></row><row><c><v>3</v></c></row>")
    assert content.rows == [(1, [1.0, 2.0]), (2, [3.0])]


def test_rows_of_spaces_are_blank():
    assert parsed('<row r="2"><c r="A2" t="str"><v>  </v></c></row>').rows == []


def test_a_formula_without_a_stored_result_is_told_from_an_empty_text():
    content = parsed(
        '<row r="1"><c r="A1"><f>B1*2</f><v></v></c><c r="B1"><f>C1</f></c>'
        '<c r="C1" t="str"><f>""</f><v></v></c><c r="D1"><f>1+1</f><v>2</v></c></row>'
    )
    assert content.rows[0][1] == [UncalculatedFormula("=B1*2"), UncalculatedFormula("=C1"), None, 2.0]


def test_hidden_rows_hidden_columns_and_merged_ranges_are_seen():
    content = parsed(
        '<row r="1" hidden="1"><c r="A1"><v>1</v></c></row>',
        before='<cols><col min="2" max="3" hidden="1"/></cols>',
        after='<mergeCells count="1"><mergeCell ref="A4:B6"/></mergeCells>',
    )
    assert content.hidden_rows == [1]
    assert content.hidden_columns == [2, 3]
    assert content.merged == [Merged("A4:B6", 4, 6, 1, 2)]


def test_names_may_carry_a_prefix():
    rows = '<x:row r="1"><x:c r="A1"><x:v>7</x:v></x:c></x:row>'
    xml = f'<x:worksheet xmlns:x="{MAIN[7:-1]}"><x:sheetData>{rows}</x:sheetData></x:worksheet>'
    content = parse_sheet(io.BytesIO(xml.encode()), [], frozenset(), from_1904=False)
    assert content.rows == [(1, [7.0])]


def test_shared_strings_join_their_runs_and_leave_out_phonetic_hints():
    xml = (
        f"<sst {MAIN}><si><t>plain</t></si><si><r><t>rich </t></r><r><t>text</t></r></si>"
        "<si><t>東京</t><rPh sb='0' eb='2'><t>とうきょう</t></rPh></si><si><t>_x0041_ and _x005F_x0041_</t></si></sst>"
    )
    assert parse_strings(io.BytesIO(xml.encode())) == ["plain", "rich text", "東京", "A and _x0041_"]


def test_a_document_type_is_refused_before_it_can_exhaust_the_memory():
    bomb = b'<!DOCTYPE x [<!ENTITY a "aaaaaaaaaa"><!ENTITY b "&a;&a;&a;">]><worksheet><sheetData/></worksheet>'
    with pytest.raises(UnreadableError) as caught:
        parse_sheet(io.BytesIO(bomb), [], frozenset(), from_1904=False)
    assert caught.value.code == "not-a-workbook"


@pytest.mark.parametrize("from_1904", [False, True])
@pytest.mark.parametrize("serial", [1.0, 59.0, 61.0, 1462.0, 25569.0, 46000.0, 46000.25, 73415.0])
def test_dates_agree_with_openpyxl_in_both_date_systems(serial, from_1904):
    # Outside check: openpyxl's own conversion.
    theirs = from_excel(serial, CALENDAR_MAC_1904 if from_1904 else CALENDAR_WINDOWS_1900)
    ours = date_of_serial(serial, from_1904=from_1904)
    assert (ours if isinstance(ours, datetime) else datetime(ours.year, ours.month, ours.day)) == theirs


def test_a_number_outside_the_calendar_stays_a_number():
    assert date_of_serial(1e9, from_1904=False) == 1e9


@pytest.mark.parametrize(
    "code",
    [
        *("yyyy-mm-dd", "dd/mm/yy", '"at" h:mm', "[$-409]d-mmm-yy;@"),
        *("0.00", "#,##0", '0.0 "days"', "[Red]0;[Blue]-0", "General", "0.00%", r"0\d", "@"),
    ],
)
def test_date_formats_are_told_from_others_as_openpyxl_tells_them(code):
    # Outside check: openpyxl's own rule for number formats.
    assert shows_date(164, code) == is_date_format(code)


def test_built_in_formats_14_to_22_show_dates_and_2_does_not():
    # ECMA-376, part 1, 18.8.30: the built-in number formats.
    assert all(shows_date(number, None) for number in range(14, 23))
    assert not shows_date(2, None)


def test_a_workbook_written_by_another_library_reads_cell_for_cell():
    # Outside check: the same cells as openpyxl reads back from its own file.
    workbook = openpyxl.Workbook()
    sheet = workbook.active
    sheet.title = "trades"
    sheet.append(["text", 1, 2.5, True, date(2026, 3, 4), datetime(2026, 3, 4, 5, 6, 7), None, "é 東京"])
    sheet["C5"] = "#N/A"
    sheet["J12"] = 0.1
    sheet["A9"].number_format = "yyyy-mm-dd"
    ours = {
        (row, column): value
        for row, cells in rows_of(saved(workbook))
        for column, value in enumerate(cells, start=1)
        if value is not None
    }
    theirs = {
        (cell.row, cell.column): cell.value for row in sheet.iter_rows() for cell in row if cell.value is not None
    }
    assert ours.pop((5, 3)) == ErrorValue(theirs.pop((5, 3)))
    assert ours == theirs


def test_the_1904_date_system_is_read_right():
    workbook = openpyxl.Workbook()
    workbook.epoch = CALENDAR_MAC_1904
    sheet = workbook.active
    sheet.title = "trades"
    sheet["A1"] = date(2026, 3, 4)
    assert rows_of(saved(workbook)) == [(1, [date(2026, 3, 4)])]


def test_only_the_wanted_sheets_are_read_and_the_others_named():
    workbook = openpyxl.Workbook()
    workbook.active.title = "Curve Points"
    workbook.create_sheet("notes").sheet_state = "hidden"
    sheets, others = read_workbook(saved(workbook), "market.xlsx", ["curve_points"])
    assert [sheet.name for sheet in sheets] == ["Curve Points"]
    assert others == ["notes"]


def archive(**members: str) -> bytes:
    stream = io.BytesIO()
    with ZipFile(stream, "w", ZIP_DEFLATED) as out:
        for name, text in members.items():
            out.writestr(name, text)
    return stream.getvalue()


@pytest.mark.parametrize(
    ("data", "code"),
    [
        (b"", "not-a-workbook"),
        (b"trade_id,product\n1,2\n", "not-a-workbook"),
        (b"PK\x03\x04 cut off", "damaged-workbook"),
        (archive(**{"content.xml": "<a/>", "mimetype": "x"}), "not-a-workbook"),
        (archive(**{"word/document.xml": "<a/>"}), "not-a-workbook"),
        (bytes.fromhex("d0cf11e0a1b11ae1") + b"\0" * 512, "old-workbook-format"),
    ],
)
def test_other_files_are_named_for_what_they_are(data, code):
    with pytest.raises(UnreadableError) as caught:
        read_workbook(data, "book.xlsx", ["trades"])
    assert caught.value.code == code


def test_a_workbook_cut_short_anywhere_is_refused_and_never_half_read():
    workbook = openpyxl.Workbook()
    workbook.active.title = "trades"
    for number in range(200):
        workbook.active.append([number, f"text {number}"])
    whole = saved(workbook)
    for length in range(4, len(whole) - 1, max(1, len(whole) // 40)):
        with pytest.raises(UnreadableError):
            read_workbook(whole[:length], "book.xlsx", ["trades"])


def test_damage_inside_a_sheet_is_refused():
    workbook = openpyxl.Workbook()
    workbook.active.title = "trades"
    workbook.active["A1"] = "trade_id"
    stream = io.BytesIO()
    with ZipFile(io.BytesIO(saved(workbook))) as old, ZipFile(stream, "w") as new:
        for name in old.namelist():
            content = old.read(name)
            new.writestr(name, content[: len(content) // 2] if name.endswith("sheet1.xml") else content)
    with pytest.raises(UnreadableError) as caught:
        read_workbook(stream.getvalue(), "book.xlsx", ["trades"])
    assert caught.value.code == "damaged-workbook"


@pytest.mark.parametrize(
    ("column", "text"), [(1, "A"), (26, "Z"), (27, "AA"), (702, "ZZ"), (703, "AAA"), (16384, "XFD")]
)
def test_columns_have_letters_both_ways(column, text):
    assert letters(column) == text
    assert coordinates(f"{text}12") == (column, 12)
