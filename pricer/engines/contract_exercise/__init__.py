"""Contracts that may be ended early, by their holder or their issuer: valued as an interval."""

from pricer.engines.contract_exercise.settings import ExerciseSettings
from pricer.engines.contract_exercise.value import exercise_value, why_not
from pricer.engines.not_covered import NotCovered

__all__ = ["ExerciseSettings", "NotCovered", "exercise_value", "why_not"]
