"""The templates: made from the row models, and their examples load."""

from __future__ import annotations

import subprocess
import sys

import openpyxl
import pytest

from pricer.core.issues import InputError
from pricer.loader import load_book, load_market, write_templates
from pricer.loader.columns import columns_of
from pricer.loader.contract_examples import WHOLE_BOOK
from pricer.loader.examples import EXAMPLE_MARKET, EXAMPLE_PRICE_HISTORY
from pricer.loader.schema import BOOK, MARKET

MARKET_EXAMPLES = {**EXAMPLE_MARKET, **EXAMPLE_PRICE_HISTORY}
PARTS = [("book.xlsx", BOOK, WHOLE_BOOK), ("market.xlsx", MARKET, MARKET_EXAMPLES)]


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    folder = tmp_path_factory.mktemp("templates") / "new"
    write_templates(folder)
    return folder


def test_both_templates_are_written_and_named(tmp_path):
    assert [path.name for path in write_templates(tmp_path)] == ["book.xlsx", "market.xlsx"]


@pytest.mark.parametrize("name", ["book.xlsx", "market.xlsx"])
def test_a_workbook_that_is_there_is_never_overwritten(tmp_path, name):
    (tmp_path / name).write_text("a day's work")
    with pytest.raises(FileExistsError) as caught:
        write_templates(tmp_path)
    assert str(caught.value) == (
        f"{tmp_path / name} exists and may be filled in, so no template is written over it. Name another folder, or "
        "move the file away."
    )
    assert [path.name for path in tmp_path.iterdir()] == [name]
    assert (tmp_path / name).read_text() == "a day's work"


@pytest.mark.parametrize(("file", "tables", "_"), PARTS)
def test_each_table_has_its_columns_with_notes_and_nothing_below(folder, file, tables, _):
    workbook = openpyxl.load_workbook(folder / file)
    assert workbook.sheetnames == ["read me", *tables, "examples"]
    for name, table in tables.items():
        sheet = workbook[name]
        assert [cell.value for cell in sheet[1]] == list(table.columns)
        assert sheet.max_row == 1
        assert sheet.freeze_panes == "B2"
        for cell, column in zip(sheet[1], table.columns.values(), strict=True):
            assert column.example in cell.comment.text
            assert column.kind.words() in cell.comment.text
            assert ("Needed in every row." in cell.comment.text) == column.is_required


def test_columns_with_few_words_offer_them_as_a_list(folder):
    sheet = openpyxl.load_workbook(folder / "book.xlsx")["trades"]
    lists = {
        str(rule.sqref).partition("2")[0]: rule.formula1
        for rule in sheet.data_validations.dataValidation
        if rule.type == "list"
    }
    by_column = {cell.value: lists.get(cell.column_letter) for cell in sheet[1]}
    assert by_column["direction"] == '"long,short"'
    assert by_column["product"] == '"european option,option,note"'
    assert "k-th best" in by_column["aggregate"]
    assert by_column["strike"] is None
    assert all(len(text) <= 257 for text in lists.values())  # a spreadsheet program takes 255 characters and two quotes


def test_an_untouched_template_is_told_to_be_empty(folder):
    with pytest.raises(InputError) as caught:
        load_book(folder / "book.xlsx")
    assert str(caught.value) == (
        "book.xlsx, sheet trades: found no trades below the header; expected at least one trade. Add a row per trade."
    )
    with pytest.raises(InputError) as caught:
        load_market(folder / "market.xlsx")
    assert [issue.code for issue in caught.value.issues] == ["not-one-row"]


def fill_from_examples(path):
    """Do by hand what a person does: copy the example rows into the sheets they are for."""
    workbook = openpyxl.load_workbook(path)
    examples = workbook["examples"]
    table = header = None
    for row in examples.iter_rows(min_row=2):
        first = row[0].value
        if first in workbook.sheetnames and row[1].value is None:
            table, header = workbook[first], None
        elif first is None:
            continue
        elif header is None:
            header = [cell.value for cell in row if cell.value is not None]
            for position, name in enumerate(header, start=1):
                table.cell(1, position, name)
        else:
            target = table.max_row + 1
            for position in range(1, len(header) + 1):
                table.cell(target, position).value = row[position - 1].value
                table.cell(target, position).number_format = row[position - 1].number_format
    workbook.save(path)


def test_the_example_rows_load_when_they_are_copied_into_the_tables(folder):
    for path in write_templates(folder / "filled"):
        fill_from_examples(path)
    book, market = load_book(folder / "filled" / "book.xlsx"), load_market(folder / "filled" / "market.xlsx")
    assert len(book) == len(WHOLE_BOOK["trades"])
    assert book.issues == ()
    assert market.issues == ()
    assert list(market.underlyings) == ["ORLUMA", "TESKIR", "VADRONE", "WEXMOOR"]
    assert list(market.surfaces) == list(market.repo) == ["WEXMOOR"]


def test_the_examples_use_every_column(folder):
    for tables, rows in ((BOOK, WHOLE_BOOK), (MARKET, MARKET_EXAMPLES)):
        for name, table in tables.items():
            used = {column for row in rows[name] for column, value in row.items() if value is not None}
            # A trade whose writer is in default is refused, so no example shows one; one range is enough.
            unseen = {"writers": {"defaulted_on"}, "schedule_rules": {"ceiling"}}.get(name, set())
            assert set(table.columns) <= used | unseen, name


def test_every_column_has_a_meaning_an_example_and_says_what_blank_means():
    for tables in (BOOK, MARKET):
        for table in tables.values():
            for name, column in table.columns.items():
                assert column.meaning and column.example, name
                assert column.is_required != bool(column.blank_words), name


def test_every_model_describes_itself():
    from pricer.loader.book_models import FEATURE_ROWS
    from pricer.loader.book_rows import TRADE_ROWS, ConstituentRow
    from pricer.loader.market_rows import MARKET_ROWS

    for model in (ConstituentRow, *TRADE_ROWS.values(), *FEATURE_ROWS.values(), *MARKET_ROWS.values()):
        assert model.__doc__
        assert columns_of(model)


def test_importing_the_package_loads_no_spreadsheet_library():
    code = "import sys, pricer.loader; print(sorted({'openpyxl', 'pydantic', 'pandas', 'numpy'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
