"""All references of a problem together: which apply, whether they agree, and what they do at the edges."""

from __future__ import annotations

import math
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import ProfileKind
from pricer.engines.closed_form import FAMILIES, best_exact, references
from pricer.engines.problem import Reference, ReferenceKind
from tests.unit.closed_form_cases import equal_correlation, law, problem, random_correlation, random_problem


def agreement(known):
    """Every exact value within the errors of every other, and every bound on its side."""
    exact = [r for r in known if r.kind is ReferenceKind.EXACT]
    for one in exact:
        assert math.isfinite(one.value)
        assert one.error >= 0.0
        for r in known:
            slack = one.error + r.error + 1e-14
            if r.kind is ReferenceKind.EXACT:
                assert abs(r.value - one.value) <= slack, (one, r)
            elif r.kind is ReferenceKind.LOWER_BOUND:
                assert r.value <= one.value + slack, (one, r)
            elif r.kind is ReferenceKind.UPPER_BOUND:
                assert r.value >= one.value - slack, (one, r)
    return exact


def test_references_of_random_problems_agree_with_each_other():
    rng = np.random.default_rng(99)
    several = 0
    for _ in range(250):
        exact = agreement(references(random_problem(rng, int(rng.integers(1, 6)))))
        several += len(exact) > 1
    assert several > 25


def test_call_minus_put_is_the_forward_for_every_aggregate():
    rng = np.random.default_rng(5)
    for _ in range(60):
        seed = int(rng.integers(2**31))
        n = int(rng.integers(1, 5))
        values, errors = [], []
        for profile in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.FORWARD):
            exact = best_exact(references(random_problem(np.random.default_rng(seed), n, profiles=(profile,))))
            if exact is not None:
                values.append(exact.value)
                errors.append(exact.error)
        if len(values) == 3:
            assert values[0] - values[1] == pytest.approx(values[2], abs=sum(errors))


JOINT2 = law([1.0, 0.9], [0.2, 0.4], equal_correlation(2, 0.3))
JOINT3 = law([1.0, 0.9, 1.1], [0.2, 0.4, 0.3], random_correlation(np.random.default_rng(2), 3))
SPREAD = Aggregate.weighted_sum((1.0, -1.0))
BASKET = Aggregate.weighted_sum((0.4, 0.3, 0.3))
JOHNSON = "best or worst of several, multivariate normal"
QUADRATURE = "exact along one direction, sparse grid across"
BOUNDS = ["conditional mean", "conditional upper bound"]
APPROXIMATIONS = ["Kirk", "Bjerksund & Stensland"]
TWO_ASSET = "two-asset sum, one-dimensional quadrature"


@pytest.mark.parametrize(
    ("case", "methods"),
    [
        (problem(JOINT2, SPREAD, ProfileKind.EXCHANGE), ["exchange option", TWO_ASSET, *BOUNDS, *APPROXIMATIONS]),
        (problem(JOINT2, SPREAD, ProfileKind.CALL, 0.1), [TWO_ASSET, *BOUNDS, *APPROXIMATIONS]),
        (problem(JOINT2, SPREAD, ProfileKind.CASH_DIGITAL_CALL, 0.1), [TWO_ASSET]),
        (problem(JOINT2, SPREAD, ProfileKind.CALL, 0.1, cap=0.2), [TWO_ASSET, *APPROXIMATIONS]),
        (problem(JOINT2, Aggregate.best_of(2), ProfileKind.PUT, 1.0), ["best or worst of two, bivariate normal"]),
        (problem(JOINT2, Aggregate.kth_best(2, 2), ProfileKind.PUT, 1.0), ["best or worst of two, bivariate normal"]),
        (problem(JOINT2, Aggregate.rank_weighted((0.5, 0.5)), ProfileKind.FORWARD, 1.0), ["forward"]),
        (problem(JOINT3, BASKET, ProfileKind.PUT, 1.0), [QUADRATURE, *BOUNDS, "two moments, lognormal"]),
        (problem(JOINT3, BASKET, ProfileKind.ASSET_DIGITAL_PUT, 1.0), [QUADRATURE, "two moments, lognormal"]),
        (problem(JOINT3, BASKET, ProfileKind.FORWARD, 1.0), ["forward"]),
        (problem(JOINT3, Aggregate.worst_of(3), ProfileKind.CASH_DIGITAL_PUT, 1.0), [JOHNSON]),
        (
            problem(JOINT3, Aggregate.kth_best(2, 3), ProfileKind.CALL, 1.0),
            ["k-th best, inclusion and exclusion over subsets"],
        ),
        (
            problem(JOINT3, Aggregate.rank_weighted((0.6, 0.3, 0.1)), ProfileKind.CALL, 1.0),
            ["weights on sorted levels, quadrature over their gaps"],
        ),
        (problem(JOINT3, Aggregate.geometric((0.4, 0.3, 0.3)), ProfileKind.CALL, 1.0), ["geometric basket"]),
        (problem(JOINT3, Aggregate.weighted_sum((0.0, 2.0, 0.0)), ProfileKind.CALL, 1.0), ["Black-Scholes-Merton"]),
        (problem(JOINT3, Aggregate.weighted_sum((1.0, 0.0, -1.0)), ProfileKind.STRADDLE, 0.0), ["exchange option"]),
    ],
)
def test_the_expected_references_apply_in_their_order(case, methods):
    found = [r.method for r in references(case)]
    assert found[: len(methods)] == methods
    if methods != ["exchange option"]:
        assert found == methods


