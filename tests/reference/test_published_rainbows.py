"""Best and worst of several assets against published and constructed values.

Boyle, Evnine & Gibbs (1989), Barraquand & Martineau (1995), Levy (2004), and cases
constructed for the formula of Johnson (1987), each recomputed by a second route.
"""

from __future__ import annotations

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form.extremes import EXTREMES, TWO_ASSET_EXTREMES
from tests.reference.checker import call_or_put, check, problem_of, read, value_by

RAINBOWS = read("rainbow_n_asset.csv")
DIGITALS = read("multi_asset_digital.csv")


def by_johnson(row):
    n = int(row["n"])
    aggregate = Aggregate.best_of(n) if row["product"].endswith("max") else Aggregate.worst_of(n)
    return value_by(EXTREMES, problem_of(row, aggregate, call_or_put(row)))


def digital(row):
    n = int(row["n"])
    aggregate = Aggregate.best_of(n) if row["product"].startswith("best") else Aggregate.worst_of(n)
    # Performances: the spots are all 100, the barrier is a fraction of them.
    barrier = 100.0 * float(row["terms"].removeprefix("B="))
    profile = Profile(ProfileKind.CASH_DIGITAL_CALL, barrier, cash_amount=100.0)
    return value_by(TWO_ASSET_EXTREMES if n == 2 else EXTREMES, problem_of(row, aggregate, profile))


def test_rainbows_meet_published_values():
    check(RAINBOWS, by_johnson)


def test_rainbows_meet_recomputed_values():
    # Perfectly correlated rows were recomputed by a quadrature across a kink, good to 2e-5.
    smooth = [row for row in RAINBOWS if not row["case_id"].endswith("r1.0")]
    perfect = [row for row in RAINBOWS if row["case_id"].endswith("r1.0")]
    check(smooth, by_johnson, against="recomputed_value", tolerance=1e-8)
    check(perfect, by_johnson, against="recomputed_value", tolerance=2e-5)


def test_digitals_on_the_best_and_the_worst_meet_constructed_values():
    check(DIGITALS, digital)
