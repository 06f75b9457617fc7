"""Random European problems for the property tests."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.monte_carlo import SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

#: One fixed size, so that prices compared with each other see the same draws.
FIXED_SIZE = SamplingSettings(initial_points=1024, maximum_points=1024)


@st.composite
def laws(draw, minimum=1, maximum=5):
    """A joint lognormal law of a few assets around 100, volatilities 10 to 60 %, up to 5 years."""
    n = draw(st.integers(minimum, maximum))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    factors = rng.normal(size=(n, n + 1))
    correlation = factors @ factors.T
    scale = np.sqrt(np.diag(correlation))
    correlation /= np.outer(scale, scale)
    years = draw(st.floats(0.05, 5.0))
    return JointLognormal.from_volatilities(rng.uniform(60, 140, n), rng.uniform(0.1, 0.6, n), correlation, years)


@st.composite
def aggregates(draw, n):
    """Any aggregate of n levels, with weights that keep its level near 100."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    positive = rng.uniform(0.2, 1.0, n)
    makers = {
        "basket": lambda: Aggregate.weighted_sum(tuple(positive / positive.sum())),
        "signed": lambda: Aggregate.weighted_sum(tuple(np.where(np.arange(n) % 2, -0.5, 1.0) * positive)),
        "geometric": lambda: Aggregate.geometric(tuple(positive / positive.sum())),
        "best": lambda: Aggregate.best_of(n),
        "worst": lambda: Aggregate.worst_of(n),
        "k-th": lambda: Aggregate.kth_best(1 + int(rng.integers(n)), n),
        "ranked": lambda: Aggregate.rank_weighted(tuple(positive / positive.sum())),
    }
    return makers[draw(st.sampled_from(sorted(makers)))]()


@st.composite
def problems(draw, minimum=1, maximum=5, kinds=tuple(ProfileKind)):
    """Any aggregate and any profile on a random law, struck near the aggregate's level."""
    law = draw(laws(minimum, maximum))
    aggregate = draw(aggregates(law.n_assets))
    level = float(aggregate(law.forwards))
    strike = level * draw(st.floats(0.7, 1.3))
    profile = Profile(draw(st.sampled_from(kinds)), strike, cash_amount=10.0)
    return EuropeanProblem(law, aggregate, profile.payoff(), draw(st.floats(0.7, 1.0)))


def struck(problem, kind, strike):
    """The same problem with another profile."""
    return replace(problem, payoff=Profile(kind, strike, cash_amount=10.0).payoff())


def value_of(problem, group="property"):
    """Sampled at one fixed size under one seed."""
    return sample(problem, group=group, seed=1, value_tolerance=1e-12, delta_tolerance=1e-12, settings=FIXED_SIZE)
