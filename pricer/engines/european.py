"""A European option under each model, beside every reference."""

from __future__ import annotations

from pricer.contracts.book import Trade
from pricer.engines.closed_form import references
from pricer.engines.local_vol_model import lognormal_value_by_paths
from pricer.engines.local_vol_monte_carlo import LocalVolSettings
from pricer.engines.model_value import Asked, ModelValue
from pricer.engines.monte_carlo import sample
from pricer.engines.selector import headline
from pricer.engines.unit_ratios import european_ratios
from pricer.engines.unit_terms import UnitTerms
from pricer.market.market import Market

_METHOD = "pathwise, common factor integrated exactly"


def lognormal_value(
    trade: Trade, terms: UnitTerms, market: Market, asked: Asked, settings: LocalVolSettings
) -> ModelValue:
    """One unit under lognormal levels: sampled, and by every formula that applies."""
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
    return ModelValue(
        headline(drawn, known, asked.value_tolerance), drawn, known, european_ratios(terms, drawn, _METHOD)
    )
