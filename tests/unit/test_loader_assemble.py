"""From rows to a book: what each trade becomes, whose a stray row is, and where everything stands."""

from __future__ import annotations

from copy import deepcopy
from datetime import date

import openpyxl
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Model, Premium
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.core.issues import Severity
from pricer.core.source import Place
from pricer.loader import load_book, load_market, write_tables
from pricer.loader.examples import EXAMPLE_BOOK, EXAMPLE_MARKET
from pricer.run.admission import admit


@pytest.fixture
def tables():
    return deepcopy(dict(EXAMPLE_BOOK))


@pytest.fixture
def load(tmp_path):
    def loaded(tables, ending=".xlsx"):
        path = tmp_path / f"book{ending}"
        write_tables(tables, path)
        return load_book(path)

    return loaded


def leg(trade_id, underlying, weight=None, fixing=None):
    return {"trade_id": trade_id, "underlying": underlying, "weight": weight, "initial_fixing": fixing}


def codes(issues):
    return [issue.code for issue in issues]


def test_the_examples_become_the_trades_they_describe(load, tables):
    book = load(tables)
    assert book.issues == () and book.refusals == ()
    basket, worst, exchange, ranked, second, best = book
    assert basket.position == -5_000_000.0
    assert basket.contract.underlyings == ("ORLUMA", "TESKIR", "VADRONE")
    assert basket.contract.reference_levels == (82.4, 205.0, 36.9)
    assert basket.contract.aggregate == Aggregate.weighted_sum((0.5, 0.3, 0.2))
    assert basket.contract.profile == Profile(ProfileKind.CALL, strike=1.0, cap=0.3)
    assert basket.premium == Premium(410_000.0, date(2026, 3, 4))
    assert (basket.counterparty, basket.netting_set, basket.strategy) == ("Guldmar Bank", "GUL-1", "basket hedges")
    assert worst.contract.aggregate == Aggregate.worst_of(2)
    assert worst.collateral == "USD"
    assert exchange.contract.profile == Profile(ProfileKind.EXCHANGE)
    assert exchange.contract.reference_levels == (1.0, 1.0)
    assert not exchange.contract.on_performance
    assert ranked.contract.aggregate == Aggregate.rank_weighted((0.6, 0.3, 0.1))
    assert ranked.contract.profile.cash_amount == 0.08
    assert second.contract.aggregate == Aggregate.kth_best(2, 2)
    assert best.contract.aggregate == Aggregate.best_of(2, cash=1.0)
    assert [trade.model for trade in book] == [None, Model.LOCAL_VOLATILITY, None, None, None, None]
    assert [trade.contract.conversion for trade in book] == [None] * 5 + [Conversion.QUANTO]


def test_the_examples_can_be_priced_on_the_example_market(load, tables, tmp_path):
    write_tables(EXAMPLE_MARKET, tmp_path / "market.xlsx")
    admitted = admit(load(tables), load_market(tmp_path / "market.xlsx"))
    assert len(admitted) == 6
    assert admitted.issues == ()


@pytest.mark.parametrize(
    ("word", "conversion"), [("Composite", Conversion.COMPOSITE), ("QUANTO", Conversion.QUANTO), (None, None)]
)
def test_a_conversion_is_carried_by_the_contract(load, tables, word, conversion):
    tables["trades"][0]["conversion"] = word
    book = load(tables)
    assert book.issues == ()
    assert book.trades[0].contract.conversion is conversion


@pytest.mark.parametrize(
    ("word", "model"), [("lognormal", Model.LOGNORMAL), ("Local-Volatility", Model.LOCAL_VOLATILITY), ("", None)]
)
def test_a_model_is_carried_by_the_trade(load, tables, word, model):
    tables["trades"][0]["model"] = word
    book = load(tables)
    assert book.issues == ()
    assert book.trades[0].model is model


def test_books_without_the_optional_columns_load_as_before(tables, tmp_path):
    path = tmp_path / "old.xlsx"
    write_tables(tables, path)
    workbook = openpyxl.load_workbook(path)
    header = [cell.value for cell in workbook["trades"][1]]
    for name in ("model", "conversion"):
        workbook["trades"].delete_cols(header.index(name) + 1)
    workbook.save(path)
    book = load_book(path)
    assert book.issues == () and len(book) == 6
    assert {trade.model for trade in book} == {trade.contract.conversion for trade in book} == {None}


