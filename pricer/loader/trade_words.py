"""Words of the table trades, and units that several of its columns share."""

from __future__ import annotations

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.profile import ProfileKind

LONG, SHORT = "long", "short"
PRICE, PERFORMANCE = "price", "performance"
EUROPEAN_OPTION, OPTION, NOTE = "european option", "option", "note"
PRODUCTS = (EUROPEAN_OPTION, OPTION, NOTE)

CASH_DIGITALS = (ProfileKind.CASH_DIGITAL_CALL, ProfileKind.CASH_DIGITAL_PUT)
WEIGHTED = (AggregateKind.WEIGHTED_SUM, AggregateKind.GEOMETRIC)

LEVEL_UNIT = "in currency for price options, as a decimal (1.00 = 100 %) for performance options"
PAYOFF_UNIT = "per unit of the option, in currency or as a decimal like the strike"
