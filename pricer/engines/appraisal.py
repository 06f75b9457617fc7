"""A trade on tonight's market and everything known of the value of one unit, under each model."""

from __future__ import annotations

import math
import time
from collections.abc import Iterable
from dataclasses import dataclass, field, replace

import numpy as np

from pricer.contracts.book import Model, Trade
from pricer.contracts.contract import Contract
from pricer.contracts.life_cycle import AsOf, Status
from pricer.contracts.option import EuropeanOption
from pricer.contracts.overhedge import Overhedge, overhedged
from pricer.contracts.remainder import remainder
from pricer.engines import european
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_value import (
    ContractSettings,
    local_vol_contract_value,
    lognormal_contract_value,
    may_be_exercised,
)
from pricer.engines.known_value import known_notional, known_value
from pricer.engines.local_vol_model import local_vol_value
from pricer.engines.local_vol_monte_carlo import LocalVolSettings
from pricer.engines.model_value import Asked, ModelValue
from pricer.engines.monte_carlo import SamplingSettings
from pricer.engines.unit_terms import UnitTerms
from pricer.market.market import Market
from pricer.market.standing import standing

#: How much larger the error of a contract may be under the model that does not lead.
_LESS = 2.0


@dataclass(frozen=True, slots=True)
class AppraisalSettings:
    """How trades are appraised.

    ``precision_bp`` and ``delta_precision_bp`` are targets for the standard errors of the value and of
    each cash delta (delta times spot), in basis points of notional; for cash deltas, of their gross
    sum where that is larger, of which paths need only come within ``path_delta_precision_bp``, contracts with
    triggers within ``contract_delta_precision_bp``: digitals move by many times what they pay. ``model`` leads where
    the trade asks for none; None: local volatility where an underlying has a smile. ``compare_models`` : both are
    computed wherever they differ. ``overhedge`` : what the desk would rather book than a payout that jumps, if it asks
    for that.
    """

    seed: int
    precision_bp: float = 1.0
    delta_precision_bp: float = 1.0
    path_delta_precision_bp: float = 10.0
    contract_delta_precision_bp: float = 100.0
    model: Model | None = None
    compare_models: bool = True
    overhedge: Overhedge | None = None
    sampling: SamplingSettings = field(default_factory=SamplingSettings)
    local_vol: LocalVolSettings = field(default_factory=LocalVolSettings)
    contract: ContractSettings = field(default_factory=ContractSettings)


@dataclass(frozen=True, slots=True)
class Appraisal:
    """What is known of one unit of a trade. ``lead`` is the model of the headline.

    Where no underlying has a smile both models are one, and ``lognormal`` is the value of both. ``as_of`` tells
    where the trade stands. ``overhedge_cost`` of one unit to this side of the trade, None where none was asked.
    """

    trade: Trade
    as_of: AsOf
    unit_notional: float
    lead: Model
    lognormal: ModelValue | None
    local_volatility: ModelValue | None
    has_smile: bool
    tolerance: float  # standard error asked of the value
    seconds: float
    overhedge_cost: float | None = None

    @property
    def is_live(self) -> bool:
        """Whether anything is still to happen: all that is left of other trades is known."""
        return self.as_of.status is Status.LIVE

    @property
    def leading(self) -> ModelValue:
        """The value of the leading model."""
        first, second = self.lognormal, self.local_volatility
        found = second if self.lead is Model.LOCAL_VOLATILITY and second is not None else first
        assert found is not None  # made so by ``appraise``
        return found

    @property
    def values(self) -> tuple[tuple[Model, ModelValue], ...]:
        """Every value that was computed, with its model."""
        both = ((Model.LOGNORMAL, self.lognormal), (Model.LOCAL_VOLATILITY, self.local_volatility))
        return tuple((model, value) for model, value in both if value is not None)


def appraise(trade: Trade, market: Market, settings: AppraisalSettings) -> Appraisal:
    """Value the trade under its model, and under the other one if models are compared, beside every reference."""
    started = time.perf_counter()
    found = _appraised(trade, market, settings)
    cost = _overhedge_cost(found, market, settings)
    return replace(found, overhedge_cost=cost, seconds=time.perf_counter() - started)


