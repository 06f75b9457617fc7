"""From a book and a market to frozen results: positions, premiums, order, refusals."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Book, Premium
from pricer.core.issues import Severity
from pricer.core.progress import Silent
from pricer.engines import european
from pricer.engines.closed_form import best_exact, references
from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.unit_terms import UnitTerms
from pricer.market.correlation import checked
from pricer.run import pricing
from pricer.run.local import map_groups
from pricer.run.outcome import Interval, Status, Verdict
from pricer.run.pricing import price
from pricer.run.settings import Settings
from tests.unit.markets import TODAY, basket, small_market

MARKET = small_market()


def book(*trades):
    return Book("night", tuple(trades))


def named(trade, trade_id, **changes):
    return replace(trade, trade_id=trade_id, **changes)


def priced(*trades, market=MARKET, **settings):
    return price(book(*trades), market, Settings(workers=2, **settings))


def test_a_position_is_its_quantity_times_the_value_of_one_unit():
    trade = basket("ARVENNE", "BELCOR")
    unit = best_exact(references(UnitTerms.of(trade, MARKET).lognormal())).value
    long, short = priced(named(trade, "L"), named(trade, "S", position=-40.0)).valuations
    assert long.value == pytest.approx(100.0 * unit, rel=1e-12)
    assert short.value == pytest.approx(-40.0 * unit, rel=1e-12)
    assert short.lower <= short.value <= short.upper
    assert (long.interval, long.standard_error, long.status) == (Interval.EXACT, 0.0, Status.PRICED)
    # a price option's notional: quantity times the basket at spot, 0.5 x 100 + 0.5 x 50
    assert (long.notional, short.notional) == (7500.0, 3000.0)


def test_a_premium_still_to_be_paid_is_inside_the_value_with_the_desks_sign():
    trade = basket("ARVENNE")
    due, paid = Premium(1000.0, date(2027, 3, 1)), Premium(1000.0, TODAY)
    plain, long, short, over = priced(
        named(trade, "P"), named(trade, "L", premium=due), named(trade, "S", premium=due, position=-100.0),
        named(trade, "O", premium=paid),
    ).valuations  # fmt: skip
    discounted = 1000.0 * MARKET.discount_factor("EUR", "", date(2027, 3, 1))
    assert long.value == pytest.approx(plain.value - discounted)
    assert short.value == pytest.approx(-plain.value + discounted)
    assert (long.unpaid_premium, short.unpaid_premium) == (pytest.approx(-discounted), pytest.approx(discounted))
    assert over.value == plain.value


def test_values_are_reported_in_one_currency():
    (v,) = priced(basket("CADMUS", currency="USD")).valuations
    assert v.reporting_value == pytest.approx(v.value / 1.10)  # EURUSD 1.10


def test_deltas_gammas_and_vegas_are_black_scholes_for_one_asset():
    """Textbook formulas with a dividend yield (Hull, Options, Futures and Other Derivatives; from memory)."""
    trade = replace(basket("ARVENNE"), position=-100.0)
    (v,) = priced(trade).valuations
    (row,) = v.deltas
    law = MARKET.joint_lognormal(("ARVENNE",), trade.contract.expiry_date)
    forward, s = float(law.forwards[0]), float(law.deviations[0])
    years = (trade.contract.expiry_date - TODAY).days / 365.0
    df = MARKET.discount_factor("EUR", "", trade.contract.payment_date)
    d1 = math.log(forward / 60.0) / s + 0.5 * s
    density = math.exp(-0.5 * d1 * d1) / math.sqrt(2.0 * math.pi)
    cumulative = 0.5 * math.erfc(-d1 / math.sqrt(2.0))
    growth = forward / 100.0
    assert row.delta == pytest.approx(-100.0 * df * growth * cumulative, rel=1e-9)
    assert row.gamma == pytest.approx(-100.0 * df * growth**2 * density / (forward * s), rel=1e-9)
    assert row.vega == pytest.approx(-100.0 * df * forward * density * math.sqrt(years) / 100.0, rel=1e-9)


def test_a_lower_bound_of_a_unit_bounds_a_short_position_from_above():
    trade = basket("ARVENNE", "BELCOR")
    outcome = priced(named(trade, "L"), named(trade, "S", position=-100.0))
    kinds = {
        side: {c.reference_method: c.reference_kind for c in outcome.cross_checks if c.trade_id == side}
        for side in "LS"
    }
    mirror = {"lower bound": "upper bound", "upper bound": "lower bound"}
    assert "lower bound" in kinds["L"].values()
    assert kinds["S"] == {method: mirror.get(kind, kind) for method, kind in kinds["L"].items()}
    for c in outcome.cross_checks:
        assert c.difference == pytest.approx(c.engine_value - c.reference_value)
        if c.reference_kind == "lower bound":
            assert c.difference >= -c.tolerance


def test_a_trade_that_the_market_does_not_cover_is_refused_with_every_reason():
    outcome = priced(basket("ARVENNE"), named(basket("ARVENE", "CADMUS"), "T2"))
    assert [v.trade_id for v in outcome.valuations] == ["T1"]
    (refused,) = outcome.refusals
    assert {issue.code for issue in refused.issues} == {"unknown-underlying", "other-currency"}
    assert outcome.exit_status == 1


def test_the_exit_status_is_2_when_nothing_could_be_priced():
    assert priced(basket("NOWHERE")).exit_status == 2
    assert priced(basket("ARVENNE")).exit_status == 0


def test_an_engine_failure_costs_one_trade_and_is_told(monkeypatch):
    def broken(problem, **arguments):
        if arguments["group"] == "BAD":
            raise ZeroDivisionError("boom")
        return working(problem, **arguments)

    working = european.sample
    monkeypatch.setattr(european, "sample", broken)
    outcome = priced(basket("ARVENNE"), named(basket("ARVENNE"), "BAD"))
    (issue,) = outcome.issues
    assert (issue.code, issue.trade_id, issue.severity) == ("engine-failed", "BAD", Severity.ERROR)
    assert "ZeroDivisionError: boom" in issue.found
    assert outcome.exit_status == 1


def test_a_trade_whose_cross_check_disagrees_is_disputed(monkeypatch):
    wrong = Reference("wrong formula", ReferenceKind.EXACT, 1.0, 0.0, "nowhere")
    monkeypatch.setattr(european, "references", lambda problem: (wrong,))
    outcome = priced(basket("ARVENNE", "BELCOR"))
    assert outcome.valuations[0].status is Status.DISPUTED
    assert outcome.cross_checks[0].verdict is Verdict.DIFFERS


def test_an_expiry_today_pays_on_todays_spot_and_says_so():
    outcome = priced(basket("ARVENNE", expiry=TODAY))
    (v,) = outcome.valuations
    assert v.value == pytest.approx(100.0 * (100.0 - 60.0))
    assert [issue.code for issue in outcome.issues] == ["spot-for-fixing"]


def ranked(*weights):
    """A trade without any exact value: rank weights on as many underlyings as there are weights."""
    trade = basket("ARVENNE", "BELCOR", "DORNACH", "ELSTRA")
    return replace(trade, contract=replace(trade.contract, aggregate=Aggregate.rank_weighted(weights)))


def wide_market():
    market = small_market()
    ids = ("ARVENNE", "BELCOR", "DORNACH", "ELSTRA")
    more = {name: replace(market.underlyings["BELCOR"], underlying_id=name) for name in ids[2:]}
    correlation = checked(
        ids, np.array([[1, 0.5, 0.4, 0.1], [0.5, 1, 0.3, 0.6], [0.4, 0.3, 1, 0.2], [0.1, 0.6, 0.2, 1]])
    )
    return replace(market, underlyings={**market.underlyings, **more}, correlation=correlation[0])


def test_less_precision_than_asked_is_said():
    tight = replace(Settings().sampling, maximum_points=1024)
    trade, market = ranked(0.5, 0.3, 0.15, 0.05), wide_market()
    (v,) = priced(trade, market=market, precision_bp=1e-4, sampling=tight).valuations
    assert v.status is Status.PRECISION_NOT_REACHED
    assert v.ending.startswith("budget of points spent: standard error")
    (v,) = priced(trade, market=market).valuations
    assert (v.status, v.interval) == (Status.PRICED, Interval.SAMPLING)
    assert v.standard_error <= 1e-4 * v.notional


def test_an_exact_value_is_priced_whatever_sampling_reaches():
    tight = replace(Settings().sampling, maximum_points=1024)
    (v,) = priced(basket("ARVENNE", "BELCOR"), precision_bp=1e-4, sampling=tight).valuations
    assert (v.status, v.interval) == (Status.PRICED, Interval.EXACT)
    assert v.ending.startswith("budget of points spent")


def test_results_come_in_the_order_of_the_work_whoever_finishes_first():
    import time

    def work(n):
        time.sleep(0.01 * (5 - n))
        return n * n

    assert map_groups(work, range(5), workers=5, progress=Silent(), label=str) == [0, 1, 4, 9, 16]


def test_progress_is_told_each_step():
    seen = []

    class Listener:
        def start(self, total):
            seen.append(total)

        def advance(self, label):
            seen.append(label)

        def finish(self):
            seen.append("end")

    pricing.price(book(basket("ARVENNE")), MARKET, Settings(workers=1), Listener())
    assert seen == [1, "T1", "end"]


@pytest.mark.parametrize("wrong", [{"seed": -1}, {"precision_bp": 0.0}, {"workers": 0}, {"precision_bp": math.nan}])
def test_settings_out_of_range_are_refused(wrong):
    with pytest.raises(ValueError, match="got"):
        Settings(**wrong)
