"""From the tables of features to contracts: what each example becomes, and where every fault is told."""

from __future__ import annotations

from copy import deepcopy
from datetime import date

import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import AverageOf
from pricer.contracts.barrier import NOTHING, BarrierKind
from pricer.contracts.exercise import ExercisedBy, ExerciseStyle
from pricer.contracts.observation import Observation
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.core.issues import InputError, Severity
from pricer.loader import load_book, load_market, write_tables
from pricer.loader.contract_examples import EXAMPLE_CONTRACTS
from pricer.loader.examples import EXAMPLE_BOOK, EXAMPLE_MARKET
from pricer.run.admission import admit


@pytest.fixture
def tables():
    return {name: [dict(row) for row in rows] for name, rows in EXAMPLE_CONTRACTS.items()}


@pytest.fixture
def load(tmp_path):
    def loaded(tables, ending=".xlsx"):
        write_tables(tables, tmp_path / f"book{ending}")
        return load_book(tmp_path / f"book{ending}")

    return loaded


@pytest.fixture
def examples(load, tables):
    book = load(tables)
    assert book.issues == () and book.refusals == ()
    return {trade.trade_id: trade.contract for trade in book}


def row_of(tables, table, trade_id, **wanted):
    return next(
        row for row in tables[table] if row["trade_id"] == trade_id and all(row.get(k) == v for k, v in wanted.items())
    )


def refused(book, trade_id):
    (refusal,) = book.refusals
    assert refusal.trade_id == trade_id
    assert {issue.trade_id for issue in refusal.issues} == {trade_id}
    return refusal.issues


def test_every_example_can_be_priced_on_the_example_market(load, tables, tmp_path):
    write_tables(EXAMPLE_MARKET, tmp_path / "market.xlsx")
    admitted = admit(load(tables), load_market(tmp_path / "market.xlsx"))
    assert len(admitted) == len(tables["trades"])
    assert [str(issue) for issue in admitted.issues] == []


def test_every_example_is_named_after_its_parts(examples):
    assert [contract.product for contract in examples.values()] == [
        "basket knock-out call",
        "basket knock-in put",
        "worst of average call",
        "basket forward-start cliquet call",
        "worst of memory coupon autocallable knock-in note",
        "worst of range accrual issuer-callable note",
        "worst of american put",
        "vulnerable best of call",
        "vulnerable best of call",
        "basket dispersion forward",
        "multi-asset correlation forward",
    ]


def test_a_daily_barrier_needs_no_schedule_and_pays_its_rebate_at_the_hit(examples):
    (barrier,) = examples["EX-7"].features
    assert barrier.kind is BarrierKind.OUT and barrier.rebate_at_hit == 0.02 and barrier.instead == NOTHING
    assert barrier.trigger == Trigger(Direction.UP, Aggregate.weighted_sum((0.5, 0.5)))
    days = [observation.day for observation in barrier.schedule]
    # Outside check: TARGET closes on Good Friday, 3 April 2026, and Easter Monday, 6 April (ECB's published calendar).
    assert days[:4] == [date(2026, 4, 1), date(2026, 4, 2), date(2026, 4, 7), date(2026, 4, 8)]
    assert days[-1] == date(2027, 6, 18) and len(days) == len(barrier.levels) == len(set(days))
    assert set(barrier.levels) == {1.4} and not barrier.continuous
    assert barrier.schedule[0].payment_date == date(2026, 4, 7)


def test_a_barrier_by_underlying_scales_levels_and_keeps_the_desks_record(examples):
    (barrier,) = examples["EX-8"].features
    assert barrier.trigger == Trigger.any_underlying(Direction.DOWN, 2, (80.0, 190.0))
    assert set(barrier.levels) == {1.0} and barrier.continuous
    assert barrier.instead == Redemption(capital=0.5) and barrier.rebate_at_hit is None
    assert barrier.recorded_hit == Observation(date(2026, 3, 18), date(2026, 3, 20))
    assert barrier.clear_until == date(2026, 3, 17)


def test_an_average_observes_the_ends_of_its_periods(examples):
    statistic = examples["EX-9"].statistic
    assert statistic.of is AverageOf.AGGREGATE
    assert len(statistic.dates) == 12
    # Month-ends by the roll preceding: 31 May 2026 is a Sunday, 28 February 2027 too.
    assert statistic.dates[0] == date(2026, 4, 30) and statistic.dates[1] == date(2026, 5, 29)
    assert date(2027, 2, 26) in statistic.dates and statistic.dates[-1] == date(2027, 3, 31)