def _appraised(trade: Trade, market: Market, settings: AppraisalSettings) -> Appraisal:
    as_of = standing(trade, market)
    option = _european(trade, as_of, market)
    if option is not None:
        return _european_appraisal(replace(trade, contract=option), trade, as_of, market, settings)
    if as_of.status is not Status.LIVE:
        notional, known = known_notional(trade, as_of, market), known_value(trade, as_of, market)
        return Appraisal(trade, as_of, notional, Model.LOGNORMAL, known, None, False, 0.0, 0.0)
    terms = ContractTerms.of(trade, as_of, market)
    asked = _asked(trade, terms.unit_notional, settings)
    asked = replace(asked, delta_fraction=settings.contract_delta_precision_bp * 1e-4)
    has_smile = _has_smile(trade.contract, market)
    wanted = _lead(trade, settings, has_smile=has_smile)
    both = settings.compare_models and has_smile
    smiled = lognormal = None
    if both or (wanted is Model.LOCAL_VOLATILITY and has_smile):
        leads = wanted is Model.LOCAL_VOLATILITY
        smiled = local_vol_contract_value(trade, terms, market, asked if leads else _beside(asked), settings.contract)
    if both or wanted is Model.LOGNORMAL or smiled is None:
        leads = wanted is Model.LOGNORMAL or smiled is None
        lognormal = lognormal_contract_value(
            trade, terms, market, asked if leads else _beside(asked), settings.contract
        )
    lead = Model.LOGNORMAL if has_smile and smiled is None else wanted  # some contracts know no local volatility
    return Appraisal(trade, as_of, terms.unit_notional, lead, lognormal, smiled, has_smile, asked.value_tolerance, 0.0)


def _european(trade: Trade, as_of: AsOf, market: Market) -> EuropeanOption | None:
    """What is left of the trade as a European option, if that is all that is left of it.

    An option that expires today is still valued as one while spots stand in for today's fixings.
    """
    contract = trade.contract
    if isinstance(contract, EuropeanOption):
        return contract if contract.expiry_date > market.valuation_date or as_of.assumed else None
    if as_of.status is not Status.LIVE or as_of.to_be_paid or may_be_exercised(as_of):
        return None
    left = remainder(as_of).as_european()
    return left if left is not None and left.expiry_date > market.valuation_date else None


def _european_appraisal(
    trade: Trade, booked: Trade, as_of: AsOf, market: Market, settings: AppraisalSettings
) -> Appraisal:
    """``trade`` is what is left of ``booked``, as a European option."""
    terms = UnitTerms.of(trade, market)
    has_smile = _has_smile(trade.contract, market) and terms.years > 0.0
    lead = _lead(trade, settings, has_smile=has_smile)
    asked = _asked(trade, terms.unit_notional, settings)
    paths = replace(settings.local_vol, sampling=settings.sampling)
    by_paths = replace(asked, delta_fraction=settings.path_delta_precision_bp * 1e-4)
    both = settings.compare_models and has_smile
    lognormal = smiled = None
    if both or lead is Model.LOGNORMAL or not has_smile:
        lognormal = european.lognormal_value(trade, terms, market, asked, paths)
    if both or (lead is Model.LOCAL_VOLATILITY and has_smile):
        smiled = local_vol_value(trade, terms, market, by_paths, paths)
    return Appraisal(booked, as_of, terms.unit_notional, lead, lognormal, smiled, has_smile, asked.value_tolerance, 0.0)


def _asked(trade: Trade, unit_notional: float, settings: AppraisalSettings) -> Asked:
    return Asked(
        group=trade.trade_id,
        seed=settings.seed,
        value_tolerance=settings.precision_bp * 1e-4 * unit_notional,
        delta_tolerance=settings.delta_precision_bp * 1e-4 * unit_notional,
        delta_fraction=settings.delta_precision_bp * 1e-4,
    )


def _beside(asked: Asked) -> Asked:
    """What is asked of the model that does not lead: the model difference needs its value, nothing its deltas."""
    return replace(asked, value_tolerance=_LESS * asked.value_tolerance, delta_tolerance=math.inf)


def _has_smile(contract: EuropeanOption | Contract, market: Market) -> bool:
    return any(name in market.surfaces for name in contract.underlyings)


def _lead(trade: Trade, settings: AppraisalSettings, *, has_smile: bool) -> Model:
    return trade.model or settings.model or (Model.LOCAL_VOLATILITY if has_smile else Model.LOGNORMAL)


def _overhedge_cost(plain: Appraisal, market: Market, settings: AppraisalSettings) -> float | None:
    """What one unit loses to this side if it books the safer contract: 0 or less; None if nothing is asked."""
    if settings.overhedge is None or plain.as_of.status is not Status.LIVE:
        return None
    trade = plain.trade
    side = float(np.sign(trade.position))
    unchecked = replace(settings.contract, with_checks=False)
    only = replace(settings, overhedge=None, compare_models=False, model=plain.lead, contract=unchecked)
    safer = overhedged(trade.contract, settings.overhedge, long=side > 0.0, after=market.valuation_date)
    value = plain.leading.headline.value
    costs = (side * (_value(replace(trade, contract=other), market, only) - value) for other in _other(safer, trade))
    return min((0.0, *costs))


def _other(safer: Iterable[EuropeanOption | Contract], trade: Trade) -> Iterable[EuropeanOption | Contract]:
    return (contract for contract in safer if contract != trade.contract)


def _value(trade: Trade, market: Market, settings: AppraisalSettings) -> float:
    return _appraised(trade, market, settings).leading.headline.value
