"""Tidy tables of what is due, of how long trades live, and of what was booked; units in ``contract_columns``."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import date, timedelta
from enum import StrEnum
from typing import TYPE_CHECKING

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier
from pricer.contracts.coupons import Coupons
from pricer.contracts.exercise import Exercise
from pricer.report import tidy
from pricer.report.contract_words import ContractPart, contract_parts, prices_told
from pricer.report.totals import priced
from pricer.run.outcome import ContractFacts, EventRow, Outcome, Valuation

if TYPE_CHECKING:
    import pandas

    Frame = pandas.DataFrame

_SATURDAY = 5


class Due(StrEnum):
    """How soon an event is."""

    OVERDUE = "overdue"
    TODAY = "today"
    TOMORROW = "tomorrow"
    LATER = "later"


def contract_tables(outcome: Outcome) -> Mapping[str, Frame]:
    """The tables by name; without rows where the book has no such trades."""
    return {
        "events": events(outcome),
        "life": life(outcome),
        "contracts": tidy.records(
            [part for facts in outcome.contracts for part in contract_parts(facts)],
            ContractPart,
            text="trade_id product part booked tonight",
        ),
        "contract_dates": tidy.records(
            [row for facts in outcome.contracts for row in contract_dates(facts)],
            ContractDate,
            text="trade_id part standing prices",
            dates="day payment_date",
        ),
    }


def next_weekday(day: date) -> date:
    """The next Monday to Friday after ``day``."""
    following = day + timedelta(days=1)
    return following + timedelta(days=7 - following.weekday()) if following.weekday() >= _SATURDAY else following


def due(event: EventRow, valuation_date: date) -> Due:
    """How soon the event is; a weekend's belong to the Monday after it."""
    if event.day <= valuation_date:
        return Due.TODAY if event.day == valuation_date else Due.OVERDUE
    return Due.TOMORROW if event.day <= next_weekday(valuation_date) else Due.LATER


def in_order(events: tuple[EventRow, ...]) -> list[EventRow]:
    """By day; within it the triggers that would be met or are nearest first, and what has no trigger last."""

    def key(event: EventRow) -> tuple[date, bool, float, str]:
        near = math.inf if event.deviations is None else abs(event.deviations)
        return event.day, not event.met_today, near, event.trade_id

    return sorted(events, key=key)


def events(outcome: Outcome) -> Frame:
    """One row an event of the days ahead."""
    rows = in_order(outcome.events)
    words = {None: "", True: "yes", False: "no"}
    today = outcome.facts.valuation_date
    return tidy.frame(
        {
            "due": [due(row, today) for row in rows],
            "day": [row.day for row in rows],
            "last_day": [row.last_day for row in rows],
            "trade_id": [row.trade_id for row in rows],
            "product": [row.product for row in rows],
            "what": [row.what for row in rows],
            "underlyings": [", ".join(row.underlyings) for row in rows],
            "level": [row.level for row in rows],
            "current": [row.current for row in rows],
            "distance_percent": [None if row.distance is None else 100.0 * row.distance for row in rows],
            "deviations": [row.deviations for row in rows],
            "met_today": [words[row.met_today] for row in rows],
            "amount": [None if row.amount is None else _money(row.amount) for row in rows],
            "currency": [row.currency for row in rows],
            "payment_date": [row.payment_date for row in rows],
            "counterparty": [row.counterparty for row in rows],
        },
        text="due trade_id product what underlyings met_today currency counterparty",
        dates="day last_day payment_date",
    )


def _money(amount: float) -> float:
    """Without the dust of binary numbers, and without a minus before a zero."""
    return round(amount, 4) + 0.0


@dataclass(frozen=True, slots=True)
class _End:
    """One way in which a contract may end, in percent."""

    trade: Valuation
    day: date
    what: str
    probability: float
    error: float
    cumulative: float


