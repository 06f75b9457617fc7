"""Stulz (1982), Margrabe (1978) and two-asset correlation options against published tables.

Sources stand in every row of the tables: Haug (1998), the two-asset spreadsheet of Firth,
Levy (2004), most as quoted in QuantLib's test suite.
"""

from __future__ import annotations

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form.exchange import EXCHANGE
from pricer.engines.closed_form.extremes import TWO_ASSET_EXTREMES
from pricer.engines.closed_form.multivariate_normal import within
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.reference.checker import call_or_put, check, read, value_by

ROWS = read("two_asset_european.csv")


def problem_of(row, aggregate, profile, spots=None):
    years, rate = float(row["t"]), float(row["r"])
    spots = np.array([float(row["s1"]), float(row["s2"])]) if spots is None else spots
    forwards = spots * np.exp((rate - np.array([float(row["q1"]), float(row["q2"])])) * years)
    rho = float(row["rho"])
    volatilities = np.array([float(row["v1"]), float(row["v2"])])
    law = JointLognormal.from_volatilities(forwards, volatilities, np.array([[1.0, rho], [rho, 1.0]]), years)
    return EuropeanProblem(law, aggregate, profile.payoff(), float(np.exp(-rate * years)))


def test_options_on_the_best_or_worst_of_two_meet_published_values():
    def value(row):
        best = row["product"].endswith("max")
        aggregate = Aggregate.best_of(2) if best else Aggregate.worst_of(2)
        return value_by(TWO_ASSET_EXTREMES, problem_of(row, aggregate, call_or_put(row)))

    check([row for row in ROWS if "_on_m" in row["product"]], value)


def test_exchange_options_and_their_sensitivities_meet_published_values():
    def value(row):
        asked = row["product"].split(":")[1]
        aggregate = Aggregate.weighted_sum((float(row["qty1"]), -float(row["qty2"])))
        spots = np.array([float(row["s1"]), float(row["s2"])])

        def price(moved):
            return value_by(EXCHANGE, problem_of(row, aggregate, Profile(ProfileKind.EXCHANGE), moved))

        if asked == "price":
            return price(spots)
        step = 1e-3 * np.where(asked[-1] == np.array(["1", "2"]), spots, 0.0)
        size = step.sum()
        if asked.startswith("delta"):
            return (price(spots + step) - price(spots - step)) / (2.0 * size)
        return (price(spots + step) - 2.0 * price(spots) + price(spots - step)) / size**2

    check([row for row in ROWS if row["product"].startswith("exchange")], value)


def test_a_two_asset_correlation_option_meets_its_published_value():
    def value(row):
        """Pays (S2 - strike2)+ if S1 > strike: two bivariate probabilities, one with S2 as numeraire."""
        problem = problem_of(row, Aggregate.weighted_sum((0.0, 1.0)), call_or_put(row))
        law, strikes = problem.law, np.array([float(row["strike"]), float(row["strike2"])])
        distance = np.log(law.forwards / strikes) - 0.5 * np.diag(law.covariance)
        strict = np.ones(2, dtype=bool)
        paid = within(-np.eye(2), distance, law.covariance, strict).value
        received = within(-np.eye(2), distance + law.covariance[:, 1], law.covariance, strict).value
        return problem.discount_factor * (law.forwards[1] * received - strikes[1] * paid)

    check([row for row in ROWS if row["product"].startswith("two_asset_correlation")], value)


def test_every_row_of_the_table_is_checked():
    known = ("call_on_m", "put_on_m", "exchange", "two_asset_correlation")
    assert [row["product"] for row in ROWS if not row["product"].startswith(known)] == []
