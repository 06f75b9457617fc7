"""A European trade on tonight's market and everything known of the value of one unit, under each model."""

from __future__ import annotations

import time
from dataclasses import dataclass, field, replace

from pricer.contracts.book import Model, Trade
from pricer.engines.closed_form import references
from pricer.engines.local_vol_model import local_vol_value, lognormal_value_by_paths
from pricer.engines.local_vol_monte_carlo import LocalVolSettings
from pricer.engines.model_value import Asked, ModelValue
from pricer.engines.monte_carlo import SamplingSettings, sample
from pricer.engines.selector import headline
from pricer.engines.unit_terms import UnitTerms
from pricer.market.market import Market


@dataclass(frozen=True, slots=True)
class AppraisalSettings:
    """How trades are appraised.

    ``precision_bp`` and ``delta_precision_bp`` are targets for the standard errors of the value and of
    each cash delta (delta times spot), in basis points of notional; for cash deltas, of their gross
    sum where that is larger, of which paths need only come within ``path_delta_precision_bp``: digitals
    move by many times what they pay. ``model`` leads where the trade asks for none; None: local volatility
    where an underlying has a smile. ``compare_models`` : both are computed wherever they differ.
    """

    seed: int
    precision_bp: float = 1.0
    delta_precision_bp: float = 1.0
    path_delta_precision_bp: float = 10.0
    model: Model | None = None
    compare_models: bool = True
    sampling: SamplingSettings = field(default_factory=SamplingSettings)
    local_vol: LocalVolSettings = field(default_factory=LocalVolSettings)


@dataclass(frozen=True, slots=True)
class Appraisal:
    """What is known of one unit of a trade. ``lead`` is the model of the headline.

    Where no underlying has a smile both models are one, and ``lognormal`` is the value of both.
    """

    trade: Trade
    terms: UnitTerms
    lead: Model
    lognormal: ModelValue | None
    local_volatility: ModelValue | None
    has_smile: bool
    tolerance: float  # standard error asked of the value
    seconds: float

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
    terms = UnitTerms.of(trade, market)
    has_smile = any(name in market.surfaces for name in trade.contract.underlyings) and terms.years > 0.0
    lead = trade.model or settings.model or (Model.LOCAL_VOLATILITY if has_smile else Model.LOGNORMAL)
    asked = Asked(
        group=trade.trade_id,
        seed=settings.seed,
        value_tolerance=settings.precision_bp * 1e-4 * terms.unit_notional,
        delta_tolerance=settings.delta_precision_bp * 1e-4 * terms.unit_notional,
        delta_fraction=settings.delta_precision_bp * 1e-4,
    )
    paths = replace(settings.local_vol, sampling=settings.sampling)
    by_paths = replace(asked, delta_fraction=settings.path_delta_precision_bp * 1e-4)
    both = settings.compare_models and has_smile
    lognormal = smiled = None
    if both or lead is Model.LOGNORMAL or not has_smile:
        lognormal = _lognormal_value(trade, terms, market, asked, paths)
    if both or (lead is Model.LOCAL_VOLATILITY and has_smile):
        smiled = local_vol_value(trade, terms, market, by_paths, paths)
    return Appraisal(
        trade=trade,
        terms=terms,
        lead=lead,
        lognormal=lognormal,
        local_volatility=smiled,
        has_smile=has_smile,
        tolerance=asked.value_tolerance,
        seconds=time.perf_counter() - started,
    )


def _lognormal_value(
    trade: Trade, terms: UnitTerms, market: Market, asked: Asked, settings: LocalVolSettings
) -> ModelValue:
    problem = terms.lognormal()
    if problem is None:
        return lognormal_value_by_paths(trade, terms, market, asked, settings)
    drawn = sample(
        problem,
        group=asked.group,
        seed=asked.seed,
        value_tolerance=asked.value_tolerance,
        delta_tolerance=asked.delta_tolerance,
        delta_fraction=asked.delta_fraction,
        settings=settings.sampling,
    )
    known = references(problem)
    return ModelValue(headline(drawn, known, asked.value_tolerance), drawn, known)
