"""Lognormal sampling fused with a payoff, beside careful NumPy and QuantLib's Monte Carlo engine.

One core, one run, the rivals taking turns; the best of several rounds each, so that a busy
machine disturbs all alike. Random words and scrambling are inside the clock, as the rivals'
random numbers are; the points are those of the engine's first size. Every rate has the
sampling error it bought beside it.
Run alone: ``python -m pytest -m bench -s tests/bench/test_kernel_speed.py``.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
import QuantLib as ql
from threadpoolctl import threadpool_limits

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.monte_carlo import SamplingSettings
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.design import Design
from pricer.simulation.loadings import principal_components
from pricer.simulation.sampler import Sampler

pytestmark = pytest.mark.bench

#: What the engine draws before it first looks at an error.
RANDOMISATIONS, POINTS = SamplingSettings().randomisations, SamplingSettings().initial_points
#: Paths that NumPy works on together: (20, 1024) doubles stay in the second-level cache.
CHUNK = 1024


def basket(n: int) -> tuple[JointLognormal, Aggregate, float]:
    """An invented basket: n unlike assets, correlation 0.5, call at the money for a year."""
    rng = np.random.default_rng(n)
    volatilities, weights = rng.uniform(0.15, 0.4, n), rng.uniform(0.5, 1.5, n)
    law = JointLognormal.from_volatilities(np.full(n, 100.0), volatilities, 0.5 + 0.5 * np.eye(n), 1.0)
    return law, Aggregate.weighted_sum(tuple(weights / weights.sum())), 100.0


def careful_numpy(law: JointLognormal, weights: np.ndarray, strike: float, paths: int) -> tuple[float, float]:
    """Double precision, chunks that fit the cache, no copies, NumPy's fastest normals."""
    rng = np.random.Generator(np.random.SFC64(7))
    n = law.n_assets
    root = np.linalg.cholesky(law.covariance)
    scales = weights * law.forwards * np.exp(-0.5 * np.diag(law.covariance))
    z, logs = np.empty((n, CHUNK)), np.empty((n, CHUNK))
    total = squares = 0.0
    for _ in range(paths // CHUNK):
        rng.standard_normal(out=z)
        np.matmul(root, z, out=logs)
        np.exp(logs, out=logs)
        payoff = scales @ logs
        payoff -= strike
        np.maximum(payoff, 0.0, out=payoff)
        total += float(payoff.sum())
        squares += float(payoff @ payoff)
    mean = total / paths
    return mean, float(np.sqrt((squares / paths - mean**2) / paths))


def quantlib_engine(law: JointLognormal, weights: np.ndarray, strike: float, paths: int) -> ql.BasketOption:
    """QuantLib's pseudo-random basket engine, one step to expiry, no interest."""
    today = ql.Date(2, 1, 2025)
    ql.Settings.instance().evaluationDate = today
    days, flat = ql.Actual365Fixed(), ql.FlatForward(today, 0.0, ql.Actual365Fixed())
    processes = [
        ql.BlackScholesMertonProcess(
            ql.QuoteHandle(ql.SimpleQuote(float(f))),
            ql.YieldTermStructureHandle(flat),
            ql.YieldTermStructureHandle(flat),
            ql.BlackVolTermStructureHandle(ql.BlackConstantVol(today, ql.NullCalendar(), float(s), days)),
        )
        for f, s in zip(law.forwards, law.deviations, strict=True)
    ]
    array = ql.StochasticProcessArray(processes, ql.Matrix(law.correlation.tolist()))
    payoff = ql.AverageBasketPayoff(ql.PlainVanillaPayoff(ql.Option.Call, strike), ql.Array(weights.tolist()))
    option = ql.BasketOption(payoff, ql.EuropeanExercise(today + 365))
    option.setPricingEngine(
        ql.MCEuropeanBasketEngine(array, "pseudorandom", timeSteps=1, requiredSamples=paths, seed=7)
    )
    return option


def best_of(rounds: int, *jobs: Callable[[], object]) -> list[float]:
    """Seconds of each job, the least of ``rounds`` turns."""
    best = [np.inf] * len(jobs)
    for _ in range(rounds):
        for i, job in enumerate(jobs):
            start = time.perf_counter()
            job()
            best[i] = min(best[i], time.perf_counter() - start)
    return best


@pytest.mark.parametrize("n", [5, 20, 100])
def test_fused_sampling_beats_numpy_fourfold_and_quantlib_fortyfold(n):
    law, aggregate, strike = basket(n)
    weights = np.array(aggregate.weights)
    design = Design.of(law, aggregate, Profile(ProfileKind.CALL, strike).payoff(), triangular=False)
    full = principal_components(law.covariance, weights / weights.max(), np.diag(law.covariance))
    plain = replace(design, direction=np.zeros(n), factor_deviation=0.0, loadings=full / np.log(2.0))
    paths, quantlib_paths = RANDOMISATIONS * POINTS, 20_000 // max(1, n // 20)
    fused = {
        "payoff alone": (plain, False),
        "smoothed": (design, False),
        "smoothed, with deltas, gammas, vegas": (design, True),
    }
    sums: dict[str, np.ndarray] = {}

    def run(name: str) -> Callable[[], object]:
        laid_out, with_ratios = fused[name]

        def job() -> None:
            sampler = Sampler(laid_out, np.random.default_rng(7), RANDOMISATIONS, with_ratios=with_ratios)
            sums[name] = sampler.extend(POINTS)

        return job

    option = quantlib_engine(law, weights, strike, quantlib_paths)
    numpy_paths = max(CHUNK, paths // CHUNK * CHUNK)
    numpy_result: list[tuple[float, float]] = []
    with threadpool_limits(1):
        seconds = best_of(
            15,
            *(run(name) for name in fused),
            lambda: numpy_result.append(careful_numpy(law, weights, strike, numpy_paths)),
        )
        (quantlib_seconds,) = best_of(3, lambda: (option.recalculate(), option.NPV()))
    levels = np.array([paths] * 3 + [numpy_paths]) * n
    rates = dict(zip([*fused, "numpy"], levels / np.array(seconds) / 1e6, strict=True))
    rates["quantlib"] = quantlib_paths * n / quantlib_seconds / 1e6
    print(f"\n{n} assets, million asset-levels per second:")
    for name in fused:
        means = sums[name][:, 0] / POINTS
        report(
            f"fused, {name}", rates[name], float(means.mean()), float(means.std(ddof=1)) / RANDOMISATIONS**0.5, paths
        )
    report("careful numpy", rates["numpy"], *numpy_result[-1], numpy_paths)
    report("quantlib", rates["quantlib"], option.NPV(), option.errorEstimate(), quantlib_paths)
    over_numpy, over_quantlib = (rates["payoff alone"] / rates[rival] for rival in ("numpy", "quantlib"))
    print(f"  payoff alone: {over_numpy:.1f} times numpy, {over_quantlib:.0f} times quantlib")
    assert over_numpy >= 4.0
    assert over_quantlib >= 40.0


def report(name: str, rate: float, value: float, error: float, paths: int) -> None:
    print(f"  {name:45s} {rate:7.1f}   value {value:.5f} +- {error:.1e} on {paths} paths")


STARTS = """
import time
imported = time.process_time()
from pricer.engines.monte_carlo import prepare
before = time.process_time()
prepare()
print(before - imported, time.process_time() - before)
"""


def test_a_cold_start_compiles_in_seconds_and_a_warm_one_does_not(tmp_path):
    # seconds of the processor, not of the clock: compilers are slow on a machine that does something else
    environment = {**os.environ, "NUMBA_CACHE_DIR": str(tmp_path)}
    times = []
    for _ in range(2):
        command = [sys.executable, "-c", STARTS]
        done = subprocess.run(command, env=environment, capture_output=True, text=True, check=True)
        times.append([float(x) for x in done.stdout.split()])
    (imports, cold), (_, warm) = times
    print(f"\nimport {imports:.2f} s; kernels cold {cold:.1f} s, from the cache {warm:.2f} s (numba's import in both)")
    assert cold < 15.0
    assert warm < 1.5