def test_a_cliquet_starts_on_its_first_date_and_its_references_are_set_by_the_market(examples):
    contract = examples["EX-10"]
    assert contract.levels.references is None and contract.levels.setting_dates == (date(2026, 4, 15),)
    assert contract.statistic.dates[0] == date(2026, 4, 15) and len(contract.statistic.dates) == 5
    assert contract.statistic.local == Profile(ProfileKind.FORWARD, 1.0, floor=-0.02, cap=0.03)


def test_an_autocallable_is_its_coupons_its_calls_and_its_barrier_in_this_order(examples):
    contract = examples["EX-11"]
    coupons, call, barrier = contract.features
    assert contract.payout == Redemption(1.0, put_strike=0.8, leverage=1.25)
    assert coupons.memory and [coupon.level for coupon in coupons.coupons] == [0.7, 0.68, 0.66, 0.64]
    assert [coupon.amount for coupon in coupons.coupons] == [0.02, 0.021, 0.022, 0.023]
    assert call == Autocall(
        (Observation(date(2027, 3, 31), date(2027, 4, 6)), Observation(date(2027, 9, 30), date(2027, 10, 5))),
        Trigger.every_underlying(Direction.UP, 2),
        (1.0, 0.95),
        (1.0, 1.0),
    )
    assert [observation.day for observation in barrier.schedule] == [date(2027, 12, 17)]
    assert barrier.instead == Redemption(1.0) and not barrier.trigger.at_level_counts


def test_accrual_dates_belong_to_the_next_coupon(examples):
    coupons, right = examples["EX-12"].features
    first, second = coupons.coupons
    assert first.accrual_dates[0] == date(2026, 4, 1) and first.accrual_dates[-1] == date(2026, 9, 30)
    assert second.accrual_dates[0] == date(2026, 10, 1) and second.accrual_dates[-1] == date(2027, 3, 31)
    assert (first.level, first.ceiling, first.amount) == (0.8, 1.2, 0.04)
    assert right.by is ExercisedBy.ISSUER and right.amounts == (1.0,)
    assert right.exercised == Observation(date(2026, 3, 31), date(2026, 4, 2))
    assert examples["EX-12"].payout == Redemption(1.0, 1.0, 1.0, 1.0, 0.8, floor=0.95)


def test_an_american_right_lasts_from_its_start_to_the_expiry(examples):
    (right,) = examples["EX-13"].features
    assert right.style is ExerciseStyle.AMERICAN and right.payout == examples["EX-13"].payout
    assert [observation.day for observation in right.rights] == [date(2026, 3, 31), date(2027, 3, 19)]


def test_writers_default_by_hazard_rates_or_by_their_assets(examples):
    assert examples["EX-14"].writer == Writer("Guldmar Bank", 0.35)
    assert examples["EX-15"].writer == Writer("Guldmar Vehicle", None, StructuralDefault("VADRONE", 30.0, 0.25))


def test_a_dispersion_weighs_the_components_against_their_basket(examples):
    assert examples["EX-16"].statistic.weights == (0.5, 0.5, -1.0)
    assert examples["EX-17"].statistic.weights == (0.5, 0.5) and not examples["EX-17"].statistic.demeaned


@pytest.mark.parametrize("ending", ["", ".xlsx"])
def test_tables_that_a_book_lacks_are_empty_ones(load, ending):
    assert len(load({**EXAMPLE_BOOK, "barriers": [], "schedules": []}, ending)) == 6


def test_an_option_without_anything_of_a_path_is_a_european_option(load):
    tables = deepcopy(dict(EXAMPLE_BOOK))
    plain = load(tables).trades
    for row in tables["trades"]:
        row["product"] = "option"
    assert load(tables).trades == plain
    assert all(isinstance(trade.contract, EuropeanOption) for trade in plain)


def test_the_same_tables_as_csv_files_give_the_same_contracts(load, tables):
    assert load(tables, "").trades == load(tables).trades


