"""A European trade on tonight's market, as numbers, and everything known of its value per unit."""

from __future__ import annotations

import time
from dataclasses import dataclass, replace

import numpy as np

from pricer.contracts.book import Trade
from pricer.engines.closed_form import references
from pricer.engines.monte_carlo import Sample, SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem, Reference
from pricer.engines.selector import Headline, headline
from pricer.market.joint_lognormal import JointLognormal
from pricer.market.market import Market


@dataclass(frozen=True, slots=True)
class Appraisal:
    """What both routes say of one unit of a trade."""

    trade: Trade
    headline: Headline
    sample: Sample
    references: tuple[Reference, ...]
    unit_notional: float
    tolerance: float  # standard error asked of the value
    seconds: float


def problem_of(trade: Trade, market: Market) -> EuropeanProblem:
    """The trade as the engines see it: normalised levels, cash level folded into the payoff."""
    option = trade.contract
    law = market.joint_lognormal(option.underlyings, option.expiry_date)
    normalised = JointLognormal(law.forwards / np.array(option.reference_levels), law.covariance)
    return EuropeanProblem(
        law=normalised,
        aggregate=replace(option.aggregate, cash=None),
        payoff=option.payoff_on_core(),
        discount_factor=market.discount_factor(trade.currency, trade.collateral, option.payment_date),
    )


def appraise(
    trade: Trade,
    market: Market,
    *,
    seed: int,
    precision_bp: float,
    delta_precision_bp: float,
    settings: SamplingSettings,
) -> Appraisal:
    """Sample the trade and evaluate every reference that applies to it.

    The precisions are targets for the standard errors of the value and of each cash delta
    (delta times spot), in basis points of notional; for cash deltas, of their gross sum where
    that is larger.
    """
    started = time.perf_counter()
    problem = problem_of(trade, market)
    spots = np.array([market.underlyings[u].spot for u in trade.contract.underlyings])
    unit_notional = trade.contract.unit_notional(spots)
    tolerance = precision_bp * 1e-4 * unit_notional
    drawn = sample(
        problem,
        group=trade.trade_id,
        seed=seed,
        value_tolerance=tolerance,
        delta_tolerance=delta_precision_bp * 1e-4 * unit_notional,
        delta_fraction=delta_precision_bp * 1e-4,
        settings=settings,
    )
    known = references(problem)
    return Appraisal(
        trade=trade,
        headline=headline(drawn, known, tolerance),
        sample=drawn,
        references=known,
        unit_notional=unit_notional,
        tolerance=tolerance,
        seconds=time.perf_counter() - started,
    )
