"""What must hold of the closed forms of any contract with any past."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from pricer.contracts import ageing
from pricer.contracts.life_cycle import Status, as_of
from pricer.engines.closed_form.contract_references import contract_references
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import ReferenceKind
from tests.property.seasoned_contracts_at_random import DAYS, path, record, seasoned_contracts

UNHURRIED = settings(max_examples=60, deadline=None)
RATE = 0.03


def terms_of(contract, day, prices, volatility=0.8):
    """Wild levels, so that a few weeks decide something; assets are half correlated."""
    n = len(contract.underlyings)
    spots = prices[DAYS.index(day)]
    today = dict(zip(contract.underlyings, spots.tolist(), strict=True))
    stands = as_of(contract, day, record(prices, contract.underlyings), today)
    dates = tuple(d for d in contract.dates if d > day)
    times = np.array([(d - day).days / 365.0 for d in dates])
    one = volatility**2 * (0.5 * np.eye(n) + 0.5)

    def discount(paid):
        return math.exp(-RATE * (paid - day).days / 365.0)

    return ContractTerms(
        as_of=stands,
        contract=contract,
        dates=dates,
        times=times,
        forwards=spots * np.exp(np.outer(times, np.linspace(0.0, 0.03, n))),
        floors=np.zeros((len(dates), n)),
        covariances=np.diff(times, prepend=0.0)[:, np.newaxis, np.newaxis] * one,
        discount=discount,
        known_value=sum(p.amount * discount(p.payment_date) for p in stands.to_be_paid),
        unit_notional=1.0,
        random_spots=spots,
        rates=np.ones(n),
    )


def simulated(terms, paths, seed):
    """Mean and standard error of what the contract pays on simulated prices, and the mean's reach in one path."""
    random = np.random.default_rng(seed)
    m, n = terms.forwards.shape
    roots = np.linalg.cholesky(terms.covariances)
    drift = 0.5 * np.cumsum(np.diagonal(terms.covariances, axis1=1, axis2=2), axis=0)
    start = replace(terms.as_of.progress, payments=())
    values = []
    for _ in range(paths):
        moves = np.cumsum(np.einsum("kij,kj->ki", roots, random.standard_normal((m, n))), axis=0)
        prices = terms.forwards * np.exp(moves - drift)
        paid = ageing.walk(terms.contract, start, terms.dates, prices).progress.payments
        values.append(sum(p.amount * terms.discount(p.payment_date) for p in paid))
    return np.mean(values) + terms.known_value, np.std(values, ddof=1) / math.sqrt(paths)


@UNHURRIED
@given(seasoned_contracts(), st.integers(0, 10_000), st.integers(0, len(DAYS) - 2))
def test_references_of_any_contract_agree_with_each_other_and_with_what_it_pays(contract, seed, i):
    terms = terms_of(contract, DAYS[i], path(seed, len(contract.underlyings)))
    found = contract_references(terms)
    if terms.as_of.status is not Status.LIVE:
        assert found == ()
    exact = [r for r in found if r.kind is ReferenceKind.EXACT]
    assume(exact)
    for other in exact[1:]:
        assert other.value == pytest.approx(exact[0].value, abs=other.error + exact[0].error + 1e-9)
    for bound in found:
        if bound.kind is ReferenceKind.LOWER_BOUND:
            assert bound.value <= exact[0].value + exact[0].error + bound.error + 1e-12
        if bound.kind is ReferenceKind.UPPER_BOUND:
            assert bound.value >= exact[0].value - exact[0].error - bound.error - 1e-12
    value, error = simulated(terms, 300, seed)
    # Sixty draws of few paths, some of whose payments are rare: a gross error is looked for, and rare ones are allowed
    # for by what one path in three hundred may pay.
    assert abs(value - exact[0].value) < 6.0 * error + 2.0 / 300.0


@UNHURRIED
@given(seasoned_contracts(), st.integers(0, 10_000), st.integers(0, len(DAYS) - 2))
def test_known_amounts_enter_every_reference_once(contract, seed, i):
    terms = terms_of(contract, DAYS[i], path(seed, len(contract.underlyings)))
    more = replace(terms, known_value=terms.known_value + 0.25)
    for before, after in zip(contract_references(terms), contract_references(more), strict=True):
        assert after.value == pytest.approx(before.value + 0.25, abs=1e-12)
