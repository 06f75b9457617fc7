"""Rows of the early-exercise tables as problems."""

from __future__ import annotations

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.engine import EarlyExerciseSettings, early_exercise_value
from pricer.engines.early_exercise.fitting import FitSettings
from pricer.engines.early_exercise.outcome import EarlyExerciseValue
from pricer.engines.early_exercise.problem import EarlyExerciseProblem
from tests.reference.checker import Row, correlation, numbers

#: Standard errors that a bound may be on the wrong side of a value, in tables of some 50 rows.
SURE = 4.0

#: One round of half a second on five assets and nine dates.
BRIEF = EarlyExerciseSettings(
    seed=7,
    group="reference",
    gap=1e-2,
    rounds=1,
    fit=FitSettings(blocks=8, points=256, inner=64),
    certificate=CertificateSettings(blocks=16, points=128, inner=128),
)

#: One round of about two seconds.
MODEST = EarlyExerciseSettings(
    seed=7,
    group="reference",
    gap=1e-3,
    rounds=1,
    fit=FitSettings(blocks=8, points=512, inner=128),
    certificate=CertificateSettings(blocks=16, points=128, inner=256),
)


def bermudan_max_call(row: Row) -> EarlyExerciseProblem:
    """A row of ``bermudan_max_call.csv``: three dates a year; exercise at time 0 is never best and left out."""
    n = int(row["n"])
    if row["vol_rule"] == "0.20 each":
        volatilities = np.full(n, 0.2)
    elif row["vol_rule"].startswith("sigma_i = 0.08 + 0.32 (i-1)/(d-1)"):
        volatilities = 0.08 + 0.32 * np.arange(n) / (n - 1)
    else:
        assert row["vol_rule"].startswith("sigma_i = 0.1 + i/(2d)"), row["vol_rule"]
        volatilities = 0.1 + np.arange(1, n + 1) / (2 * n)
    years = float(row["t"])
    return EarlyExerciseProblem.from_constants(
        np.arange(1, round(3 * years) + 1) / 3.0,
        np.full(n, float(row["s0"])),
        rate=float(row["r"]),
        dividend_yields=np.full(n, float(row["div_yield"])),
        volatilities=volatilities,
        correlation=np.eye(n),
        aggregate=Aggregate.best_of(n),
        payoff=Profile(ProfileKind.CALL, float(row["strike"])).payoff(),
    )


def multi_asset(row: Row, dates_if_continuous: int | None = None) -> EarlyExerciseProblem:
    """A row of ``early_exercise_multi_asset.csv``; continuous exercise needs a number of dates."""
    n, years, product = int(row["n"]), float(row["t"]), row["product"]
    text = row["exercise_dates"]
    if text == "continuous":
        assert dates_if_continuous is not None
        count = dates_if_continuous
    else:
        count = round(50 * years) if text == "50 per year" else int(text.split()[0])
    times = years * np.arange(1, count + 1) / count
    if "j=0" in text:
        times = np.concatenate([[0.0], times])
    kind = ProfileKind.CALL if "call" in product else ProfileKind.PUT
    profile = Profile(kind, float(row["strike"]))
    if product.startswith("exchange"):
        aggregate, profile = Aggregate.weighted_sum((1.0, -1.0)), Profile(ProfileKind.EXCHANGE)
    elif product.endswith("on_max"):
        aggregate = Aggregate.best_of(n)
    elif product.endswith("on_min"):
        aggregate = Aggregate.worst_of(n)
    elif product.startswith("geometric"):
        aggregate = Aggregate.geometric((1.0 / n,) * n)
    else:
        weights = numbers(row["weights"]) if row["weights"] else np.ones(1)
        aggregate = Aggregate.weighted_sum(tuple(weights.tolist()))
    return EarlyExerciseProblem.from_constants(
        times,
        _each(row["spots"], n),
        rate=float(row["r"]),
        dividend_yields=_each(row["div_yields"], n),
        volatilities=_each(row["vols"], n),
        correlation=correlation(row["corr_upper"], n) if n > 1 else np.eye(1),
        aggregate=aggregate,
        payoff=profile.payoff(),
    )


def _each(text: str, n: int) -> np.ndarray:
    return np.full(n, float(text.split()[0])) if text.endswith("each") else numbers(text)


def brackets(value: EarlyExerciseValue, low: float, high: float) -> bool:
    """Do the interval and ``[low, high]`` overlap, within the noise of its ends?"""
    lower, upper = value.interval(SURE)
    return lower <= high and low <= upper


def check_brackets(
    rows: list[Row], problem_of, band_of, settings: EarlyExerciseSettings = BRIEF, widest: float = np.inf
) -> None:
    """Fail with every row whose interval misses its band, or is wider than ``widest`` of its value."""
    assert rows, "no rows to check"
    bad = []
    for row in rows:
        value = early_exercise_value(problem_of(row), settings)
        low, high = band_of(row)
        if not brackets(value, low, high) or value.relative_gap > widest:
            bad.append(
                f"{row['case_id']}: got {value.lower:.6g} +- {value.lower_error:.2g} to {value.upper:.6g} +- "
                f"{value.upper_error:.2g}, wanted {low:.6g} to {high:.6g}\n    source: {row['source']}"
            )
    if bad:
        pytest.fail(f"{len(bad)} of {len(rows)} rows are off:\n" + "\n".join(bad), pytrace=False)


def within_tolerance(row: Row) -> tuple[float, float]:
    """The table's value with its tolerance."""
    value, tolerance = float(row["value"]), float(row["tolerance"])
    return value - tolerance, value + tolerance


def within_recomputed(row: Row, relative: float = 3e-4) -> tuple[float, float]:
    """The recomputed value, given the error of its grid."""
    value = float(row["recomputed_value"])
    return value * (1.0 - relative), value * (1.0 + relative)
