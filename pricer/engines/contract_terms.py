"""One unit of a contract on tonight's market, as engines of paths see it: numbers by date, no names."""

from __future__ import annotations

import math
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, replace
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.life_cycle import AsOf
from pricer.contracts.option import Conversion
from pricer.engines.contract_factors import ContractFactors
from pricer.market.affine_price import AffinePrice
from pricer.market.market import Market

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class ContractTerms:
    """Prices at the dates to come, and what an amount paid on a day is worth tonight.

    ``as_of`` tells where ``contract`` stands: levels fixed so far, states of its parts. ``dates`` (n_dates) are
    the days after the valuation date on which it is observed, expiry included, ``times`` (n_dates,) their years.
    The price of an asset on a date, as the contract counts it (a composite's in the payment currency), is
    ``forwards[k] M[k] + floors[k]`` with M a lognormal martingale from 1 under the payment currency's measure, whose
    logarithm has moved by ``covariances[k]`` (n_dates, n, n) since the date before; ``floors`` (n_dates, n) are cash
    dividends still to come then, a composite's at the exchange rate's forward. Prices are not divided by references.
    ``discount`` : value tonight of 1 paid on a day after the valuation date, less what is lost if the writer
    defaults before. ``known_value`` : discounted amounts that are decided and not yet paid. ``unit_notional`` in the
    trade's currency. A derivative by the logarithm of every forward of an asset is ``random_spots * rates`` times
    that by its spot: spots less tonight's value of cash dividends to come, in the underlyings' currencies, and rates.
    """

    as_of: AsOf
    contract: Contract
    dates: tuple[date, ...]
    times: Array
    forwards: Array
    floors: Array
    covariances: Array
    discount: Callable[[date], float]
    known_value: float
    unit_notional: float
    random_spots: Array
    rates: Array
    factors: ContractFactors | None = None

    @classmethod
    def of(cls, trade: Trade, as_of: AsOf, market: Market, more_dates: Collection[date] = ()) -> ContractTerms:
        """``more_dates`` are days on which something may be decided. Raises as :meth:`Market.joint_lognormal`."""
        contract = as_of.contract
        names, conversion, today = contract.underlyings, contract.conversion, market.valuation_date
        dates = tuple(sorted(day for day in {*contract.dates, *more_dates} if day > today))
        prices = [market.affine_price(name) for name in names]
        currencies = [market.underlyings[name].currency for name in names]
        if dates:  # raises what it raises
            market.joint_lognormal(names, dates[-1], payment_currency=trade.currency, conversion=conversion, pure=True)
        factors = ContractFactors.of(market, names, dates, trade.currency, conversion)
        scales, floors = _levels(prices, dates)
        if conversion is Conversion.COMPOSITE:
            abroad = _rate_forwards(market, currencies, trade.currency, dates)
            scales, floors = scales * abroad, floors * abroad
        discount = discounting(trade, contract, market)
        spots = [market.spot_in(name, trade.currency, conversion) for name in names]
        return cls(
            as_of=as_of,
            contract=contract,
            dates=dates,
            times=np.array([as_of.years_to(day) for day in dates]),
            forwards=scales * np.exp(factors.drifts),
            floors=floors,
            covariances=factors.covariances,
            discount=discount,
            known_value=decided_value(as_of, discount),
            unit_notional=contract.unit_notional(np.array(spots)),
            random_spots=np.array([price.random_spot for price in prices]),
            rates=np.array([market.fx.rate(currency, trade.currency) for currency in currencies]),
            factors=factors,
        )

    @property
    def has_floors(self) -> bool:
        """Whether any part of a price to come is known tonight."""
        return bool(np.any(self.floors > 0.0))

    def with_volatility_moved(self, asset: int, by: float) -> ContractTerms:
        """Terms after the volatility of an underlying to every date has moved by ``by`` (0.01: a point).

        Correlations stay, and a quanto's forwards follow.
        """
        before = self.factors or ContractFactors(self.times, self.covariances, *_own(self.covariances.shape[1]))
        after = before.with_volatility_moved(asset, by)
        return replace(
            self,
            forwards=self.forwards * np.exp(after.drifts - before.drifts),
            covariances=after.covariances,
            factors=after,
        )

    @property
    def years(self) -> float:
        """Until expiry, 0 once it has passed."""
        return float(self.times[-1]) if len(self.times) else 0.0


def _own(n: int) -> tuple[Array, Array]:
    return np.eye(n), np.zeros((n, n))


def _levels(prices: Sequence[AffinePrice], dates: Sequence[date]) -> tuple[Array, Array]:
    """Scales and floors in the underlyings' currencies, (n_dates, n) each."""
    found = [[price.at(day) for price in prices] for day in dates]
    shape = (len(dates), len(prices))
    scales = np.array([[level.scale for level in row] for row in found]).reshape(shape)
    return scales, np.array([[level.floor for level in row] for row in found]).reshape(shape)


def _rate_forwards(market: Market, currencies: Sequence[str], target: str, dates: Sequence[date]) -> Array:
    """Forward exchange rates, (n_dates, n)."""
    by_currency = {c: np.array([market.fx_forward(c, target, day) for day in dates]) for c in set(currencies)}
    return np.array([by_currency[c] for c in currencies]).T.reshape(len(dates), len(currencies))


def decided_value(as_of: AsOf, discount: Callable[[date], float]) -> float:
    """What the amounts of one unit that are decided and not yet paid are worth tonight."""
    return math.fsum(paid.amount * discount(paid.payment_date) for paid in as_of.to_be_paid)


def discounting(trade: Trade, contract: Contract, market: Market) -> Callable[[date], float]:
    """What an amount of the contract, paid on a day, is worth tonight, its writer's default weighed."""
    writer = contract.writer

    def discount(day: date) -> float:
        """Of the desk's curve; of a doubtful writer's amount the recovery is certain, the rest takes survival."""
        sure = market.discount_factor(trade.currency, trade.collateral, day)
        if writer is None or writer.structural is not None:
            return sure
        credit = market.credit[writer.name]
        recovery = credit.recovery if writer.recovery is None else writer.recovery
        return sure * (recovery + (1.0 - recovery) * credit.survival_probability(day))

    return discount
