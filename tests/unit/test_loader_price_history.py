"""Correlations from a table of past levels: estimated, and everything that was left out told."""

from __future__ import annotations

from datetime import date

import numpy as np
import pytest

from pricer.core.issues import InputError
from pricer.loader import load_market, write_tables
from tests.unit.market_tables import full_market, price_history

IDS = ["ORLUMA", "TESKIR", "VADRONE", "WEXMOOR", "EURUSD"]
ROWS = price_history(IDS)


@pytest.fixture
def load(tmp_path):
    def loaded(rows, *, half_life=None, **more):
        tables = full_market()
        del tables["correlations"]
        tables["snapshot"][0].update(correlation_source="price history", correlation_half_life_days=half_life)
        write_tables({**tables, "price_history": rows, **more}, tmp_path / "market")
        return load_market(tmp_path / "market")

    return loaded


def told(market):
    return [f"{issue.severity}: {issue}".replace("market/price_history.csv, ", "") for issue in market.issues]


def without(*left_out):
    """The history without the rows at these positions."""
    return [row for i, row in enumerate(ROWS) if i not in left_out]


def test_correlations_are_those_of_weighted_returns_about_zero(load):
    market = load(ROWS, half_life=20.0)
    assert market.issues == () and market.rejected == {}
    # The formula by itself: sum w x y / sqrt(sum w x^2 sum w y^2) with w = 2^(-age / 20).
    levels = np.array([row["level"] for row in ROWS]).reshape(-1, len(IDS))
    returns = np.diff(np.log(levels), axis=0)
    weights = 0.5 ** (np.arange(len(returns))[::-1] / 20.0)
    sums = (returns * weights[:, None]).T @ returns
    expected = sums / np.sqrt(np.outer(np.diag(sums), np.diag(sums)))
    assert market.correlation.ids == tuple(IDS)
    assert market.correlation.matrix == pytest.approx(expected, abs=1e-12)
    assert market.quotes.correlation.matrix is market.correlation
    assert (market.quotes.correlation.counts == len(returns)).all()


def test_a_blank_half_life_is_120_business_days(load):
    assert (load(ROWS).correlation.matrix == load(ROWS, half_life=120.0).correlation.matrix).all()


def test_the_order_of_the_rows_does_not_matter(load):
    one, other = load(ROWS), load(sorted(ROWS, key=lambda row: (row["underlying"], row["date"])))
    assert one.issues == other.issues == ()
    assert one.correlation.sub(IDS) == pytest.approx(other.correlation.sub(IDS), abs=1e-14)


def test_a_pair_may_stand_the_other_way_round(load):
    turned = [
        dict(row, underlying="USDEUR", level=1.0 / row["level"]) if row["underlying"] == "EURUSD" else row
        for row in ROWS
    ]
    one, other = load(ROWS), load(turned)
    assert other.issues == ()
    day = date(2027, 3, 31)
    assert other.log_covariance(["ORLUMA", "EURUSD"], day) == pytest.approx(
        one.log_covariance(["ORLUMA", "EURUSD"], day), abs=1e-14
    )


def test_without_the_table_there_is_no_matrix(load, tmp_path):
    tables = full_market()
    del tables["correlations"]
    tables["snapshot"][0]["correlation_source"] = "price history"
    write_tables(tables, tmp_path / "market.xlsx")
    market = load_market(tmp_path / "market.xlsx")
    assert market.correlation is None
    assert [str(issue) for issue in market.issues] == [
        "market.xlsx: found no table price_history; expected a table named price_history. Add it; "
        "the command template writes an empty one."
    ]


def test_a_table_of_correlations_beside_the_history_is_not_used(load):
    market = load(ROWS, correlations=full_market()["correlations"])
    assert market.issues == ()
    assert market.correlation.sub(["ORLUMA", "TESKIR"])[0, 1] != 0.55


def test_a_history_beside_the_matrix_is_told_unless_the_choice_is_stated(tmp_path):
    tables = full_market() | {"price_history": ROWS}
    said = []
    for source in (None, "table"):
        tables["snapshot"][0]["correlation_source"] = source
        write_tables(tables, tmp_path / f"{source}.xlsx")
        said.append([str(issue) for issue in load_market(tmp_path / f"{source}.xlsx").issues])
    assert said == [
        [
            "None.xlsx, sheet price_history: found a table price_history, and a blank correlation_source in the table "
            'snapshot; expected correlation_source "table" or "price history". Correlations come from the table '
            "correlations, not from the history; say so in correlation_source."
        ],
        [],
    ]


