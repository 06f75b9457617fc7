"""Local volatility against closed forms (CEV), finite differences and QuantLib's two-dimensional engine."""

from __future__ import annotations

import re

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.local_vol_monte_carlo import sample_local_vol
from pricer.engines.local_vol_problem import LocalVolProblem
from tests.reference.checker import check, numbers, read
from tests.reference.quantlib_local_vol import extrapolated, process
from tests.unit.local_vol_cases import constant, power, tabulated

ROWS = read("local_volatility.csv")
ONE_ASSET = [row for row in ROWS if row["case_id"].startswith("LV-CEV-")]
FORWARD = [row for row in ROWS if row["case_id"].startswith("LV-CEVF-")]
TWO_ASSETS = [row for row in ROWS if row["case_id"].startswith("LV-2A-")]
KINDS = {"call": ProfileKind.CALL, "put": ProfileKind.PUT}
SHAPES = {
    "basket": Aggregate.weighted_sum,
    "spread": Aggregate.weighted_sum,
    "worst_of": lambda _: Aggregate.worst_of(2),
    "max": lambda _: Aggregate.best_of(2),
}

#: Local volatility of these processes grows without bound as the price falls; it is held at most this.
HIGHEST = 4.0
#: Absorbed at 0 with a probability that the value sees: no table of bounded volatility has that law.
ABSORBED = {"LV-CEV-11"}


def parameters(text: str, name: str) -> list[float]:
    return [float(x) for x in re.search(rf"{name}=([-0-9.|]+)", text)[1].split("|")]


def problem_of(row: dict[str, str], aggregate: Aggregate, kind: ProfileKind, cap: float) -> LocalVolProblem:
    """Levels in currency, over spot for a row with a relative strike."""
    spots, dividends = numbers(row["spots"]), numbers(row["div_yields"])
    rate, years, strike = float(row["r"]), float(row["t"]), float(row["strike"])
    volatility = parameters(row["local_vol"], "(?:sigma0|alpha)")
    exponent = parameters(row["local_vol"], "beta")
    n = int(row["n"])
    growth = rate - dividends
    if "forward" in row["model"]:  # dF = alpha F^beta dW: the volatility at F(0) is alpha F(0)^(beta - 1)
        volatility = [a * f ** (b - 1.0) for a, b, f in zip(volatility, exponent, spots, strict=True)]
        growth = np.zeros(n)
    surfaces = tuple(
        tabulated(power(s, b, float(g), cap), s, years, cells=64, nodes=641)
        for s, b, g in zip(volatility, exponent, growth, strict=True)
    )
    scale = spots if "relative" in row["product"] else np.ones(n)
    correlation = np.eye(n)
    if n > 1:
        correlation[0, 1] = correlation[1, 0] = float(row["rho"])
    return LocalVolProblem(
        surfaces,
        correlation,
        spots * np.exp(growth * years) / scale,
        np.zeros(n),
        *constant(volatility, years),
        years,
        aggregate,
        Profile(kind, strike).payoff(),
        float(np.exp(-rate * years)),
    )


def sampled(problem: LocalVolProblem, tolerance: float):
    got = sample_local_vol(problem, group="reference", seed=1, value_tolerance=tolerance, delta_tolerance=np.inf)
    assert got.reached, got.ending
    return got


def one_asset(row: dict[str, str]) -> float:
    problem = problem_of(row, Aggregate.weighted_sum((1.0,)), KINDS[row["product"]], HIGHEST)
    # an eighth of what is allowed for the error of sampling, half as much for the bias of steps
    return sampled(problem, 0.125 * max(float(row["tolerance"]), 2e-5 * float(row["spots"]))).value


def test_cev_options_with_drift_agree_with_their_closed_form():
    check([row for row in ONE_ASSET if row["case_id"] not in ABSORBED], one_asset)


