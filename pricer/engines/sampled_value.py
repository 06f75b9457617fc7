"""A sampled number with what is needed to judge it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol


class Sampled(Protocol):
    """Per unit, discounted; errors have ``degrees_of_freedom``: take Student's t for intervals."""

    @property
    def value(self) -> float: ...

    @property
    def standard_error(self) -> float: ...

    @property
    def degrees_of_freedom(self) -> int: ...

    @property
    def paths(self) -> int: ...

    @property
    def randomisations(self) -> int: ...

    @property
    def ending(self) -> str:
        """In words: how sampling ended."""


@dataclass(frozen=True, slots=True)
class SampledValue:
    """The plain facts of a :class:`Sampled`."""

    value: float
    standard_error: float
    degrees_of_freedom: int
    paths: int
    randomisations: int
    ending: str

    @classmethod
    def exact(cls, value: float) -> SampledValue:
        """A number that was not sampled, in the place of one that was."""
        return cls(value, 0.0, 1, 0, 0, "exact, nothing was sampled")
