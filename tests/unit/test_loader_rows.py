"""Rules within a row and between the rows of one trade, each told at its cell."""

from __future__ import annotations

from datetime import date

import pytest
from pydantic import ValidationError

from pricer.loader.book_rows import TRADE_ROWS, ConstituentRow, EuropeanOptionRow, TradeRow, trade_columns
from pricer.loader.columns import columns_of
from pricer.loader.faults import Fault
from pricer.loader.market_rows import CurvePointRow, CurveRow, UnderlyingRow, VolatilityRow

GOOD = {
    "trade_id": "T-1",
    "product": "european option",
    "direction": "long",
    "underlying_level": "performance",
    "notional": 1_000_000.0,
    "aggregate": "worst of",
    "profile": "put",
    "strike": 1.0,
    "expiry_date": date(2027, 6, 18),
    "currency": "EUR",
}


def validated(model, **cells):
    return model.model_validate({name: cells.get(name) for name in columns_of(model)})


def faults(model, **cells) -> dict[str, Fault]:
    with pytest.raises(ValidationError) as caught:
        validated(model, **cells)
    return {
        error["loc"][0]: columns_of(model)[error["loc"][0]].completed(error["ctx"]["error"])
        for error in caught.value.errors()
    }


def trade_faults(**changes) -> dict[str, tuple[str, str]]:
    return {name: (f.found, f.expected) for name, f in faults(EuropeanOptionRow, **GOOD | changes).items()}


def test_a_row_has_its_values_and_the_defaults_of_blank_cells():
    row = validated(EuropeanOptionRow, **GOOD)
    assert row.notional == 1_000_000.0
    assert row.settlement_lag_days == 2
    assert row.collateral == row.counterparty == ""
    assert row.trade_date is row.premium is row.floor is row.settlement_calendar is None


def test_all_faults_of_a_row_come_at_once():
    found = trade_faults(
        trade_id=None, direction="buy", currency="EUX", strike="low", expiry_date="soon", cap=-1.0, floor=0.0
    )
    assert set(found) == {"trade_id", "direction", "currency", "strike", "expiry_date", "cap"}


@pytest.mark.parametrize(
    ("changes", "column", "found", "expected"),
    [
        ({"notional": None}, "notional", "a blank cell", "a number above 0, as performance options need one"),
        ({"quantity": 5.0}, "quantity", "5", "a blank cell, as this is for price options only"),
        ({"underlying_level": "price"}, "notional", "1000000", "a blank cell, as this is for performance options only"),
        ({"underlying_level": "price", "notional": None}, "quantity", "a blank cell", "a number above 0, as "
                                                                                      "price options need one"),
        ({"strike": None}, "strike", "a blank cell", "a number, as profiles other than exchange need one"),
        ({"rank": 1.0}, "rank", "1", "a blank cell, as this is for k-th best aggregates only"),
        ({"aggregate": "k-th best"}, "rank", "a blank cell", "a whole number from 1 to 1000, as k-th best "
                                                             "aggregates need one"),
        ({"aggregate": "rank weighted"}, "rank_weights", "a blank cell",
         "numbers separated by semicolons, not all 0, as rank weighted aggregates need one"),
        ({"rank_weights": "1; 0"}, "rank_weights", '"1; 0"', "a blank cell, as this is for rank weighted "
                                                             "aggregates only"),
        ({"aggregate": "weighted sum", "profile": "exchange"}, "strike", "1", "a blank cell, as this is for "
                                                                              "profiles other than exchange only"),
        ({"profile": "exchange"}, "profile", "an exchange option on the aggregate worst of",
         "a weighted sum of two underlyings, one weight positive and one negative"),
        ({"profile": "cash digital put"}, "cash_amount", "a blank cell", "a number above 0, as cash digitals need one"),
        ({"cash_amount": 0.1}, "cash_amount", "0.1", "a blank cell, as this is for cash digitals only"),
        ({"aggregate": "geometric", "cash_level": 1.0}, "cash_level", "1",
         "a blank cell, as this is for best of and worst of aggregates only"),
        ({"floor": 0.2, "cap": 0.1}, "cap", "0.1", "a cap above the floor 0.2"),
        ({"trade_date": date(2027, 7, 1)}, "expiry_date", "the date 2027-06-18", "a date from the trade date "
                                                                                 "2027-07-01 on"),
        ({"premium": 10.0}, "premium_date", "a blank cell", "a date such as 2026-09-18, as there is a premium"),
        ({"premium_date": date(2027, 1, 4)}, "premium_date", "the date 2027-01-04",
         "a blank cell, as this is for trades with a premium only"),
        ({"premium": 1.0, "premium_date": date(2026, 1, 4), "trade_date": date(2026, 3, 2)}, "premium_date",
         "the date 2026-01-04",
         "a date from the trade date 2026-03-02 on"),
        ({"currency": "AED"}, "settlement_calendar", "a blank cell", None),
        ({"underlying_level": "price", "notional": None, "quantity": 1.0, "strike": "100%"}, "strike", '"100%"',
         "an amount of currency, as the trade is a price option"),
        ({"product": "barrier option"}, "product", '"barrier option"', "one of: european option, option, note"),
    ],
)  # fmt: skip
def test_terms_that_do_not_fit_are_told_at_the_cell_to_change(changes, column, found, expected):
    told = trade_faults(**changes)
    assert told[column][0] == found
    assert expected is None or told[column][1] == expected