@pytest.mark.parametrize(
    ("column", "cell", "value", "message"),
    [
        (
            "conversion",
            "T2",
            "quantoo",
            'found "quantoo"; expected one of: quanto, composite. Did you mean "quanto"?',
        ),
        (
            "conversion",
            "T2",
            "converted",
            'found "converted"; expected one of: quanto, composite. Enter how prices quoted in other currencies are '
            "paid, quanto: one unit of theirs counts as one of the trade's; composite: converted at the expiry's "
            "exchange rate, with strike and initial fixings in the trade's currency, e.g. quanto, or clear the cell if "
            "all underlyings are quoted in the trade's currency.",
        ),
        (
            "model",
            "AB2",
            "stochastic",
            'found "stochastic"; expected one of: lognormal, local volatility. Enter the model of the underlyings, '
            "e.g. local volatility, or clear the cell for the run's choice.",
        ),
        (
            "model",
            "AB2",
            2.0,
            'found "2"; expected one of: lognormal, local volatility. Enter the model of the underlyings, e.g. local '
            "volatility, or clear the cell for the run's choice.",
        ),
    ],
)
def test_an_unknown_conversion_or_model_costs_its_trade_and_is_told_in_full(load, tables, column, cell, value, message):
    tables["trades"][0][column] = value
    (refusal,) = load(tables).refusals
    assert refusal.trade_id == "EX-1"
    assert [str(issue) for issue in refusal.issues] == [
        f'book.xlsx, sheet trades, row 2, column "{column}" (cell {cell}): {message}'
    ]


def test_a_missing_fixing_is_told_in_full(load, tables):
    tables["constituents"][0]["initial_fixing"] = None
    (refusal,) = load(tables).refusals
    assert [str(issue) for issue in refusal.issues] == [
        'book.xlsx, sheet constituents, row 2, column "initial_fixing" (cell D2): found a blank cell; expected a '
        "number above 0, as the trade is a performance option. Enter the price that performance is measured from, for "
        "performance options, in the underlying's currency (for a composite in the trade's: price times exchange rate "
        "on the fixing day), e.g. 84.20."
    ]


def test_payment_follows_expiry_by_business_days_of_the_settlement_calendar(load, tables):
    # Outside check: 18 December 2026 is a Friday, 25 and 26 December are TARGET closing days; from the ECB's
    # published TARGET calendar (closing days: 1 January, Good Friday, Easter Monday, 1 May, 25 and 26 December).
    tables["trades"][2]["settlement_lag_days"] = 5
    book = load(tables)
    assert book.trades[2].contract.payment_date == date(2026, 12, 28)
    assert book.trades[0].contract.payment_date == date(2027, 6, 22)


def test_the_same_tables_as_csv_files_give_the_same_trades(load, tables):
    assert load(tables, "").trades == load(tables).trades


def test_every_cell_of_a_trade_can_be_found_again(load, tables):
    places = load(tables).places
    assert places["EX-2", "strike"] == Place("book.xlsx", "trades", 3, "strike", "K3")
    assert places["EX-1", "underlying:TESKIR"] == Place("book.xlsx", "constituents", 3, "underlying", "B3")
    assert places["EX-1", "initial_fixing:VADRONE"].cell == "D4"
    assert places["EX-1", "payment_date"] == places["EX-1", "settlement_lag_days"]
    assert places.get(("EX-1", "underlying:ALIEN")) is None
    assert places.get(("EX-9", "strike")) is None
    assert len(places) == len(list(places)) == len(set(places)) == 6 * 29 + 14 * 3
    assert all(places[key] == place for key, place in places.items())


def test_places_in_csv_files_name_the_file(load, tables):
    assert load(tables, "").places["EX-2", "strike"] == Place("book/trades.csv", "trades", 3, "strike", "K3")


def test_each_file_that_was_read_is_named_with_its_digest(load, tables, tmp_path):
    import hashlib

    (source,) = load(tables).sources
    assert source.sha256 == hashlib.sha256((tmp_path / "book.xlsx").read_bytes()).hexdigest()
    assert sorted(source.name for source in load(tables, "").sources) == ["book/constituents.csv", "book/trades.csv"]


def test_a_bad_trade_is_refused_with_what_could_be_read_and_the_others_load(load, tables):
    tables["trades"][0]["strike"] = "high"
    book = load(tables)
    assert [trade.trade_id for trade in book] == ["EX-2", "EX-3", "EX-4", "EX-5", "EX-6"]
    (refusal,) = book.refusals
    assert (refusal.trade_id, refusal.product, refusal.currency) == ("EX-1", "european option", "EUR")
    assert (refusal.counterparty, refusal.strategy) == ("Guldmar Bank", "basket hedges")
    assert {issue.trade_id for issue in refusal.issues} == {"EX-1"}
    assert set(refusal.issues) <= set(book.issues)


def test_a_trade_without_an_id_is_listed_by_its_row(load, tables):
    tables["trades"][1]["trade_id"] = None
    book = load(tables)
    assert [refusal.trade_id for refusal in book.refusals] == ["row 3", "EX-2"]
    assert len(book) == 5