def test_a_knock_out_without_a_rebate_ends_an_option_but_only_the_put_of_a_note(load, tables):
    for trade_id in ("EX-7", "EX-11"):
        row_of(tables, "barriers", trade_id).update(kind="knock-out", rebate=None, rebate_paid=None)
    contracts = {trade.trade_id: trade.contract for trade in load(tables)}
    assert contracts["EX-7"].features[-1].rebate_at_hit == 0.0
    assert contracts["EX-11"].features[-1].rebate_at_hit is None
    assert contracts["EX-11"].features[-1].instead == Redemption(1.0)


def test_a_call_of_a_note_redeems_its_capital_where_no_amount_is_given(load, tables):
    for row in tables["schedules"]:
        if row["purpose"] == "call":
            row["amount"] = None
    row_of(tables, "trades", "EX-11")["capital"] = 1.02
    contract = next(trade.contract for trade in load(tables) if trade.trade_id == "EX-11")
    assert contract.features[1].amounts == (1.02, 1.02)


def test_the_rows_of_a_schedule_may_come_in_any_order(load, tables):
    expected = load(tables).trades
    tables["schedules"].reverse()
    assert load(tables).trades == expected


def test_given_fixings_with_reference_dates_are_known_and_their_dates_history(load, tables):
    for row in tables["constituents"]:
        if row["trade_id"] == "EX-10":
            row["initial_fixing"] = 100.0
    levels = next(trade.contract for trade in load(tables) if trade.trade_id == "EX-10").levels
    assert levels.references == (100.0, 100.0) and levels.setting_dates == ()
    assert levels.reference_dates == (date(2026, 4, 15),)


