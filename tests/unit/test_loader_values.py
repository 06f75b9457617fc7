"""One cell at a time: what is accepted, and what is said of the rest."""

from __future__ import annotations

from datetime import date, datetime

import pytest

from pricer.contracts.profile import ProfileKind
from pricer.loader.columns import columns_of
from pricer.loader.days import Day
from pricer.loader.faults import Fault, Reading
from pricer.loader.market_rows import MARKET_ROWS
from pricer.loader.names import (
    CalendarName,
    Choice,
    Currency,
    CurrencyPair,
    FreeText,
    Identifier,
    QuarterlyTenor,
    Tenor,
)
from pricer.loader.numbers import Number, NumberList, WholeNumber
from pricer.loader.schema import BOOK, MARKET
from pricer.loader.sheets import ErrorValue, UncalculatedFormula
from pricer.loader.text import slip_of


def read(kind, cell, *, typed=True):
    return kind.read(cell, Reading(typed))


def fault(kind, cell, *, typed=True) -> Fault:
    with pytest.raises(Fault) as caught:
        read(kind, cell, typed=typed)
    return caught.value


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("12.5", 12.5),
        ("+3", 3.0),
        ("-0.5", -0.5),
        ("\N{MINUS SIGN}0.5", -0.5),
        (".25", 0.25),
        ("7.", 7.0),
        ("1e-3", 0.001),
        ("1.5E+6", 1.5e6),
        (" 12.5 ", 12.5),
        ("\N{NO-BREAK SPACE}12.5\N{NO-BREAK SPACE}", 12.5),
        ("\N{FULLWIDTH DIGIT ONE}\N{FULLWIDTH DIGIT TWO}", 12.0),
        ("12\N{ZERO WIDTH SPACE}", 12.0),
        ("22.5%", 0.225),
        ("22.3 %", 0.223),
    ],
)
def test_text_that_can_mean_one_number_only_is_that_number(text, number):
    assert read(Number(percent=True), text, typed=False) == number


@pytest.mark.parametrize(
    ("text", "code", "mend"),
    [
        ("0,225", "decimal-comma", "Write 0.225, with a decimal point."),
        (",5", "decimal-comma", "Write .5, with a decimal point."),
        ("1.234.567,5", "decimal-comma", "Write 1234567.5, with a decimal point."),
        ("1,000", "ambiguous-number", "Write 1000 or 1.000: the comma may mean either."),
        ("1,000,000", "thousands-separator", "Write 1000000, without separators."),
        ("1,234.5", "thousands-separator", "Write 1234.5, without separators."),
        ("1 000 000", "thousands-separator", "Write 1000000, without separators."),
        ("1'000", "thousands-separator", "Write 1000, without separators."),
        ("5.000.000", "thousands-separator", "Write 5000000, without separators."),
        ("1_000", "thousands-separator", "Write 1000, without separators."),
        ("nan", "not-finite", ""),
        ("-Inf", "not-finite", ""),
        ("1e999", "not-finite", ""),
        ("eighty", "not-a-number", ""),
        ("100 EUR", "not-a-number", ""),
        ("(100)", "not-a-number", ""),
        ("0x10", "not-a-number", ""),
        ("12.5.1", "not-a-number", ""),
        ("#N/A", "error-cell", "Mend the formula or its source, or type the value."),
    ],
)
def test_text_that_is_no_number_or_several_is_refused_with_the_way_to_write_it(text, code, mend):
    found = fault(Number(), text, typed=False)
    assert (found.code, found.mend) == (code, mend)


@pytest.mark.parametrize(
    ("cell", "code"),
    [
        (True, "not-a-number"),
        (date(2026, 3, 4), "not-a-number"),
        (ErrorValue("#REF!"), "error-cell"),
        (UncalculatedFormula("=A1*2"), "formula-without-result"),
        (float("inf"), "not-finite"),
    ],
)
def test_cells_of_other_types_are_not_numbers(cell, code):
    assert fault(Number(), cell).code == code


def test_a_number_stored_as_text_in_a_workbook_is_read_with_a_warning():
    reading = Reading(typed=True)
    assert Number().read("12.5", reading) == 12.5
    assert [note.code for _, note in reading.notes] == ["number-stored-as-text"]


