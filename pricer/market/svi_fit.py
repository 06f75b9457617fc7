"""A slice through one expiry's quotes, free of butterfly arbitrage and above the expiry before it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from pricer.market.corrected_slice import CorrectedSlice, Slice, base_of
from pricer.market.slice_correction import corrected
from pricer.market.smile_quotes import SmileQuotes
from pricer.market.svi import SviSlice
from pricer.market.svi_repair import is_butterfly_free, repaired

Array = NDArray[np.float64]
_Either = TypeVar("_Either", SviSlice, CorrectedSlice)

#: Bounds are kept, and calendar order is promised, this many standard deviations of the log-level from the forward.
RANGE = 8.0
#: Points in standard deviations where the bounds are imposed, dense near the forward; a little beyond the promise.
GRID: Array = 1.1 * RANGE * np.sinh(np.linspace(-3.0, 3.0, 61)) / math.sinh(3.0)
#: The same, dense enough to check what the fit imposed on ``GRID``.
FINE_GRID: Array = RANGE * np.sinh(np.linspace(-3.0, 3.0, 361)) / math.sinh(3.0)
#: The steepest wing: Lee's bound of 2 (Lee 2004), not quite reached, ...
STEEPEST = 1.98
#: ... and no more than this many standard deviations, which lets the volatility of a strike eight of them
#: away be four times that at the forward: noise in the last quotes must not shoot off.
STEEPEST_IN_DEVIATIONS = 2.5
#: A slice that crosses the one before between points of ``GRID`` is lifted by up to this share of its variance (a
#: quarter of a per cent of its volatility); where more is needed, the bounds are first imposed harder.
SMALL_LIFT = 5e-3
#: A corrected slice is lifted by up to this share only: 0.004 vol points of a volatility of 20 %.
TINY_LIFT = 4e-4
#: A quote missed by more than this volatility is suspected to be mistyped, ...
OUTLIER = 0.005
#: ... and left out if the others' error then falls below this share.
SPOILT = 0.3
#: A quote off the others' slice by up to this (1 vol point) may still be meant; by more it stays left out, and is
#: reported as missed, even where no arbitrage would forbid to meet it.
ODD = 0.01
#: Weights of quotes far from the forward fall to this.
LEAST_WEIGHT = 0.1
#: Up to as many standard deviations (a call of 10 or 90 delta lies nearer) quotes are met alike; beyond, less closely.
NEAR = 1.5
#: With fewer quotes a correction would be drawn by nothing; SVI's five numbers are enough for them.
LEAST_QUOTES = 5
#: Slices apart by this share of the variance at the forward on all of ``FINE_GRID`` do not cross between its points:
#: the narrowest slices bend by a fiftieth of that over its steps.
CLEARLY_APART = 0.02
_RIDGE = 3e-4


def fit_slice(
    quotes: SmileQuotes, time: float, before: Slice | None = None, later: Sequence[tuple[Array, Array]] = ()
) -> Slice:
    """The SVI slice of :func:`fit_svi`, brought to the quotes by a smooth correction where it misses them.

    Quotes that were left out come back if they are off by no more than ``ODD`` and the correction meets all of
    them: they are odd then, but no contradiction.
    See :mod:`pricer.market.slice_correction` for how far a correction may go.
    """
    base, weights = fit_svi(quotes, time, before, later)
    kept = weights > 0.0
    if np.count_nonzero(kept) < LEAST_QUOTES:
        return base
    misses = np.sqrt(base.total_variance(quotes.log_moneyness) / time) - quotes.volatilities
    if not kept.all() and np.max(np.abs(misses[~kept])) <= ODD:
        smile = _corrected(base, quotes, np.ones(kept.size, dtype=bool), time, before)
        errors = np.sqrt(smile.total_variance(quotes.log_moneyness) / time) - quotes.volatilities
        if np.all(np.abs(errors) <= 2.0 * _allowances(base, quotes)):
            return smile
    return _corrected(base, quotes, kept, time, before)


def _corrected(
    base: SviSlice, quotes: SmileQuotes, kept: NDArray[np.bool_], time: float, before: Slice | None
) -> Slice:
    k, volatilities, allowances = quotes.log_moneyness, quotes.volatilities, _allowances(base, quotes)
    smile = corrected(base, k[kept], volatilities[kept], allowances[kept], time, before, FINE_GRID)
    if not isinstance(smile, CorrectedSlice):
        return base
    # Its deviation at the forward is another than the base's, and so is the range in which it must lie above.
    raised = lifted(smile, before)
    if raised is None or base_of(raised).a - base.a > TINY_LIFT * float(base.total_variance(0.0)):
        return base
    return raised if _is_free(raised) else base


def _allowances(base: SviSlice, quotes: SmileQuotes) -> Array:
    """Errors that need no bend, (n,): those of ``quotes``, and more far from the forward."""
    far = np.maximum(np.abs(quotes.log_moneyness) / math.sqrt(float(base.total_variance(0.0))) - NEAR, 0.0)
    out: Array = quotes.allowance / np.maximum(np.exp(-0.25 * far * far), LEAST_WEIGHT)
    return out


def fit_svi(
    quotes: SmileQuotes, time: float, before: Slice | None = None, later: Sequence[tuple[Array, Array]] = ()
) -> tuple[SviSlice, Array]:
    """The SVI slice nearest to ``quotes`` of an expiry in ``time`` years, in weighted squares of volatility.

    With the weights of the quotes (n,), 0 for those left out.

    Weights fall with distance from the forward like a strike's vega, to a tenth at most; a quote that alone
    spoils the fit of the others is left out. ``before`` is the slice of the expiry before: total variance is kept
    above it within ``RANGE`` standard deviations. ``later`` are (log-moneyness, total variance) of later expiries'
    quotes: the slice is held below them, against its own quotes only as far as squares balance.

    One quote gives a flat slice, two a sloped and three a curved one through the quotes. Where bounds and quotes
    contradict each other the bounds win. A slice always comes back; where even the last resort (the repair of
    Gatheral & Jacquier, or the slice before carried on in time) leaves arbitrage, ``arbitrage`` reports it.
    """
    k, volatilities = quotes.log_moneyness, quotes.volatilities
    variances = volatilities**2 * time
    if np.ptp(volatilities) <= 1e-12:
        flat = SviSlice.flat(float(variances.mean()))
        if before is None or np.all(before.total_variance(_spread(flat)) <= flat.a):
            return flat, np.ones(k.size)
    prior = _prior(k, variances)
    s = math.sqrt(float(prior.total_variance(0.0)))
    x, roots = k / s, np.sqrt(variances) / s
    weights = np.maximum(np.exp(-0.25 * k * k / variances), LEAST_WEIGHT)
    weights /= math.sqrt(float(weights @ weights))
    floor = np.zeros(GRID.size) if before is None else np.sqrt(np.maximum(before.total_variance(GRID * s), 0.0)) / s
    wings = np.zeros(2) if before is None else np.minimum(np.array(before.wings) / s, 0.99 * _steepest(s))
    later_k = np.concatenate([np.empty(0), *(points for points, _ in later)])
    later_w = np.concatenate([np.empty(0), *(totals for _, totals in later)])
    bounds = (GRID, floor, later_k / s, np.sqrt(later_w) / s, s * s, _steepest(s), wings)
    anchor = _free(prior, s)
    starts = [anchor, *(_free(start, s) for start in _starts(x, roots, weights, s))]
    from pricer.market import svi_kernel  # numba is needed only from here on

    found: list[SviSlice | None] = []
    for stiffness in (1.0, 10.0, 100.0):
        settings = (*bounds, anchor, _RIDGE, stiffness)
        p = min((svi_kernel.fit(q, x, roots, weights, *settings) for q in starts), key=_cost)[0]
        p, kept = _without_outliers(p, x, roots, weights, settings, s / math.sqrt(time))
        smile = _slice(p, s)
        raised = lifted(smile, before)
        if raised is not None and _is_free(raised):
            if raised.a - smile.a <= SMALL_LIFT * s * s:
                return raised, kept
            found.append(raised)
        starts = [p]
    found.append(lifted(repaired(smile, time, _reach(smile)), before))
    if before is not None:
        found.append(lifted(_stretched(base_of(before), s * s), before))
    return _nearest([smile for smile in found if smile is not None], k, roots * s, weights), kept


def _nearest(candidates: list[SviSlice], k: Array, roots: Array, weights: Array) -> SviSlice:
    """Of those without butterfly arbitrage, if there are any, the one with the least weighted squares."""
    sound = [smile for smile in candidates if _is_free(smile)] or candidates
    return min(sound, key=lambda smile: float(np.sum((weights * (np.sqrt(smile.total_variance(k)) - roots)) ** 2)))


def is_admissible(smile: Slice, before: Slice | None) -> bool:
    """Free of butterfly arbitrage and nowhere below the slice ``before``, within ``RANGE`` standard deviations."""
    return _is_free(smile) and (before is None or excess(before, smile)[1] <= 0.0)


def excess(before: Slice, later: Slice) -> tuple[float, float]:
    """(k, amount) where the earlier slice lies furthest above the later one, within RANGE of the later.

    Found to the grid's spacing only, where they are clearly apart.
    """
    k = _spread(later)
    apart = -CLEARLY_APART * float(later.total_variance(0.0))
    for _ in range(3):  # closing in: between the points of the grid two hyperbolas may still cross
        lack = before.total_variance(k) - later.total_variance(k)
        i = int(np.argmax(lack))
        at, most = float(k[i]), float(lack[i])
        if most < apart:
            break
        k = np.linspace(k[max(i - 1, 0)], k[min(i + 1, k.size - 1)], 21)
    return at, most


def lifted(later: _Either, before: Slice | None) -> _Either | None:
    """``later`` raised at all strikes by what it lacks to lie above ``before``; None where wings cross far out."""
    for _ in range(12):  # a higher slice is also compared further out
        lack = 0.0 if before is None else excess(before, later)[1]
        if lack <= 0.0:
            return later
        base = base_of(later)
        higher = replace(base, a=base.a + 1.01 * lack + 1e-10)
        later = replace(later, base=higher) if isinstance(later, CorrectedSlice) else higher
    return None


def _stretched(before: SviSlice, variance: float) -> SviSlice:
    """``before`` carried on to a later time: the same smile in standard deviations, never below it."""
    ratio = max(variance / float(before.total_variance(0.0)), 1.0)
    root = math.sqrt(ratio)
    return SviSlice(ratio * before.a, root * before.b, before.rho, root * before.m, root * before.sigma)


def _is_free(smile: Slice) -> bool:
    return is_butterfly_free(smile, _reach(smile))


def _reach(smile: Slice) -> float:
    """A little beyond ``RANGE``, so that lifting a slice a little leaves it checked."""
    return 1.05 * RANGE * math.sqrt(float(smile.total_variance(0.0)))


def _spread(smile: Slice) -> Array:
    out: Array = FINE_GRID * math.sqrt(float(smile.total_variance(0.0)))
    return out


def _cost(fitted: tuple[Array, float]) -> float:
    return fitted[1]


def _prior(k: Array, variances: Array) -> SviSlice:
    """The three-parameter slice through level, slope and curvature of the quotes near the forward."""
    scale = math.sqrt(float(np.interp(0.0, k, variances)))
    if k.size == 1:
        return SviSlice.flat(float(variances[0]))
    near = np.exp(-0.25 * np.minimum((k / scale) ** 2, 30.0))
    degree = min(k.size - 1, 2)
    basis = np.vander(k / scale, degree + 1, increasing=True)
    level, *rest = np.linalg.lstsq(basis * near[:, None], variances * near, rcond=None)[0]
    level = float(np.clip(level, 0.5 * scale * scale, 2.0 * scale * scale))  # quotes on one side only
    curvature = 2.0 * float(rest[1]) / scale**2 if degree == 2 else None
    return SviSlice.from_forward(level, float(rest[0]) / scale, curvature)


def _starts(x: Array, roots: Array, weights: Array, s: float) -> list[SviSlice]:
    """Two starts by exact linear least squares for given centre and width (De Marco & Martini 2009)."""
    if x.size < 4:
        return []
    centres, widths = np.meshgrid(np.array([-2.0, -1.0, -0.3, 0.3, 1.0, 2.0]), np.array([0.3, 1.0, 3.0]))
    m, sigma = centres.ravel(), widths.ravel()
    z = x - m[:, None]
    basis = np.stack([np.ones_like(z), z, np.sqrt(z * z + sigma[:, None] ** 2)], axis=-1) * weights[:, None]
    target = roots**2 * weights
    normal = np.einsum("snp,snq->spq", basis, basis) + 1e-10 * np.eye(3)
    a, d, c = np.linalg.solve(normal, np.einsum("snp,n->sp", basis, target)[..., None])[..., 0].T
    error = np.sum((np.einsum("snp,ps->sn", basis, np.array([a, d, c])) - target) ** 2, axis=1)
    rho = d / np.where(c > 0.0, c, 1.0)
    least = a + c * sigma * np.sqrt(np.maximum(1.0 - rho * rho, 0.0))
    allowed = (c > 1e-6) & (np.abs(rho) < 0.999) & (least > 1e-4)
    order = [i for i in np.argsort(error) if allowed[i]][:2]
    return [SviSlice(s * s * a[i], s * c[i], rho[i], s * m[i], s * sigma[i]) for i in order]


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
