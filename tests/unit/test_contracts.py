"""Aggregates and the European option built on them."""

from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind

LEVELS = np.array([[1.1, 0.8, 0.95], [0.7, 0.9, 1.3]])


@pytest.mark.parametrize(
    ("aggregate", "want"),
    [
        (Aggregate.weighted_sum((1.0, -0.5, 2.0)), [2.6, 2.85]),
        (Aggregate.geometric((1.0, 1.0, 2.0)), [1.1 * 0.8 * 0.95**2, 0.7 * 0.9 * 1.3**2]),
        (Aggregate.best_of(3), [1.1, 1.3]),
        (Aggregate.worst_of(3), [0.8, 0.7]),
        (Aggregate.kth_best(2, 3), [0.95, 0.9]),
        (Aggregate.rank_weighted((0.5, 0.3, 0.2)), [0.55 + 0.285 + 0.16, 0.65 + 0.27 + 0.14]),
        (Aggregate.best_of(3, cash=1.2), [1.2, 1.3]),
        (Aggregate.worst_of(3, cash=0.75), [0.75, 0.7]),
    ],
)
def test_an_aggregate_is_what_its_name_says(aggregate, want):
    np.testing.assert_allclose(aggregate(LEVELS), want)


@pytest.mark.parametrize("k", [0, 4])
def test_a_rank_outside_the_basket_is_refused(k):
    with pytest.raises(ValueError, match="between 1 and 3"):
        Aggregate.kth_best(k, 3)


def test_geometric_weights_must_be_positive():
    with pytest.raises(ValueError, match="positive"):
        Aggregate.geometric((1.0, 0.0))


def test_only_best_and_worst_compete_with_cash():
    with pytest.raises(ValueError, match="compete with cash"):
        Aggregate(AggregateKind.KTH_BEST, (1.0, 0.0), cash=1.0)


def option(aggregate, profile, references=(1.0, 1.0, 1.0), on_performance=False):
    day = date(2027, 6, 18)
    return EuropeanOption(("A", "B", "C")[: len(references)], references, aggregate, profile, day, day, on_performance)


@pytest.mark.parametrize("cash", [0.5, 0.9, 1.25])
@pytest.mark.parametrize("make", [Aggregate.best_of, Aggregate.worst_of])
@pytest.mark.parametrize("kind", ProfileKind)
def test_the_engines_view_without_cash_pays_the_same(cash, make, kind):
    contract = option(make(3, cash), Profile(kind, 1.0, 0.1))
    core = make(3)(LEVELS)
    np.testing.assert_allclose(contract.payoff_on_core()(core), contract.payoff(LEVELS))


def test_performance_divides_by_the_initial_fixings():
    contract = option(Aggregate.worst_of(3), Profile(ProfileKind.FORWARD), (2.0, 1.0, 1.0), on_performance=True)
    np.testing.assert_allclose(contract.payoff(LEVELS), [0.55, 0.35])


@pytest.mark.parametrize(
    ("contract", "want"),
    [
        (option(Aggregate.weighted_sum((1.0, -1.0, 0.5)), Profile(ProfileKind.CALL, 3.0)), 10.0 + 20.0 + 15.0),
        (option(Aggregate.best_of(3), Profile(ProfileKind.PUT, 3.0)), 30.0),
        (option(Aggregate.best_of(3), Profile(ProfileKind.CASH_DIGITAL_PUT, 3.0, 7.0)), 7.0),
        (option(Aggregate.best_of(3), Profile(ProfileKind.CALL, 1.0), (9.0, 9.0, 9.0), on_performance=True), 1.0),
    ],
)
def test_the_notional_of_one_unit(contract, want):
    assert contract.unit_notional(np.array([10.0, 20.0, 30.0])) == want


def test_products_have_everyday_names():
    call = Profile(ProfileKind.CALL, 1.0)
    assert option(Aggregate.weighted_sum((0.5, 0.3, 0.2)), call).product == "basket call"
    assert option(Aggregate.weighted_sum((0.5, 0.3, -0.2)), call).product == "spread call"
    assert option(Aggregate.weighted_sum((1.0,)), call, (1.0,)).product == "single-asset call"
    assert option(Aggregate.best_of(3, 1.0), call).product == "best of assets and cash call"


def test_weights_must_match_the_underlyings():
    with pytest.raises(ValueError, match="equal in number"):
        option(Aggregate.best_of(2), Profile(ProfileKind.CALL, 1.0))


def test_an_option_without_a_notional_is_refused():
    with pytest.raises(ValueError, match="at least one weight"):
        option(Aggregate.rank_weighted((0.0, 0.0, 0.0)), Profile(ProfileKind.CALL, 1.0))
    with pytest.raises(ValueError, match="amount other than 0"):
        option(Aggregate.best_of(3), Profile(ProfileKind.CASH_DIGITAL_PUT, 1.0, cash_amount=0.0))