def test_text_is_how_a_csv_file_holds_numbers_so_there_it_needs_no_warning():
    reading = Reading(typed=False)
    Number().read("12.5", reading)
    assert reading.notes == []


def test_a_percent_sign_is_refused_where_percentages_make_no_sense():
    assert "percent sign" in fault(Number(), "5%", typed=False).mend


@pytest.mark.parametrize(("typed_number", "meant"), [(22.5, "0.225"), (-18.0, "-0.18"), (35.0, "0.35")])
def test_percentage_points_in_a_decimal_column_are_recognised(typed_number, meant):
    found = fault(Number(decimal_limit=3.0), typed_number)
    assert found.mend == f"Did you mean {meant} ({typed_number:g} %)?"


@pytest.mark.parametrize(
    ("kind", "words"),
    [
        (Number(above=0.0), "a number above 0"),
        (Number(at_least=0.0, below=1.0), "a number of at least 0 and below 1"),
        (Number(not_zero=True), "a number other than 0"),
        (Number(above=0.0, decimal_limit=3.0), "a decimal number above 0 and no larger than 3"),
        (WholeNumber(0, 60), "a whole number from 0 to 60"),
    ],
)
def test_a_number_describes_its_limits_in_words(kind, words):
    assert kind.words() == words


@pytest.mark.parametrize(
    ("kind", "cell"), [(Number(above=0.0), 0.0), (Number(at_most=1.0), 1.5), (Number(not_zero=True), 0.0)]
)
def test_numbers_outside_their_limits_are_refused(kind, cell):
    assert fault(kind, cell).code == "out-of-range"


def test_whole_numbers_may_be_stored_as_decimals_but_have_no_fraction():
    assert read(WholeNumber(0, 60), 2.0) == 2
    assert fault(WholeNumber(0, 60), 2.5).code == "out-of-range"
    assert fault(WholeNumber(1, 60), 0.0).code == "out-of-range"


def test_a_list_of_numbers_is_separated_by_semicolons():
    assert read(NumberList(), "0.6; 0.3;0.1") == (0.6, 0.3, 0.1)
    assert read(NumberList(), "60%; 40%") == (0.6, 0.4)
    assert read(NumberList(), 1.0) == (1.0,)
    assert fault(NumberList(), "0.6, 0.3, 0.1").mend == 'Separate the numbers by semicolons: "0.6; 0.3; 0.1".'
    assert fault(NumberList(), "0,6; 0,4").code == "decimal-comma"
    assert fault(NumberList(), "0; 0").code == "out-of-range"
    assert fault(NumberList(), "0.6;;0.4").code == "not-a-number"


@pytest.mark.parametrize(
    "cell", [date(2026, 9, 18), "2026-09-18", "2026-09-18T00:00:00", "2026-09-18 00:00:00", " 2026-09-18"]
)
def test_dates_are_date_cells_or_iso_text(cell):
    assert read(Day(), cell) == date(2026, 9, 18)


@pytest.mark.parametrize(
    ("cell", "code", "mend"),
    [
        ("03/04/2026", "ambiguous-date", "Write 2026-04-03 or 2026-03-04: the day and the month may be either."),
        ("13/04/2026", "not-a-date", "Write 2026-04-13."),
        ("04/13/2026", "not-a-date", "Write 2026-04-13."),
        ("05.05.2026", "not-a-date", "Write 2026-05-05."),
        ("18 Sep 2026", "not-a-date", "Write year-month-day with hyphens, e.g. 2026-09-18."),
        ("2026-02-30", "not-a-date", "There is no such day; correct it."),
        ("2026-09-18T17:30:00", "time-of-day", "Write 2026-09-18."),
        (datetime(2026, 9, 18, 17, 30), "time-of-day", "Write 2026-09-18."),
        (20260918.0, "not-a-date", "Did you mean 2026-09-18? Write it so."),
        (46283.0, "not-a-date", "Format the cell as a date, or write the date as text, e.g. 2026-09-18."),
        (date(1926, 9, 18), "out-of-range", "Check the year."),
        ("9999-12-31", "out-of-range", "Check the year."),
    ],
)  # fmt: skip
def test_dates_that_may_mean_something_else_are_refused(cell, code, mend):
    found = fault(Day(), cell)
    assert (found.code, found.mend) == (code, mend)