def test_a_repeated_id_refuses_all_its_rows(load, tables):
    tables["trades"][1]["trade_id"] = "EX-1"
    book = load(tables)
    assert [refusal.trade_id for refusal in book.refusals if "duplicate-trade" in codes(refusal.issues)] == [
        "EX-1",
        "EX-1",
    ]


def test_a_trade_without_constituents_is_refused(load, tables):
    tables["constituents"] = [row for row in tables["constituents"] if row["trade_id"] != "EX-3"]
    (refusal,) = load(tables).refusals
    assert codes(refusal.issues) == ["no-constituents"]


def test_constituents_of_an_unknown_trade_are_refused_in_its_name(load, tables):
    tables["constituents"].append(leg("OTHER", "ORLUMA", 1.0))
    book = load(tables)
    assert len(book) == 6
    assert [(refusal.trade_id, codes(refusal.issues)) for refusal in book.refusals] == [("OTHER", ["unknown-trade"])]


def test_a_misspelt_constituent_costs_the_trade_that_lost_it(load, tables):
    tables["constituents"][1]["trade_id"] = "EXX-1"
    book = load(tables)
    (refusal,) = book.refusals
    assert refusal.trade_id == "EX-1"
    assert str(refusal.issues[0]) == (
        'book.xlsx, sheet constituents, row 3, column "trade_id" (cell A3): found "EXX-1"; expected the trade_id '
        "of a row "
        'in the table trades. Did you mean "EX-1"? Correct the id.'
    )


def test_a_constituent_without_an_id_costs_both_trades_it_may_belong_to(load, tables):
    tables["constituents"][3]["trade_id"] = None
    assert [refusal.trade_id for refusal in load(tables).refusals] == ["EX-1", "EX-2"]


def test_an_unknown_id_amid_the_rows_of_one_trade_costs_that_trade(load, tables):
    tables["constituents"][1]["trade_id"] = "EX-9"
    assert [refusal.trade_id for refusal in load(tables).refusals] == ["EX-1"]


def test_a_trade_next_door_with_another_number_is_not_suspected(load, tables):
    tables["trades"].pop(1)
    book = load(tables)
    assert [refusal.trade_id for refusal in book.refusals] == ["EX-2"]
    assert len(book) == 5


@pytest.mark.parametrize(
    ("row", "changes", "column", "code"),
    [
        (0, {"weight": None}, "weight", "blank-cell"),
        (0, {"initial_fixing": None}, "initial_fixing", "blank-cell"),
        (3, {"weight": 0.5}, "weight", "unwanted-value"),
        (5, {"initial_fixing": 84.0}, "initial_fixing", "unwanted-value"),
        (1, {"underlying": "ORLUMA"}, "underlying", "duplicate-underlying"),
        (6, {"weight": 2.5}, "profile", "terms-do-not-fit"),
    ],
)
def test_constituents_must_fit_their_trade(load, tables, row, changes, column, code):
    tables["constituents"][row].update(changes)
    (refusal,) = load(tables).refusals
    assert (column, code) in {(issue.column, issue.code) for issue in refusal.issues}


@pytest.mark.parametrize(
    ("row", "changes", "column", "code"),
    [
        (4, {"rank": 3}, "rank", "terms-do-not-fit"),
        (3, {"rank_weights": "0.6; 0.4"}, "rank_weights", "terms-do-not-fit"),
        (0, {"strike": 100.0}, "strike", "not-a-decimal"),
        (0, {"strike": 4.1}, "strike", "not-a-decimal"),
        (0, {"cap": 30.0}, "cap", "not-a-decimal"),
        (3, {"cash_amount": 8.0}, "cash_amount", "not-a-decimal"),
        (4, {"floor": 2.0}, "floor", "not-a-decimal"),
        (0, {"strike": -1.0}, "strike", "out-of-range"),
        (5, {"cash_level": 100.0}, "cash_level", "not-a-decimal"),
    ],
)
def test_terms_must_fit_the_constituents(load, tables, row, changes, column, code):
    tables["trades"][row].update(changes)
    (refusal,) = load(tables).refusals
    assert [(issue.column, issue.code) for issue in refusal.issues] == [(column, code)]


def test_a_geometric_aggregate_takes_positive_weights_only(load, tables):
    tables["trades"][0]["aggregate"] = "geometric"
    tables["constituents"][1]["weight"] = -0.3
    (refusal,) = load(tables).refusals
    assert refusal.issues[0].expected == "a number above 0, as the trade's aggregate is geometric"


def test_a_spread_may_have_a_negative_strike(load, tables):
    tables["trades"][2].update(profile="call", strike=-4.0)
    assert load(tables).trades[2].contract.profile.strike == -4.0