@pytest.mark.parametrize(
    ("changes", "column", "expected", "mend"),
    [
        ({"profile": "cash digital put", "cash_amount": 8.0}, "cash_amount", "3", "Did you mean 0.08 (8 %)?"),
        ({"cap": 30.0}, "cap", "10", "Did you mean 0.3 (30 %)?"),
        ({"floor": 2.0}, "floor", "1", "Did you mean 0.02 (2 %)?"),
    ],
)
def test_payoffs_of_performance_options_are_decimals(changes, column, expected, mend):
    fault = faults(EuropeanOptionRow, **GOOD | changes)[column]
    assert fault.code == "not-a-decimal"
    assert fault.expected == f"a decimal payoff (0.08 = 8 %) of at most {expected}"
    assert fault.mend == mend
    of_price = {"underlying_level": "price", "notional": None, "quantity": 1.0}
    assert getattr(validated(EuropeanOptionRow, **GOOD | changes | of_price), column) == changes[column]


@pytest.mark.parametrize(
    "changes", [{"profile": "cash digital put", "cash_amount": 3.0}, {"cap": 10.0}, {"floor": 1.0}, {"floor": -2.0}]
)
def test_payoffs_of_performance_options_may_be_large(changes):
    validated(EuropeanOptionRow, **GOOD | changes)


def test_rules_are_silent_where_a_cell_they_look_at_is_itself_faulty():
    assert set(trade_faults(underlying_level="prize", quantity=5.0)) == {"underlying_level"}
    assert set(trade_faults(aggregate="wrost of", rank=1.0)) == {"aggregate"}


def test_a_performance_may_be_written_as_a_percentage():
    assert validated(EuropeanOptionRow, **GOOD | {"strike": "95%"}).strike == 0.95


def test_the_columns_of_trades_are_those_of_every_product_and_no_other():
    assert set(trade_columns()) == {name for model in TRADE_ROWS.values() for name in columns_of(model)}
    # Options of later days stand behind the columns that European options have always had.
    assert list(trade_columns())[: len(columns_of(EuropeanOptionRow))][-1] == "model"
    assert set(columns_of(TradeRow)) < set(trade_columns())
    assert list(trade_columns())[:3] == ["trade_id", "product", "direction"]


def test_a_weight_is_not_zero_and_a_fixing_is_positive():
    found = faults(ConstituentRow, trade_id="T", underlying="A", weight=0.0, initial_fixing=-1.0)
    assert {name: fault.expected for name, fault in found.items()} == {
        "weight": "a number other than 0",
        "initial_fixing": "a number above 0",
    }


def test_an_underlyings_calendar_is_its_currencys_unless_named():
    assert validated(UnderlyingRow, underlying="A", currency="USD", spot=1.0).calendar == "US"
    assert validated(UnderlyingRow, underlying="A", currency="USD", spot=1.0, calendar="nyse").calendar == "NYSE"
    assert "calendar" in faults(UnderlyingRow, underlying="A", currency="AED", spot=1.0)
    assert validated(CurveRow, curve="C", currency="GBP", day_count="act/360").calendar == "UK"


@pytest.mark.parametrize(
    ("volatility", "code", "mend"),
    [
        (22.5, "not-a-decimal", "Did you mean 0.225 (22.5 %)?"),
        ("22.5", "not-a-decimal", "Did you mean 0.225 (22.5 %)?"),
        (-0.2, "out-of-range", None),
        (0.0, "out-of-range", None),
        ("low", "not-a-number", None),
    ],
)
def test_volatilities_are_positive_decimals(volatility, code, mend):
    found = faults(VolatilityRow, underlying="A", expiry_date=date(2027, 1, 4), volatility_decimal=volatility)
    assert found["volatility_decimal"].code == code
    assert mend is None or found["volatility_decimal"].mend == mend


def test_a_volatility_of_22_percent_may_be_written_so():
    row = validated(VolatilityRow, underlying="A", expiry_date=date(2027, 1, 4), volatility_decimal="22.5%")
    assert row.volatility_decimal == 0.225


def test_a_curve_point_has_one_of_date_and_tenor_and_one_of_rate_and_factor():
    assert validated(CurvePointRow, curve="C", tenor="1Y", zero_rate_decimal=-0.005).zero_rate_decimal == -0.005
    assert set(faults(CurvePointRow, curve="C")) == {"tenor", "discount_factor"}
    both = faults(
        CurvePointRow, curve="C", date=date(2027, 1, 4), tenor="1Y", zero_rate_decimal=0.02, discount_factor=0.98
    )
    assert {name: fault.code for name, fault in both.items()} == {
        "tenor": "unwanted-value",
        "discount_factor": "unwanted-value",
    }
    assert set(faults(CurvePointRow, curve="C", tenor="1Y", zero_rate_decimal=2.25)) == {"zero_rate_decimal"}
