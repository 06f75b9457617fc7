"""Options whose writer's assets decide, by sampling: any aggregate, with the writer integrated exactly.

Given the levels at expiry the writer's assets are lognormal, so that what is paid of a claim is a formula; only
the levels are drawn. It stands beside the integrals where these exist, and leads where they do not.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from pricer.core.randomness import Purpose, stream
from pricer.engines.closed_form.lognormal import black
from pricer.engines.closed_form.writer_default import Share, WriterAssets
from pricer.engines.problem import EuropeanProblem
from pricer.simulation import sobol
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]
#: What is paid on claims (m,), given the driver's mean (m,) and deviation.
Paid = Callable[[Array, Array, float], Array]

RANDOMISATIONS = 32
_HALF = 2.0**-33  # half of the last bit of a point


@dataclass(frozen=True, slots=True)
class Drawn:
    """Standard normals (randomisations, points, n): the same for all that is valued on them."""

    normals: Array

    @classmethod
    def of(cls, assets: int, points: int, group: str, seed: int) -> Drawn:
        """Scrambled Sobol points, keyed as the check of this group."""
        directions = sobol.directions(assets)
        words = sobol.random_words(stream(seed, group, Purpose.CHECK, 0), RANDOMISATIONS, assets)
        fractions = [sobol.scrambled_points(directions, own, 0, points).T for own in words]
        return cls(np.asarray(ndtri(np.array(fractions) * 2.0**-32 + _HALF)))

    def means(self, problem: EuropeanProblem, assets: WriterAssets, paid: Paid) -> Array:
        """Discounted mean of every randomisation, (randomisations,)."""
        law = problem.law
        values, vectors = np.linalg.eigh(law.covariance)
        root = (vectors * np.sqrt(np.maximum(values, 0.0)))[:, ::-1]
        # The driver's regression on the levels' own normals; what it has besides is independent of them.
        safe = np.where(values > 1e-14 * values.max(), values, np.inf)
        loadings = ((assets.loadings @ vectors) / np.sqrt(safe))[::-1]
        own = math.sqrt(max(1.0 - float(loadings @ loadings), 0.0))
        levels = law.forwards * np.exp(self.normals @ root.T - 0.5 * np.diag(law.covariance))
        claims = problem.payoff(problem.aggregate(levels))
        amounts = paid(claims.ravel(), (self.normals @ loadings).ravel(), own)
        return np.asarray(problem.discount_factor * amounts.reshape(claims.shape).mean(axis=1))


def estimate(means: Array) -> tuple[float, float]:
    """Value and standard error."""
    value, error = batch_estimate(means[:, np.newaxis])
    return float(value[0]), float(error[0])


def by_shares(shares: tuple[Share, ...]) -> Paid:
    """Claims of which the writer's driver decides the share that is paid; what is negative is owed in any case."""

    def paid(claims: Array, means: Array, deviation: float) -> Array:
        kept = sum(_expected(share, means, deviation) for share in shares)
        return np.asarray(np.maximum(claims, 0.0) * kept + np.minimum(claims, 0.0))

    return paid


def out_of_all(assets: WriterAssets) -> Paid:
    """Claims that the assets pay as far as they go: ``min(claim, assets)``."""

    def paid(claims: Array, means: Array, deviation: float) -> Array:
        scale = assets.deviation
        forwards = assets.forward * np.exp(scale * means - 0.5 * scale**2 * (1.0 - deviation**2))
        due = np.maximum(claims, 0.0)
        return np.asarray(due - black(forwards, due, scale * deviation, -1) + np.minimum(claims, 0.0))

    return paid


def _expected(share: Share, means: Array, deviation: float) -> Array:
    """Mean of the share for a driver of that mean and deviation."""
    grown = share.factor * np.exp(share.tilt * means + 0.5 * share.tilt**2 * (deviation**2 - 1.0))
    distance = share.where * (means + share.tilt * deviation**2 - share.limit)
    if deviation == 0.0:
        return np.asarray(grown * (distance > 0.0))
    return np.asarray(grown * ndtr(distance / deviation))
