"""Problems speak of their place, what was found, what was expected and how to mend it."""

from pricer.core.issues import InputError, Issue, Severity

ISSUE = Issue(
    code="not-a-price",
    found="0",
    expected="a price above 0",
    mend="Enter the strike in currency, e.g. 95.",
    file="may.xlsx",
    sheet="trades",
    row=12,
    column="strike",
    cell="H12",
)


def test_an_issue_reads_as_a_sentence_with_its_place():
    assert str(ISSUE) == (
        'may.xlsx, sheet trades, row 12, column "strike" (cell H12): '
        "found 0; expected a price above 0. Enter the strike in currency, e.g. 95."
    )


def test_a_csv_file_needs_no_sheet_to_be_named():
    issue = Issue("x", "a", "b", "C.", file="may/trades.csv", sheet="trades", row=3)
    assert str(issue) == "may/trades.csv, row 3: found a; expected b. C."


def test_an_issue_of_a_whole_trade_names_the_trade():
    issue = Issue("x", "a", "b", "C.", trade_id="T1")
    assert str(issue) == "trade T1: found a; expected b. C."


def test_charging_an_issue_to_a_trade_keeps_its_place():
    charged = ISSUE.for_trade("T9")
    assert (charged.trade_id, charged.cell, charged.severity) == ("T9", "H12", Severity.ERROR)


def test_an_input_error_carries_every_issue():
    error = InputError([ISSUE, ISSUE.for_trade("T9")])
    assert len(error.issues) == 2
    assert str(error).count("a price above 0") == 2
