"""Tables in .csv files: encodings, separators, quotations, and text that must not become a formula."""

from __future__ import annotations

import codecs

import pytest

from pricer.loader.csv_folder import guarded, read_csv
from pricer.loader.sheets import UnreadableError


def rows(data: bytes | str):
    return read_csv(data.encode() if isinstance(data, str) else data, "book/trades.csv", "trades").rows


def refusal(data: bytes) -> UnreadableError:
    with pytest.raises(UnreadableError) as caught:
        rows(data)
    return caught.value


@pytest.mark.parametrize("mark", [b"", codecs.BOM_UTF8])
def test_utf_8_is_read_with_and_without_its_mark(mark):
    assert rows(mark + "trade_id,strategy\nA,Zürich\n".encode()) == [
        (1, ["trade_id", "strategy"]),
        (2, ["A", "Zürich"]),
    ]


@pytest.mark.parametrize("separator", [",", ";", "\t"])
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_the_separator_is_found_from_the_header(separator, end):
    text = f"trade_id{separator}strategy{end}A{separator}b{end}"
    assert rows(text) == [(1, ["trade_id", "strategy"]), (2, ["A", "b"])]


def test_separators_inside_quoted_names_do_not_count():
    assert rows('"a,b,c";x\n1;2\n')[1] == (2, ["1", "2"])


def test_rows_keep_the_numbers_that_a_spreadsheet_shows():
    assert [number for number, _ in rows('a,b\n\n1,"two\nlines"\n ,\n3,4\n')] == [1, 3, 5]


def test_another_encoding_is_refused_at_its_byte():
    error = refusal(b"trade_id,strategy\nA,Z" + b"\xfcrich\n")
    assert error.code == "not-utf-8"
    assert error.found == "byte 0xFC at position 21 (line 2), which is not UTF-8"


def test_the_byte_position_counts_the_mark():
    assert "position 4 " in refusal(codecs.BOM_UTF8 + b"a\xff").found


@pytest.mark.parametrize("encoding", ["utf-16", "utf-16-le", "utf-16-be"])
def test_utf_16_is_refused(encoding):
    data = "a,b\n".encode(encoding)
    assert refusal(data).code in ("not-utf-8", "damaged-csv")


def test_an_open_quotation_is_refused():
    assert refusal(b'a,b\n1,"two\n3,4\n').code == "damaged-csv"


@pytest.mark.parametrize("text", ["=1+1", "+x", "-x", "@x", "'x", "''", "'=x", "plain", "it's"])
def test_guarded_text_comes_back_as_it_was(text):
    quoted = guarded(text).replace('"', '""')
    assert rows(f'a,b\n"{quoted}",1\n')[1] == (2, [text, "1"])


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@x"])
def test_guarded_text_does_not_begin_like_a_formula(text):
    assert guarded(text).startswith("'")


def test_an_apostrophe_that_guards_nothing_stays():
    assert rows("a\n'tis\n")[1] == (2, ["'tis"])


def test_a_file_with_a_nul_character_is_refused_as_no_text():
    error = refusal(b"trade_id,strategy\nA,a\0b\n")
    assert (error.code, error.found) == ("damaged-csv", "a NUL character at position 21")
    assert (error.expected, error.mend) == ("plain text", "Copy or export the file again.")