def test_an_empty_history_leaves_no_correlations_and_says_so_of_each_id(load):
    market = load([])
    assert market.correlation is None
    assert told(market)[0] == (
        'error: market/price_history.csv: found no level of "ORLUMA"; expected levels of every underlying, and of '
        "every pair that has a volatility. It has no correlations. Add its levels."
    )
    assert told(market)[-1] == (
        "error: row 1: found no id with enough levels; expected the levels of at least one underlying. Mend the "
        "problems listed, or add levels."
    )
    assert sorted(market.rejected) == ["correlations", *sorted(f"correlations:{name}" for name in IDS)]


def test_missing_and_stale_levels_are_left_out_and_counted_once_per_id(load):
    rows = without(11, 40, 45)
    stuck = [date(2026, 1, day) for day in range(5, 10)]
    stuck_level = next(r["level"] for r in rows if r["underlying"] == "VADRONE" and r["date"] == stuck[0])
    rows = [dict(r, level=stuck_level) if r["underlying"] == "VADRONE" and r["date"] in stuck else r for r in rows]
    market = load(rows)
    assert told(market) == [
        'warning: row 2, column "underlying" (cell B2): found 2 missing levels of ORLUMA; expected a level of its own '
        "for every day of the history. They are left out: 86 returns are used. Fill in the levels if they are known.",
        'warning: row 3, column "underlying" (cell B3): found 1 missing level of TESKIR; expected a level of its own '
        "for every day of the history. They are left out: 87 returns are used. Fill in the levels if they are known.",
        'warning: row 4, column "underlying" (cell B4): found 5 stale returns of VADRONE; expected a level of its own '
        "for every day of the history. They are left out: 84 returns are used. Fill in the levels if they are known.",
    ]
    assert market.correlation.ids == tuple(IDS)


def test_levels_are_missing_only_where_their_own_market_was_open(load):
    """The US market is closed on 19 January and 16 February 2026, TARGET is not: by their published calendars."""
    holidays = (date(2026, 1, 19), date(2026, 2, 16))
    rows = [row for row in ROWS if not (row["underlying"] == "EURUSD" and row["date"] in holidays)]
    market = load(rows)
    assert market.issues == ()
    counts = market.quotes.correlation.counts
    assert counts[4, 4] == counts[0, 0] - 4  # the returns into and out of each holiday
    assert market.quotes.correlation.missing.tolist() == [0] * 5


def test_a_level_ten_times_its_neighbours_costs_its_two_returns_and_is_told(load):
    rows = [dict(row) for row in ROWS]
    rows[200]["level"] = 842.0  # ORLUMA
    before, day = rows[195]["level"], rows[200]["date"]
    market = load(rows)
    assert told(market) == [
        f'warning: row 202, column "level" (cell C202): found 842 for ORLUMA on {day}, after {before!r} on '
        f"{rows[195]['date']} (and 1 more such move); expected moves below 25 %, or within 12 times what is usual for "
        "it. Left out: 87 returns are used. A split that is not adjusted for, or a slip of the decimal point? Correct "
        "the levels."
    ]
    assert [(jump.name, jump.day) for jump in market.quotes.correlation.jumps] == [
        ("ORLUMA", day), ("ORLUMA", rows[205]["date"])
    ]  # fmt: skip
    assert market.correlation.sub(IDS) == pytest.approx(load(ROWS).correlation.sub(IDS), abs=0.03)


def test_a_split_that_is_not_adjusted_for_costs_one_return(load):
    market = load([dict(row, level=row["level"] * (2.0 if i < 200 and row["underlying"] == "ORLUMA" else 1.0))
                   for i, row in enumerate(ROWS)])  # fmt: skip
    assert [issue.code for issue in market.issues] == ["history-jump"]
    assert market.quotes.correlation.counts[0].tolist() == [88] * 5


def test_the_last_levels_are_handed_on_unless_they_are_old(load):
    old = [row for row in ROWS if row["underlying"] != "TESKIR" or row["date"] < date(2026, 3, 24)]
    last = load(old).quotes.last_levels
    assert sorted(last) == sorted(set(IDS) - {"TESKIR"})
    assert last["ORLUMA"] == (date(2026, 3, 31), pytest.approx(84.2))
    assert sorted(load(ROWS).quotes.last_levels) == sorted(IDS)


def test_a_history_beside_a_matrix_gives_last_levels_and_its_faults_are_warnings(tmp_path):
    rows = [dict(row) for row in ROWS]
    rows[7]["level"] = "n/a"
    tables = full_market() | {"price_history": [*rows, dict(rows[0], underlying="ORLUNA")]}
    tables["snapshot"][0]["correlation_source"] = "table"
    write_tables(tables, tmp_path / "market")
    market = load_market(tmp_path / "market")
    assert [(issue.code, str(issue.severity), issue.cell) for issue in market.issues] == [
        ("not-a-number", "warning", "C9"), ("unknown-underlying", "warning", "B452")
    ]  # fmt: skip
    assert market.correlation.sub(["ORLUMA", "TESKIR"])[0, 1] == 0.55
    assert sorted(market.quotes.last_levels) == sorted(IDS) and market.quotes.correlation is None


