"""Files as people really send them: what is refused, in which words, and what is read all the same.

The words are part of the product, so the main ones are asserted one by one.
"""

from __future__ import annotations

import codecs
import io
from copy import deepcopy
from datetime import date, datetime

import msoffcrypto
import openpyxl
import pytest
from msoffcrypto.format.ooxml import OOXMLFile
from openpyxl.utils.datetime import CALENDAR_MAC_1904
from typer.testing import CliRunner

from pricer.cli.app import app
from pricer.core.issues import InputError, Severity
from pricer.loader import load_book, load_market, write_tables
from pricer.loader.examples import EXAMPLE_BOOK, EXAMPLE_MARKET


@pytest.fixture
def tables():
    return deepcopy(dict(EXAMPLE_BOOK))


@pytest.fixture
def workbook(tmp_path, tables):
    """The example book, open in a spreadsheet library; ``load`` saves it and reads it."""
    path = tmp_path / "book.xlsx"
    write_tables(tables, path)
    return openpyxl.load_workbook(path)


@pytest.fixture
def load(tmp_path):
    def loaded(workbook, name="book.xlsx"):
        workbook.save(tmp_path / name)
        return load_book(tmp_path / name)

    return loaded


@pytest.fixture
def folder(tmp_path, tables):
    """The example book as a folder of .csv files."""
    write_tables(tables, tmp_path / "book")
    return tmp_path / "book"


def refused(path, load=load_book) -> InputError:
    with pytest.raises(InputError) as caught:
        load(path)
    assert all(issue.severity in (Severity.FATAL, Severity.ERROR, Severity.WARNING) for issue in caught.value.issues)
    assert any(issue.severity is Severity.FATAL for issue in caught.value.issues)
    return caught.value


def only(book, trade_id="EX-1"):
    """The one issue of the one trade refused, in words."""
    assert [refusal.trade_id for refusal in book.refusals] == [trade_id]
    assert len(book) == 5
    (issue,) = book.refusals[0].issues
    assert issue.trade_id == trade_id
    return str(issue)


def change(sheet, column, row, value):
    header = [cell.value for cell in sheet[1]]
    cell = sheet.cell(row, header.index(column) + 1)
    cell.value = value
    return cell


# A template over a day's work


def test_the_template_command_does_not_write_over_a_filled_in_workbook(tmp_path):
    path = tmp_path / "market.xlsx"
    path.write_text("a day's work")
    result = CliRunner().invoke(app, ["template", str(tmp_path)])
    assert result.exit_code == 2
    assert result.output == (
        f"{path} exists and may be filled in, so no template is written over it. Name another folder, or move the file "
        "away.\n"
    )
    assert [found.name for found in tmp_path.iterdir()] == ["market.xlsx"]
    assert path.read_text() == "a day's work"


# Files that are no input at all


@pytest.mark.parametrize("load_one", [load_book, load_market])
def test_a_missing_file(tmp_path, load_one):
    path = tmp_path / "bok.xlsx"
    assert str(refused(path, load_one)) == (
        "bok.xlsx: found no such file or folder; expected an .xlsx workbook or a folder of .csv files. "
        f"Check the path: {path}"
    )


