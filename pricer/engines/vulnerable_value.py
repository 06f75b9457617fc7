"""Options whose writer's assets decide whether they are paid (Johnson & Stulz 1987; Klein 1996).

The writer is looked at on the expiry date only, so that these are contracts with one payment, then. A writer
with a hazard rate needs nothing here: what its claims are worth is in the terms' discount, as long as they are claims.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.option import Conversion
from pricer.contracts.writer import StructuralDefault
from pricer.engines.closed_form import FAMILIES
from pricer.engines.closed_form.contract_parts import covariance_to, setting_place
from pricer.engines.closed_form.european_parts import european_parts
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.given_driver import first_exact
from pricer.engines.closed_form.vulnerable import is_claim, on_any_aggregate, on_one_level, sole_liability
from pricer.engines.closed_form.writer_default import WriterAssets, fixed_boundary
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.exact_value import moved_forwards
from pricer.engines.model_value import Asked, Life, ModelValue, UnitRatios
from pricer.engines.problem import EuropeanProblem, Reference, ReferenceKind
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import headline
from pricer.engines.vulnerable_sample import RANDOMISATIONS, Drawn, Paid, by_shares, estimate, out_of_all
from pricer.market.market import Market

Array = NDArray[np.float64]
#: A claim's discounted value with the writer's default in it; None where it is not known.
Vulnerable = Callable[[EuropeanProblem, WriterAssets], Estimate | None]

_POINTS = 4096  # of every randomisation
_STEP = 0.01  # of a forward's logarithm, in its deviations to expiry
_POINT = 0.01  # of volatility
_SAMPLED = "levels drawn, writer integrated exactly"
_KNOWN = first_exact(FAMILIES)


@dataclass(frozen=True, slots=True)
class _Assets:
    """The writer's assets, and covariances (n,) of their log with those of the levels in ``terms``."""

    forward: float
    deviation: float
    covariance: Array
    terms: ContractTerms

    def beside(self, moved: ContractTerms) -> WriterAssets:
        """The assets beside levels whose volatilities may have moved."""
        ratios = np.sqrt(_variances(moved) / np.maximum(_variances(self.terms), 1e-300))
        return WriterAssets(self.forward, self.deviation, self.covariance * ratios)


def vulnerable_value(
    trade: Trade, terms: ContractTerms, market: Market, asked: Asked, settings: object = None
) -> ModelValue | None:
    """One unit of a contract with a structural writer, under lognormal levels.

    Where the payoff can be negative, it is what the holder has to pay then, whatever becomes of the writer. None for
    contracts that pay before expiry or hang on more than that day's levels.
    Deltas are those by the underlyings; none is given by the writer's assets.
    """
    writer = terms.contract.writer
    if writer is None or writer.structural is None:
        return None
    assets = _assets(trade, terms, market, writer.structural)
    if assets is None:
        return None
    problem = _problem(terms)
    if problem is None:
        return None
    structural = writer.structural
    drawn = Drawn.of(problem.law.n_assets, _POINTS, asked.group, asked.seed)

    def means(moved: ContractTerms) -> Array:
        beside = assets.beside(moved)
        return drawn.means(_problem(moved) or problem, beside, _paid(structural, beside))

    value, error = estimate(means(terms))
    sample = SampledValue(
        value + terms.known_value, error, RANDOMISATIONS - 1, RANDOMISATIONS * _POINTS, RANDOMISATIONS, _SAMPLED
    )
    references = _references(terms, assets, structural)
    leading = headline(sample, tuple(references), asked.value_tolerance)
    ratios = _sampled_ratios(terms, means)
    return ModelValue(leading, sample, tuple(references), ratios, life=Life(terms.years, 0.0))


def _references(terms: ContractTerms, assets: _Assets, structural: StructuralDefault) -> list[Reference]:
    """Every formula that applies, and what the option is worth if its writer is sure to pay."""
    problem = _problem(terms)
    assert problem is not None  # asked by the caller
    found = []
    for name, source, method in _methods(structural):
        value = _with_holder(problem, assets.beside(terms), method)
        if value is not None:
            total = value.value + terms.known_value
            found.append(Reference(name, ReferenceKind.EXACT, total, value.error, source))
    sure = _KNOWN(problem)
    if sure is not None:
        value = sure.times(problem.discount_factor)
        total = value.value + terms.known_value
        found.append(Reference("writer sure to pay", ReferenceKind.UPPER_BOUND, total, value.error, "Merton (1973)"))
    return found


def _sampled_ratios(terms: ContractTerms, means: Callable[[ContractTerms], Array]) -> UnitRatios:
    """By differences on the same draws; vegas of composites of several underlyings are not known."""
    n = len(terms.contract.underlyings)
    shares = terms.random_spots * terms.rates
    composite = terms.contract.conversion is Conversion.COMPOSITE and bool(np.any(terms.rates != 1.0))
    deltas, vegas = [], []
    for i in range(n):
        step = _STEP * max(float(np.sqrt(terms.covariances[:, i, i].sum())), 0.1)
        up, down = (means(moved_forwards(terms, i, h)) for h in (step, -step))
        deltas.append(estimate((up - down) / (2.0 * step)))
        up, down = (means(terms.with_volatility_moved(i, h)) for h in (_POINT, -_POINT))
        vegas.append(estimate(0.5 * (up - down)))
    unknown = np.full(n, np.nan)
    return UnitRatios(
        deltas=np.array([value for value, _ in deltas]) / shares,
        delta_errors=np.array([error for _, error in deltas]) / shares,
        gammas=None,
        gamma_errors=None,
        vegas=unknown if composite else np.array([value for value, _ in vegas]),
        vega_errors=unknown if composite else np.array([error for _, error in vegas]),
        method="differences on the same draws",
    )