def test_a_history_with_a_misspelt_column_beside_a_matrix_is_told_and_not_read(tmp_path):
    tables = full_market() | {"price_history": ROWS}
    tables["snapshot"][0]["correlation_source"] = "table"
    write_tables(tables, tmp_path / "market")
    history = tmp_path / "market" / "price_history.csv"
    history.write_text(history.read_text(encoding="utf-8").replace("level", "levl", 1), encoding="utf-8")
    market = load_market(tmp_path / "market")
    assert [(issue.code, str(issue.severity)) for issue in market.issues] == [("misspelt-column", "warning")]
    assert market.quotes.last_levels == {}


def test_an_id_with_a_short_history_has_no_correlations_and_the_others_keep_theirs(load):
    market = load([row for i, row in enumerate(ROWS) if row["underlying"] != "TESKIR" or i > 200])
    assert told(market) == [
        'error: row 163, column "underlying" (cell B163): found 49 usable returns of TESKIR that it shares with '
        "ORLUMA; expected at least 60. It has no correlations. Add levels, or take the correlations from a table of "
        "them."
    ]
    assert market.correlation.ids == ("ORLUMA", "VADRONE", "WEXMOOR", "EURUSD")
    assert list(market.rejected) == ["correlations:TESKIR"]


def test_a_history_of_30_days_gives_no_correlations_at_all(load):
    market = load(price_history(IDS, 30))
    assert market.correlation is None
    assert [issue.code for issue in market.issues] == ["short-history"] * 5 + ["no-correlations"]


def test_levels_that_cannot_be_read_are_told_at_their_cells_and_count_as_missing(load):
    rows = [dict(row) for row in ROWS]
    rows[7]["level"], rows[12]["level"], rows[13]["date"] = "n/a", -3.0, "31/03/2026"
    market = load(rows)
    assert told(market) == [
        'error: row 9, column "level" (cell C9): found "n/a"; expected a number above 0. Enter the closing level, '
        "adjusted for dividends and splits, always in one unit, e.g. 84.20.",
        'error: row 14, column "level" (cell C14): found "-3"; expected a number above 0. Enter the closing level, '
        "adjusted for dividends and splits, always in one unit, e.g. 84.20.",
        'error: row 15, column "date" (cell A15): found "31/03/2026"; expected a date such as 2026-09-18. Write '
        "2026-03-31.",
        'warning: row 4, column "underlying" (cell B4): found 2 missing levels of VADRONE; expected a level of its own '
        "for every day of the history. They are left out: 86 returns are used. Fill in the levels if they are known.",
        'warning: row 5, column "underlying" (cell B5): found 1 missing level of WEXMOOR; expected a level of its own '
        "for every day of the history. They are left out: 87 returns are used. Fill in the levels if they are known.",
    ]
    assert market.rejected == {}


def test_of_two_levels_on_one_day_none_is_used_unless_they_are_equal(load):
    market = load([*ROWS, dict(ROWS[4]), dict(ROWS[3], level=5.0)])
    level = ROWS[3]["level"]
    assert told(market) == [
        f'error: row 453, column "level" (cell C453): found 5 for WEXMOOR on 2025-11-26, but {level!r} in row 5; '
        "expected one level per day. Both are left out. Delete the wrong one.",
        'warning: row 5, column "underlying" (cell B5): found 1 missing level of WEXMOOR; expected a level of its own '
        "for every day of the history. They are left out: 88 returns are used. Fill in the levels if they are known.",
    ]


def test_levels_after_the_valuation_date_are_ignored_with_one_warning(load):
    later = [dict(row, date=date(2026, 4, 1)) for row in ROWS[-5:]]
    market = load([*ROWS, *later])
    assert told(market) == [
        'warning: row 452, column "date" (cell A452): found the date 2026-04-01 (and 4 more rows); expected a date up '
        "to the valuation date 2026-03-31. Ignored. Delete the rows, or correct the valuation date."
    ]
    assert (market.correlation.matrix == load(ROWS).correlation.matrix).all()


