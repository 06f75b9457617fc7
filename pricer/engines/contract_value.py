"""A live contract under each model: the engine that suits it, beside every independent number."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from pricer.contracts.barrier import Barrier
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.exercise import Exercise
from pricer.contracts.life_cycle import AsOf, Status
from pricer.contracts.observation import Observation
from pricer.engines.closed_form.contract_references import contract_references
from pricer.engines.contract_exercise.settings import ExerciseSettings
from pricer.engines.contract_exercise.value import exercise_value
from pricer.engines.contract_exercise.value import why_not as why_not_exercised
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.result import NotAsLegs
from pricer.engines.contract_legs.smooth import smooth_value
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.engine import walk_reference, walk_value
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.model_value import Asked, ModelValue
from pricer.engines.not_covered import NotCovered
from pricer.engines.paths.sample import PathSettings
from pricer.engines.problem import Reference
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.engines.stepwise.value import stepwise_value
from pricer.engines.variance_products import variance_references, variance_value
from pricer.engines.vulnerable_value import claim_fault, vulnerable_value
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.market import Market
from pricer.market.standing import standing


@dataclass(frozen=True, slots=True)
class ContractSettings:
    """How much each engine of contracts draws; ``with_checks``: an independent walk stands beside each value."""

    smooth: PathSettings = field(default_factory=PathSettings)
    stepwise: StepwiseSettings = field(default_factory=StepwiseSettings)
    walk: WalkSettings = field(default_factory=WalkSettings)
    exercise: ExerciseSettings = field(default_factory=ExerciseSettings)
    with_checks: bool = True


def lognormal_contract_value(
    trade: Trade, terms: ContractTerms, market: Market, asked: Asked, settings: ContractSettings
) -> ModelValue:
    """One unit under lognormal levels. Raises :class:`NotCovered` for what no engine can value."""
    fault = claim_fault(terms.contract)
    if fault is not None:
        raise NotCovered(fault)
    if may_be_exercised(terms.as_of):
        return exercise_value(trade, terms, market, asked, settings.exercise)
    special = _special(trade, terms, market, asked)
    if special is not None:
        return special
    known = contract_references(terms)
    legs = contract_legs(terms)
    if isinstance(legs, NotAsLegs):
        return walk_value(trade, terms, market, asked, settings.walk, smiled=False, references=known)
    known = (*known, *_check(trade, terms, market, asked, settings, smiled=False))
    if terms.has_floors or legs.has_signed_weights:
        return stepwise_value(trade, terms, legs, market, asked, settings.stepwise, known, smiled=False)
    return smooth_value(terms, legs, asked, settings.smooth, known)


def local_vol_contract_value(
    trade: Trade, terms: ContractTerms, market: Market, asked: Asked, settings: ContractSettings
) -> ModelValue | None:
    """One unit under local volatility; None for contracts that are valued under lognormal levels alone."""
    if may_be_exercised(terms.as_of) or has_structural_writer(terms):
        return None
    known = variance_references(terms, market)
    legs = contract_legs(terms, _at_barriers(terms, market))
    if isinstance(legs, NotAsLegs):
        return walk_value(trade, terms, market, asked, settings.walk, smiled=True, references=known)
    known = (*known, *_check(trade, terms, market, asked, settings, smiled=True))
    return stepwise_value(trade, terms, legs, market, asked, settings.stepwise, known, smiled=True)


def _at_barriers(terms: ContractTerms, market: Market) -> tuple[LocalVolSurface, ...]:
    """Local volatilities for barriers watched at all times, none without one."""
    if not any(isinstance(feature, Barrier) and feature.continuous for feature in terms.contract.features):
        return ()
    surfaces = (market.implied_surface(name) for name in terms.contract.underlyings)
    return tuple(LocalVolSurface.from_implied(surface, horizon=terms.years) for surface in surfaces)


def _check(
    trade: Trade, terms: ContractTerms, market: Market, asked: Asked, settings: ContractSettings, *, smiled: bool
) -> tuple[Reference, ...]:
    if not settings.with_checks:
        return ()
    return (walk_reference(trade, terms, market, asked, settings.walk, smiled=smiled),)


def _special(trade: Trade, terms: ContractTerms, market: Market, asked: Asked) -> ModelValue | None:
    """What has a formula of its own; a structural writer has nothing else."""
    if has_structural_writer(terms):
        found = vulnerable_value(trade, terms, market, asked)
        if found is None:
            raise NotCovered(
                "a writer who defaults at expiry by his assets is priced on European payoffs without cash dividends to "
                "come alone"
            )
        return found
    return variance_value(trade, terms, market, asked, smiled=False)


def why_not(trade: Trade, market: Market) -> tuple[str, str] | None:
    """The table of the book and the reason for which a live contract is covered by no engine; None for one that may be.

    What only a solution can tell is left to the engines. Raises as :meth:`ContractTerms.of`.
    """
    contract = trade.contract
    if not isinstance(contract, Contract) or not (contract.writer or any(_rights(contract))):
        return None
    as_of = standing(trade, market)
    if as_of.status is not Status.LIVE:
        return None
    fault = claim_fault(contract)
    if fault is not None:
        return "writer", fault
    reason = why_not_exercised(ContractTerms.of(trade, as_of, market)) if may_be_exercised(as_of) else None
    return None if reason is None else ("exercise", reason)


def may_be_exercised(as_of: AsOf) -> bool:
    """Whether a right to end the contract is still there, today's included."""
    return any(days[-1].day >= as_of.valuation_date for days in _rights(as_of.contract))


def _rights(contract: Contract) -> Iterator[tuple[Observation, ...]]:
    return (feature.rights for feature in contract.features if isinstance(feature, Exercise))


def has_structural_writer(terms: ContractTerms) -> bool:
    """Whether the payer defaults by the value of his assets at expiry."""
    writer = terms.contract.writer
    return writer is not None and writer.structural is not None
