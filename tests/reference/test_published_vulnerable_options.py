"""Options whose writer may default, against the published formulas' values and a plain quadrature of both levels.

Klein (1996), Johnson & Stulz (1987), Klein & Inglis (2001); the rows name theirs. The quadrature shares nothing
with the formulas: it multiplies the two densities.
"""

from __future__ import annotations

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.engines.closed_form import FAMILIES
from pricer.engines.closed_form.given_driver import first_exact
from pricer.engines.closed_form.vulnerable import growing_liabilities, on_any_aggregate, on_one_level, sole_liability
from pricer.engines.closed_form.writer_default import WriterAssets, fixed_boundary
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.reference.checker import call_or_put, check, read

ROWS = read("vulnerable_options.csv")
KLEIN, JOHNSON_STULZ, KLEIN_INGLIS = (
    [r for r in ROWS if r["case_id"].startswith(f"VO-{x}")] for x in ("KL", "JS", "KI")
)
EXACT = first_exact(FAMILIES)


def parts(row):
    rate, years, deviation = float(row["r"]), float(row["t"]), float(row["vol_s"]) * float(row["t"]) ** 0.5
    forward = float(row["s0"]) * np.exp((rate - float(row["div_yield"])) * years)
    law = JointLognormal(np.array([forward]), np.array([[deviation**2]]))
    claim = EuropeanProblem(
        law, Aggregate.weighted_sum((1.0,)), call_or_put(row).payoff(), float(np.exp(-rate * years))
    )
    assets_deviation = float(row["vol_v"]) * years**0.5
    covariance = np.array([float(row["rho"]) * deviation * assets_deviation])
    assets = WriterAssets(float(row["v0_counterparty_assets"]) * np.exp(rate * years), assets_deviation, covariance)
    return claim, assets


def shares(row, assets):
    boundary, liabilities, deadweight = (
        float(row[name]) for name in ("default_boundary", "liabilities", "deadweight_alpha")
    )
    return fixed_boundary(assets, boundary, liabilities, deadweight)


def by_normal_probabilities(row):
    claim, assets = parts(row)
    return on_one_level(claim, assets.loadings, shares(row, assets))


def by_integral_over_assets(row):
    claim, assets = parts(row)
    return on_any_aggregate(claim, assets.loadings, shares(row, assets), EXACT)


def as_sole_liability(row):
    claim, assets = parts(row)
    return sole_liability(claim, assets, EXACT)


def among_liabilities(row):
    claim, assets = parts(row)
    return growing_liabilities(claim, assets, float(row["liabilities"]), float(row["deadweight_alpha"]))


METHODS = (
    (KLEIN, by_normal_probabilities),
    (KLEIN, by_integral_over_assets),
    (JOHNSON_STULZ, as_sole_liability),
    (KLEIN_INGLIS, among_liabilities),
)


def by_both_densities(row):
    """Both normals on a grid of panels whose edges follow the boundary and the strike: 12 digits at best."""
    claim, assets = parts(row)
    strike = claim.payoff.knots[0]
    deviation = claim.law.deviations[0]
    nodes, weights = np.polynomial.legendre.leggauss(60)
    forward, rho = claim.law.forwards[0], float(assets.loadings[0]) / deviation

    def panels(edges):
        lo, hi = edges[:-1, None], edges[1:, None]
        return (0.5 * (lo + hi) + 0.5 * (hi - lo) * nodes).ravel(), (0.5 * (hi - lo) * weights).ravel()

    knot = np.log(strike / forward) / deviation + 0.5 * deviation
    x, at_x = panels(np.unique(np.clip([-10.0, -4.0, 0.0, 4.0, 10.0, knot], -10.0, 10.0)))
    level = forward * np.exp(deviation * (x - 0.5 * deviation))
    own = np.sqrt(1.0 - rho * rho)
    total = 0.0
    for point, mass, paid in zip(x, at_x * np.exp(-0.5 * x * x) / np.sqrt(2 * np.pi), claim.payoff(level), strict=True):
        if paid == 0.0:
            continue
        if row["case_id"].startswith("VO-KL"):
            limit, owed = float(row["default_boundary"]), float(row["liabilities"])
        elif row["case_id"].startswith("VO-JS"):
            limit, owed = paid, paid
        else:
            limit = owed = float(row["liabilities"]) + paid
        keep = 1.0 - float(row["deadweight_alpha"] or 0.0)
        edge = (assets.driver_at(limit) - rho * point) / own
        y, at_y = panels(np.unique(np.clip([-10.0, -4.0, 0.0, 4.0, 10.0, edge], -10.0, 10.0)))
        money = assets.forward * np.exp(assets.deviation * (rho * point + own * y - 0.5 * assets.deviation))
        settled = np.where(money >= limit, 1.0, keep * money / owed)
        total += mass * paid * float((at_y * np.exp(-0.5 * y * y) / np.sqrt(2 * np.pi)) @ settled)
    return claim.discount_factor * total


def test_every_row_is_met():
    for rows, method in METHODS:
        check(rows, lambda row, method=method: method(row).value)


def test_every_row_agrees_with_the_product_of_both_densities_to_eleven_digits():
    for rows, method in METHODS:
        for row in rows:
            found = method(row)
            assert abs(found.value - by_both_densities(row)) < found.error + 1e-10, row["case_id"]
            assert found.error < 1e-8


def test_default_free_column_is_the_limit_of_a_writer_with_unlimited_assets():
    for row in ROWS:
        claim, assets = parts(row)
        rich = WriterAssets(1e4 * assets.forward, assets.deviation, assets.covariance)
        value = sole_liability(claim, rich, EXACT)
        printed = float(row["default_free_value"])  # nine digits
        assert abs(value.value - printed) < 5e-9 * 10.0 ** np.ceil(np.log10(printed)) + value.error
