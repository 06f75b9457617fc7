"""Gates over fixings."""

from datetime import date

import pytest

from pricer.contracts.fixings import Fixing, Fixings
from pricer.market.fixing_quality import fixing_gates
from pricer.market.fx import FxRates
from pricer.market.underlying import Underlying
from tests.unit.markets import small_market

TODAY = date(2026, 3, 16)  # a Monday
UNDERLYINGS = {"VESKA": Underlying("VESKA", "EUR", 50.0, "TARGET")}


def found(*rows, name="VESKA", rates=None):
    fixings = Fixings.from_rows(Fixing(name, date.fromisoformat(day), level) for day, level in rows)
    return [(issue.code, issue.found) for issue, _ in fixing_gates(market(fixings, rates))]


def market(fixings, rates=None, **changes):
    fx = FxRates.from_pairs(rates or {})
    return small_market(valuation_date=TODAY, underlyings=UNDERLYINGS, fx=fx, fixings=fixings, **changes)


def test_ordinary_fixings_pass():
    assert found(("2026-03-12", 49.0), ("2026-03-13", 50.5), ("2026-03-16", 50.1)) == []
    assert found(("2023-03-13", 20.0), ("2026-03-13", 50.5)) == []  # two and a half times in three years


def test_a_leap_is_told_with_what_it_leapt_from_and_the_way_back():
    assert found(("2026-03-11", 49.0), ("2026-03-12", 4.91), ("2026-03-13", 50.0)) == [
        ("fixing-leaps", "a fixing 4.91 of VESKA on 2026-03-12, -90.0 % from the fixing 49 of 2026-03-11"),
        ("fixing-leaps", "a fixing 50 of VESKA on 2026-03-13, 918.3 % from the fixing 4.91 of 2026-03-12"),
    ]


def test_tonights_spot_is_compared_with_the_last_fixing_however_old():
    assert found(("2024-03-13", 5000.0)) == [
        ("fixing-leaps", "tonight's price 50 of VESKA, -99.0 % from the fixing 5000 of 2024-03-13")
    ]


@pytest.mark.parametrize(("first", "leaps"), [(36.0, False), (35.0, True)])
def test_the_limit_of_one_day_is_a_move_of_0_35_in_logarithms(first, leaps):
    # exp(0.35) = 1.419: from 36 that is 51.1, from 35 it is 49.7
    assert bool(found(("2026-03-12", first), ("2026-03-13", 50.0))) is leaps


def test_a_fixing_of_a_later_day_is_told_and_does_not_leap():
    assert found(("2026-03-17", 999.0)) == [
        ("fixing-of-a-later-day", "a fixing of VESKA on 2026-03-17, after the valuation date 2026-03-16")
    ]


def test_a_fixing_on_a_holiday_is_told():
    assert found(("2026-03-14", 50.0)) == [
        ("fixing-on-holiday", "a fixing of VESKA on 2026-03-14, not a business day of calendar TARGET")
    ]


def test_a_currency_pair_is_known_either_way_round():
    assert found(("2026-03-13", 0.8), name="USDEUR", rates={"EURUSD": 1.25}) == []
    assert found(("2026-03-13", 1.25), name="USDEUR", rates={"EURUSD": 1.25})[0][0] == "fixing-leaps"


def test_an_unknown_name_is_told_with_the_one_that_may_be_meant():
    fixings = Fixings.from_rows([Fixing("VESKKA", TODAY, 50.0)])
    ((issue, _),) = fixing_gates(market(fixings))
    assert (issue.code, issue.mend[:21]) == ("fixings-of-unknown", 'Did you mean "VESKA"?')
    assert list(fixing_gates(market(fixings, rejected={"VESKKA": ()}))) == []  # told with the underlying


def test_a_leap_puts_in_doubt_the_fixing_that_leapt():
    fixings = Fixings.from_rows(Fixing("VESKA", date(2026, 3, day), level) for day, level in ((12, 50.0), (13, 5.0)))
    assert [doubted for _, doubted in fixing_gates(market(fixings))] == ["fixings:VESKA:2026-03-13"] * 2