def test_a_file_that_is_no_workbook(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_text("trade_id,product\n")
    assert str(refused(path)) == (
        "book.xlsx: found a file that is not a workbook; expected an .xlsx workbook, or a folder of .csv files. "
        "Name the workbook, or for .csv files the folder that holds them."
    )


def test_an_empty_file(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_bytes(b"")
    assert "found an empty file" in str(refused(path))


def test_an_encrypted_workbook(tmp_path, workbook):
    plain = io.BytesIO()
    workbook.save(plain)
    path = tmp_path / "book.xlsx"
    with path.open("wb") as stream:
        OOXMLFile(plain).encrypt("secret", stream)
    with path.open("rb") as stream:
        assert msoffcrypto.OfficeFile(stream).is_encrypted()
    assert str(refused(path)) == (
        "book.xlsx: found a workbook that is encrypted with a password; expected an .xlsx workbook without a password. "
        "Open it with its password and save a copy without one."
    )


def test_an_old_binary_workbook(tmp_path):
    path = tmp_path / "book.xls"
    path.write_bytes(bytes.fromhex("d0cf11e0a1b11ae1") + b"\0" * 504 + "Workbook".encode("utf-16-le"))
    assert str(refused(path)) == (
        "book.xls: found an old binary workbook (.xls) or another Office document; expected an .xlsx workbook. "
        "Open it in a spreadsheet program and save it as .xlsx."
    )


def test_a_truncated_workbook(tmp_path, workbook):
    path = tmp_path / "book.xlsx"
    workbook.save(path)
    path.write_bytes(path.read_bytes()[:3000])
    error = refused(path)
    assert error.issues[0].code == "damaged-workbook"
    assert error.issues[0].mend.startswith("Copy or download the file again")


def test_a_workbook_with_another_ending_is_read_for_what_it_is(load, workbook):
    assert len(load(workbook, "book.xls")) == 6


def test_a_folder_without_tables(tmp_path, workbook):
    workbook.save(tmp_path / "book.xlsx")
    assert str(refused(tmp_path)) == (
        f"{tmp_path.name}: found a folder without .csv files; expected the files trades.csv and constituents.csv. "
        "Name the workbook in it: book.xlsx."
    )


# Tables and columns


def test_a_missing_sheet(load, workbook):
    workbook["constituents"].title = "constituent"
    with pytest.raises(InputError) as caught:
        load(workbook)
    assert str(caught.value) == (
        'book.xlsx: found no table constituents, but "constituent"; expected a table named constituents. '
        'Did you mean "constituent"? Rename it.'
    )


def test_a_missing_csv_file(folder):
    (folder / "constituents.csv").unlink()
    assert "found no table constituents" in str(refused(folder))


def test_sheets_that_differ_by_case_only(folder):
    (folder / "Trades.csv").write_bytes((folder / "trades.csv").read_bytes())
    assert str(refused(folder)) == (
        'book: found 2 tables that are named alike: "Trades" and "trades"; expected one table trades. '
        "Rename or remove all but one."
    )


def test_all_faults_of_both_headers_come_at_once(load, workbook):
    trades, constituents = workbook["trades"], workbook["constituents"]
    change(trades, "strike", 1, "strick")
    change(trades, "currency", 1, None)
    change(trades, "floor", 1, "profile")
    change(constituents, "underlying", 1, "underlyng")
    with pytest.raises(InputError) as caught:
        load(workbook)
    assert [
        (issue.sheet, issue.code, issue.cell) for issue in caught.value.issues if issue.severity is Severity.FATAL
    ] == [
        ("trades", "duplicate-column", "N1"),
        ("trades", "misspelt-column", "K1"),
        ("trades", "missing-column", None),
        ("constituents", "misspelt-column", "B1"),
    ]


def test_an_empty_book(load, workbook):
    workbook["trades"].delete_rows(2, 10)
    with pytest.raises(InputError) as caught:
        load(workbook)
    assert "found no trades below the header" in str(caught.value)


def test_unknown_columns_and_sheets_are_ignored_with_a_warning(load, workbook):
    workbook["trades"].cell(1, 27, "remark")
    workbook.create_sheet("pivot")
    book = load(workbook)
    assert len(book) == 6
    assert sorted((issue.code, str(issue.severity)) for issue in book.issues) == [
        ("unknown-column", "warning"),
        ("unread-sheet", "warning"),
    ]


# Cells, in the words that a person reads

STRIKE = (
    "Enter the strike, in currency for price options, as a decimal (1.00 = 100 %) for performance options, e.g. 1.00, "
    "or clear the cell for an exchange option."
)
NOTIONAL = "Enter the notional, in the trade's currency, for performance options, e.g. 5000000"
LAG = "Enter the payment's delay after expiry, in business days, e.g. 2, or clear the cell for 2 days."
AGGREGATES = "weighted sum, geometric, best of, worst of, k-th best, rank weighted"
UNSAVED = "Open the workbook in a spreadsheet program, save it there and run again, or type the value."


@pytest.mark.parametrize(
    ("column", "value", "cell", "message"),
    [
        ("strike", "one hundred", "K2", f'found "one hundred"; expected a number. {STRIKE}'),
        ("strike", True, "K2", f"found the truth value TRUE; expected a number. {STRIKE}"),
        ("strike", "nan", "K2", f'found "nan"; expected a number. {STRIKE}'),
        ("strike", "0,95", "K2", 'found "0,95"; expected a number. Write 0.95, with a decimal point.'),
        (
            *("strike", "#N/A", "K2"),
            "found the spreadsheet error #N/A; expected a number. Mend the formula or its source, or type the value.",
        ),
        (
            *("strike", "=K3*1.05", "K2"),
            f'found the formula "=K3*1.05" without a stored result; expected a number. {UNSAVED}',
        ),
        (
            *("strike", 100, "K2"),
            "found 100; expected a decimal performance (1.00 = 100 %) of at most 4. Did you mean 1 (100 %)?",
        ),
        (
            *("notional", -5_000_000, "F2"),
            f"found -5000000; expected a number above 0. {NOTIONAL}, or clear the cell for a price option.",
        ),
        (
            *("notional", "5,000,000", "F2"),
            'found "5,000,000"; expected a number above 0. Write 5000000, without separators.',
        ),
        (
            *("notional", None, "F2"),
            f"found a blank cell; expected a number above 0, as performance options need one. {NOTIONAL}.",
        ),
        (
            *("quantity", 20000, "E2"),
            "found 20000; expected a blank cell, as this is for price options only. "
            "Clear the cell, or correct underlying_level.",
        ),
        (
            *("currency", "EUX", "S2"),
            'found "EUX"; expected a currency code of ISO 4217 such as EUR. '
            "Enter the currency that the trade pays in, e.g. EUR.",
        ),
        (
            *("aggregate", "wieghted sum", "G2"),
            f'found "wieghted sum"; expected one of: {AGGREGATES}. Did you mean "weighted sum"?',
        ),
        (
            *("direction", None, "C2"),
            "found a blank cell; expected one of: long, short. Enter the desk's side, e.g. long.",
        ),
        (
            *("expiry_date", "03/04/2027", "P2"),
            'found "03/04/2027"; expected a date such as 2026-09-18. '
            "Write 2027-04-03 or 2027-03-04: the day and the month may be either.",
        ),
        (
            *("expiry_date", datetime(2027, 6, 18, 17, 30), "P2"),
            "found the time 2027-06-18 17:30:00; expected a date without a time of day. Write 2027-06-18.",
        ),
        (
            *("expiry_date", date(2026, 2, 27), "P2"),
            "found the date 2026-02-27; expected a date from the trade date 2026-03-02 on. "
            "Correct one of the two dates.",
        ),
        ("settlement_lag_days", 2.5, "Q2", f"found 2.5; expected a whole number from 0 to 60. {LAG}"),
    ],
)
def test_a_bad_cell_costs_its_trade_and_is_told_in_full(load, workbook, column, value, cell, message):
    change(workbook["trades"], column, 2, value)
    assert only(load(workbook)) == f'book.xlsx, sheet trades, row 2, column "{column}" (cell {cell}): {message}'


def test_an_error_in_an_id_costs_the_trade_too(load, workbook):
    change(workbook["trades"], "trade_id", 2, "#REF!")
    book = load(workbook)
    assert [refusal.trade_id for refusal in book.refusals] == ["row 2", "EX-1"]
    assert len(book) == 5


def test_a_missing_weight_is_told_in_full(load, workbook):
    change(workbook["constituents"], "weight", 3, None)
    assert only(load(workbook)) == (
        'book.xlsx, sheet constituents, row 3, column "weight" (cell C3): found a blank cell; expected a number '
        "other than 0, as the trade's aggregate is weighted sum. Enter the weight, for a weighted sum or a geometric "
        "aggregate, e.g. 0.25."
    )


def test_a_repeated_trade_id_is_told_at_each_of_its_rows(load, workbook):
    change(workbook["trades"], "trade_id", 7, "EX-5")
    book = load(workbook)
    assert [str(issue) for refusal in book.refusals for issue in refusal.issues if issue.code == "duplicate-trade"] == [
        'book.xlsx, sheet trades, row 6, column "trade_id" (cell A6): found "EX-5", 2 times (also in row 7); '
        "expected each trade_id once. Give each trade its own id, or delete the repeated row.",
        'book.xlsx, sheet trades, row 7, column "trade_id" (cell A7): found "EX-5", 2 times (also in row 6); '
        "expected each trade_id once. Give each trade its own id, or delete the repeated row.",
    ]
    assert len(book) == 4


def test_all_problems_of_all_rows_come_at_once(load, workbook):
    for row, column, value in [(2, "strike", "x"), (2, "currency", "?"), (3, "direction", None), (4, "quantity", 0)]:
        change(workbook["trades"], column, row, value)
    change(workbook["constituents"], "initial_fixing", 9, "y")
    book = load(workbook)
    assert [(issue.trade_id, issue.sheet, issue.cell) for issue in book.issues] == [
        ("EX-1", "trades", "S2"),
        ("EX-1", "trades", "K2"),
        ("EX-2", "trades", "C3"),
        ("EX-3", "trades", "E4"),
        ("EX-4", "constituents", "D9"),
    ]
    assert len(book) == 2


def test_merged_cells_are_refused_with_their_range(load, workbook):
    workbook["constituents"].merge_cells("A2:A4")
    book = load(workbook)
    assert {refusal.trade_id for refusal in book.refusals} >= {"EX-1"}
    assert "book.xlsx, sheet constituents, row 2, " in str(book.refusals[0].issues[0])
    assert book.refusals[0].issues[0].found == "the merged cells A2:A4"
    assert "EX-1" not in {trade.trade_id for trade in book}


def test_merged_cells_beside_the_table_do_not_matter(load, workbook):
    workbook["constituents"].merge_cells("H2:H4")
    assert len(load(workbook)) == 6


# What is read all the same


def test_blank_rows_between_and_after_the_data_do_not_matter(load, workbook):
    trades = workbook["trades"]
    trades.insert_rows(4, 3)
    trades.cell(40, 2).number_format = "0.00"
    trades.cell(30, 3, "  ")
    book = load(workbook)
    assert [trade.trade_id for trade in book] == ["EX-1", "EX-2", "EX-3", "EX-4", "EX-5", "EX-6"]
    assert book.places["EX-3", "trade_id"].cell == "A7"
    assert book.issues == ()


def test_notes_beside_and_below_the_tables_are_neither_trades_nor_faults(load, workbook):
    workbook["trades"]["AD3"] = "ask Guldmar"
    workbook["trades"]["AC12"] = "checked, 31 March"
    workbook["constituents"]["G20"] = "sum"
    book = load(workbook)
    assert len(book) == 6
    assert book.refusals == ()
    assert [str(issue) for issue in book.issues] == [
        "book.xlsx, sheet trades: found values outside the named columns, in cells AD3, AC12; expected values below a "
        "column name only. Ignored. Name their column, or clear them.",
        "book.xlsx, sheet constituents: found values outside the named columns, in cell G20; expected values below a "
        "column name only. Ignored. Name their column, or clear them.",
    ]


def test_a_book_of_notes_only_is_empty(load, workbook):
    workbook["trades"].delete_rows(2, 10)
    workbook["trades"]["AD3"] = "no trades today"
    with pytest.raises(InputError) as caught:
        load(workbook)
    assert "found no trades below the header" in str(caught.value)


def test_a_note_beside_the_snapshot_is_no_second_market(tmp_path):
    write_tables(EXAMPLE_MARKET, tmp_path / "market.xlsx")
    workbook = openpyxl.load_workbook(tmp_path / "market.xlsx")
    workbook["snapshot"]["E5"] = "taken at 17:45"
    workbook.save(tmp_path / "market.xlsx")
    market = load_market(tmp_path / "market.xlsx")
    assert [(issue.code, issue.sheet) for issue in market.issues] == [("nameless-column", "snapshot")]


def test_a_note_below_a_csv_table_is_no_trade(folder):
    rewritten(folder, "trades", lambda data: data + b"," * 30 + b"checked\n")
    book = load_book(folder)
    assert len(book) == 6
    assert [issue.found for issue in book.issues] == ["values outside the named columns, in cell AE8"]


def test_hidden_rows_are_read_with_a_warning(load, workbook):
    workbook["trades"].row_dimensions[3].hidden = True
    book = load(workbook)
    assert len(book) == 6
    assert [str(issue) for issue in book.issues] == [
        "book.xlsx, sheet trades: found hidden rows: 3; expected visible rows. "
        "Read like any other; remove what does not belong to the input."
    ]


def test_spaces_and_invisible_characters_around_words_do_not_matter(load, workbook):
    change(workbook["trades"], "direction", 2, "\N{NO-BREAK SPACE} Short ")
    change(workbook["constituents"], "trade_id", 2, "EX-1\N{ZERO WIDTH SPACE}")
    change(workbook["constituents"], "trade_id", 3, "\N{FULLWIDTH LATIN CAPITAL LETTER E}X-1 ")
    book = load(workbook)
    assert len(book) == 6
    assert len(book.trades[0].contract.underlyings) == 3
    assert [issue.code for issue in book.issues] == ["odd-characters", "odd-characters"]


def test_numbers_stored_as_text_are_read_with_a_warning(load, workbook):
    change(workbook["trades"], "strike", 2, "1.0").data_type = "s"
    book = load(workbook)
    assert book.trades[0].contract.profile.strike == 1.0
    assert [str(issue) for issue in book.issues] == [
        'book.xlsx, sheet trades, row 2, column "strike" (cell K2): found the text "1.0"; expected a number cell. '
        "Read as 1; format the cell as a number and enter it again."
    ]


def test_a_cell_formatted_as_a_percentage_holds_its_decimal(load, workbook):
    change(workbook["trades"], "strike", 2, 0.95).number_format = "0%"
    assert load(workbook).trades[0].contract.profile.strike == 0.95


def test_iso_dates_as_text_are_dates(load, workbook):
    change(workbook["trades"], "expiry_date", 2, "2027-06-18").number_format = "@"
    book = load(workbook)
    assert book.trades[0].contract.expiry_date == date(2027, 6, 18)
    assert book.issues == ()


def test_the_1904_date_system_gives_the_same_dates(tmp_path, tables):
    workbook = openpyxl.Workbook()
    workbook.epoch = CALENDAR_MAC_1904
    workbook.remove(workbook.active)
    for name, rows in tables.items():
        sheet = workbook.create_sheet(name)
        columns = list(dict.fromkeys(column for row in rows for column in row))
        sheet.append(columns)
        for row in rows:
            sheet.append([row.get(column) for column in columns])
    workbook.save(tmp_path / "mac.xlsx")
    write_tables(tables, tmp_path / "book.xlsx")
    assert load_book(tmp_path / "mac.xlsx").trades == load_book(tmp_path / "book.xlsx").trades


# .csv files


def rewritten(folder, table, change_text):
    path = folder / f"{table}.csv"
    path.write_bytes(change_text(path.read_bytes()))
    return folder


def test_a_csv_file_with_a_byte_order_mark(folder):
    assert len(load_book(rewritten(folder, "trades", lambda data: codecs.BOM_UTF8 + data))) == 6


def test_a_csv_file_in_another_encoding(folder):
    rewritten(folder, "trades", lambda data: data.replace(b"Guldmar", b"G\xd6ldmar"))
    position = (folder / "trades.csv").read_bytes().index(b"\xd6")
    assert str(refused(folder)) == (
        f"book/trades.csv: found byte 0xD6 at position {position} (line 2), which is not UTF-8; expected UTF-8 text. "
        'Save it as "CSV UTF-8" in the spreadsheet program.'
    )


def test_csv_files_separated_by_semicolons(folder, tables):
    plain = load_book(folder).trades
    tables["trades"][3]["rank_weights"] = "0.6; 0.3; 0.1"
    path = folder / "constituents.csv"
    path.write_text(path.read_text().replace(",", ";"))
    assert load_book(folder).trades == plain


def test_decimal_commas_between_semicolons_are_refused_with_the_mend(folder):
    path = folder / "constituents.csv"
    path.write_text(path.read_text().replace(",", ";").replace(".", ","))
    book = load_book(folder)
    assert len(book) == 0
    assert str(book.issues[0]) == (
        'book/constituents.csv, row 2, column "weight" (cell C2): found "0,5"; '
        "expected a number other than 0. Write 0.5, with a decimal point."
    )


def test_a_decimal_comma_between_commas_is_seen_by_the_number_of_cells(folder):
    rewritten(folder, "constituents", lambda data: data.replace(b"0.5", b"0,5", 1))
    book = load_book(folder)
    assert [refusal.trade_id for refusal in book.refusals] == ["EX-1"]
    assert book.refusals[0].issues[0].found == "5 cells"


def test_a_csv_file_that_was_cut_short_is_not_half_read(folder):
    rewritten(folder, "constituents", lambda data: data[:-8])
    book = load_book(folder)
    assert [refusal.trade_id for refusal in book.refusals] == ["EX-6"]
    assert "cut short" in book.refusals[0].issues[0].mend


def test_a_csv_file_that_may_have_lost_its_last_digits_is_told(folder):
    rewritten(folder, "constituents", lambda data: data[:-2])
    book = load_book(folder)
    assert len(book) == 6
    assert [str(issue) for issue in book.issues] == [
        "book/constituents.csv: found a last row without a line break; expected a line break after "
        "every row. Check that the last row is whole: the file may have been cut short."
    ]


def test_ids_in_csv_files_keep_their_leading_zeros(folder):
    for table in ("trades", "constituents"):
        rewritten(folder, table, lambda data: data.replace(b"EX-1,", b"007,"))
    assert load_book(folder).trades[0].trade_id == "007"


# Markets


def test_faults_of_a_market_are_told_with_their_cells(tmp_path):
    tables = deepcopy(dict(EXAMPLE_MARKET))
    tables["underlyings"][0]["spot"] = -84.2
    tables["volatilities"][2]["volatility_decimal"] = 26.2
    tables["curve_points"][0]["zero_rate_decimal"] = 1.95
    write_tables(tables, tmp_path / "market.xlsx")
    market = load_market(tmp_path / "market.xlsx")
    assert [str(issue) for issue in market.issues] == [
        'market.xlsx, sheet underlyings, row 2, column "spot" (cell C2): found -84.2; expected a number above 0. '
        "Enter its price, in its currency, e.g. 84.20.",
        'market.xlsx, sheet curve_points, row 2, column "zero_rate_decimal" (cell D2): found 1.95; expected a '
        "decimal number "
        "no larger than 1. Did you mean 0.0195 (1.95 %)?",
        'market.xlsx, sheet volatilities, row 4, column "volatility_decimal" (cell C4): found 26.2; expected a '
        "decimal number "
        "above 0 and no larger than 3. Did you mean 0.262 (26.2 %)?",
        'market.xlsx, sheet credit, row 2, column "currency" (cell E2): found EUR, which has no usable standard curve; '
        "expected a currency with a curve without collateral in the table curves. Add or mend the curve, or correct "
        "the currency.",
    ]
    assert sorted(market.rejected) == ["EUR-STANDARD", "ORLUMA", "TESKIR", "credit:Guldmar Bank"]


def test_a_market_given_as_a_book_and_a_book_given_as_a_market(tmp_path, tables):
    write_tables(tables, tmp_path / "book.xlsx")
    missing = [
        issue.expected for issue in refused(tmp_path / "book.xlsx", load_market).issues if issue.code == "missing-sheet"
    ]
    assert "a table named snapshot" in missing


def checked_with(tmp_path, tables, market):
    """What the command says of a book and a market, without the spaces of a terminal's layout."""
    write_tables(tables, tmp_path / "book.xlsx")
    write_tables(market, tmp_path / "market.xlsx")
    return CliRunner().invoke(app, ["check", str(tmp_path / "book.xlsx"), str(tmp_path / "market.xlsx")])


def test_what_the_market_refused_is_told_first_and_its_trades_say_what_to_mend(tmp_path, tables):
    market = deepcopy(dict(EXAMPLE_MARKET))
    market["correlations"][1]["ORLUMA"] = 0.35
    market["fx"] = [{"pair": "EURUSD", "spot": 0.0}]
    tables["trades"] = tables["trades"][:2]
    tables["trades"][1]["currency"] = "USD"
    tables["trades"][1]["collateral"] = None
    tables["constituents"] = tables["constituents"][:4]
    result = checked_with(tmp_path, tables, market)
    assert result.exit_code == 2
    headings = [line for line in result.output.splitlines() if line.startswith(("error", "warning"))]
    assert headings == [
        "error: out of range (1)",
        "error: not symmetric (1)",
        "error: missing correlation (1)",
        "error: no fx route (1)",
        "error: other currency (1)",
    ]
    assert (
        'Mend the market first: market.xlsx, sheet correlations, row 3, column "ORLUMA" (cell B3): found 0.35, but '
        "0.55 in cell C2; expected the same correlation in both cells."
    ) in result.output
    assert (
        'Mend the market first: market.xlsx, sheet fx, row 2, column "spot" (cell B2): found 0; expected a number '
        "above 0."
    ) in result.output
    assert result.output.startswith("5 problems: 5 errors\n")


def test_one_trade_is_counted_in_the_singular(tmp_path, tables):
    tables["trades"] = tables["trades"][:1]
    tables["constituents"] = tables["constituents"][:3]
    result = checked_with(tmp_path, tables, EXAMPLE_MARKET)
    assert result.output.endswith("\n1 trade can be priced, 0 cannot.\n")
