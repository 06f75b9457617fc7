"""Closed forms, bounds and quadratures for contracts with a path: one file per family.

They hold for lognormal levels, whatever has been fixed so far. A family declines rather than doubt.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Protocol

from pricer.contracts.life_cycle import Status
from pricer.engines.closed_form.continuous_barriers import continuous_barriers
from pricer.engines.closed_form.contract_averages import against_average, average_of_one_level, average_parts
from pricer.engines.closed_form.contract_variance import basket_variance, correlation_at_once, realised_variance
from pricer.engines.closed_form.dated_walk import by_dates
from pricer.engines.closed_form.european_parts import european_parts
from pricer.engines.closed_form.path_family import AsEuropeans, PathFamily
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.problem import Reference, ReferenceKind


class ContractFamily(Protocol):
    """What knows some contracts: references without the amounts already known, none where it does not apply."""

    def references(self, terms: ContractTerms) -> tuple[Reference, ...]: ...


@dataclass(frozen=True, slots=True)
class _ContinuousBarriers:
    def references(self, terms: ContractTerms) -> tuple[Reference, ...]:
        return continuous_barriers(terms)


#: All families, in the order in which their references are listed: those that are exact and simplest in front.
PATH_FAMILIES: tuple[ContractFamily, ...] = (
    PathFamily(
        "realised variance of lognormal levels",
        ReferenceKind.EXACT,
        "Imhof (1961); Demeterfi, Derman, Kamal & Zou (1999)",
        realised_variance,
    ),
    PathFamily(
        "average by convolution",
        ReferenceKind.EXACT,
        "Carverhill & Clewlow (1990); Benhamou (2002)",
        average_of_one_level,
    ),
    PathFamily(
        "average that sets the reference", ReferenceKind.EXACT, "Geman, El Karoui & Rochet (1995)", against_average
    ),
    PathFamily(
        "quadrature from date to date",
        ReferenceKind.EXACT,
        "Andricopoulos, Widdicks, Duck & Newton (2003); Fusai & Recchioni (2007)",
        by_dates,
    ),
    _ContinuousBarriers(),
    AsEuropeans("date by date", european_parts),
    AsEuropeans("average as a basket of fixings", average_parts),
    PathFamily("basket variance from two moments", ReferenceKind.APPROXIMATION, "Levy (1992)", basket_variance),
    PathFamily(
        "correlation of certain covariances",
        ReferenceKind.APPROXIMATION,
        "continuous observation, common practice",
        correlation_at_once,
    ),
)


def contract_references(terms: ContractTerms) -> tuple[Reference, ...]:
    """Every number known without sampling, per unit and discounted, amounts already known included.

    None for contracts that have ended, and for those whose writer's own assets decide what is paid.
    """
    writer = terms.contract.writer
    if terms.as_of.status is not Status.LIVE or (writer is not None and writer.structural is not None):
        return ()
    found = (reference for family in PATH_FAMILIES for reference in family.references(terms))
    return tuple(replace(reference, value=reference.value + terms.known_value) for reference in found)