FAULTS = {
    "a barrier in percentage points": (
        "barriers", "EX-7", {}, {"level": 140.0}, "level", "not-a-decimal", "Did you mean 1.4 (140 %)?"),
    "a call level in percentage points": (
        "schedules", "EX-11", {"purpose": "call"}, {"level": 100.0}, "level", "not-a-decimal",
        "Did you mean 1 (100 %)?"),
    "a coupon in percentage points": (
        "schedule_rules", "EX-11", {}, {"amount": 2.0, "amount_step": None}, "amount", "not-a-decimal",
        "Did you mean 0.02 (2 %)?"),
    "a put strike in percentage points": (
        "trades", "EX-11", {}, {"put_strike": 80.0}, "put_strike", "not-a-decimal", "Did you mean 0.8 (80 %)?"),
    "a variance strike in percentage points": (
        "trades", "EX-16", {}, {"strike": 4.0}, "strike", "not-a-decimal", "Did you mean 0.04 (4 %)?"),
    "a local cap in percentage points": (
        "trades", "EX-10", {}, {"local_cap": 3.0}, "local_cap", "not-a-decimal", "Did you mean 0.03 (3 %)?"),
    "a rebate in percentage points": (
        "barriers", "EX-7", {}, {"rebate": 5.0}, "rebate", "not-a-decimal", "Did you mean 0.05 (5 %)?"),
    "a ceiling below the level": (
        "schedules", "EX-12", {"purpose": "coupon"}, {"ceiling": 0.7}, "ceiling", "terms-do-not-fit", "Correct"),
    "a call without a level": (
        "schedules", "EX-11", {"purpose": "call"}, {"level": None}, "level", "blank-cell", "Enter the level"),
    "a level of an observation": (
        "schedule_rules", "EX-9", {}, {"level": 1.0}, "level", "unwanted-value", "Clear the cell, or correct purpose."),
    "a date after the expiry": (
        "schedules", "EX-11", {"purpose": "call"}, {"date": date(2029, 3, 29), "payment_date": None}, "date",
        "dates-out-of-order", "Correct one of the two"),
    "a rule that ends after the expiry": (
        "schedule_rules", "EX-9", {}, {"end_date": date(2027, 6, 30)}, "end_date", "dates-out-of-order", "Correct"),
    "a payment before its date": (
        "schedules", "EX-11", {"purpose": "call"}, {"payment_date": date(2026, 1, 5)}, "payment_date",
        "dates-out-of-order", "Correct one of the two dates."),
    "a repeated date": (
        "schedules", "EX-11", {"purpose": "call"}, {"date": date(2027, 9, 30), "payment_date": None}, "date",
        "repeated-date", "Delete one of the two rows."),
    "an unknown frequency": (
        "schedule_rules", "EX-9", {}, {"frequency": "monthly"}, "frequency", "not-a-tenor", "Enter"),
    "an unknown purpose": (
        "schedules", "EX-10", {}, {"purpose": "referense"}, "purpose", "unknown-word", 'Did you mean "reference"?'),
    "a hit when nobody watched": (
        "barriers", "EX-8", {}, {"recorded_hit_date": date(2027, 1, 4), "recorded_payment_date": None},
        "recorded_hit_date", "dates-out-of-order", "Correct"),
    "a hit between the days on which a barrier is watched": (
        "barriers", "EX-7", {}, {"recorded_hit_date": date(2026, 5, 2)}, "recorded_hit_date", "terms-do-not-fit",
        "Correct the date, or clear the cell"),
    "a knock-in of a note that has no put": (
        "trades", "EX-11", {}, {"put_strike": None, "leverage": None}, "kind", "terms-do-not-fit",
        "Enter the note's put_strike"),
    "a hit on a day that was clear": (
        "barriers", "EX-8", {}, {"clear_until": date(2026, 3, 18)}, "clear_until", "dates-out-of-order", "Correct"),
    "a rebate at the hit of a knock-in": (
        "barriers", "EX-8", {}, {"rebate_paid": "at hit"}, "rebate_paid", "terms-do-not-fit", "A knock-in knows"),
    "a barrier of the aggregate by underlying": (
        "barriers", "EX-8", {}, {"watched_on": "aggregate"}, "watched_on", "terms-do-not-fit", "Correct it"),
    "an underlying without its barrier level": (
        "constituents", "EX-8", {"underlying": "TESKIR"}, {"barrier_level": None}, "barrier_level", "blank-cell",
        "Enter the level of this underlying"),
    "a barrier level nobody takes": (
        "constituents", "EX-7", {"underlying": "ORLUMA"}, {"barrier_level": 1.2}, "barrier_level", "unwanted-value",
        "Clear the cell, or correct the table barriers."),
    "a variance weight of a call": (
        "constituents", "EX-7", {"underlying": "ORLUMA"}, {"variance_weight": 1.0}, "variance_weight",
        "unwanted-value", "Clear the cell, or correct the trade's statistic."),
    "one initial fixing of two": (
        "constituents", "EX-10", {"underlying": "ORLUMA"}, {"initial_fixing": 84.2}, "initial_fixing", "blank-cell",
        "Enter the price"),
    "no initial fixing and no date that sets it": (
        "constituents", "EX-13", {"underlying": "ORLUMA"}, {"initial_fixing": None}, "initial_fixing", "blank-cell",
        "Enter the price"),
    "an average without dates": (
        "trades", "EX-13", {}, {"statistic": "average"}, "statistic", "no-dates", "Add them"),
    "dates of a statistic that is none": (
        "trades", "EX-9", {}, {"statistic": None, "average_of": None}, "purpose", "terms-do-not-fit", "Name the"),
    "a cliquet on prices": (
        "trades", "EX-10", {}, {"underlying_level": "price", "notional": None, "quantity": 1.0}, "purpose",
        "terms-do-not-fit", "Delete the dates"),
    "a local floor of an average": (
        "trades", "EX-9", {}, {"local_floor": 0.0}, "local_floor", "unwanted-value", "Clear the cell, or correct"),
    "a correlation of the worst": (
        "trades", "EX-17", {}, {"aggregate": "worst of"}, "statistic", "terms-do-not-fit", "Correct the aggregate"),
    "leverage without a put": (
        "trades", "EX-11", {}, {"put_strike": None}, "leverage", "unwanted-value", "Clear the cell, or correct"),
    "a note on prices": (
        "trades", "EX-11", {}, {"underlying_level": "price", "notional": None, "quantity": 10.0}, "underlying_level",
        "terms-do-not-fit", "Write performance"),
    "a strike of a note": (
        "trades", "EX-11", {}, {"strike": 1.0}, "strike", "unwanted-value", "Clear the cell, or correct product."),
    "a european option with a barrier": (
        "trades", "EX-7", {}, {"product": "european option"}, "product", "terms-do-not-fit", "Write option"),
    "an exercise on a day without a right": (
        "exercises", "EX-12", {}, {"exercised_date": date(2026, 3, 30)}, "exercised_date", "dates-out-of-order",
        "Correct the date"),
    "a start of a bermudan right": (
        "exercises", "EX-12", {}, {"start_date": date(2026, 3, 30)}, "start_date", "unwanted-value", "Clear"),
    "a bermudan right without dates": (
        "exercises", "EX-13", {}, {"style": "bermudan", "start_date": None}, "feature", "no-dates", "Add them"),
    "memory of coupons that accrue": (
        "coupons", "EX-11", {}, {"trade_id": "EX-12"}, "memory", "terms-do-not-fit", "Clear the cell."),
    "assets without liabilities": (
        "writers", "EX-15", {}, {"liabilities": None}, "liabilities", "blank-cell", "Enter the writer's liabilities"),
    "a recovery beside assets": (
        "writers", "EX-15", {}, {"recovery_decimal": 0.4}, "assets", "unwanted-value", "Clear the cell, or correct"),
    "a recovery in percentage points": (
        "writers", "EX-14", {}, {"recovery_decimal": 35.0}, "recovery_decimal", "not-a-decimal",
        "Did you mean 0.35 (35 %)?"),
}  # fmt: skip


