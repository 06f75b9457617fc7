"""The closing lines in the terminal: what the model is worth, and how the surfaces stand."""

from __future__ import annotations

from dataclasses import replace

from pricer.cli.console import show_outcome
from pricer.run.outcome import MarketFacts, Model
from tests.unit.report_outcomes import checks_of, empty, outcome, valuation


def lines(capsys, run):
    show_outcome(run)
    return capsys.readouterr().out.splitlines()


def test_the_closing_lines_tell_the_model_difference_and_the_surfaces(capsys):
    trade = valuation(
        1, currency="EUR", model_difference=-1234.5, model_difference_standard_error=6.0, reporting_value=1.0, value=1.0
    )
    found = lines(capsys, outcome(0, refused=(), valuations=(trade,)))
    assert "local volatility less lognormal: -1,234.50 EUR, standard error 6.00, trades: 1" in found
    assert "volatility surfaces: 5, of which fail: 1, trades priced from these: 0" in found
    assert "simulated quotes between 10 and 90 delta: 128, of which off by more than 0.05 vol points: 30" in found


def test_a_flat_market_under_one_model_is_not_spoken_of(capsys):
    trade = valuation(1, model_difference=None, model_difference_standard_error=None)
    found = lines(capsys, empty(valuations=(trade,), market=MarketFacts()))
    assert not [line for line in found if "surface" in line or "lognormal" in line or "delta" in line]
    assert found[-2:] == [
        "cross-checks: 0, of which disagree: 0",
        "leading values checked under their own model, of 1: exact reference 0, bounds 0, no reference 1",
    ]


def test_the_closing_lines_tell_under_which_model_was_checked(capsys):
    trade = valuation(1)
    other = replace(checks_of(trade)[0], model=Model.LOGNORMAL)
    assert trade.model is Model.LOCAL_VOLATILITY
    found = lines(capsys, empty(valuations=(trade,), cross_checks=(other, checks_of(trade)[1])))
    assert "cross-checks: 2 (1 under local volatility, 1 under lognormal), of which disagree: 0" in found
    assert "leading values checked under their own model, of 1: exact reference 0, bounds 1, no reference 0" in found
