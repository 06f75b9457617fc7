"""Whole runs under both models: which leads, what they differ by, what is marked, and deltas against bumps."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Book, Model
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.surface_replication import METHOD
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.run.outcome import Interval, Status, Verdict
from pricer.run.pricing import price
from pricer.run.settings import Settings
from tests.unit.markets import basket
from tests.unit.smiled_markets import LEVELS, real_market

SMILED = real_market()
FLAT = real_market(smiles=False)
LOCAL, LOGNORMAL = Model.LOCAL_VOLATILITY, Model.LOGNORMAL


def run(*trades, market=SMILED, **settings):
    named = tuple(replace(trade, trade_id=f"T{i}") for i, trade in enumerate(trades))
    return price(Book("night", named), market, Settings(workers=2, **settings))


def option(*names, aggregate=None, conversion=None, performance=True, strike=1.0, kind=ProfileKind.CALL, **terms):
    trade = basket(*names, **terms)
    n = len(names)
    contract = replace(
        trade.contract,
        aggregate=aggregate or Aggregate.weighted_sum((1.0 / n,) * n),
        profile=Profile(kind, strike),
        conversion=conversion,
        on_performance=performance,
        reference_levels=tuple(LEVELS[name] for name in names) if performance else (1.0,) * n,
    )
    return replace(trade, contract=contract, position=1e6)


WORST = {"aggregate": Aggregate.worst_of(2), "kind": ProfileKind.PUT}


def test_the_smile_leads_where_there_is_one_and_the_difference_is_told():
    outcome = run(option("ARVENNE", "BELCOR", strike=0.9, kind=ProfileKind.PUT))
    (value,) = outcome.valuations
    assert (value.model, value.status) == (LOCAL, Status.PRICED)
    assert value.time_steps >= 8
    # a put far below is worth more with a skew than at the at-the-forward volatility
    assert value.model_difference > 10.0 * value.model_difference_standard_error > 0.0
    (plain,) = run(option("ARVENNE", "BELCOR", strike=0.9, kind=ProfileKind.PUT), model=LOGNORMAL).valuations
    assert plain.model is LOGNORMAL
    assert plain.value == pytest.approx(value.value - value.model_difference, rel=1e-12)
    assert plain.model_difference == value.model_difference


def test_a_trades_own_model_comes_before_the_runs():
    asked = replace(option("ARVENNE"), model=LOGNORMAL)
    one, two = run(asked, option("ARVENNE"), model=LOCAL).valuations
    assert (one.model, two.model) == (LOGNORMAL, LOCAL)


def test_one_model_alone_has_no_difference_and_the_same_value():
    (both,) = run(option("ARVENNE", "BELCOR")).valuations
    (alone,) = run(option("ARVENNE", "BELCOR"), compare_models=False).valuations
    assert alone.value == both.value
    assert (alone.model_difference, alone.model_difference_standard_error) == (None, None)


def test_without_smiles_both_models_are_one():
    asked = replace(option("ARVENNE", "BELCOR"), model=LOCAL)
    free, smiled = run(option("ARVENNE", "BELCOR"), asked, market=FLAT).valuations
    assert (free.model, smiled.model) == (LOGNORMAL, LOCAL)
    assert free.value == pytest.approx(smiled.value, abs=1e-4 * 1e6)
    assert (free.model_difference, smiled.model_difference) == (0.0, 0.0)


def test_a_flat_surface_makes_both_models_agree():
    smiles = real_market().surfaces
    flat = {name: replace(each, surface=FLAT.implied_surface(name), quotes=()) for name, each in smiles.items()}
    market = replace(SMILED, surfaces=flat)
    trades = [option("ARVENNE", "BELCOR"), option("BELCOR", "ARVENNE", **WORST),
              option("ARVENNE", "CADMUS", conversion=Conversion.QUANTO),
              option("ARVENNE", "CADMUS", conversion=Conversion.COMPOSITE)]  # fmt: skip
    for value in run(*trades, market=market).valuations:
        assert abs(value.model_difference) <= 4.0 * value.model_difference_standard_error + 1.0


def test_one_underlying_is_worth_what_its_surface_says_and_paths_agree():
    outcome = run(option("ARVENNE", strike=0.95, kind=ProfileKind.PUT), option("BELCOR", kind=ProfileKind.STRADDLE))
    for value in outcome.valuations:
        assert (value.interval, value.method) == (Interval.EXACT, METHOD)
    checks = [check for check in outcome.cross_checks if check.reference_method == METHOD]
    assert [(check.model, check.verdict) for check in checks] == [(LOCAL, Verdict.AGREES)] * 2
    assert {check.model for check in outcome.cross_checks} == {LOCAL, LOGNORMAL}


def test_every_quoted_vanilla_comes_back_from_the_paths():
    outcome = run(option("ARVENNE", "BELCOR"))
    assert [facts.underlying for facts in outcome.market.surfaces] == ["ARVENNE", "BELCOR", "CADMUS"]
    arvenne, _, cadmus = outcome.market.surfaces
    inside = [quote for quote in arvenne.quotes if quote.counts]
    assert len(inside) >= 12
    # the target of the issue: 0.05 vol points
    assert max(abs(quote.simulated - quote.quoted) for quote in inside) < 5e-4
    assert all(quote.simulated is None for quote in cadmus.quotes)  # no trade needs it


def test_simulated_forwards_are_the_curves_on_every_date_ex_dates_included():
    outcome = run(option("ARVENNE", "BELCOR"))
    points = [point for point in outcome.market.forwards if point.underlying == "ARVENNE"]
    assert date(2027, 5, 20) in [point.date for point in points if point.dividend == 2.0]
    for point in points:
        assert point.simulated == pytest.approx(point.forward, abs=5.0 * point.simulated_standard_error + 1e-4)
        assert point.simulated_standard_error < 0.01


def fails(name):
    return replace(SMILED.surfaces[name], failures=("its quotes contradict each other",))


def test_nothing_is_priced_from_a_failing_surface_unless_asked_and_then_it_is_marked():
    market = replace(SMILED, surfaces={**SMILED.surfaces, "BELCOR": fails("BELCOR")})
    trades = option("ARVENNE"), option("ARVENNE", "BELCOR")
    outcome = run(*trades, market=market)
    assert [value.trade_id for value in outcome.valuations] == ["T0"]
    (refused,) = outcome.refusals
    assert [issue.code for issue in refused.issues] == ["failing-surface"]
    assert "--accept-failing-surfaces" in refused.issues[0].mend
    marked = run(*trades, market=market, accept_failing_surfaces=True)
    assert [value.status for value in marked.valuations] == [Status.PRICED, Status.FAILING_SURFACE]
    assert [issue.code for issue in marked.issues] == ["failing-surface"]
    # so it is under the lognormal model, whose volatilities come from the same quotes
    assert run(trades[1], market=market, model=LOGNORMAL).refusals


def test_correlations_move_towards_one_and_zero():
    trade = option("ARVENNE", "BELCOR", **WORST)
    plain, one, zero = (
        run(trade, **how).valuations[0].value
        for how in ({}, {"correlation_towards_one": 0.5}, {"correlation_towards_zero": 0.5})
    )
    assert one < plain < zero  # a worst-of put loves dispersion
    with pytest.raises(ValueError, match="either towards one or towards zero"):
        Settings(correlation_towards_one=0.1, correlation_towards_zero=0.1)


CASES = {
    "basket with a floor": option("ARVENNE", "BELCOR"),
    "worst of with a floor": option("ARVENNE", "BELCOR", **WORST),
    "quanto basket": option("CADMUS", "ARVENNE", conversion=Conversion.QUANTO),
    "quanto worst of": option("CADMUS", "BELCOR", conversion=Conversion.QUANTO, **WORST),
    "composite basket": option("CADMUS", "BELCOR", conversion=Conversion.COMPOSITE, strike=0.9),
    "composite worst of": option("CADMUS", "ARVENNE", conversion=Conversion.COMPOSITE, **WORST),
}


def moved_market(name, bump, model, monkeypatch):
    """The spot times ``1 + bump``: volatilities stay, local ones as a function of time and level."""
    market = real_market(smiles=model is LOCAL, spots={name: LEVELS[name] * (1.0 + bump)})
    if model is LOGNORMAL:
        return market
    still, surface_of = SMILED.implied_surface(name), LocalVolSurface.from_implied
    shift = np.log(market.affine_price(name).random_spot / SMILED.affine_price(name).random_spot)

    def from_implied(surface, horizon):
        if surface is not still:
            return surface_of(surface, horizon=horizon)
        base = surface_of(still, horizon=horizon)
        rows = [np.interp(base.nodes(i) + shift, base.nodes(i), base.values[i]) for i in range(len(base.values))]
        return replace(base, values=np.array(rows))

    monkeypatch.setattr(LocalVolSurface, "from_implied", from_implied)
    return replace(market, surfaces=SMILED.surfaces)


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("model", list(Model))
def test_deltas_are_what_shares_would_replace(case, model, monkeypatch):
    """Bumps by common draws."""
    trade, smiles, h = CASES[case], model is LOCAL, 0.004
    precise = {"precision_bp": 0.2, "compare_models": False, "model": model}
    middle = run(trade, market=real_market(smiles=smiles), **precise).valuations[0]
    for delta in middle.deltas:
        name = delta.underlying
        spot = LEVELS[name]
        moved = []
        for bump in (h, -h):
            with monkeypatch.context() as patch:
                moved.append(run(trade, market=moved_market(name, bump, model, patch), **precise).valuations[0].value)
        difference = (moved[0] - moved[1]) / (2.0 * h * spot)
        rate = 1.0 / 1.10 if name == "CADMUS" and trade.contract.conversion else 1.0
        # 1e6 of notional: 0.2 bp of it is 20, and each of the two values is off by some of it
        allowed = 5.0 * delta.standard_error + (2.0 * 20.0 / (2.0 * h * spot) + 0.004 * 1e6 / spot) / rate
        assert delta.delta == pytest.approx(difference / rate, abs=allowed), name


def test_vegas_of_one_asset_are_to_the_quoted_volatility_whatever_it_pays():
    """A quanto's forward moves with the volatility; a floor makes the random part move more."""
    bump = 0.001
    expiry = FLAT.underlyings["ARVENNE"].volatility.dates[0]
    trades = option("ARVENNE", expiry=expiry), option("CADMUS", conversion=Conversion.QUANTO, expiry=expiry)
    for trade in trades:
        name = trade.contract.underlyings[0]
        (value,) = run(trade, market=FLAT, precision_bp=0.05).valuations
        moved = []
        for side in (1.0, -1.0):
            own = FLAT.underlyings[name]
            times = np.array(own.volatility.times[1:])
            volatilities = np.sqrt(np.array(own.volatility.variances[1:]) / times) + side * bump
            curve = type(own.volatility).from_quotes(FLAT.valuation_date, own.volatility.dates, volatilities.tolist())
            market = replace(FLAT, underlyings={**FLAT.underlyings, name: replace(own, volatility=curve)})
            moved.append(run(trade, market=market, precision_bp=0.05).valuations[0].value)
        assert value.deltas[0].vega == pytest.approx((moved[0] - moved[1]) / (2.0 * 100.0 * bump), rel=5e-3)


def test_composites_have_no_vega():
    (value,) = run(CASES["composite basket"], market=FLAT).valuations
    assert all(np.isnan(delta.vega) for delta in value.deltas)
