"""The book's sensitivities, underlying by underlying."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import isfinite

from pricer.report.rates import Rates
from pricer.report.sums import quadrature, ratio, total
from pricer.report.totals import priced
from pricer.run.outcome import Delta, Outcome, UnderlyingFacts, Valuation


@dataclass(frozen=True, slots=True)
class UnderlyingTotal:
    """Sensitivities of the whole book to one underlying; standard errors add in quadrature.

    ``delta`` in shares, ``lots`` in lots, ``cash_delta`` in the underlying's currency, ``gamma`` in shares per unit
    of currency of its price over the trades that have one, ``reporting_vega_per_vol_point``
    in reporting currency. What cannot be formed from the trades' numbers or the outcome's facts is NaN: a delta that
    one trade lacks makes the book's unknown, and the counts of such trades say why; the ``known`` sums leave them out.
    """

    underlying: str
    currency: str
    spot: float
    lot_size: float
    trades: int
    delta: float
    standard_error: float
    lots: float
    cash_delta: float
    reporting_cash_delta: float
    reporting_cash_delta_standard_error: float
    gamma: float
    gamma_standard_error: float
    trades_without_gamma: int
    reporting_vega_per_vol_point: float
    reporting_vega_per_vol_point_standard_error: float
    trades_without_delta: int
    trades_without_vega: int
    known_delta: float
    known_reporting_cash_delta: float
    known_reporting_vega_per_vol_point: float


def underlying_totals(outcome: Outcome) -> list[UnderlyingTotal]:
    """One total per underlying of the priced trades, largest absolute cash delta first."""
    rates = Rates.from_outcome(outcome)
    members: dict[str, list[tuple[Valuation, Delta]]] = {}
    for valuation in priced(outcome):
        for delta in valuation.deltas:
            members.setdefault(delta.underlying, []).append((valuation, delta))
    facts = {u.underlying: u for u in outcome.underlyings}
    totals = [_underlying_total(name, facts.get(name), pairs, rates) for name, pairs in members.items()]
    return sorted(totals, key=_largest_first)


def known_totals(totals: Sequence[UnderlyingTotal]) -> list[UnderlyingTotal]:
    """The totals with deltas summed over the trades that have one, largest first; partial, so without errors."""
    known = [
        replace(
            item,
            delta=item.known_delta,
            reporting_cash_delta=item.known_reporting_cash_delta,
            reporting_cash_delta_standard_error=math.nan,
        )
        for item in totals
    ]
    return sorted(known, key=_largest_first)


def _largest_first(item: UnderlyingTotal) -> tuple[bool, float, str]:
    size = abs(item.reporting_cash_delta)
    return math.isnan(size), 0.0 if math.isnan(size) else -size, item.underlying


def _underlying_total(
    name: str, facts: UnderlyingFacts | None, pairs: list[tuple[Valuation, Delta]], rates: Rates
) -> UnderlyingTotal:
    deltas = [d for _, d in pairs]
    gammas = [(d.gamma, d.gamma_standard_error or 0.0) for d in deltas if d.gamma is not None and isfinite(d.gamma)]
    spot = facts.spot if facts else deltas[0].spot
    to_reporting = facts.to_reporting if facts else math.nan
    lot_size = facts.lot_size if facts else math.nan
    delta = total(d.delta for d in deltas)
    error = quadrature(d.standard_error for d in deltas)
    known = total(d.delta for d in deltas if isfinite(d.delta))
    return UnderlyingTotal(
        underlying=name,
        currency=facts.currency if facts else "",
        spot=spot,
        lot_size=lot_size,
        trades=len(pairs),
        delta=delta,
        standard_error=error,
        lots=ratio(delta, lot_size),
        cash_delta=delta * spot,
        reporting_cash_delta=delta * spot * to_reporting,
        reporting_cash_delta_standard_error=error * spot * to_reporting,
        gamma=total(gamma for gamma, _ in gammas),
        gamma_standard_error=quadrature(error for _, error in gammas),
        trades_without_gamma=len(deltas) - len(gammas),
        reporting_vega_per_vol_point=total(rates.reporting(d.vega, v.currency) for v, d in pairs),
        reporting_vega_per_vol_point_standard_error=quadrature(
            rates.reporting(d.vega_standard_error, v.currency) for v, d in pairs
        ),
        trades_without_delta=sum(not isfinite(d.delta) for d in deltas),
        trades_without_vega=sum(not isfinite(d.vega) for d in deltas),
        known_delta=known,
        known_reporting_cash_delta=known * spot * to_reporting,
        known_reporting_vega_per_vol_point=total(
            rates.reporting(d.vega, v.currency) for v, d in pairs if isfinite(d.vega)
        ),
    )
