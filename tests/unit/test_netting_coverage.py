"""Netting sets and counterparties that the market does not know are told once each, word for word."""

from dataclasses import replace
from datetime import date

from pricer.contracts.book import Book
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.agreements import Agreement
from pricer.market.credit import HazardCurve
from pricer.market.netting_coverage import netting_coverage
from pricer.market.quality import gates
from pricer.run.admission import admit
from tests.unit.markets import TODAY, basket, small_market


def trade(trade_id, counterparty="Nordhavn Bank", netting_set="NOR-1"):
    return replace(basket("ARVENNE", "BELCOR"), trade_id=trade_id, counterparty=counterparty, netting_set=netting_set)


def market(**changes):
    return small_market(
        agreements={"NOR-1": Agreement("NOR-1", "Nordhavn Bank", "EUR")},
        credit={
            "Nordhavn Bank": HazardCurve.from_hazard_rates("Nordhavn Bank", TODAY, 0.4, [date(2031, 11, 28)], [0.01])
        },
        **changes,
    )


def place(trade, column):
    return Place("book.xlsx", "trades", 2, column, "X2") if trade.trade_id == "T1" else None


def told(*trades, on=None):
    return list(netting_coverage(trades, on or market(), place))


def test_known_sets_and_names_raise_nothing():
    assert told(trade("T1"), trade("T2"), trade("T3", "", "")) == []


def test_a_netting_set_without_agreement_is_told_once():
    (issue,) = told(trade("T1", netting_set="NOR-2"), trade("T2", netting_set="NOR-2"), trade("T3"))
    assert (issue.code, issue.severity) == ("no-agreement", Severity.WARNING)
    assert str(issue) == (
        'book.xlsx, sheet trades, row 2, column "netting_set" (cell X2): found netting set "NOR-2" (2 trades), which '
        'has no agreement; expected a netting set of the agreements table. Did you mean "NOR-1"? Correct the name, or '
        "add its agreement to the market. No value in this report depends on it; valuation adjustments will."
    )


def test_an_agreement_with_another_counterparty():
    credit = dict(market().credit) | {"Vesterhav Fund": market().credit["Nordhavn Bank"]}
    (issue,) = told(trade("T1", "Vesterhav Fund"), trade("T2"), on=replace(market(), credit=credit))
    assert issue.code == "agreement-of-another"
    assert str(issue) == (
        'book.xlsx, sheet trades, row 2, column "counterparty" (cell X2): found counterparty "Vesterhav Fund" in '
        'netting set "NOR-1" (1 trade), whose agreement is with "Nordhavn Bank"; expected one counterparty for a '
        "netting set. Correct the counterparty or the netting set. No value in this report depends on it; valuation "
        "adjustments will."
    )


def test_a_counterparty_without_credit_is_told_once():
    (issue,) = told(trade("T1", "Nordhaven Bank", ""), trade("T2", "Nordhaven Bank", ""))
    assert issue.code == "no-credit"
    assert str(issue) == (
        'book.xlsx, sheet trades, row 2, column "counterparty" (cell X2): found counterparty "Nordhaven Bank" (2 '
        "trades), which the credit table does not hold; expected a counterparty with credit spreads. Did you mean "
        '"Nordhavn Bank"? Correct the name, or add it to the credit table. No value in this report depends on it; '
        "valuation adjustments will."
    )


def test_what_the_market_refused_or_never_had_is_not_asked_for():
    why = (Issue("bad", "found", "expected", "mend"),)
    refused = market(rejected={"agreements:NOR-2": why, "credit:Vesterhav Fund": why})
    assert told(trade("T1", "Vesterhav Fund", "NOR-2"), on=refused) == []
    assert told(trade("T1", "Vesterhav Fund", "NOR-2"), on=small_market()) == []


def test_an_agreement_in_a_currency_without_a_curve():
    odd = small_market(agreements={"NOR-1": Agreement("NOR-1", "Nordhavn Bank", "CHF")})
    (issue,) = gates(odd)
    assert str(issue) == (
        "found currency CHF of the agreement of netting set NOR-1, which has no standard discount curve; expected a "
        "curve of CHF with empty collateral, over which collateral earns its spread. Correct the currency, or add its "
        "curve to the curves table. No value in this report depends on it; valuation adjustments will."
    )


def test_admission_tells_them_and_refuses_nothing():
    admitted = admit(Book("b", (trade("T1", netting_set="NOR-9"),)), market())
    assert [issue.code for issue in admitted.issues] == ["no-agreement"]
    assert len(admitted.trades) == 1
