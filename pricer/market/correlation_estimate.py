"""Correlations estimated from a table of past levels.

Daily log-returns with mean 0 (common practice: over a day the mean is lost in the noise) are
weighted by age, ``2 ** (-age / half_life)`` with the age in business days of the calendar. What is
not a return of its own day is left out and counted:

- a missing level costs the return into it and the return out of it;
- a level repeated over ``stale_run`` business days or more is stale: the returns of the run, and the
  one that ends it and catches up, are left out for that id;
- a move that is large for any day and far outside what is usual for its id is no return of a day, but
  a split that was not adjusted for or a slip of the decimal point: the return is left out;
- rows on days off are dropped.

A return over a longer gap common to all ids (a holiday) counts as one day, divided by the root of
the business days it spans. Levels of markets that close at different hours are correlated too
low by daily returns; nothing here corrects that.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pricer.market.calendars import is_business_day
from pricer.market.correlation import CorrelationMatrix, Repair, checked

Returns = NDArray[np.float64]  # (n_returns, n_ids), NaN where left out

#: A log-return above this size, and above this many of its id's usual deviations, is a jump (rules of our own).
JUMP, JUMP_DEVIATIONS = 0.25, 12.0
#: A normal variable's standard deviation over the median of its size (Hampel 1974).
_DEVIATION_OF_MEDIAN = 1.4826


class Window(StrEnum):
    """Which returns a pair's correlation is estimated from."""

    PAIRWISE = "pairwise"  # those that both ids of the pair have: most data, may need repair
    COMPLETE = "complete"  # those that all ids have: one window for all, always consistent


@dataclass(frozen=True, slots=True)
class HistoryRules:
    """How a history is read. ``half_life`` in business days; ``minimum_returns`` that every pair must share."""

    half_life: float = 120.0
    stale_run: int = 3
    minimum_returns: int = 60
    window: Window = Window.PAIRWISE
    calendar: str = "WEEKENDS"

    def __post_init__(self) -> None:
        if not (np.isfinite(self.half_life) and self.half_life > 0.0):
            raise ValueError(f"the half-life must be above 0 business days; got {self.half_life}")
        if self.stale_run < 2:
            raise ValueError(f"a stale run has 2 unchanged days or more; got {self.stale_run}")
        if self.minimum_returns < 2:
            raise ValueError(f"a correlation needs 2 returns or more; got {self.minimum_returns}")


@dataclass(frozen=True, slots=True)
class Jump:
    """A return that was left out as no return of a day: from the level ``before`` to that of ``day``."""

    name: str
    earlier: date
    before: float
    day: date
    level: float


@dataclass(frozen=True, slots=True, eq=False)
class CorrelationEstimate:
    """The matrix, the ``repair`` it took (None for none), and what it was made from, in the order of its ids.

    ``counts`` (n, n) are the returns used for each pair, ``effective`` (n, n) the number of equally
    weighted returns that would be as precise (Kish 1965). ``missing`` and ``stale`` (n,) count the levels
    missing on business days of each id's own calendar, and the returns left out as stale; ``days_off`` the
    rows dropped; ``jumps`` are the returns left out as such.
    """

    matrix: CorrelationMatrix
    repair: Repair | None
    counts: NDArray[np.int64]
    effective: NDArray[np.float64]
    missing: NDArray[np.int64]
    stale: NDArray[np.int64]
    days_off: int
    jumps: tuple[Jump, ...] = ()


def estimate(
    ids: Sequence[str],
    dates: Sequence[date],
    levels: NDArray[np.float64],
    rules: HistoryRules | None = None,
    *,
    limit: float = 0.10,
    calendars: Mapping[str, str] | None = None,
) -> CorrelationEstimate:
    """Correlations of ``ids`` from ``levels`` (n_dates, n_ids), NaN where missing, on increasing ``dates``.

    ``calendars`` names the calendar of an id; those without one have levels on all business days of the rules.

    Raises ValueError for shapes that do not fit, levels that are not positive, dates out of
    order, pairs that share too few returns, and ids that never move; and
    :class:`~pricer.market.correlation.CorrelationError` for a repair that moves an entry by more than ``limit``.
    """
    rules = rules or HistoryRules()
    names = tuple(ids)
    table = _well_formed(names, dates, np.array(levels, dtype=float))
    open_days = np.array([is_business_day(rules.calendar, day) for day in dates], dtype=bool)
    table = table[open_days]
    kept = [day for day, is_open in zip(dates, open_days, strict=True) if is_open]
    spans = business_days_between(kept, rules.calendar)
    returns, stale, jumped = usable_returns(table, spans, rules.stale_run)
    if rules.window is Window.COMPLETE:
        returns = np.where(np.isnan(returns).any(axis=1, keepdims=True), np.nan, returns)
    ages = np.concatenate([np.cumsum(spans[::-1])[::-1][1:], [0.0]]) if len(spans) else np.zeros(0)
    weights = np.exp2(-ages / rules.half_life)
    counts, effective = _counts(returns, weights)
    _check_counts(names, counts, returns, rules.minimum_returns)
    matrix, repair = checked(names, weighted_correlation(returns, weights), limit)
    expected = _open(names, kept, rules, calendars or {})
    missing = (np.isnan(table) & expected).sum(axis=0)
    jumps = [Jump(names[j], kept[i], float(table[i, j]), kept[i + 1], float(table[i + 1, j])) for i, j in jumped]
    return CorrelationEstimate(matrix, repair, counts, effective, missing, stale, int((~open_days).sum()), tuple(jumps))