def test_performance_weights_that_miss_one_are_used_with_a_warning(load, tables):
    tables["constituents"][0]["weight"] = 50.0
    book = load(tables)
    assert len(book) == 6
    assert [(issue.code, issue.severity, issue.trade_id) for issue in book.issues] == [
        ("weights-off-one", Severity.WARNING, "EX-1")
    ]


def test_the_strike_of_a_performance_option_grows_with_its_weights(load, tables):
    tables["trades"][0]["strike"] = 4.1
    for row in tables["constituents"][:3]:
        row["weight"] *= 2.0
    assert load(tables).trades[0].contract.profile.strike == 4.1


@pytest.mark.parametrize(("weights", "total"), [("60; 30; 10", "100"), ("0.6; 0.3; 0", "0.9")])
def test_rank_weights_of_a_performance_that_miss_one_are_used_with_a_warning(load, tables, weights, total):
    tables["trades"][3]["rank_weights"] = weights
    book = load(tables)
    assert [(str(issue), issue.severity, issue.trade_id) for issue in book.issues] == [
        (
            'book.xlsx, sheet trades, row 5, column "rank_weights" (cell I5): found weights that add up to '
            f"{total}; expected performance weights that add up to 1. Used as given. Check the weights: 25 % is "
            "entered as 0.25.",
            Severity.WARNING,
            "EX-4",
        )
    ]
    assert len(book) == 6


def test_rank_weights_of_both_signs_need_not_add_up_to_one(load, tables):
    tables["trades"][3]["rank_weights"] = "1; 0; -1"
    assert load(tables).issues == ()


@pytest.mark.parametrize("level", ["price", "performance"])
def test_geometric_weights_that_miss_one_are_used_with_a_warning(load, tables, level):
    tables["trades"][0]["aggregate"] = "geometric"
    tables["constituents"][0]["weight"] = 1.5
    if level == "price":
        tables["trades"][0].update(underlying_level="price", notional=None, quantity=10.0)
        for row in tables["constituents"][:3]:
            row["initial_fixing"] = None
    (issue,) = load(tables).issues
    assert (issue.code, issue.severity, issue.found) == (
        "weights-off-one",
        Severity.WARNING,
        "weights that add up to 2",
    )


def test_weights_of_prices_are_numbers_of_shares(load, tables):
    tables["trades"][2].update(profile="call", strike=500.0)
    tables["constituents"][6]["weight"] = 2.5
    assert load(tables).issues == ()


def test_one_weight_is_counted_in_the_singular(load, tables):
    tables["trades"][3]["rank_weights"] = "1"
    (refusal,) = load(tables).refusals
    assert (refusal.issues[0].found, refusal.issues[0].expected) == ("1 weight", "3, one per underlying")


def test_a_repeated_id_breeds_no_false_errors_and_the_cells_at_fault_are_told_once(load, tables):
    # Together the two trades would have five constituents, and ORLUMA and TESKIR twice.
    tables["trades"][1].update(trade_id="EX-1", strike="low")
    for row in tables["constituents"][3:5]:
        row["trade_id"] = "EX-1"
    tables["constituents"][0]["initial_fixing"] = -1.0
    book = load(tables)
    assert [(refusal.trade_id, codes(refusal.issues)) for refusal in book.refusals] == [
        ("EX-1", ["out-of-range", "duplicate-trade"]),
        ("EX-1", ["not-a-number", "duplicate-trade"]),
    ]
    assert len(book.issues) == 4


@pytest.mark.parametrize("ending", [".xlsx", ""])
def test_a_book_called_book_is_named_after_the_folder_it_lies_in(tables, tmp_path, ending, monkeypatch):
    path = tmp_path / "saltmarsh_desk" / f"Book{ending}"
    path.parent.mkdir()
    write_tables(tables, path)
    assert load_book(path).name == "saltmarsh_desk"
    monkeypatch.chdir(path.parent)
    assert load_book(path.name).name == "saltmarsh_desk"
    other = path.rename(path.with_name(f"night{ending}"))
    assert load_book(other).name == "night"


def test_text_that_looks_like_a_formula_stays_text(load, tables):
    for text in ("=1+1", "+cmd", "-x", "@SUM(A1)"):
        tables["trades"][0]["counterparty"] = text
        for ending in ("", ".xlsx"):
            assert load(tables, ending).trades[0].counterparty == text


def test_numeric_ids_are_the_same_in_both_tables_however_they_are_stored(load, tables):
    for row in (*tables["trades"], *tables["constituents"]):
        if row["trade_id"] == "EX-2":
            row["trade_id"] = 1002
    tables["constituents"][4]["trade_id"] = "1002"
    book = load(tables)
    assert book.trades[1].trade_id == "1002"
    assert len(book.trades[1].contract.underlyings) == 2
