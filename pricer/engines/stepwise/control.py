"""The same legs on lognormal prices along the same paths: a control variate whose mean is known without steps."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.contract_legs.drawing import draw
from pricer.engines.contract_legs.result import ContractLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.model_value import Asked
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings

Array = NDArray[np.float64]

#: Share of the tolerances that the known mean may use up.
_SHARE = 0.4

#: With more dates lognormal legs cost more than they save.
_MOST_DATES = 60


@dataclass(frozen=True, slots=True)
class KnownMean:
    """Value and log-deltas (n,) of the legs under lognormal prices with the market's forwards, with errors."""

    value: float
    error: float
    log_deltas: Array
    log_delta_errors: Array


def can_be_controlled(terms: ContractTerms, legs: ContractLegs) -> bool:
    """Whether lognormal legs are known at less cost than they save."""
    return not legs.has_signed_weights and len(terms.dates) <= _MOST_DATES


def known_mean(terms: ContractTerms, legs: ContractLegs, asked: Asked) -> KnownMean | None:
    """By the engine of lognormal legs, prices having no known part; None if it knows no deltas."""
    law = PathLaw(terms.times, terms.forwards + terms.floors, terms.covariances)
    finer = Asked(
        f"{asked.group}/control",
        asked.seed,
        _SHARE * asked.value_tolerance,
        _SHARE * asked.delta_tolerance,
        _SHARE * asked.delta_fraction,
    )
    found = draw(PathProblem(law, legs.legs), finer, PathSettings())
    if not np.all(np.isfinite(found.log_deltas)):
        return None
    return KnownMean(found.value, found.standard_error, found.log_deltas, found.log_delta_errors)
