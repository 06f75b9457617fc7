"""Does the local volatility table of a surface give the surface back? By the forward equation, without a simulation."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import groupby

import numpy as np

from pricer.core.issues import Issue
from pricer.market.black import call, vega
from pricer.market.checked_surface import CheckedSurface, QuoteFit
from pricer.market.findings import Locate, nowhere, percent, warning
from pricer.market.forward_equation import model_calls
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.volatility_quality import quote_place

#: Quotes between 10 and 90 delta whose volatility the table misses by more than this (0.05 vol points) are reported.
WORST_TABLE_MISS = 5e-4


@dataclass(frozen=True, slots=True)
class TableMiss:
    """A quote and what the model less the surface is there, in volatility of X (0.001 is 0.1 vol points)."""

    quote: QuoteFit
    error: float


def table_misses(checked: CheckedSurface) -> tuple[TableMiss, ...]:
    """What local volatility makes of every quote between 10 and 90 delta, in their order.

    To first order in the error: model price less surface price over vega, both on X.
    """
    quotes = [quote for quote in checked.quotes if quote.in_the_middle]
    groups = [list(group) for _, group in groupby(quotes, key=lambda quote: quote.expiry_date)]
    if not groups:
        return ()
    surface = checked.surface
    times = [surface.times[surface.dates.index(group[0].expiry_date)] for group in groups]
    strikes = [np.array([quote.pure_log_strike for quote in group]) for group in groups]
    found = model_calls(LocalVolSurface.from_implied(surface, horizon=times[-1]), strikes, times)
    out: list[TableMiss] = []
    for group, time, k, calls in zip(groups, times, strikes, found, strict=True):
        deviations = np.sqrt(surface.total_variance(k, time))
        errors = (calls - call(k, deviations)) / (vega(k, deviations) * np.sqrt(time))
        out.extend(TableMiss(quote, error) for quote, error in zip(group, errors.tolist(), strict=True))
    return tuple(out)


def local_vol_gates(checked: CheckedSurface, place: Locate = nowhere) -> Iterator[Issue]:
    """A warning where local volatility misses a surface that passes its checks by more than ``WORST_TABLE_MISS``.

    One that fails is not used unasked, and its failures say more. ``place`` as for
    :func:`~pricer.market.surface_quality.surface_gates`.
    """
    if not checked.passes:
        return
    missed = [miss for miss in table_misses(checked) if not abs(miss.error) <= WORST_TABLE_MISS]
    if not missed:
        return
    worst = max(missed, key=lambda miss: abs(miss.error))
    quote = worst.quote
    others = f", and {len(missed) - 1} more of its quotes by less" if len(missed) > 1 else ""
    yield warning(
        quote_place(checked.underlying_id, quote, place),
        "local-volatility-miss",
        f"the local volatility table of {checked.underlying_id} misses its surface by "
        f"{100.0 * abs(worst.error):.2f} vol points on {quote.expiry_date} at strike {quote.strike:.6g} "
        f"({percent(quote.relative_strike, 1)} of the forward){others}",
        f"quotes between 10 and 90 delta given back within {100.0 * WORST_TABLE_MISS:.2f} vol points",
        "Values under local volatility are off by as much; prefer lognormal ones where they depend on these strikes, "
        "or review quotes that are very steep there.",
    )
