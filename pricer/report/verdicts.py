"""The verdicts of cross-checks in the order of reading, and which of them tested something."""

from __future__ import annotations

from collections.abc import Sequence

from pricer.engines.problem import ReferenceKind
from pricer.run.outcome import CrossCheck, Model, Verdict

#: What a reader should see first comes first; an approximation says least about the engine.
ORDER = (
    Verdict.DIFFERS,
    Verdict.OUTSIDE_BOUND,
    Verdict.AGREES,
    Verdict.WITHIN_BOUND,
    Verdict.FAR,
    Verdict.CLOSE,
)
NO_SAMPLING = "agrees, engine exact too"
#: Verdicts of which the difference in standard errors says something: a bound is meant to lie apart.
MEASURED_IN_ERRORS = frozenset({Verdict.AGREES, Verdict.DIFFERS, Verdict.OUTSIDE_BOUND})


def by_model(checks: Sequence[CrossCheck]) -> list[tuple[Model, list[CrossCheck]]]:
    """The checks of each model that has any, local volatility first: it leads wherever there is a smile."""
    groups = [(model, [c for c in checks if c.model == model]) for model in (Model.LOCAL_VOLATILITY, Model.LOGNORMAL)]
    return [(model, mine) for model, mine in groups if mine]


def without_sampling(check: CrossCheck) -> bool:
    """Whether two exact values agree: nothing was sampled that the reference could have tested."""
    sampled = check.reference_kind == ReferenceKind.SAMPLE
    return check.verdict is Verdict.AGREES and check.engine_standard_error == 0.0 and not sampled


def by_verdict(checks: Sequence[CrossCheck]) -> list[tuple[str, Verdict, list[CrossCheck]]]:
    """Name, verdict and checks of every verdict, occurred or not; agreements without sampling apart."""
    groups = []
    for verdict in ORDER:
        mine = [check for check in checks if check.verdict is verdict]
        exact = [check for check in mine if without_sampling(check)]
        groups.append((str(verdict), verdict, [check for check in mine if not without_sampling(check)]))
        if verdict is Verdict.AGREES:
            groups.append((NO_SAMPLING, verdict, exact))
    return groups
