"""From one unit to the desk's position: quantities, currencies, premium, and verdicts."""

from __future__ import annotations

import math

from pricer.contracts.book import Trade
from pricer.engines.cross_check import compare
from pricer.engines.european import Appraisal
from pricer.engines.problem import ReferenceKind
from pricer.market.calendars import year_fraction
from pricer.market.market import Market
from pricer.run.outcome import CrossCheck, Delta, Status, Valuation

#: A lower bound of one unit is an upper bound of a short position.
_MIRRORED = {
    ReferenceKind.LOWER_BOUND: ReferenceKind.UPPER_BOUND,
    ReferenceKind.UPPER_BOUND: ReferenceKind.LOWER_BOUND,
}


def valuation(appraisal: Appraisal, market: Market, *, disputed: bool = False) -> Valuation:
    """The position's value, errors and sensitivities, with its unpaid premium inside the value."""
    trade, lead, drawn = appraisal.trade, appraisal.headline, appraisal.sample
    size = abs(trade.position)
    low, high = sorted((trade.position * lead.lower, trade.position * lead.upper))
    premium = unpaid_premium(trade, market)
    value = trade.position * lead.value + premium
    to_reporting = market.to_reporting(trade.currency)
    return Valuation(
        trade_id=trade.trade_id,
        product=trade.contract.product,
        currency=trade.currency,
        counterparty=trade.counterparty,
        netting_set=trade.netting_set,
        strategy=trade.strategy,
        expiry_date=trade.contract.expiry_date,
        notional=size * appraisal.unit_notional,
        value=value,
        standard_error=size * lead.standard_error,
        lower=low + premium,
        upper=high + premium,
        interval=lead.interval,
        method=lead.method,
        unpaid_premium=premium,
        reporting_value=value * to_reporting,
        reporting_standard_error=size * lead.standard_error * to_reporting,
        sampled_value=trade.position * drawn.value + premium,
        sampled_standard_error=size * drawn.standard_error,
        paths=drawn.paths,
        randomisations=drawn.randomisations,
        degrees_of_freedom=drawn.degrees_of_freedom,
        seconds=appraisal.seconds,
        status=_status(appraisal, disputed=disputed),
        ending=drawn.ending,
        deltas=deltas(appraisal, market),
    )


def _status(appraisal: Appraisal, *, disputed: bool) -> Status:
    if disputed:
        return Status.DISPUTED
    if appraisal.headline.standard_error > appraisal.tolerance:
        return Status.PRECISION_NOT_REACHED
    return Status.PRICED


def unpaid_premium(trade: Trade, market: Market) -> float:
    """Present value of a premium still to be paid: negative when the desk pays it."""
    premium = trade.premium
    if premium is None or premium.payment_date <= market.valuation_date:
        return 0.0
    discount = market.discount_factor(trade.currency, trade.collateral, premium.payment_date)
    return -_side(trade) * premium.amount * discount


def deltas(appraisal: Appraisal, market: Market) -> tuple[Delta, ...]:
    """Shares, gamma and vega per underlying, from the sensitivities of one unit.

    Forwards are proportional to spots, so a derivative with respect to the logarithm of the
    forward, divided by the spot, is the number of shares.
    """
    trade, drawn = appraisal.trade, appraisal.sample
    position, size = trade.position, abs(trade.position)
    years = year_fraction(market.valuation_date, trade.contract.expiry_date)
    per_vol_point = 0.01 * math.sqrt(years)
    rows = []
    for i, underlying in enumerate(trade.contract.underlyings):
        spot = market.underlyings[underlying].spot
        gamma, gamma_error = None, None
        if drawn.log_gammas is not None and drawn.log_gamma_errors is not None:
            gamma = position * float(drawn.log_gammas[i]) / spot**2
            gamma_error = size * float(drawn.log_gamma_errors[i]) / spot**2
        rows.append(
            Delta(
                underlying=underlying,
                delta=position * float(drawn.log_deltas[i]) / spot,
                standard_error=size * float(drawn.log_delta_errors[i]) / spot,
                gamma=gamma,
                gamma_standard_error=gamma_error,
                vega=position * float(drawn.deviation_vegas[i]) * per_vol_point,
                vega_standard_error=size * float(drawn.deviation_vega_errors[i]) * per_vol_point,
                spot=spot,
                method="pathwise, common factor integrated exactly",
            )
        )
    return tuple(rows)


def cross_checks(appraisal: Appraisal, tests_in_book: int) -> tuple[CrossCheck, ...]:
    """The option's sampled position value beside every reference (no premium on either side)."""
    trade, drawn = appraisal.trade, appraisal.sample
    position, size, side = trade.position, abs(trade.position), _side(trade)
    rows = []
    for reference in appraisal.references:
        found = compare(
            drawn,
            reference,
            unit_notional=appraisal.unit_notional,
            asked=appraisal.tolerance,
            tests_in_book=tests_in_book,
        )
        rows.append(
            CrossCheck(
                trade_id=trade.trade_id,
                product=trade.contract.product,
                engine_value=position * drawn.value,
                engine_standard_error=size * drawn.standard_error,
                reference_method=reference.method,
                reference_kind=str(reference.kind if side > 0 else _MIRRORED.get(reference.kind, reference.kind)),
                reference_value=position * reference.value,
                reference_error=size * reference.error,
                difference=position * found.difference,
                difference_bp=side * found.difference / appraisal.unit_notional * 1e4,
                difference_standard_errors=None if found.standard_errors is None else side * found.standard_errors,
                tolerance=size * found.tolerance,
                verdict=found.verdict,
                source=reference.source,
            )
        )
    return tuple(rows)


def _side(trade: Trade) -> float:
    return math.copysign(1.0, trade.position)
