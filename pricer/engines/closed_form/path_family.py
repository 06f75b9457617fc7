"""What a family of formulas for contracts over several dates offers: numbers without sampling."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from pricer.engines.closed_form import FAMILIES
from pricer.engines.closed_form import references as european_references
from pricer.engines.closed_form.family import Estimate
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import EuropeanProblem, Reference, ReferenceKind


@dataclass(frozen=True, slots=True)
class PathFamily:
    """A named, cited way of valuing some contracts; ``value`` is discounted, without the amounts already known.

    It returns None for a contract to which the family does not apply.
    """

    method: str
    kind: ReferenceKind
    source: str
    value: Callable[[ContractTerms], Estimate | None]

    def references(self, terms: ContractTerms) -> tuple[Reference, ...]:
        found = self.value(terms)
        if found is None or not (math.isfinite(found.value) and math.isfinite(found.error)):
            return ()
        return (Reference(self.method, self.kind, float(found.value), float(found.error), self.source),)


@dataclass(frozen=True, slots=True)
class AsEuropeans:
    """Contracts that are a sum of European options, each of which the European families know.

    ``parts`` returns None for other contracts; ``method`` names the reduction.
    """

    method: str
    parts: Callable[[ContractTerms], Sequence[EuropeanProblem] | None]

    def references(self, terms: ContractTerms) -> tuple[Reference, ...]:
        problems = self.parts(terms)
        if problems is None:
            return ()
        if len(problems) == 1:
            return tuple(self._named(reference) for reference in european_references(problems[0]))
        return self._sums(problems)

    def _named(self, reference: Reference) -> Reference:
        method = f"{self.method}: {reference.method}"
        return Reference(method, reference.kind, reference.value, reference.error, reference.source)

    def _sums(self, problems: Sequence[EuropeanProblem]) -> tuple[Reference, ...]:
        """The exact sum where every part is exact, else what its bounds add up to."""
        exact = [_exact(problem) for problem in problems]
        known = [reference for reference in exact if reference is not None]
        if len(known) == len(problems):
            return (self._sum(known, ReferenceKind.EXACT),)
        rest = {i: european_references(problem) for i, problem in enumerate(problems) if exact[i] is None}
        bounds = []
        for kind in (ReferenceKind.LOWER_BOUND, ReferenceKind.UPPER_BOUND):
            found = [exact[i] or _tightest(rest[i], kind) for i in range(len(problems))]
            parts = [reference for reference in found if reference is not None]
            if len(parts) == len(problems):
                bounds.append(self._sum(parts, kind))
        return tuple(bounds)

    def _sum(self, parts: Sequence[Reference], kind: ReferenceKind) -> Reference:
        return Reference(
            f"{self.method}: {len(parts)} European options",
            kind,
            math.fsum(reference.value for reference in parts),
            math.fsum(reference.error for reference in parts),
            "; ".join(dict.fromkeys(reference.source for reference in parts)),
        )


def _exact(problem: EuropeanProblem) -> Reference | None:
    """By the first family that is exact: the others would cost time."""
    exact = (family for family in FAMILIES if family.kind is ReferenceKind.EXACT)
    return next((found for family in exact if (found := family.reference(problem)) is not None), None)


def _tightest(references: Sequence[Reference], kind: ReferenceKind) -> Reference | None:
    """The best bound of ``kind``; None where there is none."""
    bounds = [reference for reference in references if reference.kind is kind]
    if kind is ReferenceKind.LOWER_BOUND:
        return max(bounds, key=lambda bound: bound.value - bound.error, default=None)
    return min(bounds, key=lambda bound: bound.value + bound.error, default=None)
