"""From one unit to the desk's position: quantities, currencies, premium, and verdicts."""

from __future__ import annotations

import math
from typing import Any

from pricer.contracts.book import Trade
from pricer.engines.appraisal import Appraisal
from pricer.engines.cross_check import compare
from pricer.engines.problem import ReferenceKind
from pricer.market.coverage import failing_surfaces
from pricer.market.market import Market
from pricer.run.outcome import ChanceRow, CrossCheck, Delta, Status, Valuation

#: A lower bound of one unit is an upper bound of a short position.
_MIRRORED = {
    ReferenceKind.LOWER_BOUND: ReferenceKind.UPPER_BOUND,
    ReferenceKind.UPPER_BOUND: ReferenceKind.LOWER_BOUND,
}


def valuation(appraisal: Appraisal, market: Market, *, disputed: bool = False, compared: bool = True) -> Valuation:
    """The position's value, errors and sensitivities, with its unpaid premium inside the value.

    Without ``compared`` no model difference is told, not even the 0 of a trade without a smile.
    """
    trade, lead, drawn = appraisal.trade, appraisal.leading.headline, appraisal.leading.sample
    size = abs(trade.position)
    low, high = sorted((trade.position * lead.lower, trade.position * lead.upper))
    premium = unpaid_premium(trade, market)
    value = trade.position * lead.value + premium
    to_reporting = market.to_reporting(trade.currency)
    difference, difference_error = _model_difference(appraisal) if compared else (None, None)
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
        model=appraisal.lead,
        model_difference=difference,
        model_difference_standard_error=difference_error,
        unpaid_premium=premium,
        reporting_value=value * to_reporting,
        reporting_standard_error=size * lead.standard_error * to_reporting,
        sampled_value=trade.position * drawn.value + premium,
        sampled_standard_error=size * drawn.standard_error,
        paths=drawn.paths,
        randomisations=drawn.randomisations,
        time_steps=appraisal.leading.time_steps,
        degrees_of_freedom=drawn.degrees_of_freedom,
        seconds=appraisal.seconds,
        status=_status(appraisal, market, disputed=disputed),
        ending=drawn.ending,
        deltas=deltas(appraisal, market),
        life_status=str(appraisal.as_of.status),
        overhedge_cost=None if appraisal.overhedge_cost is None else size * appraisal.overhedge_cost,
        **_life(appraisal),
    )


def _life(appraisal: Appraisal) -> dict[str, Any]:
    """The fields of a valuation that say how long the contract may live."""
    life = appraisal.leading.life
    if life is None:
        return {}
    return {
        "expected_life": life.expected_life,
        "expected_life_standard_error": life.expected_life_error,
        "call_probability": math.fsum(chance.probability for chance in life.ends) if life.ends else None,
        "knock_probability": life.knocked,
        "chances": tuple(ChanceRow(c.day, c.what, c.probability, c.standard_error) for c in life.ends),
    }


def _status(appraisal: Appraisal, market: Market, *, disputed: bool) -> Status:
    if not appraisal.is_live:
        return Status.PRICED
    if failing_surfaces(appraisal.trade, market):
        return Status.FAILING_SURFACE
    if disputed:
        return Status.DISPUTED
    if appraisal.leading.headline.standard_error > appraisal.tolerance or not appraisal.leading.is_sound:
        return Status.PRECISION_NOT_REACHED
    return Status.PRICED


def _model_difference(appraisal: Appraisal) -> tuple[float | None, float | None]:
    """The position under local volatility less under lognormal levels, and its standard error."""
    if not appraisal.has_smile:
        return 0.0, 0.0
    plain, smiled = appraisal.lognormal, appraisal.local_volatility
    if plain is None or smiled is None:
        return None, None
    error = math.hypot(plain.headline.standard_error, smiled.headline.standard_error)
    position = appraisal.trade.position
    return position * (smiled.headline.value - plain.headline.value), abs(position) * error


def unpaid_premium(trade: Trade, market: Market) -> float:
    """Present value of a premium still to be paid: negative when the desk pays it."""
    premium = trade.premium
    if premium is None or premium.payment_date <= market.valuation_date:
        return 0.0
    discount = market.discount_factor(trade.currency, trade.collateral, premium.payment_date)
    return -_side(trade) * premium.amount * discount


def deltas(appraisal: Appraisal, market: Market) -> tuple[Delta, ...]:
    """Shares, gamma and vega of the position per underlying; none of a trade that has ended."""
    if not appraisal.is_live:
        return ()
    trade, ratios = appraisal.trade, appraisal.leading.ratios
    position, size = trade.position, abs(trade.position)
    known = ratios.gammas is not None and ratios.gamma_errors is not None
    gammas, gamma_errors = (ratios.gammas, ratios.gamma_errors) if known else (None, None)
    return tuple(
        Delta(
            underlying=underlying,
            delta=position * float(ratios.deltas[i]),
            standard_error=size * float(ratios.delta_errors[i]),
            gamma=None if gammas is None else position * float(gammas[i]),
            gamma_standard_error=None if gamma_errors is None else size * float(gamma_errors[i]),
            vega=position * float(ratios.vegas[i]),
            vega_standard_error=size * float(ratios.vega_errors[i]),
            spot=market.underlyings[underlying].spot,
            method=ratios.method,
        )
        for i, underlying in enumerate(trade.contract.underlyings)
    )


def cross_checks(appraisal: Appraisal, tests_in_book: int) -> tuple[CrossCheck, ...]:
    """The option's sampled position value beside every reference of each model (no premium on either side)."""
    trade = appraisal.trade
    position, size, side = trade.position, abs(trade.position), _side(trade)
    rows = []
    pairs = ((model, value.sample, reference) for model, value in appraisal.values for reference in value.references)
    for model, drawn, reference in pairs:
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
                model=model,
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