@pytest.mark.parametrize("case", FAULTS)
def test_a_fault_costs_its_trade_alone_and_is_told_at_its_cell(load, tables, case):
    table, trade_id, which, changes, column, code, mend = FAULTS[case]
    row_of(tables, table, trade_id, **which).update(changes)
    told = refused(load(tables), changes.get("trade_id", trade_id))
    found = [issue for issue in told if (issue.column, issue.code) == (column, code)]
    assert found, [str(issue) for issue in told]
    assert found[0].mend.startswith(mend)
    assert found[0].cell is not None and found[0].row is not None


def test_faults_are_told_in_full(load, tables):
    row_of(tables, "schedules", "EX-11", purpose="call").update(level=100.0)
    row_of(tables, "barriers", "EX-11").update(monitoring="dates")
    assert [str(issue) for issue in refused(load(tables), "EX-11")] == [
        'book.xlsx, sheet schedules, row 3, column "level" (cell F3): found 100; expected a decimal performance (1.00 '
        "= 100 %) of at most 4. Did you mean 1 (100 %)?",
        'book.xlsx, sheet barriers, row 4, column "monitoring" (cell H4): found a barrier watched on dates, without '
        "dates of purpose barrier; expected the dates in the table schedules or schedule_rules. Add them under the "
        "same trade_id and feature, or write daily, continuous or expiry.",
    ]


def test_a_rule_beside_rows_is_refused(load, tables):
    tables["schedule_rules"].append({"trade_id": "EX-11", "purpose": "call", "frequency": "6M", "level": 1.0})
    (issue,) = refused(load(tables), "EX-11")
    assert (issue.sheet, issue.column, issue.code) == ("schedule_rules", "purpose", "repeated-series")
    assert issue.found == "a rule for dates of purpose call, which the table schedules has from row 3"


def test_a_daily_barrier_starts_after_the_trade_date_unless_it_says_when(load, tables):
    row_of(tables, "barriers", "EX-7")["start_date"] = None
    assert load(tables).trades[0].contract.features[0].schedule[0].day == date(2026, 4, 1)
    row_of(tables, "trades", "EX-7")["trade_date"] = None
    (issue,) = refused(load(tables), "EX-7")
    assert (issue.column, issue.code) == ("start_date", "blank-cell")


def test_two_barriers_are_numbered(load, tables):
    tables["barriers"].append({**row_of(tables, "barriers", "EX-7"), "level": 0.6, "direction": "down"})
    (issue,) = refused(load(tables), "EX-7")
    assert (issue.column, issue.code) == ("feature", "repeated-feature")
    tables["barriers"][-1]["feature"] = 2
    contract = load(tables).trades[0].contract
    assert [barrier.trigger.direction for barrier in contract.features] == [Direction.UP, Direction.DOWN]


def test_dates_of_a_feature_that_is_missing_are_told(load, tables):
    tables["barriers"] = [row for row in tables["barriers"] if row["trade_id"] != "EX-11"]
    tables["schedules"].append({"trade_id": "EX-11", "purpose": "barrier", "date": date(2027, 12, 17), "level": 0.6})
    (issue,) = refused(load(tables), "EX-11")
    assert (issue.sheet, issue.column, issue.code) == ("schedules", "purpose", "no-feature")


def test_nothing_is_observed_before_the_references_are_set(load, tables):
    row_of(tables, "schedule_rules", "EX-10")["start_date"] = date(2026, 4, 1)
    (issue,) = refused(load(tables), "EX-10")
    assert (issue.sheet, issue.column, issue.found) == ("schedule_rules", "start_date", "the date 2026-04-01")


