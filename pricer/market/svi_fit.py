"""The SVI slice nearest to one expiry's quotes, free of butterfly arbitrage and above the expiry before it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.market.corrected_slice import Slice, base_of
from pricer.market.slice_order import RANGE, is_free, lifted, reach, spread, stretched
from pricer.market.smile_quotes import SmileQuotes
from pricer.market.svi import SviSlice
from pricer.market.svi_repair import repaired
from pricer.market.svi_start import prior_slice, starting_slices

Array = NDArray[np.float64]

#: Points in standard deviations where the bounds are imposed, dense near the forward; a little beyond the promise.
GRID: Array = 1.1 * RANGE * np.sinh(np.linspace(-3.0, 3.0, 61)) / math.sinh(3.0)
#: Points on each side beyond it, if the next expiry reaches further: g alone is imposed there, where it lacks.
OUTER = 4
#: The steepest wing: Lee's bound of 2 (Lee 2004), not quite reached, ...
STEEPEST = 1.98
#: ... and no more than this many standard deviations, which lets the volatility of a strike eight of them
#: away be four times that at the forward: noise in the last quotes must not shoot off.
STEEPEST_IN_DEVIATIONS = 2.5
#: A slice that crosses the one before between points of ``GRID`` is lifted by up to this share of its variance (a
#: quarter of a per cent of its volatility); where more is needed, the bounds are first imposed harder.
SMALL_LIFT = 5e-3
#: A quote missed by more than this volatility is suspected to be mistyped, ...
OUTLIER = 0.005
#: ... and left out if the others' error then falls below this share.
SPOILT = 0.3
#: Weights of quotes far from the forward fall to this.
LEAST_WEIGHT = 0.1
_RIDGE = 3e-4


def fit_svi(
    quotes: SmileQuotes, time: float, before: Slice | None = None, later: Sequence[tuple[Array, Array]] = ()
) -> tuple[SviSlice, Array]:
    """The SVI slice nearest to ``quotes`` of an expiry in ``time`` years, in weighted squares of volatility.

    With the weights of the quotes (n,), 0 for those left out.

    Weights fall with distance from the forward like a strike's vega, to a tenth at most; a quote that alone
    spoils the fit of the others is left out. ``before`` is the slice of the expiry before: total variance is kept
    above it within ``RANGE`` standard deviations. ``later`` are (log-moneyness, total variance) of later expiries'
    quotes: the slice is held below them, against its own quotes only as far as squares balance. It has no butterfly
    arbitrage within ``RANGE`` standard deviations of its own and of the next of them.

    One quote gives a flat slice, two a sloped and three a curved one through the quotes. Where bounds and quotes
    contradict each other the bounds win. A slice always comes back; where even the last resort (the repair of
    Gatheral & Jacquier, or the slice before carried on in time) leaves arbitrage, ``arbitrage`` reports it.
    """
    k, volatilities = quotes.log_moneyness, quotes.volatilities
    variances = volatilities**2 * time
    if np.ptp(volatilities) <= 1e-12:
        flat = SviSlice.flat(float(variances.mean()))
        if before is None or np.all(before.total_variance(spread(flat)) <= flat.a):
            return flat, np.ones(k.size)
    prior = prior_slice(k, variances)
    s = math.sqrt(float(prior.total_variance(0.0)))
    x, roots = k / s, np.sqrt(variances) / s
    weights = np.maximum(np.exp(-0.25 * k * k / variances), LEAST_WEIGHT)
    weights /= math.sqrt(float(weights @ weights))
    ahead = next_deviation(later)
    wide = _grid(ahead / s)
    floor = np.zeros(wide.size)
    if before is not None:
        floor[: GRID.size] = np.sqrt(np.maximum(before.total_variance(GRID * s), 0.0)) / s
    wings = np.zeros(2) if before is None else np.minimum(np.array(before.wings) / s, 0.99 * _steepest(s))
    later_k = np.concatenate([np.empty(0), *(points for points, _ in later)])
    later_w = np.concatenate([np.empty(0), *(totals for _, totals in later)])
    bounds = (later_k / s, np.sqrt(later_w) / s, s * s, _steepest(s), wings)
    anchor = _free(prior, s)
    starts = [anchor, *(_free(start, s) for start in starting_slices(x, roots, weights, s))]
    from pricer.market import svi_kernel  # numba is needed only from here on

    found: list[SviSlice | None] = []
    for stiffness, points in ((1.0, GRID.size), (10.0, wide.size), (100.0, wide.size)):
        settings = (wide[:points], floor[:points], *bounds, anchor, _RIDGE, stiffness)
        p = min((svi_kernel.fit(q, x, roots, weights, *settings) for q in starts), key=_cost)[0]
        p, kept = _without_outliers(p, x, roots, weights, settings, s / math.sqrt(time))
        smile = _slice(p, s)
        raised = lifted(smile, before)
        if raised is not None and is_free(raised, ahead):
            if raised.a - smile.a <= SMALL_LIFT * s * s:
                return raised, kept
            found.append(raised)
        starts = [p]
    found.append(lifted(repaired(smile, time, reach(smile, ahead)), before))
    if before is not None:
        found.append(lifted(stretched(base_of(before), s * s), before))
    return _nearest([smile for smile in found if smile is not None], k, roots * s, weights, ahead), kept


def next_deviation(later: Sequence[tuple[Array, Array]]) -> float:
    """The deviation at the forward of the next of ``later`` expiries (see :func:`fit_svi`); 0 if there is none."""
    return math.sqrt(float(np.interp(0.0, *later[0]))) if later else 0.0


def _grid(ratio: float) -> Array:
    """``GRID``, and where the next deviation is so many of this slice's, points as far out in those as well."""
    if ratio <= 1.0:
        return GRID
    outer = GRID[-1] * np.linspace(1.0, ratio, OUTER + 1)[1:]
    return np.concatenate([GRID, -outer, outer])


