"""The model difference: local volatility less lognormal, trade by trade and for the book."""

from __future__ import annotations

import math

import pytest

from pricer.report import tables
from pricer.report.model_differences import model_differences
from pricer.report.styles import Mark
from pricer.report.top import MODEL_DIFFERENCES_SHOWN, lines_of_model_differences
from pricer.report.totals import book_total, group_totals
from pricer.run.outcome import Model, Status, UnderlyingFacts
from tests.unit.report_outcomes import empty, outcome, refusals, valuation

SWISS = (UnderlyingFacts("TARNWELL", "CHF", 50.0, 20.0, 1.25),)


def trade(trade_id: str, difference: float | None, error: float | None = 0.0, **changes):
    base = {"trade_id": trade_id, "currency": "EUR", "notional": -1e6, "value": 100.0, "reporting_value": 100.0}
    numbers = {"model_difference": difference, "model_difference_standard_error": error, "status": Status.PRICED}
    return valuation(1, **{**base, **numbers, "deltas": (), **changes})


def lines(run):
    return lines_of_model_differences(model_differences(run), book_total(run).total)


def test_a_difference_is_shown_in_both_currencies_and_in_basis_points_of_notional():
    run = empty(valuations=(trade("A", -400.0, 8.0, currency="CHF", time_steps=37),), underlyings=SWISS)
    row = tables(run)["valuations"].iloc[0]
    assert (row["model_difference"], row["model_difference_standard_error"]) == (-400.0, 8.0)
    assert (row["reporting_model_difference"], row["reporting_model_difference_standard_error"]) == (-500.0, 10.0)
    assert row["model_difference_bp"] == pytest.approx(-4.0)  # of the notional's size: a short trade keeps the sign
    assert row["time_steps"] == 37


def test_a_trade_under_one_model_has_no_difference_and_one_without_smile_has_none_to_speak_of():
    frame = tables(empty(valuations=(trade("A", None, None), trade("B", 0.0))))["valuations"]
    names = ["model_difference", "reporting_model_difference", "model_difference_bp"]
    assert frame.loc[0, names].isna().all()
    assert list(frame.loc[1, names]) == [0.0, 0.0, 0.0]


def test_the_model_of_a_refused_trade_is_blank():
    assert set(tables(empty(refusals=refusals()))["valuations"]["model"]) == {""}


def test_the_books_difference_adds_up_with_errors_in_quadrature_and_counts_what_it_leaves_out():
    trades = (
        trade("A", 100.0, 3.0),
        trade("B", -40.0, 4.0),
        trade("C", None, None),
        trade("D", 1e9, 1.0, status=Status.NOT_PRICED),
    )
    whole = book_total(empty(valuations=trades)).total
    assert (whole.model_difference, whole.model_difference_standard_error) == (60.0, 5.0)
    assert whole.without_model_difference == 1


def test_a_book_under_one_model_has_no_difference_instead_of_zero():
    whole = book_total(empty(valuations=(trade("A", None, None),))).total
    assert math.isnan(whole.model_difference)
    assert math.isnan(whole.model_difference_standard_error)


def test_the_parts_of_every_model_add_up_to_the_book():
    run = outcome()
    parts = {part.group: part for part in group_totals(run, "model")}
    assert set(parts) == {Model.LOGNORMAL, Model.LOCAL_VOLATILITY, "not priced"}
    whole = book_total(run).total
    assert parts["not priced"].not_priced == whole.not_priced == 3
    valued = [parts[model] for model in Model]
    assert sum(part.value for part in valued) == pytest.approx(whole.value)
    assert sum(part.model_difference for part in valued) == pytest.approx(whole.model_difference)


def test_trades_from_failing_surfaces_are_counted_by_their_own_name_and_stay_in_the_total():
    run = empty(valuations=(trade("A", 1.0), trade("B", 2.0, status=Status.FAILING_SURFACE)))
    whole = book_total(run).total
    assert (whole.trades, whole.priced, whole.failing_surface, whole.not_priced) == (2, 1, 1, 0)
    assert whole.value == 200.0
    assert tables(run)["summaries"].query("grouping == 'currency'")["failing_surface"].tolist() == [1]


def test_the_largest_differences_come_first_and_the_rest_is_one_line():
    sizes = [(-1.0) ** i * (i + 1.0) for i in range(MODEL_DIFFERENCES_SHOWN + 3)]
    found = lines(empty(valuations=tuple(trade(f"T{i}", size, 2.0) for i, size in enumerate(sizes))))
    assert found[0].name == f"T{len(sizes) - 1}"
    assert len(found) == MODEL_DIFFERENCES_SHOWN + 2
    rest, whole = found[-2:]
    assert (rest.name, whole.name) == ("other (3)", "total")
    assert rest.numbers[-2:] == (pytest.approx(1.0 - 2.0 + 3.0), pytest.approx(2.0 * math.sqrt(3.0)))
    assert sum(line.numbers[-2] for line in found[:-1]) == pytest.approx(whole.numbers[-2])


def test_trades_without_a_difference_need_no_line():
    assert lines(empty(valuations=(trade("A", 0.0), trade("B", None, None)))) == []


def test_a_difference_that_is_not_a_number_leads_and_is_marked():
    found = lines(empty(valuations=(trade("A", 5.0), trade("B", math.nan))))
    assert (found[0].name, found[0].mark) == ("B", Mark.LOOK)
    assert math.isnan(found[-1].numbers[-2])


def test_the_values_beside_the_differences_add_up_to_the_book():
    trades = (
        trade("A", 5.0, reporting_value=10.0),
        trade("B", 0.0, reporting_value=200.0),
        trade("C", None, None, reporting_value=3000.0),
    )
    run = empty(valuations=trades)
    found = {line.name: line.numbers for line in lines(run)}
    assert found["no difference (1)"] == (0.0, 0.0, 200.0, 0.0, 0.0)
    assert found["under one model only (1)"][2] == 3000.0
    assert found["total"][2] == book_total(run).total.value == 3210.0
    assert found["total"][3] == 5.0
