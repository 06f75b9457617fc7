"""Options with a structural writer, valued as trades: formulas, sampling, deltas, and what is refused."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from pricer.engines.problem import ReferenceKind
from pricer.engines.vulnerable_value import claim_fault, vulnerable_value
from pricer.market.credit import HazardCurve
from tests.unit.markets import TODAY, small_market

EXPIRY = Observation(date(2027, 12, 17), date(2027, 12, 21))
ASKED = Asked("T1", 7, 1e-4, 1e-4, 1e-4)
CALL = Profile(ProfileKind.CALL, 1.0)
ALONE, PAIR = Levels(("ARVENNE",), (100.0,)), Levels(("ARVENNE", "BELCOR"), (100.0, 50.0))
ONE, WORST = Aggregate.weighted_sum((1.0,)), Aggregate.worst_of(2)


def market():
    """The assets of the writer are CADMUS, worth 80 in euro."""
    known = small_market()
    return small_market(
        underlyings={**known.underlyings, "CADMUS": replace(known.underlyings["CADMUS"], currency="EUR")}
    )


def trade(levels, aggregate, payout=CALL, liabilities=70.0, lost=0.2, position=1.0):
    writer = Writer("Ostrevane", structural=StructuralDefault("CADMUS", liabilities, lost if liabilities else 0.0))
    contract = Contract(levels, ExpiryLevel(EXPIRY.day, aggregate), payout, EXPIRY, (), writer)
    return Trade("T1", contract, position, "EUR")


def terms_of(wanted, on):
    spots = {name: underlying.spot for name, underlying in on.underlyings.items()}
    return ContractTerms.of(wanted, as_of(wanted.contract, TODAY, Fixings.from_rows(()), spots), on)


def value(wanted, on=None):
    on = on or market()
    return vulnerable_value(wanted, terms_of(wanted, on), on, ASKED)


CASES = {
    "one": (ALONE, ONE, CALL),
    "basket": (PAIR, Aggregate.weighted_sum((0.5, 0.5)), CALL),
    "worst": (PAIR, WORST, CALL),
    "geometric digital": (PAIR, Aggregate.geometric((0.5, 0.5)), Profile(ProfileKind.CASH_DIGITAL_CALL, 1.0)),
}


@pytest.mark.parametrize("liabilities", [70.0, 0.0])
@pytest.mark.parametrize("name", CASES)
def test_formulas_and_the_sample_agree_and_default_takes_something(name, liabilities):
    found = value(trade(*CASES[name], liabilities, position=60.0))
    exact = [r for r in found.references if r.kind is ReferenceKind.EXACT]
    (sure,) = (r for r in found.references if r.kind is ReferenceKind.UPPER_BOUND)
    assert exact
    for reference in exact:
        # Eight comparisons of 31 degrees of freedom at a fixed seed.
        assert abs(found.sample.value - reference.value) < 4.0 * found.sample.standard_error + reference.error
        assert 0.0 < reference.value < sure.value
    assert found.sample.standard_error < 2e-4
    assert found.headline.value == exact[0].value


def test_deltas_are_those_of_moved_spots():
    wanted, on = trade(PAIR, WORST), market()
    found = value(wanted, on)
    for i, name in enumerate(("ARVENNE", "BELCOR")):
        spot = on.underlyings[name].spot
        moved = [
            value(wanted, replace(on, underlyings={**on.underlyings, name: replace(on.underlyings[name], spot=s)}))
            for s in (spot * 1.003, spot / 1.003)
        ]
        slope = (moved[0].headline.value - moved[1].headline.value) / (spot * (1.003 - 1.0 / 1.003))
        assert abs(found.ratios.deltas[i] - slope) < 4.0 * found.ratios.delta_errors[i] + 1e-4 * slope


def test_a_writer_who_owes_nothing_else_is_the_safer_the_smaller_the_position():
    values = [value(trade(ALONE, ONE, CALL, 0.0, position=p)).headline.value for p in (1.0, 50.0, 1000.0)]
    sure = next(r for r in value(trade(ALONE, ONE)).references if r.kind is ReferenceKind.UPPER_BOUND)
    assert values[0] == pytest.approx(sure.value, abs=1e-9)
    assert np.all(np.diff(values[1:]) < 0.0)


def test_what_the_holder_owes_is_owed_to_a_writer_in_default_as_well():
    forward = value(trade(ALONE, ONE, Profile(ProfileKind.FORWARD, 1.0)))
    call, put = (value(trade(ALONE, ONE, Profile(kind, 1.0))) for kind in (ProfileKind.CALL, ProfileKind.PUT))
    sure_put = next(r.value for r in put.references if r.kind is ReferenceKind.UPPER_BOUND)
    assert forward.headline.value == pytest.approx(call.headline.value - sure_put, abs=1e-12)


def test_an_aggregate_without_a_formula_is_led_by_its_sample():
    ranks = Aggregate.rank_weighted((1.3, -0.4))
    found = value(trade(PAIR, ranks, Profile(ProfileKind.STRADDLE, 0.9)))
    reference = [r for r in found.references if r.kind is ReferenceKind.EXACT]
    assert found.headline.value == (reference[0].value if reference else found.sample.value)
    assert 0.0 < found.sample.standard_error < 1e-3


def test_contracts_on_more_than_one_day_are_left_to_others():
    wanted = trade(ALONE, ONE)
    days = (date(2027, 6, 18), EXPIRY.day)
    average = replace(wanted, contract=replace(wanted.contract, statistic=Average(days, ONE)))
    assert value(average) is None
    assert value(replace(wanted, contract=replace(wanted.contract, writer=None))) is None


def test_a_forward_start_counts_the_assets_covariance_from_the_start_only():
    wanted = trade(ALONE, ONE)
    start = date(2027, 6, 18)
    forward = replace(wanted, contract=replace(wanted.contract, levels=Levels(("ARVENNE",), None, (start,))))
    found = value(forward)
    (first, *_) = found.references
    assert abs(found.sample.value - first.value) < 4.0 * found.sample.standard_error


def test_a_hazard_rate_may_weigh_claims_only():
    wanted = trade(ALONE, ONE).contract
    reduced = replace(wanted, writer=Writer("Ostrevane"))
    assert claim_fault(reduced) is None
    assert "can be negative" in claim_fault(replace(reduced, payout=Profile(ProfileKind.FORWARD, 1.0)))
    spread = replace(reduced, levels=PAIR, statistic=ExpiryLevel(EXPIRY.day, Aggregate.weighted_sum((1.0, -1.0))))
    assert claim_fault(spread) is None
    assert claim_fault(replace(spread, payout=Profile(ProfileKind.ASSET_DIGITAL_PUT, 0.0))) is not None
    assert claim_fault(replace(wanted, payout=Profile(ProfileKind.FORWARD, 1.0))) is None


def test_a_claim_weighed_with_survival_is_the_sure_one_times_what_is_expected_of_it():
    wanted, on = trade(ALONE, ONE), market()
    curve = HazardCurve.from_hazard_rates("Ostrevane", TODAY, 0.4, [date(2031, 11, 28)], [0.03])
    risky = replace(wanted, contract=replace(wanted.contract, writer=Writer("Ostrevane")))
    sure = terms_of(replace(wanted, contract=replace(wanted.contract, writer=None)), on)
    weighed = terms_of(risky, replace(on, credit={"Ostrevane": curve}))
    day = EXPIRY.payment_date
    share = 0.4 + 0.6 * curve.survival_probability(day)
    assert weighed.discount(day) == pytest.approx(sure.discount(day) * share, rel=1e-14)


def test_a_writer_without_other_liabilities_has_no_deadweight_cost():
    with pytest.raises(ValueError, match="without a deadweight cost"):
        StructuralDefault("CADMUS", 0.0, 0.1)
    with pytest.raises(ValueError, match="liabilities must be 0 or more"):
        StructuralDefault("CADMUS", -1.0)
