"""Butterfly arbitrage of one slice: where it is, and the nearest slice without it."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from pricer.market.corrected_slice import CorrectedSlice, Slice
from pricer.market.svi import JumpWings, SviSlice

Array = NDArray[np.float64]

#: Points per side of the search for the least g; the minimum between them is then refined.
_POINTS = 301
#: A g below 0 by no more than this is rounding.
TOLERANCE = 1e-10


def least_butterfly(smile: Slice, reach: float, interesting: float = math.inf) -> tuple[float, float]:
    """(k, g) where g is least within ``reach`` of the forward in log-moneyness.

    Found to the grid's spacing only, where g is above ``interesting`` on all of a dense grid.
    """
    k = _points(smile, reach)
    g = smile.butterfly(k)
    i = int(np.argmin(g))
    left, right = k[max(i - 1, 0)], k[min(i + 1, k.size - 1)]
    if g[i] == 1.0 == g.max():
        return 0.0, 1.0
    if g[i] > interesting:
        return float(k[i]), float(g[i])
    found = minimize_scalar(lambda at: float(smile.butterfly(at)), bounds=(left, right), method="bounded")
    return (float(found.x), float(found.fun)) if found.fun < g[i] else (float(k[i]), float(g[i]))


def is_butterfly_free(smile: Slice, reach: float) -> bool:
    """Whether g >= 0 within ``reach``, on a grid dense at the forward and at the slice's own centre."""
    return bool(np.all(smile.butterfly(_points(smile, reach)) >= -TOLERANCE))


def repaired(smile: SviSlice, time: float, reach: float) -> SviSlice:
    """A slice without butterfly arbitrage within ``reach``, with the variance, skew and put wing of ``smile``.

    Gatheral & Jacquier (2014), section 5.1: the call wing ``c' = p + 2 psi`` and least variance
    ``v~' = v 4 p c' / (p + c')^2`` always do. Between the given pair (c, v~) and this one, the pair that
    moves total variance least near the forward is taken. Where the put wing itself is too steep both wings are
    scaled to Lee's bound first; ``smile`` is returned if it has no arbitrage.
    """
    if is_butterfly_free(smile, reach):
        return smile
    smile = _within_lee(smile)
    jw = smile.jump_wings(time)
    safe_call = max(jw.put_wing + 2.0 * jw.skew, 0.0)
    safe_least = jw.variance * 4.0 * jw.put_wing * safe_call / (jw.put_wing + safe_call) ** 2
    near = np.linspace(-2.0, 2.0, 41) * math.sqrt(jw.variance * time)
    kept = smile.total_variance(near)
    best, distance = SviSlice.flat(jw.variance * time), math.inf
    for share in np.linspace(0.0, 1.0, 9):
        least = jw.minimum_variance + share * (safe_least - jw.minimum_variance)
        found = _nearest_call_wing(replace(jw, minimum_variance=float(least)), safe_call, reach)
        if found is not None:
            moved = float(np.sum((found.total_variance(near) - kept) ** 2))
            if moved < distance:
                best, distance = found, moved
    return best


def _nearest_call_wing(jw: JumpWings, safe: float, reach: float) -> SviSlice | None:
    """The slice whose call wing is as near to the given one, between it and ``safe``, as g >= 0 allows."""
    good, bad = 1.0, 0.0
    found = _candidate(jw, safe, reach)
    if found is None:
        return None
    for _ in range(30):
        share = 0.5 * (good + bad)
        slice_ = _candidate(jw, jw.call_wing + share * (safe - jw.call_wing), reach)
        if slice_ is None:
            bad = share
        else:
            good, found = share, slice_
    return found


def _candidate(jw: JumpWings, call_wing: float, reach: float) -> SviSlice | None:
    try:
        smile = SviSlice.from_jump_wings(replace(jw, call_wing=call_wing))
    except (ValueError, ZeroDivisionError):
        return None
    return smile if is_butterfly_free(smile, reach) else None


def _within_lee(smile: SviSlice) -> SviSlice:
    """The slice with its level at the forward kept and its steeper wing brought to a slope below 2."""
    steepest = max(smile.wings)
    if steepest <= 1.98:
        return smile
    b = smile.b * 1.98 / steepest
    flatter = replace(smile, b=b, a=max(smile.a, 0.0))
    shift = float(smile.total_variance(0.0)) - float(flatter.total_variance(0.0))
    return replace(flatter, a=flatter.a + max(shift, 0.0))


def _points(smile: Slice, reach: float) -> Array:
    if isinstance(smile, CorrectedSlice):
        inner = np.linspace(max(smile.start, -reach), min(smile.end, reach), 4 * smile.coefficients.size + 13)
        return np.union1d(_points(smile.base, reach), inner)
    bend = np.sinh(np.linspace(-6.0, 6.0, _POINTS)) / math.sinh(6.0)
    centre = smile.m + 20.0 * smile.sigma * bend
    out: Array = np.unique(np.concatenate([reach * bend, centre[np.abs(centre) <= reach]]))
    return out
