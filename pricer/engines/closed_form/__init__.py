"""Closed forms, bounds and quadratures for European problems: one file per family.

Every applicable one is evaluated beside the sampling engine. Each family prices calls,
puts and digitals on its own kind of aggregate; any payoff is composed of those.
"""

from __future__ import annotations

import math
from collections.abc import Iterable

from pricer.engines.closed_form.basket_quadrature import BASKET_QUADRATURE
from pricer.engines.closed_form.bjerksund_stensland import BJERKSUND_STENSLAND
from pricer.engines.closed_form.black_scholes import BLACK_SCHOLES
from pricer.engines.closed_form.exchange import EXCHANGE
from pricer.engines.closed_form.extremes import EXTREMES, TWO_ASSET_EXTREMES
from pricer.engines.closed_form.family import Family
from pricer.engines.closed_form.forward import FORWARD
from pricer.engines.closed_form.geometric_basket import GEOMETRIC_BASKET
from pricer.engines.closed_form.kirk import KIRK
from pricer.engines.closed_form.known_level import KNOWN_LEVEL
from pricer.engines.closed_form.lower_bound import LOWER_BOUND
from pricer.engines.closed_form.moment_matching import MOMENT_MATCHING
from pricer.engines.closed_form.one_factor_ranks import ONE_FACTOR_RANKS
from pricer.engines.closed_form.one_factor_sum import ONE_FACTOR_SUM
from pricer.engines.closed_form.order_statistics import ORDER_STATISTICS
from pricer.engines.closed_form.ranked_quadrature import RANKED_QUADRATURE
from pricer.engines.closed_form.two_asset_sum import TWO_ASSET_SUM
from pricer.engines.closed_form.upper_bound import UPPER_BOUND
from pricer.engines.problem import EuropeanProblem, Reference, ReferenceKind

__all__ = ["FAMILIES", "Family", "best_exact", "references"]

#: All families, in the order in which their references are listed. Those that claim to be
#: exact come first, the most trusted ones in front: formulas; integrals over one variable;
#: normal probabilities of several dimensions; integrals over several variables.
FAMILIES: tuple[Family, ...] = (
    KNOWN_LEVEL,
    BLACK_SCHOLES,
    FORWARD,
    GEOMETRIC_BASKET,
    EXCHANGE,
    TWO_ASSET_EXTREMES,
    ONE_FACTOR_SUM,
    TWO_ASSET_SUM,
    ONE_FACTOR_RANKS,
    EXTREMES,
    ORDER_STATISTICS,
    RANKED_QUADRATURE,
    BASKET_QUADRATURE,
    LOWER_BOUND,
    UPPER_BOUND,
    KIRK,
    BJERKSUND_STENSLAND,
    MOMENT_MATCHING,
)


def references(problem: EuropeanProblem) -> tuple[Reference, ...]:
    """Every closed form, bound, quadrature and approximation that applies, in a fixed order."""
    found = (family.reference(problem) for family in FAMILIES)
    return tuple(reference for reference in found if reference is not None)


def best_exact(refs: Iterable[Reference], tolerance: float = math.inf) -> Reference | None:
    """The most trusted exact reference whose error is within ``tolerance``; None where there is none.

    ``refs`` are in the order of ``FAMILIES``. The smallest claimed error is no ground for
    trust: it would favour the method whose claims are the least cautious.
    """
    exact = (reference for reference in refs if reference.kind is ReferenceKind.EXACT)
    return next((reference for reference in exact if reference.error <= tolerance), None)