def test_words_are_recognised_whatever_their_case_spaces_underscores_and_hyphens():
    kind = Choice.of(ProfileKind)
    for text in ("cash digital call", "Cash_Digital-Call", " CASHDIGITALCALL "):
        assert read(kind, text) is ProfileKind.CASH_DIGITAL_CALL


def test_an_unknown_word_is_refused_with_the_nearest_one():
    found = fault(Choice.of(ProfileKind), "stradle")
    assert found.found == '"stradle"'
    assert found.mend == 'Did you mean "straddle"?'


@pytest.mark.parametrize(
    ("cell", "name"),
    [
        ("A-1", "A-1"),
        (1001.0, "1001"),
        ("007", "007"),
        ("  A  1 ", "A 1"),
        ("A\N{NO-BREAK SPACE}1", "A 1"),
        ("=A1", "=A1"),
        ("@handle", "@handle"),
        ("-x", "-x"),
    ],
)
def test_identifiers_are_text_or_whole_numbers(cell, name):
    assert read(Identifier(), cell) == name


@pytest.mark.parametrize("cell", [True, date(2026, 3, 1), 10.5, 1e16, ErrorValue("#N/A"), "#REF!"])
def test_cells_that_a_spreadsheet_has_changed_are_not_identifiers(cell):
    fault(Identifier(), cell)


def test_invisible_and_full_width_characters_are_taken_out_of_names_and_told():
    reading = Reading()
    assert Identifier().read("AB\N{ZERO WIDTH SPACE}C", reading) == "ABC"
    assert Identifier().read("\N{FULLWIDTH LATIN CAPITAL LETTER A}BC", reading) == "ABC"
    assert [note.found for _, note in reading.notes] == [
        'invisible characters (U+200B) in "ABC"',
        'full-width characters in "\N{FULLWIDTH LATIN CAPITAL LETTER A}BC"',
    ]


def test_free_text_keeps_its_full_width_characters():
    assert read(FreeText(), "\N{FULLWIDTH LATIN CAPITAL LETTER A}") == "\N{FULLWIDTH LATIN CAPITAL LETTER A}"


def test_currencies_are_codes_of_iso_4217():
    assert read(Currency(), "EUR") == "EUR"
    assert read(Currency(), "eur") == "EUR"
    assert fault(Currency(), "EUX").code == "unknown-currency"


def test_pence_are_not_taken_for_pounds():
    assert fault(Currency(), "GBp").mend == 'Write "GBP", with amounts in its main unit.'
    assert fault(Currency(), "GBX").code == "unknown-currency"


def test_the_currency_codes_are_quantlibs_as_far_as_it_knows_them():
    # Outside check: QuantLib's currency classes carry their ISO 4217 codes.
    ql = pytest.importorskip("QuantLib")
    names = (
        "EUR USD GBP JPY CHF SEK NOK DKK CAD AUD NZD HKD SGD KRW PLN CZK HUF ZAR MXN BRL INR CNY TRY THB ILS TWD ISK"
    )
    for name in names.split():
        assert read(Currency(), getattr(ql, f"{name}Currency")().code()) == name


@pytest.mark.parametrize("text", ["EURUSD", "EUR/USD", "eur-usd", "EUR USD"])
def test_pairs_may_be_written_with_a_separator(text):
    assert read(CurrencyPair(), text) == "EURUSD"


@pytest.mark.parametrize("text", ["EUREUR", "EURUSX", "EUR", "GBpUSD", "EURUSDX"])
def test_pairs_of_unknown_or_equal_currencies_are_refused(text):
    assert fault(CurrencyPair(), text).code == "unknown-currency"


def test_calendars_may_be_joined():
    assert read(CalendarName(), "target + us") == "TARGET+US"
    assert fault(CalendarName(), "TARGT").mend == 'Did you mean "TARGET"?'


