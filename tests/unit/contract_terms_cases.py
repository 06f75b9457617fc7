"""Terms of contracts on invented levels under constant rates and volatilities, and their values by plain simulation."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from pricer.contracts import ageing
from pricer.contracts.fixings import Fixings
from pricer.contracts.life_cycle import as_of
from pricer.contracts.observation import Observation
from pricer.engines.contract_terms import ContractTerms
from tests.unit.seasoned_contracts import NAMES, week

RATE, YIELDS, VOLATILITIES = 0.04, np.array([0.01, 0.03, 0.0]), np.array([0.25, 0.35, 0.2])
CORRELATION = np.array([[1.0, 0.5, 0.3], [0.5, 1.0, 0.4], [0.3, 0.4, 1.0]])
SPOTS = np.array([95.0, 108.0, 101.0])


def quarter(k):
    """The day of the k-th quarter: 13 weeks each."""
    return week(13 * k)


def seen(k):
    """The observation of quarter k, paid two weeks later."""
    return Observation(quarter(k), week(13 * k + 2))


def discount_from(today, rate=RATE):
    return lambda day: math.exp(-rate * (day - today).days / 365.0)


def terms_of(contract, today=None, past=None, spots=SPOTS, rate=RATE, scale=1.0, floors=0.0):
    """``past`` are fixings; volatilities are multiplied by ``scale``; every price holds ``floors`` of known cash."""
    today = today or quarter(0)
    n = len(contract.underlyings)
    stands = as_of(contract, today, past or Fixings.from_rows(()), dict(zip(NAMES, spots, strict=False)))
    days = tuple(day for day in contract.dates if day > today)
    times = np.array([(day - today).days / 365.0 for day in days])
    steps = np.diff(times, prepend=0.0)
    one = CORRELATION[:n, :n] * np.outer(VOLATILITIES[:n], VOLATILITIES[:n]) * scale**2
    discount = discount_from(today, rate)
    return ContractTerms(
        as_of=stands,
        contract=contract,
        dates=days,
        times=times,
        forwards=spots[:n] * np.exp(np.outer(times, rate - YIELDS[:n])) - floors,
        floors=np.full((len(days), n), floors),
        covariances=steps[:, None, None] * one,
        discount=discount,
        known_value=sum(p.amount * discount(p.payment_date) for p in stands.to_be_paid),
        unit_notional=1.0,
        random_spots=spots[:n].copy(),
        rates=np.ones(n),
    )


def with_uneven_steps(terms, seed=3):
    """The same with volatilities and drifts that change from date to date."""
    random = np.random.default_rng(seed)
    factors = 0.5 + random.random(len(terms.dates))
    drifts = 0.03 * random.standard_normal(len(terms.dates))
    return replace(
        terms,
        covariances=terms.covariances * factors[:, None, None],
        forwards=terms.forwards * np.exp(np.cumsum(drifts))[:, None],
    )


def simulated(terms, paths=400, seed=1):
    """Value and standard error by showing the contract its own simulated prices, path by path, with mirror images."""
    random = np.random.default_rng(seed)
    m, n = terms.forwards.shape
    roots = [np.linalg.cholesky(c) for c in terms.covariances]
    normals = random.standard_normal((paths, m, n))
    drift = 0.5 * np.cumsum(np.diagonal(terms.covariances, axis1=1, axis2=2), axis=0)
    values = np.zeros(paths)
    start = replace(terms.as_of.progress, payments=())
    for sign in (1.0, -1.0):
        moves = np.cumsum(np.einsum("kij,pkj->pki", np.array(roots), sign * normals), axis=1)
        prices = terms.forwards * np.exp(moves - drift) + terms.floors
        for i in range(paths):
            paid = ageing.walk(terms.contract, start, terms.dates, prices[i]).progress.payments
            values[i] += 0.5 * sum(p.amount * terms.discount(p.payment_date) for p in paid)
    return float(values.mean()) + terms.known_value, float(values.std(ddof=1) / math.sqrt(paths))
