"""Published values, row by row, through one checker that shows every row that is off."""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form.family import Family
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

Row = dict[str, str]

#: Columns that say where a row comes from or what it is worth, not what goes in.
NOT_INPUTS = frozenset(
    {
        "case_id",
        "value",
        "tolerance",
        "source",
        "seen_or_memory",
        "recomputed_value",
        "recomputed_by",
        "agrees",
        "notes",
    }
)


def read(name: str) -> list[Row]:
    """The rows of a table of this folder. Each has its source, and the tolerance it must be met at."""
    with (Path(__file__).parent / name).open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def check(rows: list[Row], value_of: Callable[[Row], float], *, against: str = "value", tolerance: float | None = None):
    """Fail with inputs, got, wanted and relative error of every row outside its tolerance."""
    assert rows, "no rows to check"
    bad = []
    for row in rows:
        got, wanted = value_of(row), float(row[against])
        allowed = float(row["tolerance"]) if tolerance is None else tolerance
        if not abs(got - wanted) <= allowed:
            relative = abs(got - wanted) / abs(wanted) if wanted else np.inf
            inputs = ", ".join(f"{name}={text}" for name, text in row.items() if name not in NOT_INPUTS and text)
            bad.append(
                f"{row['case_id']}: got {got:.12g}, wanted {wanted:.12g} +- {allowed:.3g}, "
                f"relative error {relative:.2e}\n    inputs: {inputs}\n    source: {row['source']}"
            )
    if bad:
        pytest.fail(f"{len(bad)} of {len(rows)} rows are off:\n" + "\n".join(bad), pytrace=False)


def numbers(text: str) -> np.ndarray:
    """A list separated by bars, or "x each" written out by the caller."""
    return np.array([float(part) for part in text.split("|")])


def correlation(upper: str, n: int) -> np.ndarray:
    """A correlation matrix from its upper triangle row by row, or from "x all pairs"."""
    matrix = np.eye(n)
    rows, columns = np.triu_indices(n, 1)
    values = float(upper.split()[0]) if upper.endswith("all pairs") else numbers(upper)
    matrix[rows, columns] = values
    matrix[columns, rows] = values
    return matrix


def law_of(row: Row) -> JointLognormal:
    """The law of the levels of a row with lists of spots, dividend yields and volatilities."""
    n, years, rate = int(row["n"]), float(row["t"]), float(row["r"])
    forwards = numbers(row["spots"]) * np.exp((rate - numbers(row["div_yields"])) * years)
    return JointLognormal.from_volatilities(forwards, numbers(row["vols"]), correlation(row["corr_upper"], n), years)


def problem_of(row: Row, aggregate: Aggregate, profile: Profile) -> EuropeanProblem:
    """A problem on the law of :func:`law_of`, discounted at the row's rate."""
    discount_factor = float(np.exp(-float(row["r"]) * float(row["t"])))
    return EuropeanProblem(law_of(row), aggregate, profile.payoff(), discount_factor)


def call_or_put(row: Row) -> Profile:
    """The profile of a row whose product says call or put."""
    kind = ProfileKind.CALL if "call" in row["product"] else ProfileKind.PUT
    return Profile(kind, float(row["strike"]))


def value_by(family: Family, problem: EuropeanProblem) -> float:
    """The family's value; it must apply."""
    reference = family.reference(problem)
    assert reference is not None, f"{family.method} does not apply"
    return reference.value