@pytest.mark.parametrize(
    "aggregate",
    [
        Aggregate.weighted_sum((1.0, -1.0, 0.5)),
        Aggregate.best_of(3),
        Aggregate.worst_of(3),
        Aggregate.kth_best(2, 3),
        Aggregate.rank_weighted((0.5, 0.3, 0.2)),
        Aggregate.geometric((0.3, 0.3, 0.4)),
    ],
    ids=lambda aggregate: aggregate.kind,
)
@pytest.mark.parametrize("kind", [ProfileKind.CALL, ProfileKind.PUT, ProfileKind.CASH_DIGITAL_CALL])
def test_at_expiry_the_payoff_on_the_known_level_is_returned(aggregate, kind):
    joint = law([100.0, 90.0, 80.0], [0.2, 0.3, 0.4], equal_correlation(3, 0.5), years=0.0)
    p = problem(joint, aggregate, kind, 55.0, 0.98)
    known = references(p)
    agreement(known)
    assert best_exact(known).value == pytest.approx(0.98 * float(p.payoff(aggregate(joint.forwards))), abs=1e-12)


@pytest.mark.parametrize("strike", [-500.0, -1e-6, 0.0, 1e-6, 5e5])
@pytest.mark.parametrize(
    "aggregate",
    [
        Aggregate.weighted_sum((0.5, 0.3, 0.2)),
        Aggregate.weighted_sum((1.0, -0.6, -0.4)),
        Aggregate.weighted_sum((1.0, -1.0, 0.0)),
        Aggregate.best_of(3),
        Aggregate.kth_best(2, 3),
        Aggregate.rank_weighted((0.5, 0.3, 0.2)),
        Aggregate.geometric((0.3, 0.3, 0.4)),
    ],
    ids=str,
)
def test_far_strikes_give_intrinsic_values(strike, aggregate):
    joint = law([100.0, 90.0, 80.0], [0.2, 0.3, 0.4], random_correlation(np.random.default_rng(0), 3))
    put, call = (references(problem(joint, aggregate, kind, strike)) for kind in (ProfileKind.PUT, ProfileKind.CALL))
    agreement(put)
    agreement(call)
    exact = [best_exact(known) for known in (put, call)]
    assert min(e.value for e in exact) >= -1e-9
    forward = best_exact(references(problem(joint, aggregate, ProfileKind.FORWARD, strike)))
    assert exact[1].value - exact[0].value == pytest.approx(
        forward.value, abs=exact[0].error + exact[1].error + forward.error
    )
    if abs(strike) > 100.0:  # further than any spread of these assets reaches
        assert min(e.value for e in exact) == pytest.approx(0.0, abs=1e-3)


@pytest.mark.parametrize("rho", [1.0, 0.9999, -0.4999, -0.5])
def test_singular_and_nearly_singular_correlations_give_agreeing_numbers(rho):
    joint = law([100.0, 95.0, 105.0], [0.2, 0.3, 0.25], equal_correlation(3, rho))
    for aggregate in (
        Aggregate.weighted_sum((0.4, 0.3, 0.3)),
        Aggregate.weighted_sum((1.0, -1.0, 0.0)),
        Aggregate.best_of(3),
        Aggregate.kth_best(2, 3),
        Aggregate.rank_weighted((0.5, 0.3, 0.2)),
    ):
        for kind in (ProfileKind.CALL, ProfileKind.CASH_DIGITAL_PUT):
            agreement(references(problem(joint, aggregate, kind, 60.0)))


