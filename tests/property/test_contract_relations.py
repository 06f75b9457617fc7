"""Relations between contracts that hold whatever the model: values by legs on common draws."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import pytest

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.fixings import Fixings
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.appraisal import AppraisalSettings, appraise
from pricer.engines.contract_value import ContractSettings
from tests.property.test_seasoning_consistency import (
    AT_EXPIRY,
    EXPIRY,
    FIXED,
    NOTE,
    OBSERVED,
    SPOTS,
    TODAY,
    WORST,
    market_on,
    paid,
)

MARKET = market_on(TODAY, SPOTS, Fixings())
SETTINGS = AppraisalSettings(
    seed=7, precision_bp=1.0, delta_precision_bp=100.0, contract=ContractSettings(with_checks=False)
)
PUT = Profile(ProfileKind.PUT, 1.0)
COUPONS, CALL, KNOCK_IN = NOTE.features
UP, DOWN = Trigger(Direction.UP, WORST), Trigger(Direction.DOWN, WORST)


def worth(contract: Contract | EuropeanOption) -> tuple[float, float]:
    found = appraise(Trade("RELATION", contract, 1.0, "EUR"), MARKET, SETTINGS).leading.headline
    return found.value, found.standard_error


def barrier(kind: BarrierKind, trigger: Trigger, level: float) -> Barrier:
    return Barrier(kind, trigger, tuple(map(paid, OBSERVED)), (level,) * len(OBSERVED))


def option(*features) -> Contract:
    return Contract(FIXED, AT_EXPIRY, PUT, paid(EXPIRY), features)


def note(*features) -> Contract:
    return replace(NOTE, features=features)


@pytest.mark.parametrize(("trigger", "level"), [(DOWN, 0.75), (DOWN, 0.95), (UP, 1.02)])
def test_knocked_in_and_knocked_out_are_together_plain(trigger, level):
    (plain, error), *halves = (
        worth(option()),
        worth(option(barrier(BarrierKind.IN, trigger, level))),
        worth(option(barrier(BarrierKind.OUT, trigger, level))),
    )
    slack = 4.0 * (error + sum(e for _, e in halves))  # four standard errors, added as if they erred together
    assert sum(value for value, _ in halves) == pytest.approx(plain, abs=slack)
    assert min(value for value, _ in halves) > 0.0


def test_an_autocallable_that_is_never_called_is_its_bond_less_a_put():
    never = replace(CALL, levels=(99.0,) * len(CALL.levels))
    sure = Coupons(tuple(Coupon(day, paid(day).payment_date, 0.03) for day in OBSERVED))
    value, error = worth(note(sure, never))
    put, put_error = worth(option())
    bond = sum(0.03 * MARKET.discount_factor("EUR", "", paid(day).payment_date) for day in OBSERVED)
    bond += MARKET.discount_factor("EUR", "", paid(EXPIRY).payment_date)
    assert value == pytest.approx(bond - put, abs=4.0 * (error + put_error))


def test_an_autocallable_that_is_always_called_is_its_first_payment():
    always = replace(CALL, levels=(0.01,) * len(CALL.levels))
    value, error = worth(note(always))
    first = MARKET.discount_factor("EUR", "", paid(OBSERVED[0]).payment_date)
    assert value == pytest.approx(first, abs=4.0 * error + 1e-9)


def increasing(values):
    """Each value above the one before; the draws are common, so that sampling hides nothing."""
    return all(later > earlier for earlier, later in pairwise(values))


def test_a_note_is_worth_more_with_larger_coupons_and_lower_coupon_levels():
    def with_coupons(amount, level):
        coupons = tuple(replace(coupon, amount=amount, level=level) for coupon in COUPONS.coupons)
        return worth(note(replace(COUPONS, coupons=coupons), CALL, KNOCK_IN))[0]

    assert increasing([with_coupons(amount, 0.7) for amount in (0.01, 0.02, 0.03)])
    assert increasing([with_coupons(0.03, level) for level in (1.0, 0.8, 0.6)])


def test_a_note_is_worth_less_with_a_higher_knock_in_barrier():
    barriers = (replace(KNOCK_IN, levels=(level,)) for level in (0.9, 0.8, 0.7, 0.6))
    assert increasing([worth(note(COUPONS, CALL, knock_in))[0] for knock_in in barriers])


def test_a_knock_out_is_worth_more_the_further_its_barrier():
    assert increasing([worth(option(barrier(BarrierKind.OUT, DOWN, level)))[0] for level in (0.95, 0.85, 0.75)])
    assert increasing([worth(option(barrier(BarrierKind.OUT, UP, level)))[0] for level in (0.98, 1.05, 1.15)])


def test_the_chance_of_a_call_rises_as_triggers_step_down():
    def chance(step):
        levels = tuple(1.0 - step * k for k in range(len(CALL.levels)))
        contract = note(COUPONS, replace(CALL, levels=levels), KNOCK_IN)
        life = appraise(Trade("RELATION", contract, 1.0, "EUR"), MARKET, SETTINGS).leading.life
        return sum(end.probability for end in life.ends), -life.expected_life

    assert increasing([chance(step) for step in (0.0, 0.03, 0.06)])
    assert isinstance(CALL, Autocall)
