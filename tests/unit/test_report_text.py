from __future__ import annotations

import csv
import io

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pricer.report.text import clean, csv_text, shorten, slug


@pytest.mark.parametrize(
    "text", ["=1+1", "+49 69", "-5.2 %", "@sum", "\t=1", "\ttab", "\nline", "  =1+1", "＝1", "'quoted", "=cmd|'x'!A1"]
)
def test_a_text_that_a_spreadsheet_might_run_gets_one_apostrophe(text):
    assert csv_text(text) == "'" + text


@pytest.mark.parametrize("text", ["", "SMF-1000", "a = b", "Hjelm & Dahl", "5.2", "  indented", "x\ty", "é"])
def test_other_text_stays_as_it_is(text):
    assert csv_text(text) == text


@given(st.text())
def test_taking_one_leading_apostrophe_away_gives_every_text_back(text):
    found = csv_text(text)
    assert (found[1:] if found.startswith("'") else found) == clean(text)


@given(st.text())
def test_no_text_in_a_csv_cell_begins_like_a_formula(text):
    assert csv_text(text).lstrip()[:1] not in {"=", "+", "-", "@", "＝", "＋", "－", "＠"}


@given(st.text(alphabet=st.characters(codec=None, categories=None)))
def test_clean_text_can_be_written_as_utf_8_and_survives_a_csv_reader(text):
    cell = csv_text(text)
    file = io.StringIO(newline="")
    csv.writer(file, lineterminator="\n").writerow([cell, "end"])
    written = file.getvalue().encode("utf-8").decode("utf-8")
    assert next(csv.reader(io.StringIO(written, newline=""))) == [cell, "end"]


def test_control_characters_and_lone_surrogates_become_visible():
    assert clean("a\x00b\udcffc\r\nd\re") == "a\ufffdb\ufffdc\nd\ne"


def test_long_text_is_cut_on_one_line():
    assert shorten("one\n two   three", 30) == "one two three"
    assert shorten("one two three", 8) == "one two…"


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("May Book", "may-book"),
        ("Saltmarsh & Fen, structured desk", "saltmarsh-fen-structured-desk"),
        ("Équities/Köln..", "equities-koln"),
        ("../../etc", "etc"),
        ("***", "book"),
        ("", "book"),
        ("x" * 200, "x" * 40),
    ],
)
def test_a_book_name_becomes_part_of_a_file_name(name, expected):
    assert slug(name) == expected
