"""Draws legs under lognormal levels: at once, or on few dates with the difference to all of them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.engines.contract_legs.thinned import two_levels
from pricer.engines.model_value import Asked
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import LegSample, PathSample, PathSettings, batch_values, sample_paths

Array = NDArray[np.float64]

#: Shares of the tolerated error: their squares add up to 1.
_COARSE, _DIFFERENCE = 0.8, 0.6
#: A path on all dates is dear, and few of them tell the difference.
_FIRST_POINTS, _FEWER_STEPS = 32, 4


@dataclass(frozen=True, slots=True)
class Drawn:
    """Sums over ``parts``, drawn independently: one for legs drawn at once, two for two levels.

    ``legs`` are the samples of the whole legs.
    """

    parts: tuple[PathSample, ...]
    legs: tuple[LegSample, ...]
    settings: tuple[PathSettings, ...]

    @property
    def value(self) -> float:
        return sum(part.value for part in self.parts)

    @property
    def standard_error(self) -> float:
        return float(np.sqrt(sum(part.standard_error**2 for part in self.parts)))

    @property
    def log_deltas(self) -> Array:
        return np.asarray(sum(part.log_deltas for part in self.parts))

    @property
    def log_delta_errors(self) -> Array:
        return np.asarray(np.sqrt(sum(part.log_delta_errors**2 for part in self.parts)))

    @property
    def paths(self) -> int:
        return sum(part.paths for part in self.parts)

    @property
    def randomisations(self) -> int:
        return self.parts[0].randomisations

    @property
    def ending(self) -> str:
        return "; differences on all dates: ".join(part.ending for part in self.parts)

    def again(self, problem: PathProblem, asked: Asked, fewer: int) -> Array:
        """The value of another problem by randomisation, (randomisations,), from 1 in ``fewer`` of the same points."""
        split = two_levels(problem) if len(self.parts) > 1 else None
        problems = (problem,) if split is None else (split.coarse, split.difference)
        total = np.zeros(self.randomisations)
        for number, (one, part, settings) in enumerate(zip(problems, self.parts, self.settings, strict=True)):
            points = part.paths // part.randomisations
            points = max(points // fewer, min(points, settings.initial_points // 2))
            group = _group(asked, number)
            total += batch_values(one, group=group, seed=asked.seed, points=points, settings=settings)
        return total


def draw(problem: PathProblem, asked: Asked, settings: PathSettings) -> Drawn:
    """Until the standard errors of the value and of every log-delta are within what is asked, or the budget ends."""
    split = two_levels(problem)
    if split is None:
        found = _sampled(problem, asked, 0, settings, 1.0, asked.delta_tolerance, asked.delta_fraction)
        return Drawn((found,), found.legs, (settings,))
    coarse = _sampled(
        split.coarse, asked, 0, settings, _COARSE, _COARSE * asked.delta_tolerance, _COARSE * asked.delta_fraction
    )
    gross = float(np.sum(np.abs(coarse.log_deltas))) if settings.with_ratios else 0.0
    limit = asked.delta_tolerance if np.isnan(gross) else max(asked.delta_tolerance, asked.delta_fraction * gross)
    first = min(_FIRST_POINTS, settings.initial_points)
    dear = replace(settings, initial_points=first, maximum_steps=settings.maximum_steps // _FEWER_STEPS)
    apart = _sampled(split.difference, asked, 1, dear, _DIFFERENCE, _DIFFERENCE * limit, 0.0)
    kept = np.array(split.kept)
    legs = tuple(
        replace(few, dates=kept[few.dates]) if same else whole
        for few, whole, same in zip(coarse.legs, apart.legs, split.is_same, strict=False)
    )
    return Drawn((coarse, apart), legs, (settings, dear))


def _sampled(
    problem: PathProblem, asked: Asked, part: int, settings: PathSettings, share: float, deltas: float, fraction: float
) -> PathSample:
    return sample_paths(
        problem,
        group=_group(asked, part),
        seed=asked.seed,
        value_tolerance=share * asked.value_tolerance,
        delta_tolerance=deltas,
        delta_fraction=fraction,
        settings=settings,
    )


def _group(asked: Asked, part: int) -> str:
    return asked.group if part == 0 else f"{asked.group}, difference on all dates"
