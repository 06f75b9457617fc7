"""Path-dependent trades against published and independently computed values.

Discrete barriers: Broadie, Glasserman & Kou (1997), table 2.1, and convolution by quadrature. Worst-of digitals:
multivariate normal distribution. Autocallables, reverse convertible and down-and-in put: antithetic Monte Carlo and
tensor grids. The rows say how each value was obtained.
"""

import csv
from pathlib import Path

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Event, Leg, Payment, Reading, Trigger, When
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings, sample_paths
from tests.unit.barrier_legs import knocked_in, knocked_out, observed_knock_in
from tests.unit.note_legs import Observation
from tests.unit.note_legs import autocallable as leg_of


def rows(name):
    with (Path(__file__).parent / name).open() as file:
        return {row["case_id"]: row for row in csv.DictReader(file)}


BARRIERS = {k: row for k, row in rows("barriers.csv").items() if "dates" in row["monitoring"]}
NOTES = rows("worst_of_and_autocallable.csv")


def value(law, legs, tolerance, points=2**14):
    settings = PathSettings(maximum_points=points)
    return sample_paths(
        PathProblem(law, tuple(legs)), group="reference", seed=1, value_tolerance=tolerance, settings=settings
    )


def agrees(found, row):
    # the reference's own tolerance, and four of our standard errors
    assert abs(found.value - float(row["value"])) < float(row["tolerance"]) + 4.0 * found.standard_error


@pytest.mark.parametrize("case", BARRIERS)
def test_discrete_barrier_options(case):
    row = BARRIERS[case]
    number = {k: float(row[k]) for k in ("s1", "strike", "barrier", "r", "q1", "v1", "t")}
    m = int(row["monitoring"].split()[0])
    times = number["t"] * np.arange(1, m + 1) / m
    drift = number["r"] - number["q1"]
    law = PathLaw.constant(times, np.array([number["s1"]]), np.array([drift]), np.array([number["v1"]]), np.eye(1))
    price = Reading(Aggregate.weighted_sum((1.0,)), (1.0,))
    kind = ProfileKind.CALL if row["product"].endswith("call") else ProfileKind.PUT
    df = float(np.exp(-number["r"] * number["t"]))
    end = Payment(Profile(kind, number["strike"]).payoff(), df, When.SURVIVING, price)
    side = "above" if row["product"].startswith("up") else "below"
    leg = knocked_out(end, m - 1, range(m), **{side: Trigger(price, number["barrier"])})
    found = value(law, [leg], 5e-4 * float(row["value"]))
    agrees(found, row)
    assert found.reached


def law_of(row, times):
    n = int(row["n"])
    spots, yields, volatilities = (
        np.array([float(x) for x in row[k].split("|")]) for k in ("spots", "div_yields", "vols")
    )
    correlation = np.eye(n)
    upper = [float(x) for x in row["corr_upper"].split("|")] if row["corr_upper"] else []
    correlation[np.triu_indices(n, 1)] = upper
    correlation = correlation + correlation.T - np.eye(n)
    return PathLaw.constant(np.asarray(times), spots, float(row["r"]) - yields, volatilities, correlation)


def performance(row, aggregate):
    return Reading(aggregate, tuple(float(x) for x in row["spots"].split("|")))


@pytest.mark.parametrize("case", [c for c in NOTES if c[:5] in ("WO-DG", "WO-BG")])
def test_worst_and_best_of_digitals(case):
    row = NOTES[case]
    t, n = float(row["t"]), int(row["n"])
    law = law_of(row, [t])
    reading = performance(row, Aggregate.worst_of(n) if case.startswith("WO-DG") else Aggregate.best_of(n))
    digital = PiecewiseLinear(0.0, 0.0, (float(row["terms"].split("=")[1]),), (0.0,), (100.0,))
    pays = Payment(digital, float(np.exp(-float(row["r"]) * t)), When.ALIVE, reading)
    agrees(value(law, [Leg((Event(0, payments=(pays,)),))], 2e-4, 2**16), row)


def note(case, times, triggers, redemptions, knock_in, **coupons):
    row = NOTES[case]
    n = int(row["n"])
    worst = performance(row, Aggregate.worst_of(n))
    law = law_of(row, times)
    dfs = np.exp(-float(row["r"]) * law.times)
    seen = [
        Observation(j, float(dfs[j]), triggers[j], redemptions[j], coupons.get("level"), coupons.get("coupon", 0.0))
        for j in range(len(times))
    ]
    final = PiecewiseLinear(0.0, 100.0, (knock_in,), (-100.0,), (100.0 * (1.0 - knock_in),))
    return value(law, [leg_of(seen, worst, final, memory="level" in coupons)], 2e-3), row


def test_snowball_on_two_assets():
    found, row = note("AC-S2-2", [0.5, 1.0, 1.5, 2.0], [0.95] * 4, [104.0, 108.0, 112.0, 116.0], 0.7)
    agrees(found, row)


def test_snowball_on_three_assets():
    found, row = note("AC-S3-1", [1.0, 2.0, 3.0], [1.0] * 3, [110.0, 120.0, 130.0], 0.6)
    agrees(found, row)


def test_memory_coupons_on_two_assets():
    found, row = note("AC-P2-1", [0.5, 1.0, 1.5, 2.0], [1.0] * 3 + [None], [100.0] * 4, 0.6, level=0.7, coupon=3.0)
    agrees(found, row)


def test_reverse_convertible_with_a_monthly_knock_in():
    row = NOTES["AC-B1-1"]
    times = np.arange(1, 13) / 12.0
    law = law_of(row, times)
    level = performance(row, Aggregate.worst_of(1))
    dfs = np.exp(-float(row["r"]) * times)
    coupons = Leg(tuple(Event(j, payments=(Payment.fixed(0.8, float(dfs[j]), When.ALIVE),)) for j in range(12)))
    end = Payment(PiecewiseLinear(0.0, 0.0), float(dfs[-1]), When.SURVIVING, level)
    touched, whole = PiecewiseLinear(0.0, 100.0, (1.0,), (-100.0,), (0.0,)), PiecewiseLinear(100.0, 0.0)
    agrees(value(law, observed_knock_in(coupons, Trigger(level, 0.7), range(12), touched, whole, end), 1e-3), row)


def test_worst_of_put_knocked_in_monthly():
    row = NOTES["AC-D2-1"]
    times = np.arange(1, 13) / 12.0
    law = law_of(row, times)
    worst = performance(row, Aggregate.worst_of(2))
    put = PiecewiseLinear(100.0, -100.0, (1.0,), (100.0,), (0.0,))
    end = Payment(put, float(np.exp(-float(row["r"]))), When.SURVIVING, worst)
    agrees(value(law, knocked_in(end, 11, range(12), below=Trigger(worst, 0.75)), 2e-3), row)