def life(outcome: Outcome) -> Frame:
    """One row a day on which a contract may end, and one for expiry; contracts that can only expire are left out."""
    uncertain = [v for v in priced(outcome) if v.chances or v.knock_probability is not None]
    ends = [end for v in uncertain for end in _ends(v)]
    return tidy.frame(
        {
            "trade_id": [end.trade.trade_id for end in ends],
            "product": [end.trade.product for end in ends],
            "expected_life": [end.trade.expected_life for end in ends],
            "expected_life_standard_error": [end.trade.expected_life_standard_error for end in ends],
            "knock_probability_percent": [percent(end.trade.knock_probability) for end in ends],
            "day": [end.day for end in ends],
            "what": [end.what for end in ends],
            "probability_percent": [end.probability for end in ends],
            "probability_standard_error_percent": [end.error for end in ends],
            "cumulative_percent": [end.cumulative for end in ends],
        },
        text="trade_id product what",
        dates="day",
    )


def percent(probability: float | None) -> float | None:
    """A probability in percent, None for none."""
    return None if probability is None else 100.0 * probability


def _ends(v: Valuation) -> Iterator[_End]:
    so_far = 0.0
    for chance in sorted(v.chances, key=lambda chance: chance.day):
        so_far += chance.probability
        yield _End(
            v, chance.day, chance.what, 100.0 * chance.probability, 100.0 * chance.standard_error, 100.0 * so_far
        )
    yield _End(v, v.expiry_date, "expiry", 100.0 * (1.0 - so_far), math.nan, 100.0)


@dataclass(frozen=True, slots=True)
class ContractDate:
    """A day on which one part of a contract looks at the market; numbers per unit, None where there is none.

    ``prices`` are those of the day, in words, up to the valuation date.
    """

    trade_id: str
    part: str
    day: date
    payment_date: date | None
    level: float | None
    ceiling: float | None
    amount: float | None
    standing: str
    prices: str


def contract_dates(facts: ContractFacts) -> Iterator[ContractDate]:
    """Every observation of a contract, part by part."""
    contract, as_of = facts.as_of.contract, facts.as_of
    seen = {day: prices_told(contract.underlyings, prices) for day, prices in facts.prices}

    def row(
        part: str,
        day: date,
        paid: date | None = None,
        level: float | None = None,
        amount: float | None = None,
        ceiling: float | None = None,
    ) -> ContractDate:
        today = as_of.valuation_date
        standing = "passed" if day < today else "today" if day == today else "to come"
        ended = as_of.progress.ended_on
        if ended is not None and day > ended:
            standing = "dropped"
        found = seen.get(day, "")
        return ContractDate(facts.trade.trade_id, part, day, paid, level, ceiling, amount, standing, found)

    yield from (row("reference", day) for day in contract.levels.reference_dates)
    yield from (row("final level", day) for day in contract.statistic.dates)
    for feature in contract.features:
        match feature:
            case Coupons():
                for coupon in feature.coupons:
                    for day in coupon.accrual_dates:
                        yield row("accrual", day, None, coupon.level, None, coupon.ceiling)
                    level = None if coupon.accrual_dates else coupon.level
                    yield row("coupon", coupon.day, coupon.payment_date, level, coupon.amount)
            case Autocall():
                for o, level, amount in zip(feature.schedule, feature.levels, feature.amounts, strict=True):
                    yield row("call", o.day, o.payment_date, level, amount)
            case Barrier():
                rebate = feature.rebate_at_hit
                for o, level in zip(feature.schedule, feature.levels, strict=True):
                    yield row(feature.label, o.day, None if rebate is None else o.payment_date, level, rebate)
            case Exercise():
                for i, right in enumerate(feature.rights):
                    amount_i = None if feature.amounts is None else feature.amounts[i]
                    yield row("right to exercise", right.day, right.payment_date, None, amount_i)
    yield row("expiry", contract.expiry.day, contract.expiry.payment_date)