@pytest.mark.parametrize(("last", "count"), [(date(2026, 3, 24), 0), (date(2026, 3, 23), 1)])
def test_a_history_that_ends_more_than_five_business_days_ago_is_told(load, last, count):
    market = load(price_history(IDS, last=last))
    assert told(market) == [
        'warning: row 451, column "date" (cell A451): found a history that ends on 2026-03-23; expected levels up to 5 '
        "business days before the valuation date 2026-03-31. Correlations are estimated from it all the same. Add the "
        "latest levels."
    ] * count  # fmt: skip


def test_levels_on_days_off_are_left_out_with_one_warning(load):
    market = load([*ROWS, *(dict(row, date=date(2026, 3, 28)) for row in ROWS[-5:])])
    assert told(market) == [
        'warning: row 452, column "date" (cell A452): found levels on 1 day off, the first 2026-03-28; expected levels '
        "of business days. They are left out."
    ]


def test_ids_that_the_market_does_not_have_are_told_once_each(load):
    rows = [*ROWS, *(dict(row, underlying="ZZZ") for row in ROWS[:9]), dict(ROWS[-4], underlying="TESKIRR")]
    assert told(load(rows)) == [
        'error: row 452, column "underlying" (cell B452): found "ZZZ" (and 8 more rows); expected an underlying or a '
        "currency pair of the market. Not used. Add it to the market, or delete these rows.",
        'error: row 461, column "underlying" (cell B461): found "TESKIRR"; expected an underlying or a currency pair '
        'of the market. Did you mean "TESKIR"? Correct the id: these levels are missing.',
    ]


def test_an_underlying_without_a_history_is_missing_from_the_matrix_and_explained(load):
    market = load([row for row in ROWS if row["underlying"] != "WEXMOOR"])
    assert market.correlation.ids == ("ORLUMA", "TESKIR", "VADRONE", "EURUSD")
    assert [issue.code for issue in market.rejected["correlations:WEXMOOR"]] == ["no-history"]


def test_of_a_pair_that_stands_both_ways_the_first_is_used(load):
    turned = [dict(row, underlying="USDEUR", level=1.0 / row["level"]) for row in ROWS if row["underlying"] == "EURUSD"]
    market = load([*ROWS, *turned])
    assert told(market) == [
        'error: row 452, column "underlying" (cell B452): found the pair USDEUR, and its inverse in row 6; expected '
        "each pair of currencies in one direction. Delete one of the two rows."
    ]
    assert market.correlation.ids == tuple(IDS)


def contradictory():
    """Three ids of which each pair shares a third of the days, and moves there in ways that cannot hold together."""
    names, levels, rows = ("ORLUMA", "TESKIR", "VADRONE"), [100.0, 100.0, 100.0], []
    signs = ((1.0, 1.0, None), (1.0, None, 1.0), (None, 1.0, -1.0))
    steps = price_history(("ORLUMA",), 240)
    for i in range(1, 240):
        move = steps[i]["level"] / steps[i - 1]["level"]
        for j, sign in enumerate(signs[i // 80]):
            if sign is not None:
                levels[j] *= move**sign
                rows.append({"date": steps[i]["date"], "underlying": names[j], "level": levels[j]})
    return rows


def test_a_history_that_contradicts_itself_too_much_gives_no_matrix(load):
    market = load(contradictory(), fx_volatilities=[])
    assert market.correlation is None
    (issue,) = [issue for issue in market.issues if issue.code == "inconsistent-correlations"]
    # Which of the three pairs is moved most is a tie.
    assert issue.found.startswith("the correlations contradict each other (smallest eigenvalue -1.0000)")
    assert issue.found.endswith("from 1.0000 to 0.5000, more than the limit of 0.1")
    assert (issue.place(), issue.expected, issue.mend) == (
        f'market/price_history.csv, row {issue.row}, column "underlying" (cell B{issue.row})',
        "correlations that can hold together (no negative eigenvalue)",
        "Fill in missing levels of this pair, so that all correlations come from the same days.",
    )
    assert [issue.code for issue in market.rejected["correlations"]] == ["inconsistent-correlations"]


def test_a_half_life_of_nothing_is_refused_with_its_cell(load):
    with pytest.raises(InputError) as caught:
        load(ROWS, half_life=0.0)
    assert str(caught.value) == (
        'market/snapshot.csv, row 2, column "correlation_half_life_days" (cell D2): found "0"; expected a number above '
        "0. Enter the age at which a past return counts half, in business days, for correlations from the price "
        "history, e.g. 120, or clear the cell for 120."
    )


def test_a_history_of_weekends_only_is_no_history(load):
    saturdays = [dict(row, date=date(2026, 3, 28)) for row in ROWS[-5:]]
    market = load(saturdays)
    assert market.correlation is None
    assert [issue.code for issue in market.issues] == ["short-history"] * 5 + ["no-correlations"]
