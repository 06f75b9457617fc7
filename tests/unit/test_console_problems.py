"""Problems in the terminal: the gravest first, causes before what follows from them, counted in words."""

from __future__ import annotations

from pricer.cli.console import SHOWN_OF_A_KIND, show_problems
from pricer.core.issues import Issue, Severity


def issue(code, severity=Severity.ERROR, trade_id=None, found="a"):
    return Issue(code, found, "b", "C.", severity, trade_id=trade_id)


def headings(capsys, issues, **how):
    show_problems(issues, **how)
    text = capsys.readouterr().err
    return [line for line in text.splitlines() if line and not line.startswith("  ")]


def test_faults_of_inputs_come_before_those_of_trades_and_each_kind_where_it_first_appeared(capsys):
    issues = [
        issue("beyond-curve", Severity.WARNING, "T1"),
        issue("no-volatility", trade_id="T1"),
        issue("missing-correlation", trade_id="T2"),
        issue("out-of-range"),
        issue("weekend-valuation", Severity.WARNING),
        issue("calendar-arbitrage"),
        issue("out-of-range", trade_id="T3"),
        issue("missing-sheet", Severity.FATAL),
    ]
    assert headings(capsys, issues) == [
        "8 problems: 1 fatal, 5 errors, 2 warnings",
        "fatal: missing sheet (1)",
        "error: out of range (1)",
        "error: calendar arbitrage (1)",
        "error: no volatility (1)",
        "error: missing correlation (1)",
        "error: out of range (1)",
        "warning: weekend valuation (1)",
        "warning: beyond curve (1)",
    ]


def test_counts_are_in_the_singular_and_in_the_plural(capsys):
    assert headings(capsys, [issue("x")])[0] == "1 problem: 1 error"
    assert headings(capsys, [issue("x", Severity.WARNING)] * 3)[0] == "3 problems: 3 warnings"
    assert headings(capsys, [issue("x", Severity.FATAL)] * 2)[0] == "2 problems: 2 fatal"


def test_many_of_a_kind_are_counted_unless_every_one_is_asked_for(capsys):
    issues = [issue("x", found=str(n)) for n in range(SHOWN_OF_A_KIND + 2)]
    show_problems(issues)
    assert capsys.readouterr().err.endswith("  ... and 2 more of this kind\n")
    show_problems(issues, every=True)
    assert f"found {SHOWN_OF_A_KIND + 1}; " in capsys.readouterr().err