def test_rows_of_an_unknown_trade_are_refused_in_its_name(load, tables):
    tables["barriers"].append({**row_of(tables, "barriers", "EX-7"), "trade_id": "OTHER"})
    issues = refused(load(tables), "OTHER")
    assert [issue.code for issue in issues] == ["unknown-trade"]


@pytest.mark.parametrize("name", ["EXX-7", "EX-71"])
def test_a_misspelt_row_costs_the_trade_that_would_look_plainer_without_it(load, tables, name):
    tables["barriers"][0]["trade_id"] = name
    tables["trades"] = [row for row in tables["trades"] if row["trade_id"] in ("EX-7", "EX-8", "EX-11")]
    for table in tables:
        tables[table] = [row for row in tables[table] if row["trade_id"] in ("EX-7", "EX-8", "EX-11", name)]
    issues = refused(load(tables), "EX-7")
    assert [issue.mend for issue in issues if issue.code == "unknown-trade"] == ['Did you mean "EX-7"? Correct the id.']


def test_a_row_without_an_id_costs_its_neighbours(load, tables):
    tables["barriers"][0]["trade_id"] = None
    assert {refusal.trade_id for refusal in load(tables).refusals} == {"EX-8"}


def test_a_misspelt_column_of_a_table_of_features_stops_the_book(tmp_path, tables):
    write_tables(tables, tmp_path / "book")
    path = tmp_path / "book" / "barriers.csv"
    path.write_text(path.read_text().replace("kind", "kindd", 1))
    with pytest.raises(InputError) as caught:
        load_book(tmp_path / "book")
    assert [(issue.code, issue.column) for issue in caught.value.issues] == [("misspelt-column", "kindd")]


def test_a_misspelt_table_of_features_is_never_ignored(load, tables):
    tables["bariers"] = tables.pop("barriers")
    with pytest.raises(InputError) as caught:
        load(tables)
    assert [(issue.code, issue.mend) for issue in caught.value.issues] == [
        ("missing-sheet", 'Did you mean "bariers"? Rename it.')
    ]


def test_a_writer_of_a_trade_that_the_desk_is_short_is_used_with_a_warning(load, tables):
    row_of(tables, "trades", "EX-14")["direction"] = "short"
    book = load(tables)
    (issue,) = book.issues
    assert (issue.severity, issue.code, issue.trade_id) == (Severity.WARNING, "writer-of-short-trade", "EX-14")
    assert (issue.sheet, issue.column) == ("writers", "writer")
    assert next(trade for trade in book if trade.trade_id == "EX-14").contract.writer is not None


def test_a_variance_strike_that_looks_like_a_volatility_is_used_with_a_warning(load, tables):
    row_of(tables, "trades", "EX-16").update(strike=0.21, aggregate_weight=None)
    book = load(tables)
    (issue,) = book.issues
    assert (issue.severity, issue.code) == (Severity.WARNING, "high-variance")
    assert issue.found == "0.21, the variance of a volatility of 45.8 %"
    assert issue.mend == "Used as given. Enter 0.0441 if 0.21 is the volatility."


def test_a_call_that_pays_a_premium_only_is_used_with_a_warning(load, tables):
    row_of(tables, "schedules", "EX-11", purpose="call")["amount"] = 0.06
    book = load(tables)
    (issue,) = book.issues
    assert (issue.severity, issue.code, issue.column) == (Severity.WARNING, "small-redemption", "amount")
    assert book.refusals == ()


def test_the_dates_and_features_of_a_trade_can_be_found_again(load, tables):
    places = load(tables).places
    assert places["EX-11", "schedule"].sheet == "schedules"
    assert places["EX-11", "schedule:call:2027-09-30"].cell == "D4"
    assert places.get(("EX-11", "schedule:call:2027-09-29")) is None
    assert places["EX-11", "schedule:coupon"].sheet == "schedule_rules"
    assert places["EX-9", "observation_dates"].cell == "F2"
    assert places["EX-8", "barrier_level:TESKIR"].cell == "E5"
    assert (places["EX-14", "writer"].cell, places["EX-15", "assets"].cell) == ("B2", "D3")
    assert places.get(("EX-7", "writer")) is None and places.get(("EX-7", "schedule")) is None
    assert all(places[key] == place for key, place in places.items())