def business_days_between(dates: Sequence[date], calendar: str) -> NDArray[np.float64]:
    """Business days from each date to the next, (n_dates - 1,); the dates are business days."""
    if not dates:
        return np.zeros(0)
    every = (date.fromordinal(n) for n in range(dates[0].toordinal(), dates[-1].toordinal() + 1))
    number = {day: count for count, day in enumerate(day for day in every if is_business_day(calendar, day))}
    return np.diff([float(number[day]) for day in dates])


def log_returns(
    levels: NDArray[np.float64], spans: NDArray[np.float64], stale_run: int
) -> tuple[Returns, NDArray[np.int64]]:
    """Log-returns per root business day, NaN where left out: (n_dates - 1, n_ids); and how many were stale, (n_ids,).

    ``levels`` (n_dates, n_ids) are positive or NaN; ``spans`` (n_dates - 1,) the business days in between.
    """
    returns: Returns = np.diff(np.log(levels), axis=0) / np.sqrt(spans)[:, None]
    stale = np.zeros(returns.shape, dtype=bool)
    for column in range(returns.shape[1]):
        run, length = 0, 0.0
        for row, value in enumerate(returns[:, column]):
            if value == 0.0:
                run, length = run + 1, length + spans[row]
                continue
            if length >= stale_run:
                # A gap after the run has no return to leave out: it is missing already.
                stale[row - run : row + (not np.isnan(value)), column] = True
            run, length = 0, 0.0
        if length >= stale_run:
            stale[len(returns) - run :, column] = True
    returns[stale] = np.nan
    return returns, stale.sum(axis=0)


def usable_returns(
    levels: NDArray[np.float64], spans: NDArray[np.float64], stale_run: int
) -> tuple[Returns, NDArray[np.int64], list[tuple[int, int]]]:
    """The returns of :func:`log_returns` without jumps, the numbers of stale ones, and row and column of each jump.

    What is usual for an id is read from the median size of its returns, which a few jumps do not move.
    """
    returns, stale = log_returns(levels, spans, stale_run)
    jumped = np.zeros(returns.shape, dtype=bool)
    for column in range(returns.shape[1]):
        size = np.abs(returns[:, column])
        if not np.isnan(size).all():
            usual = _DEVIATION_OF_MEDIAN * float(np.nanmedian(size))
            jumped[:, column] = (size > JUMP_DEVIATIONS * usual) & (size * np.sqrt(spans) > JUMP)
    returns[jumped] = np.nan
    return returns, stale, [(int(row), int(column)) for row, column in np.argwhere(jumped)]


def _open(
    ids: tuple[str, ...], dates: Sequence[date], rules: HistoryRules, calendars: Mapping[str, str]
) -> NDArray[np.bool_]:
    """Whether an id has a level of its own on a day: (n_dates, n_ids)."""
    own = [calendars.get(name, rules.calendar) for name in ids]
    open_on = {calendar: [is_business_day(calendar, day) for day in dates] for calendar in set(own)}
    return np.array([open_on[calendar] for calendar in own], dtype=bool).T.reshape(len(dates), len(ids))


def weighted_correlation(returns: Returns, weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """Correlations about 0, each pair over the rows that both have: (n_ids, n_ids).

    Numerator and both variances of a pair use the same rows, so every entry lies in [-1, 1].
    """
    present = ~np.isnan(returns)
    filled = np.where(present, returns, 0.0)
    products = (filled * weights[:, None]).T @ filled
    squares = (filled**2 * weights[:, None]).T @ present  # [i, j]: variance of i over the rows of j
    scale = np.sqrt(squares * squares.T)
    ratio = np.divide(products, scale, out=np.full_like(products, np.nan), where=scale > 0.0)
    out: NDArray[np.float64] = np.clip(ratio, -1.0, 1.0)
    np.fill_diagonal(out, 1.0)
    return 0.5 * (out + out.T)


def _counts(returns: Returns, weights: NDArray[np.float64]) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    present = (~np.isnan(returns)).astype(float)
    counts = (present.T @ present).astype(np.int64)
    total = (present * weights[:, None]).T @ present
    squared = (present * weights[:, None] ** 2).T @ present
    return counts, np.divide(total**2, squared, out=np.zeros_like(total), where=squared > 0.0)


def _check_counts(ids: tuple[str, ...], counts: NDArray[np.int64], returns: Returns, minimum: int) -> None:
    short = [(int(counts[i, j]), ids[i], ids[j]) for i in range(len(ids)) for j in range(i) if counts[i, j] < minimum]
    short += [(int(counts[i, i]), ids[i], ids[i]) for i in range(len(ids)) if counts[i, i] < minimum]
    if short:
        count, a, b = min(short)
        more = f" (and {len(short) - 1} other pairs too few)" if len(short) > 1 else ""
        raise ValueError(f"{a} and {b} share {count} usable returns, fewer than {minimum}{more}")
    for i, name in enumerate(ids):
        if not np.nanmax(np.abs(returns[:, i])) > 0.0:
            raise ValueError(f"{name} never moves: it has no correlation")


def _well_formed(ids: tuple[str, ...], dates: Sequence[date], levels: NDArray[np.float64]) -> NDArray[np.float64]:
    if not ids or levels.shape != (len(dates), len(ids)):
        raise ValueError(f"levels of shape {levels.shape} do not fit {len(dates)} dates and {len(ids)} ids")
    for earlier, later in pairwise(dates):
        if later <= earlier:
            raise ValueError(f"dates must increase; {later} follows {earlier}")
    bad = np.argwhere(~np.isnan(levels) & ~((levels > 0.0) & np.isfinite(levels)))
    if len(bad):
        row, column = bad[0]
        raise ValueError(f"the level of {ids[column]} on {dates[row]} must be above 0; got {levels[row, column]:g}")
    return levels
