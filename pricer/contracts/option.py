"""The European multi-asset option: an aggregate of levels and a profile on it."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.product_name import family
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind


class Conversion(StrEnum):
    """How a level becomes an amount of the payment currency."""

    QUANTO = "quanto"  # one unit of the level's currency counts as one of the payment currency
    COMPOSITE = "composite"  # the level is converted at the date's exchange rate


@dataclass(frozen=True, slots=True)
class EuropeanOption:
    """Pays ``profile(aggregate(levels at expiry))`` per unit on the payment date.

    ``reference_levels`` divides each underlying's price: the initial fixings for a
    performance option, ones for a price option. ``conversion`` says what becomes of levels in
    another currency than the trade's; the reference levels of a composite are in the trade's.
    """

    underlyings: tuple[str, ...]
    reference_levels: tuple[float, ...]
    aggregate: Aggregate
    profile: Profile
    expiry_date: date
    payment_date: date
    on_performance: bool
    conversion: Conversion | None = None

    def __post_init__(self) -> None:
        n = len(self.underlyings)
        if not n == len(self.reference_levels) == len(self.aggregate.weights):
            raise ValueError(
                f"{n} underlyings, {len(self.reference_levels)} reference levels and "
                f"{len(self.aggregate.weights)} weights must be equal in number"
            )
        if not any(self.aggregate.weights):
            raise ValueError("at least one weight must differ from 0: the option has no notional")
        if self._is_cash_digital and not self.profile.cash_amount:
            raise ValueError("a cash digital must pay an amount other than 0: the option has no notional")

    def payoff_on_core(self) -> PiecewiseLinear:
        """The payoff per unit as a function of the aggregate *without* its cash level.

        "Best of assets and cash" is the best of the assets seen through a profile that is
        flat below the cash level, so engines never meet the cash level itself.
        """
        payoff = self.profile.payoff()
        cash = self.aggregate.cash
        if cash is None:
            return payoff
        if self.aggregate.kind is AggregateKind.BEST_OF:
            return payoff.of_floored_argument(cash)
        return payoff.of_capped_argument(cash)

    def payoff(self, spots: NDArray[np.float64]) -> NDArray[np.float64]:
        """Payoff per unit for prices ``spots`` (..., n_assets)."""
        levels = np.asarray(spots, dtype=float) / np.array(self.reference_levels)
        return self.profile.payoff()(self.aggregate(levels))

    def unit_notional(self, spots: NDArray[np.float64]) -> float:
        """The amount that one unit refers to, for quoting errors in basis points of notional.

        A cash digital refers to the amount it pays; a performance option to 1 unit of
        currency; a price option to its aggregate at ``spots`` (n_assets,), with the
        absolute values of the weights of a weighted sum.
        """
        if self._is_cash_digital:
            return abs(self.profile.cash_amount)
        if self.on_performance:
            return 1.0
        weights = self.aggregate.weights
        if self.aggregate.kind is not AggregateKind.GEOMETRIC:
            weights = tuple(abs(w) for w in weights)
        levels = np.asarray(spots, dtype=float)
        return float(Aggregate(self.aggregate.kind, weights)(levels))

    @property
    def has_fixed_notional(self) -> bool:
        """Whether the amount that one unit refers to is the same at all prices."""
        return self.on_performance or self._is_cash_digital

    @property
    def _is_cash_digital(self) -> bool:
        return self.profile.kind in (ProfileKind.CASH_DIGITAL_CALL, ProfileKind.CASH_DIGITAL_PUT)

    @property
    def product(self) -> str:
        """The trade's everyday name, used to group reports."""
        return f"{family(self.aggregate)} {self.profile.kind}"
