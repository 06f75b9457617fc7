"""One night's market: everything a trade is priced with, frozen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.fixings import Fixings
from pricer.contracts.option import Conversion
from pricer.core.issues import Issue
from pricer.core.source import SourceFile
from pricer.market.affine_price import AffinePrice
from pricer.market.agreements import Agreement
from pricer.market.checked_surface import CheckedSurface
from pricer.market.correlation import CorrelationMatrix
from pricer.market.credit import HazardCurve
from pricer.market.currency_conversion import composite, quanto, with_rates
from pricer.market.curves import DiscountCurve
from pricer.market.funding import FundingCurve
from pricer.market.fx import FxRates, MissingRate, currencies_of
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.joint_lognormal import JointLognormal
from pricer.market.market_quotes import MarketQuotes
from pricer.market.repo import RepoCurve
from pricer.market.underlying import Underlying
from pricer.market.volatility import VolatilityCurve, covariance

#: The key of :attr:`Market.rejected` under which an unusable correlation matrix is explained.
CORRELATIONS = "correlations"


class MissingMarketDataError(LookupError):
    """The market lacks what was asked of it; :func:`pricer.market.coverage.coverage` finds this beforehand."""


@dataclass(frozen=True, slots=True, eq=False)
class Market:
    """The market as it stood at the end of ``valuation_date``.

    ``curves`` is keyed by (currency, collateral), with collateral "" for the currency's
    standard curve, ``repo`` and ``surfaces`` by underlying, ``credit`` by name, ``agreements`` by
    netting set. An underlying with a surface has no volatility of its own. The correlation matrix
    holds underlyings and currency pairs ("EURUSD", either way round).
    ``rejected`` says of underlyings and curves (by their ids) and of the correlation matrix
    (as ``CORRELATIONS``) that were given but cannot be used, why, of exchange rates by their
    pairs, of an underlying left out of the matrix as ``CORRELATIONS:ID``, and of two ids whose
    correlation alone is not known as ``CORRELATIONS:ID:ID``. An underlying
    that lost only its volatility may stand in both ``underlyings`` and ``rejected``. Volatilities of
    exchange rates stand there as "fx_volatilities:EURUSD", names as "credit:NAME", agreements as
    "agreements:NETTING_SET" and the funding curve as "funding".
    A rate that stands in ``fx`` and in ``rejected`` contradicts the others: nothing may be converted at it.
    ``doubts`` are warnings about items that are used though they are implausible: of underlyings by their ids,
    of "repo:ID", "fx:EURUSD", "fx_volatilities:EURUSD" and "fixings:ID:YYYY-MM-DD".
    ``fixings`` are the official levels of past observation days, of underlyings and of currency pairs.
    ``quotes`` are those from which curves, hazard rates and correlations were made.
    """

    name: str
    valuation_date: date
    reporting_currency: str
    underlyings: Mapping[str, Underlying]
    curves: Mapping[tuple[str, str], DiscountCurve]
    correlation: CorrelationMatrix | None
    fx: FxRates
    issues: tuple[Issue, ...] = ()
    sources: tuple[SourceFile, ...] = ()
    rejected: Mapping[str, tuple[Issue, ...]] = field(default_factory=dict)
    surfaces: Mapping[str, CheckedSurface] = field(default_factory=dict)
    repo: Mapping[str, RepoCurve] = field(default_factory=dict)
    credit: Mapping[str, HazardCurve] = field(default_factory=dict)
    funding: FundingCurve | None = None
    agreements: Mapping[str, Agreement] = field(default_factory=dict)
    quotes: MarketQuotes = field(default_factory=MarketQuotes)
    doubts: Mapping[str, tuple[Issue, ...]] = field(default_factory=dict)
    fixings: Fixings = field(default_factory=Fixings)

    def growth_curve(self, underlying_id: str) -> DiscountCurve:
        """The curve at which the spot grows: the mid of the underlying's repo rates, if it has any, else the
        standard curve of its currency. Raises :class:`MissingMarketDataError`.
        """
        repo = self.repo.get(underlying_id)
        return repo.mid if repo is not None else self._curve(self._underlying(underlying_id).currency, "")

    def affine_price(self, underlying_id: str) -> AffinePrice:
        """The underlying's price on all dates, as a floor of cash dividends and a random part.

        Raises :class:`MissingMarketDataError`, and ValueError if the cash dividends to come are worth
        the spot or more.
        """
        underlying = self._underlying(underlying_id)
        growth_curve = self.growth_curve(underlying_id)
        return AffinePrice.of(underlying_id, underlying.spot, underlying.dividends, growth_curve)

    def forward(self, underlying_id: str, day: date) -> float:
        """Forward price for ``day``, after that day's dividends, in the underlying's currency.

        Spot grown at :meth:`growth_curve`, less dividends. Raises as :meth:`affine_price`, and
        ValueError if ``day`` lies before the valuation date.
        """
        return self.affine_price(underlying_id).at(day).forward

    def spot_in(self, underlying_id: str, currency: str, conversion: Conversion | None) -> float:
        """Tonight's price as a trade in ``currency`` sees it: a composite converts it, others take its number.

        Raises :class:`MissingMarketDataError` and MissingRate.
        """
        underlying = self._underlying(underlying_id)
        if conversion is Conversion.COMPOSITE:
            return underlying.spot * self.fx.rate(underlying.currency, currency)
        return underlying.spot

    def affine_levels(
        self, underlying_ids: Sequence[str], day: date
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Scales (n,) > 0 and floors (n,) >= 0 of the prices on ``day``, each in its currency.

        Prices are ``scales * X + floors`` with X the unit-mean lognormals of :meth:`log_covariance`; see
        :mod:`pricer.market.affine_price`. Raises as :meth:`forward`.
        """
        levels = [self.affine_price(name).at(day) for name in underlying_ids]
        return np.array([level.scale for level in levels]), np.array([level.floor for level in levels])

    def has_volatility(self, underlying_id: str) -> bool:
        """Whether options on the underlying can be priced."""
        underlying = self.underlyings.get(underlying_id)
        return underlying_id in self.surfaces or (underlying is not None and underlying.volatility is not None)

    def pure_volatility(self, underlying_id: str) -> VolatilityCurve:
        """Volatilities at the forward of the underlying's random part X: its own without cash dividends to come.

        Raises :class:`MissingMarketDataError`, and ValueError where no X has the quoted volatilities.
        """
        if underlying_id in self.surfaces:
            return self.surfaces[underlying_id].atm_curve
        volatility = self._volatility(underlying_id)
        return self.affine_price(underlying_id).pure_volatility(volatility)

    def implied_surface(self, underlying_id: str) -> ImpliedSurface:
        """Implied volatility of the underlying's random part X; raises as :meth:`pure_volatility`."""
        if underlying_id in self.surfaces:
            return self.surfaces[underlying_id].surface
        return ImpliedSurface.flat(self.pure_volatility(underlying_id))

    def log_covariance(self, names: Sequence[str], day: date) -> NDArray[np.float64]:
        """Covariance from the valuation date to ``day``, not annualised: (n, n).

        Names are underlyings, standing for log X of their random parts, or currency pairs such as
        "EURUSD", standing for the logarithm of that rate: either way round, and as a chain where
        the pair has no volatility of its own. Raises :class:`MissingMarketDataError`, and ValueError
        for a date before the valuation date.
        """
        exposures = [{name: 1.0} if name in self.underlyings else self._fx_factors(name) for name in names]
        factors = list(dict.fromkeys(factor for exposure in exposures for factor in exposure))
        loadings = np.array([[exposure.get(factor, 0.0) for factor in factors] for exposure in exposures])
        curves = [
            self.pure_volatility(factor) if factor in self.underlyings else self.fx.volatilities[currencies_of(factor)]
            for factor in factors
        ]
        spread = loadings @ covariance(curves, self._correlation(factors), day) @ loadings.T
        out: NDArray[np.float64] = 0.5 * (spread + spread.T)  # symmetric to the last bit
        return out

    def driver_correlation(self, names: Sequence[str]) -> NDArray[np.float64]:
        """Correlation of the Brownian motions that drive X of underlyings and the rates of currency pairs: (n, n).

        Names are underlyings and pairs that have a volatility of their own, as ``fx.log_factors`` gives them.
        Raises :class:`MissingMarketDataError`.
        """
        return self._correlation(names)

    def joint_lognormal(
        self,
        underlying_ids: Sequence[str],
        expiry_date: date,
        *,
        payment_currency: str | None = None,
        conversion: Conversion | None = None,
        pure: bool = False,
    ) -> JointLognormal:
        """The joint law of the underlyings' levels on ``expiry_date`` under the payment currency's measure.

        On the valuation date itself: today's levels, without variance. Without a payment currency all
        underlyings must share one. Those of another currency need a ``conversion``: "quanto"
        keeps the number of the price, "composite" converts it at the date's exchange rate.

        With ``pure`` the law is that of the prices above their floors (see :meth:`affine_levels`, whose
        floors are to be added, a composite's converted at the same rate); without it, cash dividends after
        ``expiry_date`` are a ValueError.

        Raises :class:`MissingMarketDataError`, and ValueError for a date before the valuation date and
        for currencies that differ without a conversion.
        """
        currencies = [self._underlying(name).currency for name in underlying_ids]
        target = _payment_currency(underlying_ids, currencies, payment_currency, conversion)
        is_composite = conversion is not None and Conversion(conversion) is Conversion.COMPOSITE
        scales, floors = self.affine_levels(underlying_ids, expiry_date)
        for name, floor in zip(underlying_ids, floors, strict=True):
            if floor > 0.0 and not pure:
                raise ValueError(
                    f"the price of {name} on {expiry_date} is not lognormal: it holds {floor:.6g} of cash dividends "
                    "still to come"
                )
        abroad = sorted({currency for currency in currencies if currency != target})
        found = self.log_covariance([*underlying_ids, *(currency + target for currency in abroad)], expiry_date)
        if not abroad:
            return JointLognormal(scales, found)
        joint = with_rates(found, [abroad.index(c) if c != target else None for c in currencies])
        if not is_composite:
            return quanto(scales, joint)
        fx_forwards = np.array([self.fx_forward(currency, target, expiry_date) for currency in currencies])
        return composite(scales, fx_forwards, joint)

    def fx_forward(self, from_currency: str, to_currency: str, day: date) -> float:
        """Units of ``to_currency`` for one of ``from_currency``, agreed tonight for ``day``: covered by both
        standard curves. Raises :class:`MissingMarketDataError` and MissingRate.
        """
        if from_currency == to_currency:
            return 1.0
        spot = self.fx.rate(from_currency, to_currency)
        return spot * self.discount_factor(from_currency, "", day) / self.discount_factor(to_currency, "", day)

    def discount_factor(self, currency: str, collateral: str, day: date) -> float:
        """Value tonight of 1 unit of ``currency`` paid on ``day`` under ``collateral`` ("" for none named).

        Raises :class:`MissingMarketDataError` without such a curve, ValueError for a day before
        the valuation date.
        """
        return self._curve(currency, collateral).discount_factor(day)

    def why_unknown(self, first: str, second: str) -> tuple[Issue, ...]:
        """Why the correlation of two ids that the matrix holds is not known; empty if it is.

        The matrix has a number for them all the same, which no trade may see.
        """
        return self.rejected.get(f"{CORRELATIONS}:{first}:{second}") or self.rejected.get(
            f"{CORRELATIONS}:{second}:{first}", ()
        )

    def to_reporting(self, currency: str) -> float:
        """Units of the reporting currency for one unit of ``currency``; raises MissingRate."""
        return self.fx.rate(currency, self.reporting_currency)

    def _curve(self, currency: str, collateral: str) -> DiscountCurve:
        try:
            return self.curves[currency, collateral]
        except KeyError:
            raise MissingMarketDataError(
                f'the market has no discount curve for {currency} with collateral "{collateral}"'
            ) from None

    def _underlying(self, underlying_id: str) -> Underlying:
        try:
            return self.underlyings[underlying_id]
        except KeyError:
            raise MissingMarketDataError(f'the market has no underlying "{underlying_id}"') from None

    def _volatility(self, underlying_id: str) -> VolatilityCurve:
        volatility = self._underlying(underlying_id).volatility
        if volatility is None:
            raise MissingMarketDataError(f'the market has no volatility for underlying "{underlying_id}"')
        return volatility

    def _fx_factors(self, pair: str) -> dict[str, float]:
        try:
            return self.fx.log_factors(*currencies_of(pair))
        except (MissingRate, ValueError):
            raise MissingMarketDataError(
                f"the market has neither an underlying {pair} nor a volatility for such an exchange rate"
            ) from None

    def _correlation(self, factors: Sequence[str]) -> NDArray[np.float64]:
        """Correlations of underlyings and currency pairs, these in the direction named: (n, n)."""
        if len(factors) == 1:
            return np.ones((1, 1))
        if self.correlation is None:
            raise MissingMarketDataError("the market has no usable correlation matrix")
        held = {name: name if name in self.correlation else name[3:] + name[:3] for name in factors}
        missing = sorted(
            name
            for name, row in held.items()
            if row not in self.correlation or (row != name and name in self.underlyings)
        )
        if missing:
            raise MissingMarketDataError(f"the market's correlation matrix does not hold {', '.join(missing)}")
        for first, second in combinations(held.values(), 2):
            if self.why_unknown(first, second):
                raise MissingMarketDataError(f"the correlation of {first} with {second} is not known")
        signs = np.array([1.0 if held[name] == name else -1.0 for name in factors])
        return self.correlation.sub([held[name] for name in factors]) * np.outer(signs, signs)


def _payment_currency(
    ids: Sequence[str], currencies: Sequence[str], payment: str | None, conversion: Conversion | None
) -> str:
    """The currency of the law; raises ValueError where the underlyings' currencies ask for a conversion."""
    if payment is None:
        if len(set(currencies)) != 1:
            names = ", ".join(sorted(set(currencies))) or "none"
            raise ValueError(f"a joint law needs underlyings in one currency; got {names}")
        if conversion is not None:
            raise ValueError(f"a {conversion} law needs a payment currency")
        return currencies[0]
    if not ids:
        raise ValueError("a joint law needs underlyings; got none")
    for name, currency in zip(ids, currencies, strict=True):
        if currency != payment and conversion is None:
            raise ValueError(f"{name} is quoted in {currency}, not in {payment}: it needs a conversion")
    return payment
