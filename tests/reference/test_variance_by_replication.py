"""Variance swaps by replication against models whose expected variance is known, and against QuantLib's strip."""

from __future__ import annotations

import math

import numpy as np
import pytest
import QuantLib as ql
from scipy.stats import norm

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import ProfileKind
from pricer.engines.closed_form.log_contract import variance_of_aggregate, variance_of_smile, variance_of_surface
from pricer.engines.closed_form.lognormal import ShiftedLognormal
from pricer.engines.closed_form.two_asset_sum import TWO_ASSET_SUM
from pricer.market.implied_surface import ImpliedSurface
from tests.unit.closed_form_cases import TODAY as QUANTLIB_TODAY
from tests.unit.closed_form_cases import QuantLibMarket, law, problem
from tests.unit.markets import TODAY
from tests.unit.model_smiles import MODELS, model_quotes


def smile(model, years):
    return lambda k: MODELS[model](k, years) ** 2 * years


def test_a_mixture_of_two_lognormals_gives_its_mean_log():
    # The mixture's own parameters: -2 E[log X] is a sum of two.
    years, low, high, weight, shift = 1.0, 0.13, 0.34, 0.7, 0.05
    up = 1.0 + shift * (1.0 - weight)
    down = (1.0 - weight * up) / (1.0 - weight)
    wanted = weight * (low**2 - 2.0 * math.log(up)) + (1.0 - weight) * (high**2 - 2.0 * math.log(down))

    def narrow(k):
        # Implied volatilities are found by bisection only where the options are worth something.
        return smile("mixture", years)(np.clip(k, -1.2, 1.2))

    assert variance_of_smile(narrow).value == pytest.approx(wanted, rel=5e-4)


@pytest.mark.parametrize("years", [0.25, 1.0, 3.0])
def test_a_surface_fitted_to_hestons_smiles_gives_hestons_variance(years):
    # Heston (1993): E[int v dt] = mean T + (start - mean) (1 - exp(-reversion T)) / reversion. The fit sees nine
    # strikes within two deviations; what the wings beyond them add is the surface's own.
    wanted = 0.05 * years + (0.04 - 0.05) * (1.0 - math.exp(-1.5 * years)) / 1.5
    surface = ImpliedSurface.from_quotes(TODAY, model_quotes("heston", [round(365 * years)]))
    found = variance_of_surface(surface, years)
    assert found.error < 1e-10
    assert math.sqrt(found.value / years) == pytest.approx(math.sqrt(wanted / years), abs=0.002)


def test_the_strip_equals_the_variance_averaged_over_the_normal_law_of_d2():
    # Gatheral (2006): E[-2 log X] is the mean of w(k) with d2(k) taken as standard normal.
    surface = ImpliedSurface.from_quotes(TODAY, model_quotes("sabr", [91, 365]))
    for years in (0.1, 0.25, 0.7, 1.0):
        k = np.linspace(-12.0, 8.0, 400_001)
        w = surface.total_variance(k, years)
        d2 = -k / np.sqrt(w) - 0.5 * np.sqrt(w)
        wanted = -np.trapezoid(norm.pdf(d2) * w, d2)
        assert variance_of_surface(surface, years).value == pytest.approx(wanted, rel=2e-8)


def test_quantlibs_strip_of_many_strikes_comes_near():
    # Demeterfi, Derman, Kamal & Zou (1999): volatility 20 % at 100, one point less per five strikes. Their portfolio of
    # strikes five apart costs 0.04189 (from memory; also in QuantLib's test-suite); finer ones approach the strip.
    quantlib = QuantLibMarket([100.0], [0.0], [0.2], [[1.0]], 0.05, 90)
    years, forward = 90 / 365, 100.0 * math.exp(0.05 * 90 / 365)
    costs = []
    for spacing in (5.0, 0.25):
        below, above = np.arange(50.0, 100.1, spacing), np.arange(100.0, 135.1, spacing)
        strikes = np.union1d(below, above)
        matrix = ql.Matrix([[0.2 - 0.2 * (float(x) - 100.0) / 100.0] for x in strikes])
        surface = ql.BlackVarianceSurface(
            QUANTLIB_TODAY,
            ql.NullCalendar(),
            [QUANTLIB_TODAY + 90],
            [float(x) for x in strikes],
            matrix,
            ql.Actual365Fixed(),
        )
        process = ql.BlackScholesMertonProcess(
            ql.QuoteHandle(ql.SimpleQuote(100.0)),
            quantlib.processes[0].dividendYield(),
            quantlib.processes[0].riskFreeRate(),
            ql.BlackVolTermStructureHandle(surface),
        )
        engine = ql.ReplicatingVarianceSwapEngine(
            process, spacing, [float(x) for x in above], [float(x) for x in below]
        )
        swap = ql.VarianceSwap(ql.Position.Long, 0.04, 50_000.0, QUANTLIB_TODAY, QUANTLIB_TODAY + 90)
        swap.setPricingEngine(engine)
        costs.append(swap.variance())

    def skew(k):
        return np.maximum(0.2 - 0.2 * (forward * np.exp(k) - 100.0) / 100.0, 0.03) ** 2 * years

    found = variance_of_smile(skew).value / years
    assert costs[0] == pytest.approx(0.04189, abs=1e-4)
    assert found < costs[1] < costs[0]
    assert costs[1] == pytest.approx(found, abs=2e-5)


def test_an_aggregates_own_options_give_its_variance():
    # One lognormal level: its variance. A basket of two: minus twice its mean log, by two-dimensional quadrature.
    assert variance_of_aggregate(ShiftedLognormal(0.0, 3.0, 0.3), 0.3).value == pytest.approx(0.09, abs=1e-8)
    joint = law([0.6, 0.4], [0.2, 0.45], np.array([[1.0, 0.3], [0.3, 1.0]]), 2.0)
    basket = problem(joint, Aggregate.weighted_sum((1.0, 1.0)), ProfileKind.CALL, 1.0)
    found = variance_of_aggregate(TWO_ASSET_SUM.law(basket), 0.35)
    nodes, weights = np.polynomial.hermite_e.hermegauss(80)
    root = np.linalg.cholesky(joint.covariance)
    z = np.array(np.meshgrid(nodes, nodes)).reshape(2, -1)
    x = (root @ z).T - 0.5 * np.diag(joint.covariance)
    mean_log = np.outer(weights, weights).ravel() @ np.log(np.exp(x) @ joint.forwards) / weights.sum() ** 2
    assert found.value == pytest.approx(-2.0 * mean_log, abs=1e-8 + found.error)
    assert found.error < 1e-7
