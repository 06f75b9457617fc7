"""The market table fixings: what is read, what is refused at which cell, what is told of it."""

from datetime import date

import pytest

from pricer.loader import load_market, write_tables
from tests.unit.market_tables import full_market, small_market

DAY = date(2026, 3, 20)


@pytest.fixture
def load(tmp_path):
    def loaded(rows, tables=None, name="market.xlsx"):
        write_tables((tables or full_market()) | {"fixings": rows}, tmp_path / name)
        return load_market(tmp_path / name)

    return loaded


def row(level=84.0, name="ORLUMA", day=DAY, reason=None):
    return {"underlying": name, "date": day, "level": level, "reason": reason}


def test_the_examples_fixings_are_read_in_silence(load):
    market = load(full_market()["fixings"])
    assert market.issues == ()
    assert market.fixings.level("ORLUMA", DAY) == 83.42
    assert market.fixings.level("USDEUR", DAY) == pytest.approx(1 / 1.0988)
    assert market.fixings.level("WEXMOOR", DAY) is None
    assert market.fixings.reason("WEXMOOR", DAY) == "exchange closed early"


@pytest.mark.parametrize("name", ["market.xlsx", "market"])
def test_what_was_written_is_read_to_the_last_bit(load, name):
    level = 84.1 + 1e-14
    assert load([row(level)], name=name).fixings.levels == {"ORLUMA": {DAY: level}}


def test_a_market_without_the_table_has_no_fixings(tmp_path):
    write_tables(small_market(), tmp_path / "market")
    market = load_market(tmp_path / "market")
    assert (dict(market.fixings.levels), market.issues) == ({}, ())


def test_two_levels_of_one_day_are_both_left_out(load):
    market = load([row(84.0), row(84.5), row(84.0)])
    assert [str(issue) for issue in market.issues] == [
        'market.xlsx, sheet fixings, row 3, column "level" (cell C3): found 84.5 for ORLUMA on 2026-03-20, but 84 in '
        "row 2; expected one level per day. Both are left out: trades that need it are not priced. Delete the wrong "
        "one."
    ]
    assert market.fixings.level("ORLUMA", DAY) is None
    assert market.fixings.reason("ORLUMA", DAY) == "rows 2 and 3 of the fixings table differ"


def test_the_same_level_twice_is_one(load):
    market = load([row(84.0), row(84.0), row(None, reason="late")])
    assert (market.fixings.level("ORLUMA", DAY), market.issues) == (84.0, ())


@pytest.mark.parametrize("rows", [[row(84.0), row(None, reason="late")], [row(None, reason="late"), row(84.0)]])
def test_a_level_that_came_after_all_counts_before_the_reason_why_there_was_none(load, rows):
    assert load(rows).fixings.level("ORLUMA", DAY) == 84.0


def test_a_level_that_cannot_be_read_costs_itself_and_says_so(load):
    market = load([row(-84.0), row(214.0, "TESKIR")])
    assert [str(issue) for issue in market.issues] == [
        'market.xlsx, sheet fixings, row 2, column "level" (cell C2): found -84; expected a number above 0. Enter the '
        "official level, in the underlying's currency, in one unit with its spot; of a pair as in the table fx, e.g. "
        "84.20, or clear the cell where the day had none: the column reason says why then."
    ]
    assert market.fixings.reason("ORLUMA", DAY) == "row 2 of the fixings table cannot be used"
    assert market.fixings.level("TESKIR", DAY) == 214.0


def test_a_blank_level_needs_a_reason(load):
    (issue,) = load([row(None)]).issues
    assert (issue.code, issue.cell, issue.found) == ("blank-cell", "D2", "a blank cell")


@pytest.mark.parametrize("written", ["EUR/USD", "eurusd", "EURUSD"])
def test_a_pair_is_found_however_it_is_written(load, written):
    market = load([row(1.09, written)])
    assert (market.fixings.level("EURUSD", DAY), market.issues) == (1.09, ())


def test_a_cross_of_quoted_pairs_is_known(load):
    assert load([row(0.78, "USDGBP")]).issues == ()


def test_doubtful_fixings_are_told_at_their_cells(load):
    rows = [row(83.0, day=date(2026, 3, 19)), row(8.4), row(84.0, day=date(2026, 3, 22)), row(9.0, "ORLUNA")]
    market = load([*rows, row(84.0, day=date(2026, 4, 1))])
    assert [(issue.code, str(issue.severity), issue.cell) for issue in market.issues] == [
        ("fixing-of-a-later-day", "warning", "C6"),
        ("fixing-on-holiday", "warning", "C4"),
        ("fixing-leaps", "warning", "C3"),
        ("fixing-leaps", "warning", "C4"),
        ("fixings-of-unknown", "warning", "C5"),
    ]
    assert list(market.doubts) == ["fixings:ORLUMA:2026-03-20", "fixings:ORLUMA:2026-03-22"]
