"""Which leading values a reference of their own model stands beside."""

from __future__ import annotations

from dataclasses import replace

import pytest

from pricer.report import tables
from pricer.report.reference_coverage import Checked, checked, checked_total, checked_totals
from pricer.run.outcome import Model, Status
from tests.unit.report_outcomes import checks_of, empty, outcome, valuation

LEAD, OTHER = Model.LOCAL_VOLATILITY, Model.LOGNORMAL


def trade(trade_id: str, **changes):
    return valuation(1, **{"trade_id": trade_id, "model": LEAD, "status": Status.PRICED, **changes})


def found(*checks, **changes) -> Checked:
    return checked(empty(valuations=(trade("A", **changes),), cross_checks=checks))["A"]


EXACT, BELOW, NEAR = checks_of(trade("A"))


def test_an_exact_reference_comes_before_bounds_and_bounds_before_nothing():
    assert found(EXACT, BELOW, NEAR) is Checked.EXACT
    assert found(BELOW, NEAR) is Checked.BOUNDS
    assert found() is Checked.NOTHING


def test_an_approximation_checks_nothing():
    assert found(NEAR) is Checked.NOTHING


def test_a_reference_of_the_other_model_does_not_check_the_leading_value():
    others = [replace(check, model=OTHER) for check in (EXACT, BELOW)]
    assert found(*others) is Checked.NOTHING
    assert found(*others, model=OTHER) is Checked.EXACT


def test_a_reference_that_disagrees_still_stands_beside_the_value():
    assert found(replace(EXACT, verdict="differs"), status=Status.DISPUTED) is Checked.EXACT


def test_the_table_of_valuations_says_so_trade_by_trade_and_leaves_refused_trades_blank():
    run = outcome()
    frame = tables(run)["valuations"]
    priced = frame["status"] != "not priced"
    assert set(frame.loc[priced, "checked"]) == {"exact reference"}  # the invented checks are of each trade's own model
    assert set(frame.loc[~priced, "checked"]) == {""}


def test_totals_count_by_leading_model_and_add_up_the_values_that_nothing_checks():
    trades = (
        trade("A", reporting_value=100.0),
        trade("B", reporting_value=-30.0),
        trade("C", reporting_value=7.0, model=OTHER),
        trade("D", reporting_value=1e9, status=Status.NOT_PRICED),
    )
    run = empty(valuations=trades, cross_checks=(EXACT, replace(BELOW, trade_id="C", model=OTHER)))
    smiled, plain, whole = checked_totals(run)
    assert (smiled.model, plain.model, whole.model) == (LEAD, OTHER, "total")
    assert list(smiled.by.values()) == [1, 0, 1]
    assert list(plain.by.values()) == [0, 1, 0]
    assert (whole.trades, whole.checked) == (3, 1)
    assert whole.share == pytest.approx(100.0 / 3.0)
    assert (smiled.value, smiled.unchecked_value, plain.unchecked_value) == (70.0, -30.0, 0.0)
    assert whole.unchecked_value == -30.0


def test_a_book_without_a_value_has_no_totals():
    assert checked_totals(empty()) == []
    assert checked_total(empty()).trades == 0
