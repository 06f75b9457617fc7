"""Tidy tables of an outcome: one row a thing, machine names, units in :mod:`pricer.report.columns`.

Text is ``""`` where there is none, numbers are NaN or NA. Nothing here varies between two runs of the same input
and seed except the table ``seconds``, which is kept apart for that reason.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from pricer.contracts.book import Refusal
from pricer.contracts.life_cycle import Status as Life
from pricer.core.issues import Issue, Severity
from pricer.report import tidy
from pricer.report.contract_frames import contract_tables, percent
from pricer.report.market_frames import market_tables
from pricer.report.model_differences import model_difference_bp
from pricer.report.rates import Rates
from pricer.report.reference_coverage import checked
from pricer.report.refusal_causes import RefusalCause, refusal_causes
from pricer.report.sums import ratio
from pricer.report.text import shorten
from pricer.report.totals import GROUPINGS, Total, group_totals, priced
from pricer.report.underlying_totals import UnderlyingTotal, underlying_totals
from pricer.report.verdicts import ORDER
from pricer.run.outcome import CrossCheck, Outcome, Status, Valuation

if TYPE_CHECKING:
    import pandas

    Frame = pandas.DataFrame

_SHORT = 62  # characters of a short reason
_SEVERITIES = (Severity.FATAL, Severity.ERROR, Severity.WARNING)


def tables(outcome: Outcome) -> Mapping[str, Frame]:
    """Every table of the report, by name.

    ``valuations`` has the trades that were not priced too, last, with blank numbers; ``cross_check`` and
    ``problems`` begin with what needs attention; ``seconds`` is the time each trade took. The market's tables are
    those of :func:`pricer.report.market_frames.market_tables`, those of contracts with a past and of what is due those
    of :func:`pricer.report.contract_frames.contract_tables`.
    """
    return {
        "valuations": valuations(outcome),
        "deltas": deltas(outcome),
        "underlying_deltas": underlying_deltas(outcome),
        "summaries": summaries(outcome),
        "cross_check": cross_check(outcome),
        "problems": problems(outcome),
        "not_priced": not_priced(outcome),
        "refusal_causes": tidy.records(
            refusal_causes(outcome),
            RefusalCause,
            text="kind found expected mend first_trade place side code",
            whole="trades alone",
        ),
        "seconds": seconds(outcome),
        **market_tables(outcome, _all_issues(outcome)),
        **contract_tables(outcome),
    }


def valuations(outcome: Outcome) -> Frame:
    """One row a trade, in book order, refused trades after them."""
    items: list[Valuation | Refusal] = [*outcome.valuations, *outcome.refusals]

    def known(name: str) -> list[Any]:
        return [getattr(item, name, None) for item in items]

    def number(name: str) -> list[Any]:
        return [None if _status(item) is Status.NOT_PRICED else getattr(item, name) for item in items]

    def while_alive(name: str) -> list[Any]:
        return [
            x if getattr(item, "life_status", "") == Life.LIVE else None
            for item, x in zip(items, number(name), strict=True)
        ]

    rates, checks = Rates.from_outcome(outcome), checked(outcome)
    currencies, differences = known("currency"), number("model_difference")
    difference_errors = number("model_difference_standard_error")

    def reporting(amounts: list[Any]) -> list[Any]:
        return [None if x is None else rates.reporting(x, c) for x, c in zip(amounts, currencies, strict=True)]

    def of_notional(item: Valuation | Refusal) -> float | None:
        return model_difference_bp(item) if isinstance(item, Valuation) and item.status != Status.NOT_PRICED else None

    return tidy.frame(
        {
            "trade_id": known("trade_id"),
            "product": known("product"),
            "currency": known("currency"),
            "value": number("value"),
            "standard_error": number("standard_error"),
            "lower": number("lower"),
            "upper": number("upper"),
            "interval": number("interval"),
            "method": number("method"),
            "status": [_status(item) for item in items],
            "checked": [checks.get(item.trade_id) if isinstance(item, Valuation) else None for item in items],
            "notional": known("notional"),
            "unpaid_premium": number("unpaid_premium"),
            "reporting_currency": [outcome.facts.reporting_currency] * len(items),
            "reporting_value": number("reporting_value"),
            "reporting_standard_error": number("reporting_standard_error"),
            "model": number("model"),
            "model_difference": differences,
            "model_difference_standard_error": difference_errors,
            "reporting_model_difference": reporting(differences),
            "reporting_model_difference_standard_error": reporting(difference_errors),
            "model_difference_bp": [of_notional(item) for item in items],
            "sampled_value": number("sampled_value"),
            "sampled_standard_error": number("sampled_standard_error"),
            "counterparty": known("counterparty"),
            "strategy": known("strategy"),
            "netting_set": known("netting_set"),
            "expiry_date": known("expiry_date"),
            "paths": number("paths"),
            "randomisations": number("randomisations"),
            "degrees_of_freedom": number("degrees_of_freedom"),
            "time_steps": number("time_steps"),
            "life_status": number("life_status"),
            "expected_life": while_alive("expected_life"),
            "expected_life_standard_error": while_alive("expected_life_standard_error"),
            "ends_early_probability_percent": [percent(x) for x in number("call_probability")],
            "knock_probability_percent": [percent(x) for x in number("knock_probability")],
            "overhedge_cost": number("overhedge_cost"),
            "reporting_overhedge_cost": reporting(number("overhedge_cost")),
            "ending": [reason(item) if isinstance(item, Refusal) else item.ending for item in items],
        },
        text="trade_id product currency interval method status checked reporting_currency model counterparty strategy "
        "netting_set life_status ending",
        whole="paths randomisations degrees_of_freedom time_steps",
        dates="expiry_date",
    )


def deltas(outcome: Outcome) -> Frame:
    """One row a priced trade and underlying, in book order."""
    rates = Rates.from_outcome(outcome)
    facts = {u.underlying: u for u in outcome.underlyings}
    pairs = [(v, d, facts.get(d.underlying)) for v in priced(outcome) for d in v.deltas]
    return tidy.frame(
        {
            "trade_id": [v.trade_id for v, _, _ in pairs],
            "underlying": [d.underlying for _, d, _ in pairs],
            "delta": [d.delta for _, d, _ in pairs],
            "standard_error": [d.standard_error for _, d, _ in pairs],
            "gamma": [d.gamma for _, d, _ in pairs],
            "gamma_standard_error": [d.gamma_standard_error for _, d, _ in pairs],
            "vega_per_vol_point": [d.vega for _, d, _ in pairs],
            "vega_per_vol_point_standard_error": [d.vega_standard_error for _, d, _ in pairs],
            "vega_currency": [v.currency for v, _, _ in pairs],
            "reporting_vega_per_vol_point": [rates.reporting(d.vega, v.currency) for v, d, _ in pairs],
            "lots": [ratio(d.delta, u.lot_size) if u else None for _, d, u in pairs],
            "underlying_currency": [u.currency if u else None for _, _, u in pairs],
            "spot": [d.spot for _, d, _ in pairs],
            "cash_delta": [d.delta * d.spot for _, d, _ in pairs],
            "cash_delta_standard_error": [d.standard_error * d.spot for _, d, _ in pairs],
            "reporting_currency": [outcome.facts.reporting_currency] * len(pairs),
            "reporting_cash_delta": [d.delta * d.spot * u.to_reporting if u else None for _, d, u in pairs],
            "method": [d.method for _, d, _ in pairs],
        },
        text="trade_id underlying vega_currency underlying_currency reporting_currency method",
    )


def underlying_deltas(outcome: Outcome) -> Frame:
    """One row an underlying, largest absolute cash delta first."""
    counts = "trades trades_without_gamma trades_without_delta trades_without_vega"
    frame = tidy.records(underlying_totals(outcome), UnderlyingTotal, text="underlying currency", whole=counts)
    frame.insert(list(frame).index("cash_delta") + 1, "reporting_currency", outcome.facts.reporting_currency)
    return frame


def summaries(outcome: Outcome) -> Frame:
    """One row a group of each grouping (currency, product, strategy, counterparty, netting set)."""
    totals = [t for grouping in GROUPINGS for t in group_totals(outcome, grouping)]
    whole = "trades priced precision_not_reached disputed failing_surface not_priced without_model_difference"
    frame = tidy.records(totals, Total, text="grouping group own_currency", whole=whole)
    frame.insert(2, "reporting_currency", outcome.facts.reporting_currency)
    return frame.rename(
        columns={
            "gross_notional": "reporting_gross_notional",
            "own_currency": "currency",
            "own_value": "value",
            "own_standard_error": "standard_error",
            "value": "reporting_value",
            "standard_error": "reporting_standard_error",
            "model_difference": "reporting_model_difference",
            "model_difference_standard_error": "reporting_model_difference_standard_error",
        }
    )


def cross_check(outcome: Outcome) -> Frame:
    """One row a comparison: disagreements first, then agreements, approximations last."""
    by_id = {v.trade_id: v for v in outcome.valuations}
    checks = sorted(outcome.cross_checks, key=lambda c: ORDER.index(c.verdict))
    owners = [by_id.get(c.trade_id) for c in checks]
    notionals = [abs(owner.notional) if owner else math.nan for owner in owners]
    frame = tidy.records(
        checks, CrossCheck, text="trade_id product model reference_method reference_kind verdict source"
    )
    frame.insert(2, "currency", tidy.texts([owner.currency if owner else None for owner in owners]))
    pairs = list(zip(checks, notionals, strict=True))
    frame["tolerance_bp"] = tidy.numbers([1e4 * ratio(c.tolerance, notional) for c, notional in pairs])
    frame["difference_tolerances"] = tidy.numbers([ratio(c.difference, c.tolerance) for c in checks])
    frame["reference_percent"] = tidy.numbers([100.0 * ratio(c.reference_value, notional) for c, notional in pairs])
    return frame


def problems(outcome: Outcome) -> Frame:
    """One row a problem, the gravest first; those of the refused trades name the trade they refuse.

    One that costs many trades has as many rows; ``refusal_causes`` tells it once.
    """
    rows = sorted(_all_issues(outcome), key=lambda issue: _SEVERITIES.index(issue.severity))
    order = ["severity", "trade_id", "file", "sheet", "row", "column", "cell", "code", "found", "expected", "mend"]
    text = " ".join(name for name in order if name != "row")
    return tidy.records(rows, Issue, text=text, whole="row")[order]


def not_priced(outcome: Outcome) -> Frame:
    """One row a trade without a value, with what could be read of it and every reason in words."""
    items = without_value(outcome)
    names = ("trade_id", "product", "currency", "counterparty", "strategy")
    columns: dict[str, Sequence[Any]] = {name: [getattr(item, name) for item in items] for name in names}
    columns["issues"] = [len(item.issues) if isinstance(item, Refusal) else 0 for item in items]
    columns["reasons"] = [reason(item) for item in items]
    return tidy.frame(columns, text=" ".join([*names, "reasons"]), whole="issues")


def seconds(outcome: Outcome) -> Frame:
    """The time each trade took; the only table that differs between two runs of the same input and seed."""
    return tidy.frame(
        {"trade_id": [v.trade_id for v in outcome.valuations], "seconds": [v.seconds for v in outcome.valuations]},
        text="trade_id",
    )


def without_value(outcome: Outcome) -> list[Valuation | Refusal]:
    """What has no value to show: failed valuations, then refusals."""
    return [*(v for v in outcome.valuations if v.status is Status.NOT_PRICED), *outcome.refusals]


def reason(item: Valuation | Refusal) -> str:
    """Why a trade has no value, in words."""
    if isinstance(item, Valuation):
        return item.ending
    return "; ".join(str(issue) for issue in item.issues) or "no reason was recorded"


def short_reason(item: Valuation | Refusal) -> str:
    """The first reason in a few words: what stands in which column, and what should."""
    if isinstance(item, Valuation) or not item.issues:
        return shorten(reason(item), _SHORT)
    first, more = item.issues[0], len(item.issues) - 1
    others = f" (and {more} more)" if more else ""
    column = f"{first.column}: " if first.column else ""
    return shorten(f"{column}found {first.found}; expected {first.expected}", _SHORT - len(others)) + others


def _status(item: Valuation | Refusal) -> Status:
    return item.status if isinstance(item, Valuation) else Status.NOT_PRICED


def _all_issues(outcome: Outcome) -> list[Issue]:
    """Every issue once: one found while reading and then charged to a trade is listed with the trade only."""
    charged = [
        issue if issue.trade_id is not None else issue.for_trade(refusal.trade_id)
        for refusal in outcome.refusals
        for issue in refusal.issues
    ]
    without_trade = {replace(issue, trade_id=None) for issue in charged}
    found = [issue for issue in outcome.issues if issue.trade_id is not None or issue not in without_trade]
    return list(dict.fromkeys([*found, *charged]))
