"""Correlations estimated from past levels, and everything that was left out told."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.core.issues import Issue, Severity
from pricer.loader.correlations import both_ways, inverted
from pricer.loader.faults import Fault, number_in_words
from pricer.loader.findings import Findings
from pricer.loader.price_history import OLD_HISTORY_DAYS, PriceHistory, is_old
from pricer.loader.table import Table
from pricer.loader.text import quoted
from pricer.loader.underlying_rows import PriceHistoryRow
from pricer.market.calendars import is_business_day
from pricer.market.correlation import CorrelationError
from pricer.market.correlation_estimate import (
    JUMP,
    JUMP_DEVIATIONS,
    CorrelationEstimate,
    HistoryRules,
    business_days_between,
    estimate,
    usable_returns,
)
from pricer.market.market import CORRELATIONS


def correlations_of(
    history: PriceHistory,
    wanted: Sequence[str],
    valuation_date: date,
    half_life: float,
    calendars: Mapping[str, str],
    findings: Findings,
) -> CorrelationEstimate | None:
    """The correlations of all ids that have enough levels; ``wanted`` ids without any are told.

    ``calendars`` names the calendars of ids: a level is missing only where its own market was open.
    None, with ``CORRELATIONS`` charged, where no id is left or the correlations contradict each other too much.
    """
    own = findings.under(CORRELATIONS)
    table, rules = history.table, HistoryRules(half_life=half_life)
    for name in wanted:
        if name not in history.levels and inverted(name) not in history.levels:
            own.reject(name, [_absent(table, name)])
    names: list[str] = []
    for name in history.levels:
        if inverted(name) in names:
            fault = both_ways(name, history.first_rows[inverted(name)])
            own.reject(name, [table.issue(history.first_rows[name], "underlying", fault)])
        else:
            names.append(name)
    dates = sorted({day for levels in history.levels.values() for day in levels})
    levels = _matrix(history, names, dates)
    kept = _enough(history, names, dates, levels, rules, own)
    if not kept:
        fault = Fault(
            "no-correlations", "no id with enough levels", "the levels of at least one underlying",
            "Mend the problems listed, or add levels.",
        )  # fmt: skip
        findings.reject(CORRELATIONS, [table.issue(table.header.row, None, fault)])
        return None
    findings.add(_old(table, dates[-1], valuation_date, rules))
    # Days on which only ids that were left out have levels are no gaps of the others.
    columns = levels[:, [names.index(name) for name in kept]]
    held = np.asarray((~np.isnan(columns)).any(axis=1))
    days = [day for day, is_held in zip(dates, held, strict=True) if is_held]
    try:
        found = estimate(kept, days, columns[held], rules, calendars=calendars)
    except CorrelationError as error:
        findings.reject(CORRELATIONS, [_contradiction(history, error)])
        return None
    except ValueError as error:
        fault = Fault("unusable-history", str(error), "levels that move, on enough days", "Correct the levels.")
        findings.reject(CORRELATIONS, [table.issue(history.first_rows[kept[0]], "underlying", fault)])
        return None
    findings.add(_gaps(history, found, days, rules))
    findings.add(_jumps(history, found))
    return found


def _matrix(history: PriceHistory, names: Sequence[str], dates: Sequence[date]) -> NDArray[np.float64]:
    """Levels (n_dates, n_names), NaN where missing."""
    position = {day: i for i, day in enumerate(dates)}
    out = np.full((len(dates), len(names)), np.nan)
    for column, name in enumerate(names):
        for day, (level, _) in history.levels[name].items():
            out[position[day], column] = level
    return out


def _enough(
    history: PriceHistory,
    names: Sequence[str],
    dates: Sequence[date],
    levels: NDArray[np.float64],
    rules: HistoryRules,
    own: Findings,
) -> list[str]:
    """The ids of which every pair shares enough returns; those that spoil most pairs are left out first."""
    is_open = [is_business_day(rules.calendar, day) for day in dates]
    days = [day for day, opened in zip(dates, is_open, strict=True) if opened]
    spans = business_days_between(days, rules.calendar)
    returns, _, _ = usable_returns(levels[np.array(is_open, dtype=bool)], spans, rules.stale_run)
    present = (~np.isnan(returns)).astype(int)
    counts = present.T @ present  # [i, j]: returns that both have
    kept = list(range(len(names)))
    while kept:
        short = counts[np.ix_(kept, kept)] < rules.minimum_returns
        spoilt = short.sum(axis=1) + short.diagonal() * len(kept)  # one that is short by itself goes first
        if not short.any():
            break
        worst = kept[max(range(len(kept)), key=lambda i: (spoilt[i], -counts[kept[i], kept[i]]))]
        partner = kept[int(np.argmin(counts[worst, kept]))]
        own.reject(names[worst], [_short(history, names[worst], names[partner], int(counts[worst, partner]), rules)])
        kept.remove(worst)
    return [names[i] for i in kept]


def _short(history: PriceHistory, name: str, partner: str, count: int, rules: HistoryRules) -> Issue:
    shared = "" if partner == name else f" that it shares with {partner}"
    fault = Fault(
        "short-history",
        f"{count} usable returns of {name}{shared}",
        f"at least {rules.minimum_returns}",
        "It has no correlations. Add levels, or take the correlations from a table of them.",
    )
    return history.table.issue(history.first_rows[name], "underlying", fault)


def _gaps(history: PriceHistory, found: CorrelationEstimate, dates: Sequence[date], rules: HistoryRules) -> list[Issue]:
    """What was left out: days off, and missing or stale levels, once per id."""
    issues = []
    if found.days_off:
        closed = [day for day in dates if not is_business_day(rules.calendar, day)]
        number = min(levels[day][1] for levels in history.levels.values() for day in closed if day in levels)
        fault = Fault(
            "history-on-days-off",
            f"levels on {_count(found.days_off, 'day')} off, the first {closed[0]}",
            "levels of business days",
            "They are left out.",
        )
        issues.append(history.table.issue(number, "date", fault, Severity.WARNING))
    for i, name in enumerate(found.matrix.ids):
        missing, stale = int(found.missing[i]), int(found.stale[i])
        parts = [_count(missing, "missing level")] * (missing > 0) + [_count(stale, "stale return")] * (stale > 0)
        if parts:
            fault = Fault(
                "history-gaps",
                f"{' and '.join(parts)} of {name}",
                "a level of its own for every day of the history",
                f"They are left out: {int(found.counts[i, i])} returns are used. Fill in the levels if they are known.",
            )
            issues.append(history.table.issue(history.first_rows[name], "underlying", fault, Severity.WARNING))
    return issues


def _jumps(history: PriceHistory, found: CorrelationEstimate) -> list[Issue]:
    """The first return of each id that was left out as a jump, at the level it leads to."""
    issues = []
    for i, name in enumerate(found.matrix.ids):
        own = [jump for jump in found.jumps if jump.name == name]
        if not own:
            continue
        first = own[0]
        more = f" (and {_count(len(own) - 1, 'more such move')})" if len(own) > 1 else ""
        fault = Fault(
            "history-jump",
            f"{number_in_words(first.level)} for {name} on {first.day}, after {number_in_words(first.before)} on "
            f"{first.earlier}{more}",
            f"moves below {100.0 * JUMP:g} %, or within {JUMP_DEVIATIONS:g} times what is usual for it",
            f"Left out: {int(found.counts[i, i])} returns are used. A split that is not adjusted for, or a slip of the "
            "decimal point? Correct the levels.",
        )
        issues.append(history.table.issue(history.levels[name][first.day][1], "level", fault, Severity.WARNING))
    return issues


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'s' * (number != 1)}"


def _old(table: Table[PriceHistoryRow], last: date, valuation_date: date, rules: HistoryRules) -> list[Issue]:
    if not is_old(last, valuation_date, rules.calendar):
        return []
    fault = Fault(
        "old-history",
        f"a history that ends on {last}",
        f"levels up to {OLD_HISTORY_DAYS} business days before the valuation date {valuation_date}",
        "Correlations are estimated from it all the same. Add the latest levels.",
    )
    return [table.issue(table.rows[-1].number, "date", fault, Severity.WARNING)]


def _contradiction(history: PriceHistory, error: CorrelationError) -> Issue:
    fault = Fault(
        "inconsistent-correlations",
        str(error),
        "correlations that can hold together (no negative eigenvalue)",
        "Fill in missing levels of this pair, so that all correlations come from the same days.",
    )
    return history.table.issue(history.first_rows[error.repair.pair[0]], "underlying", fault)


def _absent(table: Table[PriceHistoryRow], name: str) -> Issue:
    return Issue(
        "no-history",
        f"no level of {quoted(name)}",
        "levels of every underlying, and of every pair that has a volatility",
        "It has no correlations. Add its levels.",
        file=table.sheet.file,
        sheet=table.sheet.name,
    )
