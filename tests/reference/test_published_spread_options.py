"""Spread options against published values: quadrature for the exact ones, Kirk (1995) for Kirk's."""

from __future__ import annotations

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.engines.closed_form.kirk import KIRK
from pricer.engines.closed_form.two_asset_sum import TWO_ASSET_SUM
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.reference.checker import call_or_put, check, read, value_by

ROWS = read("spread_two_asset.csv")
EXACT = [row for row in ROWS if not row["product"].endswith("kirk_approximation")]
BY_KIRK = [row for row in ROWS if row["product"].endswith("kirk_approximation")]


def problem_of(row):
    years, rate = float(row["t"]), float(row["r"])
    levels = np.array([float(row["s1"]), float(row["s2"])])
    if row["underlying"] == "spot":
        levels = levels * np.exp((rate - np.array([float(row["q1"]), float(row["q2"])])) * years)
    rho = float(row["rho"])
    volatilities = np.array([float(row["v1"]), float(row["v2"])])
    law = JointLognormal.from_volatilities(levels, volatilities, np.array([[1.0, rho], [rho, 1.0]]), years)
    discount_factor = float(np.exp(-rate * years))
    return EuropeanProblem(law, Aggregate.weighted_sum((1.0, -1.0)), call_or_put(row).payoff(), discount_factor)


def test_spread_options_by_quadrature_meet_published_values():
    check(EXACT, lambda row: value_by(TWO_ASSET_SUM, problem_of(row)))


def test_spread_options_by_quadrature_meet_recomputed_values_to_ten_digits():
    check(EXACT, lambda row: value_by(TWO_ASSET_SUM, problem_of(row)), against="recomputed_value", tolerance=2e-10)


def test_kirks_formula_meets_published_values():
    check(BY_KIRK, lambda row: value_by(KIRK, problem_of(row)))
