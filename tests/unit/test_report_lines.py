"""The short lines of the summary's tables."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from pricer.report.styles import Mark
from pricer.report.top import SHOWN, lines_of_groups, lines_of_underlyings, lines_of_verdicts
from pricer.report.totals import book_total, group_totals
from pricer.report.underlying_totals import underlying_totals
from pricer.report.verdicts import NO_SAMPLING, without_sampling
from pricer.run.outcome import Verdict
from tests.unit.report_outcomes import checks_of, empty, outcome, valuation


def test_a_sum_over_underlyings_has_no_standard_error_because_they_share_draws():
    totals = underlying_totals(outcome())
    lines = lines_of_underlyings(totals)
    assert lines[-1].name == "total"
    assert math.isnan(lines[-1].numbers[-1])
    assert lines[-1].numbers[-2] == pytest.approx(sum(t.reporting_cash_delta for t in totals))
    assert [line.numbers[-1] for line in lines[:-1]] == [t.reporting_cash_delta_standard_error for t in totals]


def test_the_rest_of_many_underlyings_has_no_standard_error_either():
    totals = underlying_totals(outcome())
    many = [replace(t, underlying=f"{t.underlying} {i}") for t in totals for i in range(2)]
    rest = lines_of_underlyings(many)[SHOWN]
    assert rest.name == f"other ({len(many) - SHOWN})"
    assert math.isnan(rest.numbers[-1])


@pytest.mark.parametrize("shown", [12, 20])
def test_a_table_shows_as_many_groups_as_it_has_room_for(shown):
    run = empty(valuations=tuple(valuation(i, product=f"product {i}") for i in range(40)))
    lines = lines_of_groups(group_totals(run, "product"), book_total(run).total, shown=shown)
    assert len(lines) == shown + 2
    assert lines[shown].name == f"other ({40 - shown})"
    assert sum(line.numbers[0] for line in lines[:-1]) == 40


def test_standard_errors_measure_exact_references_and_broken_bounds_alone():
    lines = {line.name: line.numbers[-1] for line in lines_of_verdicts(outcome().cross_checks)}
    blank = {name for name, largest in lines.items() if math.isnan(largest)}
    assert blank == {Verdict.WITHIN_BOUND, Verdict.FAR, Verdict.CLOSE}
    assert lines[Verdict.DIFFERS] == pytest.approx(9.3)
    assert lines[Verdict.OUTSIDE_BOUND] == pytest.approx(8.1)


def test_disagreements_have_a_line_where_none_occurred_and_other_verdicts_have_not():
    lines = lines_of_verdicts([checks_of(valuation(1))[0]])
    assert [(line.name, line.numbers[0]) for line in lines] == [("differs", 0), ("outside bound", 0), ("agrees", 1)]
    assert {line.mark for line in lines} == {Mark.NONE}


def test_agreement_of_two_exact_values_is_counted_apart():
    exact, below, near = checks_of(valuation(1))
    same = {"engine_standard_error": 0.0, "difference": 0.0, "difference_standard_errors": None}
    checks = [exact, exact, replace(exact, **same), replace(below, **same), near]
    lines = {line.name: line for line in lines_of_verdicts(checks)}
    assert (lines["agrees"].numbers[0], lines[NO_SAMPLING].numbers[0], lines["within bound"].numbers[0]) == (2, 1, 1)
    assert sum(line.numbers[0] for line in lines.values()) == len(checks)
    assert lines[NO_SAMPLING].mark is Mark.NONE


def test_a_difference_of_two_exact_values_stays_an_alarm():
    exact = checks_of(valuation(1))[0]
    wrong = replace(exact, engine_standard_error=0.0, difference_standard_errors=None, verdict=Verdict.DIFFERS)
    assert not without_sampling(wrong)
    first = lines_of_verdicts([wrong])[0]
    assert (first.name, first.numbers[0], first.mark) == ("differs", 1, Mark.LOOK)