@pytest.mark.parametrize(("text", "tenor"), [("3M", "3M"), ("18m", "18M"), ("1 Y", "1Y"), ("02W", "2W")])
def test_tenors_are_a_number_and_a_letter(text, tenor):
    assert read(Tenor(), text) == tenor


@pytest.mark.parametrize("text", ["3", "M", "0M", "3Q", "1Y6M", "-1Y"])
def test_other_tenors_are_refused(text):
    assert fault(Tenor(), text).code == "not-a-tenor"


def test_a_tenor_beyond_every_market_is_refused():
    assert read(Tenor(), "100Y") == "100Y"
    assert (fault(Tenor(), "101Y").code, fault(Tenor(), "101Y").expected) == ("out-of-range", "a tenor of at most 100Y")


@pytest.mark.parametrize("text", ["3M", "18M", "5Y"])
def test_quarterly_tenors_are_whole_quarters(text):
    assert read(QuarterlyTenor(), text) == text


@pytest.mark.parametrize("text", ["1M", "20M", "2W", "90D", "five years"])
def test_tenors_that_no_quarterly_premium_fits_are_refused(text):
    assert fault(QuarterlyTenor(), text).code == "not-a-tenor"


@pytest.mark.parametrize(
    ("typed_number", "meant"),
    [
        (125.0, "Did you mean 0.0125 (125 basis points)?"),
        (10.0, "Did you mean 0.001 (10 basis points)?"),
        (-12.5, "Did you mean -0.00125 (-12.5 basis points)?"),
        (-5.0, "Did you mean -0.05 (-5 %) or -0.0005 (-5 basis points)?"),
        (2e4, ""),
    ],
)
def test_basis_points_in_a_column_of_spreads_are_recognised(typed_number, meant):
    assert fault(Number(percent=True, decimal_limit=1.0, basis_points=True), typed_number).mend == meant


@pytest.mark.parametrize(
    ("kind", "typed_number", "meant"),
    [
        (Number(percent=True, decimal_limit=1.0, is_rate=True), 1.97, "Did you mean 0.0197 (1.97 %)?"),
        (Number(percent=True, decimal_limit=1.0, is_rate=True), 197.0, "Did you mean 0.0197 (197 basis points)?"),
        (Number(percent=True, decimal_limit=1.0, is_rate=True), 19700.0, ""),
        (Number(above=0.0, percent=True, decimal_limit=3.0), 2250.0, ""),
        (Number(above=0.0, percent=True, decimal_limit=3.0), -22.5, ""),
        (Number(at_least=-1.0, at_most=1.0, percent=True, decimal_limit=2.0), 150.0, ""),
    ],
)
def test_no_guess_at_a_unit_breaks_the_columns_own_limits(kind, typed_number, meant):
    assert fault(kind, typed_number).mend == meant


@pytest.mark.parametrize(
    ("name", "typed", "is_slip"),
    [
        ("cap", "cap", True),
        ("cap", "kap", True),
        ("cap", "acp", True),
        ("cap", "ca", True),
        ("cap", "kpa", False),
        ("floor", "flor", True),
        ("floor", "flr", False),
        ("weight", "wieght", True),
        ("weight", "whieght", True),
        ("weight", "wihgte", False),
        ("lot_size", "Lot Sice", True),
    ],
)
def test_a_slip_of_the_finger_is_one_edit_and_two_from_six_letters_on(name, typed, is_slip):
    assert slip_of(name, ["something else", typed]) == (typed if is_slip else None)


def test_a_slip_of_nothing_is_none():
    assert slip_of("cap", []) is None


@pytest.mark.parametrize("typed", [True, False])
@pytest.mark.parametrize("tables", [BOOK, MARKET])
def test_every_columns_example_is_read_by_the_column_itself(tables, typed):
    for table in tables.values():
        for column in table.columns.values():
            column.read(column.example, Reading(typed))


def test_every_column_says_how_to_mend_a_cell_in_one_sentence():
    for model in MARKET_ROWS.values():
        for column in columns_of(model).values():
            remedy = column.remedy()
            assert remedy.startswith("Enter ")
            assert remedy.endswith(".")
            assert "  " not in remedy