def _problem(terms: ContractTerms) -> EuropeanProblem | None:
    """The one payment at expiry, as if the writer were sure to pay."""
    parts = european_parts(terms)
    return parts[0] if parts is not None and len(parts) == 1 else None


def _paid(structural: StructuralDefault, assets: WriterAssets) -> Paid:
    if structural.liabilities == 0.0:
        return out_of_all(assets)
    owed = structural.liabilities
    return by_shares(fixed_boundary(assets, owed, owed, structural.deadweight_cost))


def claim_fault(contract: Contract) -> str | None:
    """Why survival may not simply weigh what ``contract`` pays; None where it may.

    A holder who may have to pay owes that to a writer in default as well.
    """
    writer = contract.writer
    if writer is None or writer.structural is not None:
        return None
    instead = [f.payout_instead(f.start()) for f in contract.features]
    payoffs = [contract.payout.payoff(), *(payout.payoff() for payout in instead if payout is not None)]
    aggregate = getattr(contract.statistic, "aggregate", None)
    positive = aggregate is not None and min(aggregate.weights) >= 0.0 and not _counts_returns(contract)
    if all(is_claim(payoff, positive=positive) for payoff in payoffs):
        return None
    return "its payoff can be negative: what the holder would owe is not weighed with the writer's survival"


def _counts_returns(contract: Contract) -> bool:
    return hasattr(contract.statistic, "local") or hasattr(contract.statistic, "returns_per_year")


def _methods(structural: StructuralDefault) -> tuple[tuple[str, str, Vulnerable], ...]:
    if structural.liabilities == 0.0:
        return (
            (
                "claim on all of its writer's assets",
                "Johnson & Stulz (1987)",
                lambda problem, assets: sole_liability(problem, assets, _KNOWN),
            ),
        )
    owed, lost = structural.liabilities, structural.deadweight_cost

    def by_probabilities(problem: EuropeanProblem, assets: WriterAssets) -> Estimate | None:
        return on_one_level(problem, assets.loadings, fixed_boundary(assets, owed, owed, lost))

    def over_the_assets(problem: EuropeanProblem, assets: WriterAssets) -> Estimate | None:
        return on_any_aggregate(problem, assets.loadings, fixed_boundary(assets, owed, owed, lost), _KNOWN)

    return (
        ("writer's assets, two-dimensional normal", "Klein (1996)", by_probabilities),
        ("writer's assets, one integral", "Klein (1996)", over_the_assets),
    )


def _with_holder(problem: EuropeanProblem, assets: WriterAssets, method: Vulnerable) -> Estimate | None:
    """The writer pays what is above 0 if it can, the holder what is below in any case."""
    positive = min(problem.aggregate.weights) >= 0.0
    if is_claim(problem.payoff, positive=positive):
        return method(problem, assets)
    due = method(replace(problem, payoff=problem.payoff.limited(floor=0.0)), assets)
    owed = _KNOWN(replace(problem, payoff=problem.payoff.scaled(-1.0).limited(floor=0.0)))
    if due is None or owed is None:
        return None
    return due + owed.times(-problem.discount_factor)


def _assets(trade: Trade, terms: ContractTerms, market: Market, structural: StructuralDefault) -> _Assets | None:
    """None where the assets hold known cash, or are counted in another currency than the formulas need."""
    contract, since = terms.contract, setting_place(terms)
    if since is None or not terms.dates:
        return None
    abroad = market.underlyings[structural.assets].currency != trade.currency
    if abroad and (structural.liabilities == 0.0 or contract.conversion is Conversion.COMPOSITE):
        return None
    names = (*contract.underlyings, structural.assets)
    conversion = contract.conversion or (Conversion.QUANTO if abroad else None)
    last = terms.dates[-1]
    law = market.joint_lognormal(names, last, payment_currency=trade.currency, conversion=conversion, pure=True)
    if market.affine_price(structural.assets).at(last).floor > 0.0 or law.covariance[-1, -1] <= 0.0:
        return None
    covariance = law.covariance[-1, :-1]
    if since >= 0:
        start = market.joint_lognormal(
            names, terms.dates[since], payment_currency=trade.currency, conversion=conversion, pure=True
        )
        covariance = covariance - start.covariance[-1, :-1]
    # All that the writer owes is the whole position; the assets are counted per unit of it.
    units = abs(trade.position) if structural.liabilities == 0.0 else 1.0
    return _Assets(float(law.forwards[-1]) / units, float(law.deviations[-1]), covariance, terms)


def _variances(terms: ContractTerms) -> Array:
    """Of the logs of the levels that are paid on."""
    since = setting_place(terms)
    assert since is not None  # asked before
    last = len(terms.dates) - 1
    return np.asarray(np.diag(covariance_to(terms, last) - covariance_to(terms, since)))
