"""What a model says of one unit of a trade, and what it was asked for."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.engines.monte_carlo import Sample
from pricer.engines.problem import Reference
from pricer.engines.selector import Headline


@dataclass(frozen=True, slots=True)
class Asked:
    """Targets for standard errors, per unit and discounted, and what keys the draws; see ``monte_carlo.sample``."""

    group: str
    seed: int
    value_tolerance: float
    delta_tolerance: float
    delta_fraction: float


@dataclass(frozen=True, slots=True)
class ModelValue:
    """One unit under one model: the number that leads, the sample, and every reference beside it.

    ``time_steps`` of a path, 0 where levels are drawn at expiry alone. ``is_sound`` : whether the
    discretisation in time is known to be fine enough and forwards came back. ``ratios`` says how the
    sensitivities of ``sample`` were obtained.
    """

    headline: Headline
    sample: Sample
    references: tuple[Reference, ...]
    time_steps: int = 0
    is_sound: bool = True
    ratios: str = "pathwise, common factor integrated exactly"
