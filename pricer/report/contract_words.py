"""A contract in words, part by part: what was booked, to lay beside the confirmation, and where it stands tonight."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExerciseStyle
from pricer.contracts.life_cycle import AsOf, Status
from pricer.contracts.writer import Writer
from pricer.report.contract_state import feature_state, levels_state, statistic_state
from pricer.report.level_words import Words
from pricer.run.outcome import ContractFacts

#: Longer schedules are told by their ends; the plain table of dates has every one.
DATES_TOLD = 24


@dataclass(frozen=True, slots=True)
class ContractPart:
    """One part of one contract: ``booked`` as the confirmation should have it, ``tonight`` what has come of it."""

    trade_id: str
    product: str
    part: str
    booked: str
    tonight: str


def contract_parts(facts: ContractFacts) -> Iterator[ContractPart]:
    """The trade, its levels, statistic, payout, features and writer, in the order in which they are observed."""
    trade, as_of = facts.trade, facts.as_of
    contract = as_of.contract
    words = Words(contract.underlyings, contract.on_performance, trade.currency)

    def part(name: str, booked: str, tonight: str) -> ContractPart:
        return ContractPart(trade.trade_id, contract.product, name, booked, tonight)

    yield part("trade", _trade(trade, contract), _standing(as_of, words))
    yield part("levels", _levels(contract, words), levels_state(as_of, words))
    yield part("final level", _statistic(contract, words), statistic_state(as_of, words))
    expiry = contract.expiry
    payout = f"{words.payout(contract.payout)}; expiry {expiry.day}, paid on {expiry.payment_date}"
    yield part("payout", payout, _paid(as_of, "final payoff", words))
    for i, feature in enumerate(contract.features):
        yield part(_name(feature), _feature(feature, words), feature_state(as_of, i, words))
    if contract.writer is not None:
        yield part("writer", _writer(contract.writer), _writer_state(contract.writer))
    if facts.prices:
        yield part("prices so far", "as of every day looked at, fixings or, tonight, spots", _prices(facts))


def prices_told(underlyings: Sequence[str], prices: Sequence[float]) -> str:
    """The prices of one day; a missing one is said to be missing."""
    pairs = zip(underlyings, prices, strict=True)
    return ", ".join(f"{name} {'missing' if math.isnan(price) else f'{price:,.10g}'}" for name, price in pairs)


def _prices(facts: ContractFacts) -> str:
    days, names = facts.prices, facts.as_of.contract.underlyings
    if len(days) > DATES_TOLD:
        (first, _), (last, prices) = days[0], days[-1]
        return f"{len(days)} days from {first} to {last}; the last: {prices_told(names, prices)}"
    return "; ".join(f"{day}: {prices_told(names, prices)}" for day, prices in days)


def _name(feature: object) -> str:
    match feature:
        case Coupons():
            return "coupons"
        case Autocall():
            return "call"
        case Exercise():
            return "right to exercise"
    return str(getattr(feature, "label", ""))


def _trade(trade: Trade, contract: Contract) -> str:
    side = "long" if trade.position > 0.0 else "short"
    size = f"{abs(trade.position):,.15g}"
    what = f"{trade.currency} notional" if contract.on_performance else f"units, paid in {trade.currency}"
    told = [f"{side} {size} {what}"]
    told += [f"with {trade.counterparty}"] if trade.counterparty else []
    told += [f"traded on {trade.trade_date}"] if trade.trade_date else []
    told += [f"collateral {trade.collateral}"] if trade.collateral else []
    if trade.premium is not None:
        told.append(f"premium {trade.premium.amount:,.15g} {trade.currency} on {trade.premium.payment_date}")
    return "; ".join(told)


def _standing(as_of: AsOf, words: Words) -> str:
    told = [str(as_of.status)]
    if as_of.ending is not None:
        told.append(f"{as_of.ending} on {as_of.progress.ended_on}")
    if as_of.to_be_paid:
        due = (f"{words.amount(p.amount)} {p.reason} on {p.payment_date}" for p in as_of.to_be_paid)
        told.append(f"decided and still to be paid: {', '.join(due)}")
    if as_of.assumed:
        told.append(f"today's spots stand in for fixings of {', '.join(as_of.assumed)}")
    if as_of.status is Status.LIVE:
        told.append(f"{as_of.years_to(as_of.contract.expiry.day):.2f} years to expiry")
    return "; ".join(told)


def _levels(contract: Contract, words: Words) -> str:
    levels = contract.levels
    told = []
    if levels.references is None:
        several = len(levels.reference_dates) > 1
        how = "the mean of the prices on" if several else "the price on"
        told.append(f"performance from {how} {_days(levels.reference_dates)}")
    elif levels.on_performance:
        initial = (f"{name} {price:,.10g}" for name, price in zip(levels.underlyings, levels.references, strict=True))
        told.append(f"performance from initial fixings {', '.join(initial)}")
        if levels.reference_dates:
            told.append(f"fixed on {_days(levels.reference_dates)}")
    else:
        told.append(f"prices of {words.names}")
    if levels.conversion is not None:
        told.append(str(levels.conversion))
    return "; ".join(told)


def _statistic(contract: Contract, words: Words) -> str:
    return f"{words.statistic(contract.statistic)} {_days(contract.statistic.dates)}"


def _feature(feature: object, words: Words) -> str:
    match feature:
        case Coupons():
            return _coupons(feature, words)
        case Autocall():
            rows = [
                (o.day, f"{words.level(level)}, pays {words.amount(amount)} on {o.payment_date}")
                for o, level, amount in zip(feature.schedule, feature.levels, feature.amounts, strict=True)
            ]
            return f"called if {words.trigger(feature.trigger)} the level: {_rows(rows)}"
        case Barrier():
            return _barrier(feature, words)
        case Exercise():
            return _exercise(feature, words)
    return ""


def _coupons(feature: Coupons, words: Words) -> str:
    told = []
    if feature.trigger is not None:
        told.append(f"paid if {words.trigger(feature.trigger)} the level")
    if feature.memory:
        told.append("with memory: a paid coupon brings those missed before")
    rows = [(coupon.day, _coupon(coupon, words)) for coupon in feature.coupons]
    return f"{'; '.join([*told, _rows(rows)])}"


def _coupon(coupon: Coupon, words: Words) -> str:
    told = f"{words.amount(coupon.amount)} on {coupon.payment_date}"
    if coupon.accrual_dates:
        upper = "" if coupon.ceiling is None else f" to {words.level(coupon.ceiling)}"
        days = f"{len(coupon.accrual_dates)} days from {coupon.accrual_dates[0]} to {coupon.accrual_dates[-1]}"
        return f"{told} times the share of {days} within {words.level(coupon.level or 0.0)}{upper}"
    return told if coupon.level is None else f"{words.level(coupon.level)}, pays {told}"


def _barrier(feature: Barrier, words: Words) -> str:
    rows = [(o.day, words.level(level)) for o, level in zip(feature.schedule, feature.levels, strict=True)]
    watched = "at all times, schedule" if feature.continuous else "on"
    told = [f"{feature.label} if {words.trigger(feature.trigger)} the level, watched {watched} {_rows(rows)}"]
    if feature.rebate_at_hit is not None:
        told.append(f"a hit ends the contract and pays {words.amount(feature.rebate_at_hit)}")
    else:
        told.append(f"while the payout is not in force expiry pays {words.payout(feature.instead)}")
    return "; ".join(told)


def _exercise(feature: Exercise, words: Words) -> str:
    rights = feature.rights
    if feature.payout is not None:
        receives = f"{words.payout(feature.payout)} on {words.aggregate(feature.aggregate)}"
        rows = [(right.day, f"paid on {right.payment_date}") for right in rights]
    else:
        receives = "the amount of the date"
        rows = [
            (right.day, f"{words.amount(amount)} on {right.payment_date}")
            for right, amount in zip(rights, feature.amounts or (), strict=True)
        ]
    when = "on any business day among" if feature.style is ExerciseStyle.AMERICAN else "on"
    return f"the {feature.by} may end it for {receives}, {feature.style}, {when} {_rows(rows)}"


def _writer(writer: Writer) -> str:
    told = [writer.name]
    if writer.structural is not None:
        model = writer.structural
        told.append(
            f"defaults at expiry if assets {model.assets} are below {model.liabilities:,.10g}; "
            f"{100.0 * model.deadweight_cost:g} % of them is lost in it"
        )
    else:
        recovery = "as the market has it" if writer.recovery is None else f"{100.0 * writer.recovery:g} %"
        told.append(f"recovery {recovery}")
    return "; ".join(told)


def _writer_state(writer: Writer) -> str:
    return "no default on record" if writer.defaulted_on is None else f"in default since {writer.defaulted_on}"


def _paid(as_of: AsOf, reason: str, words: Words) -> str:
    found = [p for p in as_of.progress.payments if p.reason == reason]
    return "; ".join(f"{words.amount(p.amount)}, paid on {p.payment_date}" for p in found) or (
        "not decided yet" if as_of.ending is None else "dropped"
    )


def _days(days: Sequence[date]) -> str:
    if len(days) > DATES_TOLD:
        return f"{len(days)} dates from {days[0]} to {days[-1]}"
    return ", ".join(map(str, days))


def _rows(rows: Sequence[tuple[date, str]]) -> str:
    """Dates with what belongs to each; told once where it is the same, and by its ends where there are many."""
    what = list(dict.fromkeys(text for _, text in rows))
    if len(what) == 1:
        return f"{_days([day for day, _ in rows])}: {what[0]}"
    if len(rows) > DATES_TOLD:
        (first, text), (last, end) = rows[0], rows[-1]
        return f"{len(rows)} dates from {first}: {text}, to {last}: {end}"
    return "; ".join(f"{day}: {text}" for day, text in rows)