def _nearest(candidates: list[SviSlice], k: Array, roots: Array, weights: Array, ahead: float) -> SviSlice:
    """Of those without butterfly arbitrage, if there are any, the one with the least weighted squares."""
    sound = [smile for smile in candidates if is_free(smile, ahead)] or candidates
    return min(sound, key=lambda smile: float(np.sum((weights * (np.sqrt(smile.total_variance(k)) - roots)) ** 2)))


def _cost(fitted: tuple[Array, float]) -> float:
    return fitted[1]


def _free(smile: SviSlice, s: float) -> Array:
    """The five free numbers of the kernel for a slice, moved inside their range."""
    from pricer.market import svi_kernel

    left, right = smile.wings
    bound = _steepest(s)
    shares = [min(max(wing / s / bound, 1e-6), 0.99) for wing in (left, right)]
    width = smile.sigma / s if smile.b > 0.0 else 1.0
    narrowest, widest = svi_kernel.NARROWEST, svi_kernel.WIDEST
    width = min(max(math.log(width / narrowest) / math.log(widest / narrowest), 0.01), 0.95)
    return np.array(
        [
            math.log(max(smile.minimum / (s * s), 1e-4)),
            *(math.log(share / (1.0 - share)) for share in shares),
            min(max(smile.m / s, -10.0), 10.0),
            math.log(width / (1.0 - width)),
        ]
    )


def _steepest(s: float) -> float:
    """The bound of a wing's slope in scaled units."""
    return min(STEEPEST / s, STEEPEST_IN_DEVIATIONS)


def _slice(p: Array, s: float) -> SviSlice:
    from pricer.market import svi_kernel

    a, b, rho, m, sigma = svi_kernel.scaled_slice(p, _steepest(s))
    return SviSlice(s * s * a, s * b, rho, s * m, s * sigma)


def _without_outliers(
    p: Array, x: Array, roots: Array, weights: Array, rest: tuple[Any, ...], to_volatility: float
) -> tuple[Array, Array]:
    """The fit without those quotes that alone spoil it, and the weights without them.

    At most every fourth is left out, and four always remain.

    While some quote is missed by more than ``OUTLIER``, the one is left out without which the others' weighted
    root mean square falls most, if it falls to less than ``SPOILT``.
    """
    from pricer.market import svi_kernel

    kept = weights.copy()
    for _ in range(min(x.size // 4, x.size - 5)):
        errors = kept * (_scaled_roots(p, x, rest) - roots)
        if np.max(np.abs(errors / np.where(kept > 0.0, kept, np.inf))) * to_volatility <= OUTLIER:
            break
        trials = []
        for i in np.flatnonzero(kept):
            others = kept.copy()
            others[i] = 0.0
            q = svi_kernel.fit(p, x, roots, others, *rest)[0]
            trials.append((float(np.sum((others * (_scaled_roots(q, x, rest) - roots)) ** 2)), q, others))
        least, q, others = min(trials, key=lambda trial: trial[0])
        if least >= SPOILT**2 * float(errors @ errors):
            break
        p, kept = q, others
    return p, kept


def _scaled_roots(p: Array, x: Array, rest: tuple[Any, ...]) -> Array:
    """sqrt(W) of the kernel's free numbers at ``x``; ``rest`` as the kernel takes it, the slopes' bound sixth."""
    from pricer.market import svi_kernel

    smile = SviSlice(*svi_kernel.scaled_slice(p, rest[5]))
    out: Array = np.sqrt(np.maximum(smile.total_variance(x), 0.0))
    return out
