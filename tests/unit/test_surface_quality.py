"""What a person is told about a surface, word for word."""

import math
from dataclasses import replace

from pricer.core.issues import Severity
from pricer.core.source import Place
from pricer.market.arbitrage import ArbitrageKind, Violation
from pricer.market.checked_surface import CheckedSurface, QuoteFit
from pricer.market.surface_quality import surface_gates
from tests.unit.smiles import day
from tests.unit.surface_cases import built, heston_quotes

SOUND = built(heston_quotes(days=(91, 365)))


def with_(violations=(), quotes=None, failures=()):
    return CheckedSurface("ARVENNE", SOUND.surface, SOUND.quotes if quotes is None else quotes, violations, failures)


def fit(days, relative, error, delta=0.5):
    return QuoteFit(day(days), 100.0 * relative, relative, delta, 0.20, 0.20 + error, math.log(relative))


def cell(name):
    return (
        Place("market.xlsx", "volatilities", 7, "volatility", "C7") if name == "volatility:ARVENNE:2027-03-01" else None
    )


def test_a_sound_surface_has_nothing_to_say():
    assert surface_gates(SOUND) == ()


def test_a_butterfly_in_the_quotes_names_expiry_strike_and_size():
    found = Violation(ArbitrageKind.BUTTERFLY, day(91), None, math.log(1.1), 0.0123, True)
    (issue,) = surface_gates(with_([found]), cell)
    assert (issue.code, issue.severity, issue.cell) == ("butterfly-arbitrage", Severity.WARNING, "C7")
    assert str(issue) == (
        'market.xlsx, sheet volatilities, row 7, column "volatility" (cell C7): found butterfly arbitrage of 1.23 vol '
        "points in the quotes of ARVENNE for 2027-03-01, at strike 110.0 % of the forward; expected option prices that "
        "are convex in strike. Lower the volatility at this strike by 1.23 vol points, or raise its neighbours."
    )


def test_a_calendar_arbitrage_names_both_dates():
    found = Violation(ArbitrageKind.CALENDAR, day(91), day(365), math.log(0.8), 0.002, True)
    (issue,) = surface_gates(with_([found]))
    assert str(issue) == (
        "found calendar arbitrage of 0.20 vol points in the quotes of ARVENNE for 2027-03-01 and 2027-11-30, at strike "
        "80.0 % of the forward; expected total variance that does not fall in time. Raise the volatility of 2027-11-30 "
        "there by 0.20 vol points, or lower the other."
    )


def test_arbitrage_left_in_the_fit_is_told_as_such():
    found = Violation(ArbitrageKind.BUTTERFLY, day(91), day(365), 0.0, 0.0329, False)
    (issue,) = surface_gates(with_([found]))
    assert str(issue) == (
        "found butterfly arbitrage (g = -0.0329) in the fitted surface of ARVENNE for 2027-03-01 and 2027-11-30, at "
        "strike 100.0 % of the forward; expected option prices that are convex in strike. The quotes around it admit "
        "no better surface; review them."
    )


def test_of_many_violations_the_ten_worst_are_told_and_the_rest_counted():
    many = [
        Violation(ArbitrageKind.BUTTERFLY, day(91), None, 0.01 * i, 0.001 + 0.001 * (i % 13), True) for i in range(13)
    ]
    issues = surface_gates(with_(many), cell)
    assert len(issues) == 11
    assert "of 1.30 vol points" in issues[0].found and "of 0.40 vol points" in issues[9].found
    assert str(issues[10]).endswith(
        "found 3 more violations of ARVENNE, none larger than those named; expected a surface without arbitrage. "
        "Correct the larger ones first; they often cause the others."
    )


def test_the_worst_missed_quote_in_the_middle_is_told_with_the_number_of_others():
    quotes = (fit(91, 0.9, 0.0007), fit(91, 1.0, -0.0012), fit(365, 1.1, 0.0006), fit(365, 1.6, 0.02, delta=0.01))
    (issue,) = surface_gates(with_(quotes=quotes), cell)
    assert (issue.code, issue.severity, issue.row) == ("volatility-miss", Severity.WARNING, 7)
    assert (issue.found, issue.expected, issue.mend) == (
        "a surface of ARVENNE that misses the quote of 2027-03-01 at strike 100 (100.0 % of the forward) by 0.12 vol "
        "points: 19.88 % for 20.00 %, and 2 more of its quotes by less",
        "quotes between 10 and 90 delta met within 0.05 vol points",
        "Check these quotes and their neighbours: no surface free of arbitrage and smooth in strike meets them.",
    )


def test_small_misses_and_those_far_out_are_not_told():
    assert surface_gates(with_(quotes=(fit(91, 1.0, 0.00049), fit(91, 0.5, 0.02, delta=0.99)))) == ()


def test_a_failing_surface_is_one_error_with_every_reason_and_the_remedy():
    failing = replace(SOUND, failures=("quotes contradict each other: X", "a quote is missed by 0.60 vol points: Y"))
    (issue,) = surface_gates(replace(failing, quotes=(fit(91, 1.0, 4e-4), fit(365, 1.0, 3e-4))), cell)
    assert (issue.code, issue.severity) == ("failing-surface", Severity.ERROR)
    assert str(issue) == (
        'market.xlsx, sheet volatilities, row 7, column "volatility" (cell C7): found a volatility surface of ARVENNE '
        "that fails its checks: quotes contradict each other: X; a quote is missed by 0.60 vol points: Y; expected "
        "quotes that a surface free of arbitrage meets. Correct the quotes of this underlying, or run with "
        "--accept-failing-surfaces: trades on it are then priced and marked."
    )


def at_quotes(key):
    return (
        Place("market.xlsx", "volatilities", 9, "volatility", key.rpartition(":")[2]) if key.count(":") == 3 else None
    )


def test_each_finding_stands_at_the_quote_it_is_about():
    quotes = (fit(91, 0.9, 1e-5), fit(91, 1.0, 2e-5), fit(365, 0.9, 0.008), fit(365, 1.1, 3e-5))
    failing = ("a quote is missed",)
    miss, failure = surface_gates(with_(quotes=quotes, failures=failing), at_quotes)
    assert (miss.code, miss.cell) == ("volatility-miss", "90.0")
    assert (failure.code, failure.cell) == ("failing-surface", "90.0")
    small = Violation(ArbitrageKind.CALENDAR, day(91), day(365), math.log(0.91), 0.001, True)
    large = Violation(ArbitrageKind.BUTTERFLY, day(365), None, math.log(1.2), 0.02, True)
    cells = [issue.cell for issue in surface_gates(with_([small, large], quotes, failing), at_quotes)]
    assert cells == [str(quotes[3].strike), "90.0", "90.0", str(quotes[3].strike)]
