"""The same legs on lognormal prices along the same paths: a control variate whose mean is known without steps."""

from __future__ import annotations

import numpy as np

from pricer.engines.contract_legs.drawing import Drawn, draw
from pricer.engines.contract_legs.result import ContractLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings

#: Share of the tolerances that the known mean may use up.
_SHARE = 0.7

#: With more dates lognormal legs cost more than they save.
_MOST_DATES = 60


def lognormal_legs(terms: ContractTerms, legs: ContractLegs, like: ContractTerms | None = None) -> PathProblem:
    """Legs on prices that have the market's forwards and no known part; drawn as those of ``like``."""
    return PathProblem(_law(terms), legs.legs, None if like is None else _law(like))


def _law(terms: ContractTerms) -> PathLaw:
    return PathLaw(terms.times, terms.forwards + terms.floors, terms.covariances)


def known_mean(terms: ContractTerms, legs: ContractLegs, asked: Asked) -> Drawn | None:
    """Value and log-deltas by the engine of lognormal legs; None where it does not know them, or is dear."""
    if legs.has_signed_weights or len(terms.dates) > _MOST_DATES:
        return None
    finer = Asked(
        f"{asked.group}/control",
        asked.seed,
        _SHARE * asked.value_tolerance,
        _SHARE * asked.delta_tolerance,
        _SHARE * asked.delta_fraction,
    )
    found = draw(lognormal_legs(terms, legs), finer, PathSettings())
    return found if np.all(np.isfinite(found.log_deltas)) else None