@pytest.mark.parametrize("scale", [1e-6, 1e-3, 1e4])
def test_values_scale_with_the_levels(scale):
    for aggregate in (BASKET, Aggregate.weighted_sum((1.0, -1.0, 0.2)), Aggregate.best_of(3)):
        big = law(JOINT3.forwards * scale, JOINT3.deviations, JOINT3.correlation)
        one = references(problem(JOINT3, aggregate, ProfileKind.CALL, 0.4))
        other = references(problem(big, aggregate, ProfileKind.CALL, 0.4 * scale))
        assert [r.method for r in one] == [r.method for r in other]
        for a, b in zip(one, other, strict=True):
            assert b.value == pytest.approx(scale * a.value, abs=scale * (a.error + 1e-9))


def test_relabelling_the_assets_changes_nothing():
    order = [2, 0, 1]
    moved = law(JOINT3.forwards[order], JOINT3.deviations[order], JOINT3.correlation[np.ix_(order, order)])
    weights = (0.7, -0.2, 0.5)
    pairs = [
        (Aggregate.weighted_sum(weights), Aggregate.weighted_sum(tuple(weights[i] for i in order))),
        (Aggregate.worst_of(3), Aggregate.worst_of(3)),
        (Aggregate.rank_weighted(weights), Aggregate.rank_weighted(weights)),
    ]
    for here, there in pairs:
        one = references(problem(JOINT3, here, ProfileKind.CALL, 0.9))
        other = references(problem(moved, there, ProfileKind.CALL, 0.9))
        for a, b in zip(one, other, strict=True):
            assert a.value == pytest.approx(b.value, abs=a.error + b.error + 1e-10)


def test_references_are_the_same_to_the_last_bit_from_many_threads():
    rng = np.random.default_rng(1)
    cases = [random_problem(rng, int(rng.integers(1, 5))) for _ in range(40)]
    alone = [references(case) for case in cases]
    with ThreadPoolExecutor(4) as pool:
        together = list(pool.map(references, cases))
    assert alone == together


def test_the_most_trusted_exact_reference_within_the_tolerance_leads():
    def made(kind, error, method):
        return Reference(method, kind, 1.0, error, "none")

    exact, bound = ReferenceKind.EXACT, ReferenceKind.LOWER_BOUND
    known = (
        made(bound, 0.0, "bound"),
        made(exact, 1e-5, "coarse"),
        made(exact, 1e-8, "fine"),
        made(exact, 1e-15, "claims most"),
    )
    assert best_exact(known, 1e-4).method == "coarse"
    assert best_exact(known, 1e-6).method == "fine"
    assert best_exact(known, 1e-12).method == "claims most"
    assert best_exact(known, 1e-16) is None
    assert best_exact(known).method == "coarse"
    assert best_exact(known[:1]) is None
    assert best_exact(iter(())) is None


def test_formulas_are_trusted_before_integrals_over_one_variable_and_these_before_integrals_over_several():
    exact = [family.method for family in FAMILIES if family.kind is ReferenceKind.EXACT]
    order = [
        "Black-Scholes-Merton",
        "perfectly correlated sum",
        TWO_ASSET,
        "ranked level, one common factor",
        JOHNSON,
        "weights on sorted levels, quadrature over their gaps",
        QUADRATURE,
    ]
    assert [method for method in exact if method in order] == order
    assert [family.kind for family in FAMILIES[: len(exact)]] == [ReferenceKind.EXACT] * len(exact)


def test_every_family_is_listed_once_and_cites_its_source():
    assert len({family.method for family in FAMILIES}) == len(FAMILIES)
    assert all(family.source for family in FAMILIES)


def test_importing_the_closed_forms_loads_neither_a_compiler_nor_statistics():
    code = "import sys, pricer.engines.closed_form; print([m in sys.modules for m in ('numba', 'scipy.stats')])"
    shown = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert shown.strip() == "[False, False]"
