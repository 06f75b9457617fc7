"""What all deltas, gammas and vegas cost beside the price alone, in the same kernel and run.

Run alone: ``python -m pytest -m bench -s tests/bench/test_ratio_cost.py``.
"""

from __future__ import annotations

import time

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.design import Design
from pricer.simulation.estimates import estimates
from pricer.simulation.sampler import Sampler

pytestmark = pytest.mark.bench

N, POINTS = 20, 1024


@pytest.mark.parametrize("aggregate", [Aggregate.weighted_sum((1.0 / N,) * N), Aggregate.worst_of(N)])
def test_twenty_deltas_and_vegas_cost_less_than_a_third_more(aggregate):
    law = JointLognormal.from_volatilities(np.full(N, 100.0), np.linspace(0.2, 0.4, N), 0.5 + 0.5 * np.eye(N), 1.0)
    design = Design.of(law, aggregate, Profile(ProfileKind.CALL, 80.0).payoff(), triangular=aggregate.is_ranked)
    samplers = [Sampler(design, np.random.default_rng(7), 32, with_ratios=w) for w in (False, True)]
    seconds = [np.inf, np.inf]
    for _ in range(150):
        for i, sampler in enumerate(samplers):
            sampler.points = 0
            sampler.sums[:] = 0.0
            start = time.perf_counter()
            sampler.extend(POINTS)
            seconds[i] = min(seconds[i], time.perf_counter() - start)
    found = estimates(design, samplers[1].sums / POINTS, POINTS)
    price, both = (f"{t * 1e3:.2f} ms" for t in seconds)
    print(
        f"\n{aggregate.kind}: price alone {price}, with {N} deltas and {N} vegas {both}:"
        f" {seconds[1] / seconds[0]:.2f} times;"
        f"\n  value {found.value:.5f} +- {found.value_error:.1e},"
        f" first delta {found.log_deltas[0]:.5f} +- {found.log_delta_errors[0]:.1e},"
        f" first vega {found.vegas[0]:.5f} +- {found.vega_errors[0]:.1e}"
    )
    assert seconds[1] <= 1.3 * seconds[0]
