"""How long a contract lives and how it ends, of the paths walked."""

from __future__ import annotations

import numpy as np

from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.sampling import Sums
from pricer.engines.contract_walk.walker import ENDINGS
from pricer.engines.model_value import Chance, Life
from pricer.simulation.batch_means import batch_estimate


def life_of(terms: ContractTerms, sums: Sums) -> Life:
    """Expected life and the chances of early endings; days on which no path ended are left out."""
    points = sums.points
    (years,), (years_error,) = batch_estimate((sums.lives / points)[:, None])
    (knocked,), (knocked_error,) = batch_estimate((sums.hits / points)[:, None])
    shares = sums.ends / points
    chances = []
    for place, kind in np.argwhere(shares.sum(axis=0) > 0.0).tolist():
        if ENDINGS[kind] is not ENDINGS[0]:
            (share,), (error,) = batch_estimate(shares[:, [place], kind])
            chances.append(Chance(terms.dates[place], str(ENDINGS[kind]), float(share), float(error)))
    if not sums.has_barrier:
        return Life(float(years), float(years_error), tuple(chances))
    return Life(float(years), float(years_error), tuple(chances), float(knocked), float(knocked_error))