def test_an_absorbing_process_is_approached_as_the_bound_on_volatility_rises():
    (row,) = (row for row in ONE_ASSET if row["case_id"] in ABSORBED)
    values = [
        sampled(problem_of(row, Aggregate.weighted_sum((1.0,)), ProfileKind.PUT, cap), 0.01).value
        for cap in (1.0, 2.0, 4.0)
    ]
    off = np.array(values) - float(row["value"])
    assert np.all(np.diff(off) > 0.0) and -0.06 < off[2] < 0.01


def test_cev_options_on_forwards_agree_with_their_closed_form():
    # closed forms to 1e-6; a sample is asked for 0.2 bp of the forward 2.1
    check(FORWARD, one_asset, tolerance=4.2e-5)


def two_assets(row: dict[str, str]) -> float:
    shape = next(name for name in SHAPES if name in row["product"])
    weights = re.search(r"weights ([-0-9.,]+)", row["product"])
    aggregate = SHAPES[shape](tuple(map(float, weights[1].split(","))) if weights else ())
    kind = ProfileKind.PUT if "put" in row["product"] else ProfileKind.CALL
    return sampled(problem_of(row, aggregate, kind, 2.0), 0.125 * float(row["tolerance"])).value


def test_two_asset_options_agree_with_finite_differences():
    check(TWO_ASSETS, two_assets)


MARKETS = {  # spot, dividend, volatility, exponent of each; rate, correlation, days
    "mild": (((100.0, 0.02, 0.3, 0.5), (100.0, 0.0, 0.2, 0.7)), 0.05, 0.4, 365),
    "unlike": (((100.0, 0.0, 0.25, 0.6), (100.0, 0.01, 0.3, 1.3)), 0.03, 0.6, 730),
}
#: QuantLib ends its grid at quantiles of the flat volatility's law. Where the local volatility makes fatter
#: tails (exponents below about 0.3) its own one-dimensional values are off by whole units; none is used here.
QUANTLIB = [
    ("basket", "mild", ProfileKind.CALL, 100.0),
    ("spread", "mild", ProfileKind.CALL, 5.0),
    ("worst of", "mild", ProfileKind.PUT, 95.0),
    ("best of", "unlike", ProfileKind.CALL, 110.0),
    ("worst of", "unlike", ProfileKind.PUT, 90.0),
]
AGGREGATES = {
    "basket": Aggregate.weighted_sum((0.5, 0.5)),
    "spread": Aggregate.weighted_sum((1.0, -1.0)),
    "best of": Aggregate.best_of(2),
    "worst of": Aggregate.worst_of(2),
}


@pytest.mark.parametrize(("shape", "market", "kind", "strike"), QUANTLIB)
def test_two_asset_values_agree_with_quantlibs_finite_differences(shape, market, kind, strike):
    assets, rate, rho, days = MARKETS[market]
    years, cap = days / 365.0, 2.0
    processes = [process(s, rate, q, v, b, cap, years) for s, q, v, b in assets]
    option = ql.Option.Put if kind is ProfileKind.PUT else ql.Option.Call
    want, off = extrapolated(shape, option, strike, days, processes, rho, size=100)
    surfaces = tuple(tabulated(power(v, b, rate - q, cap), v, years, cells=64, nodes=641) for _, q, v, b in assets)
    forwards = np.array([s * np.exp((rate - q) * years) for s, q, _, _ in assets])
    problem = LocalVolProblem(
        surfaces,
        np.array([[1.0, rho], [rho, 1.0]]),
        forwards,
        np.zeros(2),
        *constant([v for _, _, v, _ in assets], years),
        years,
        AGGREGATES[shape],
        Profile(kind, strike).payoff(),
        float(np.exp(-rate * years)),
    )
    got = sampled(problem, 2e-3)
    # t of 30 degrees of freedom: beyond 4.5 standard errors once in 10,000; 1e-3 for the bias of steps
    assert abs(got.value - want) < off + 4.5 * got.standard_error + 1e-3
    assert off < 5e-3
