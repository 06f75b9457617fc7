"""The correction that brings a slice to quotes which are not SVI-shaped, as smooth as the quotes' rounding allows.

In units of the standard deviation at the forward, s: x = k / s, W = w / s^2. The correction is a penalised spline
(Eilers & Marx 1996): least squares of the quotes' errors, each over its allowance, plus the integrated square of the
third derivative. Dupire's local variance is dw/dt over g, and g has W''/2 in it, so what is kept small is what
would show as ripples of local volatility. The penalty is the largest at which every quote is met within its allowance.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.market.black import out_of_the_money
from pricer.market.corrected_slice import CorrectedSlice, Slice, cubic_derivatives, cubics
from pricer.market.svi import SviSlice, butterfly

Array = NDArray[np.float64]

#: Distance of knots in standard deviations, unless quotes so far apart would need more than ``MOST_CELLS``.
SPACING, MOST_CELLS = 0.25, 80
#: The correction fades out over this many standard deviations beyond the last quotes.
FADE = 2.0
#: It may take from g (see :func:`svi.butterfly`) at most down to this share of the SVI slice's: beyond that, quotes
#: follow noise rather than a density, and local volatility would more than triple from strike to strike.
LEAST_SHARE = 0.1
#: Nor below this; the fit of the slice itself keeps as much.
LEAST_G = 0.01
#: Nor may it take more of the total variance than to leave this share.
LEAST_VARIANCE = 0.3
#: Where between two expiries g is bounded too: total variance linear in time does not keep it up by itself.
BETWEEN = (0.25, 0.5, 0.75)
#: But only up to as many of a strike's own standard deviations (a probability of 3e-5 beyond), and where the
#: out-of-the-money option is worth this share of the forward (0.1 basis points): a negative density between two dates
#: further out cannot be traded on, and has no weight in a price.
MATERIAL_DEVIATIONS, LEAST_VALUE = 4.0, 1e-5
#: Bounds are imposed by so much more than they are checked by, in g and in W.
G_MARGIN, W_MARGIN = 1e-3, 1e-6
#: A result may fall short of the slice before by this in W, which is then added to all strikes: where two slices all
#: but touch, a ripple of rounding's size would else forbid any correction. A ten-thousandth of a vol point or two.
TOUCH = 2e-5
#: Logarithms of penalties tried, in bisection: from stiff to all but interpolating.
_STIFFEST, _LOOSEST, _HALVINGS = 2.0, -8.0, 9
#: Weights of lacking g and lacking W against an error of one allowance; rounds of imposing the bounds.
_G_WEIGHT, _W_WEIGHT, _ROUNDS = 3e3, 1e5, 8
#: Parts of a step tried until the sum of squares falls.
_STEPS = (1.0, 0.5, 0.25, 0.1, 0.03)
#: Parts of the correction tried where bounds remain broken.
_PARTS = (1.0, 0.98, 0.95, 0.9, 0.8, 0.7, 0.6, 0.5, 0.4, 0.3, 0.2, 0.1)


class Correction:
    """One slice's problem: quotes, spline and bounds in scaled units; ``solve`` gives the coefficients."""

    def __init__(
        self, base: SviSlice, k: Array, volatilities: Array, allowances: Array, time: float, grid: Array
    ) -> None:
        self.base, self.s = base, math.sqrt(float(base.total_variance(0.0)))
        x = k / self.s
        left, right = float(x[0]) - FADE, float(x[-1]) + FADE
        self.width = max(SPACING, (right - left) / MOST_CELLS)
        self.m = max(math.ceil((right - left) / self.width) - 3, 1)
        self.start = 0.5 * (left + right) - 0.5 * (self.m + 3) * self.width
        self.cells = cubics(np.eye(self.m))  # (m + 5, m, 4)
        fitted = np.sqrt(base.total_variance(k) / time)
        # Exact where all of the miss is taken: w - w0 = t (v - v0)(v + v0).
        self.scale = self.s**2 / (time * (volatilities + fitted) * allowances)
        self.rows = self.scale[:, None] * self.basis(x)[0]
        self.target = (volatilities - fitted) / allowances
        third = 6.0 * self.cells[1:-1, :, 3] / self.width**3
        self.penalty = self.width * third.T @ third
        self.x = grid[(grid > left) & (grid < right)]
        self.value, self.first, self.second = self.basis(self.x)

    @property
    def is_needed(self) -> bool:
        """Whether the slice misses a quote by more than its allowance."""
        return bool(np.max(np.abs(self.target)) > 1.0)

    def basis(self, x: Array) -> tuple[Array, Array, Array]:
        """All B-splines and two derivatives in x, each (n, m)."""
        z = (x - self.start) / self.width
        cell = np.clip(np.floor(z), -1.0, self.cells.shape[0] - 2.0)
        p = self.cells[cell.astype(np.intp) + 1]
        u = (z - cell)[:, None]
        value, first, second = cubic_derivatives(u, p[..., 0], p[..., 1], p[..., 2], p[..., 3])
        return value, first / self.width, second / self.width**2

    def smoothest(self) -> tuple[Array, float]:
        """Coefficients and penalty of the stiffest spline within all allowances, or of the loosest one there is."""
        normal, right = self.rows.T @ self.rows, self.rows.T @ self.target
        stiff, loose = _STIFFEST, _LOOSEST
        found = np.zeros(self.m)
        for i in range(_HALVINGS):
            middle = _STIFFEST if i == 0 else 0.5 * (stiff + loose)
            trial = np.linalg.solve(normal + 10.0**middle * self.penalty, right)
            if np.max(np.abs(self.rows @ trial - self.target)) <= 1.0:
                found, loose = trial, middle
                if i == 0:
                    break
            else:
                stiff = middle
        if loose == _LOOSEST:
            found = np.linalg.solve(normal + 10.0**loose * self.penalty, right)
        return found, 10.0**loose

    def bounded(self, coefficients: Array, penalty: float, before: Slice | None) -> tuple[Array, bool]:
        """The coefficients after imposing the bounds where they lack, round by round, and whether all are kept.

        Bounds are linearised. g is bounded on this slice and ``BETWEEN`` it and the one before; W by the one
        before, and by its own base.
        """
        base = self._scaled(self.base)
        c: Array = coefficients
        earlier = None if before is None else self._scaled(before)
        shares = (1.0,) if earlier is None else (1.0, *BETWEEN)
        starts = [_mixed(earlier, base, share) for share in shares]
        least = [_least_g(self._g(*start)[0]) + G_MARGIN for start in starts]
        floor: Array = LEAST_VARIANCE * base[0]
        if earlier is not None:
            floor = np.maximum(floor, earlier[0])
        floor = floor + W_MARGIN
        normal, right = self.rows.T @ self.rows + penalty * self.penalty, self.rows.T @ self.target

        def linearised(c: Array) -> tuple[float, bool, Array, Array]:
            """The sum of squares at ``c``, whether all bounds are kept, and the equations of the next step."""
            h = self.value @ c, self.first @ c, self.second @ c
            lack = floor - base[0] - h[0]
            held = lack > 0.0
            sound = bool(np.all(lack <= W_MARGIN))
            v = _W_WEIGHT * self.value[held]
            matrix, vector = normal + v.T @ v, right + _W_WEIGHT * v.T @ (floor - base[0])[held]
            total = float(c @ (normal @ c) - 2.0 * right @ c) + _W_WEIGHT**2 * float(lack[held] @ lack[held])
            for share, start, bound in zip(shares, starts, least, strict=True):
                w, slope, curvature = (x + share * y for x, y in zip(start, h, strict=True))
                g, by_w, by_slope = self._g(np.maximum(w, LEAST_VARIANCE * start[0]), slope, curvature)
                held = g < bound
                if share < 1.0 and held.any():
                    held &= is_material(self.s * self.x, self.s**2 * w)
                if held.any():
                    lack = (bound - g)[held]
                    sound = sound and bool(np.all(lack <= G_MARGIN))
                    a = by_w[held, None] * self.value[held] + by_slope[held, None] * self.first[held]
                    a = _G_WEIGHT * share * (a + 0.5 * self.second[held])
                    matrix += a.T @ a
                    vector += a.T @ (_G_WEIGHT * lack + a @ c)
                    total += _G_WEIGHT**2 * float(lack @ lack)
            return total, sound, matrix, vector

        total, sound, matrix, vector = linearised(c)
        for _ in range(_ROUNDS):
            if sound:
                break
            step = np.linalg.solve(matrix, vector) - c
            for part in _STEPS:  # g is far from linear where the first spline ripples
                trial = linearised(c + part * step)
                if trial[0] < total:
                    break
            else:
                return c, False
            c = c + part * step
            total, sound, matrix, vector = trial
        return c, sound

    def _scaled(self, smile: Slice) -> tuple[Array, Array, Array]:
        """W and two derivatives in x on the grid, of any slice, in this one's units."""
        w, slope, curvature = smile.derivatives(self.s * self.x)
        return w / self.s**2, slope / self.s, curvature

    def slice(self, coefficients: Array) -> CorrectedSlice:
        """The base with this correction."""
        return CorrectedSlice(self.base, self.s * self.start, self.s * self.width, self.s**2 * coefficients)

    def _g(self, w: Array, slope: Array, curvature: Array) -> tuple[Array, Array, Array]:
        """g and its derivatives in W and W' in scaled units; that in W'' is a half."""
        tilt, share = 1.0 - 0.5 * self.x * slope / w, 1.0 / w + 0.25 * self.s**2
        g = tilt * tilt - 0.25 * slope * slope * share + 0.5 * curvature
        by_w = (tilt * self.x * slope + 0.25 * slope * slope) / (w * w)
        return g, by_w, -tilt * self.x / w - 0.5 * slope * share


def corrected(
    base: SviSlice,
    k: Array,
    volatilities: Array,
    allowances: Array,
    time: float,
    before: Slice | None,
    grid: Array,
) -> Slice:
    """``base`` brought to ``volatilities`` (n,) at ``k`` (n,), increasing, as far as sound; ``base`` if it meets them.

    ``allowances`` (n,) > 0 : errors in volatility not worth a bend. ``before`` : the slice of the expiry before,
    above which ``base`` lies. ``grid`` : standard deviations at which bounds are checked.
    Where bounds stay broken the whole correction is scaled down until they are kept.
    """
    problem = Correction(base, k, volatilities, allowances, time, grid)
    if not problem.is_needed:
        return base
    coefficients, penalty = problem.smoothest()
    coefficients, sound = problem.bounded(coefficients, penalty, before)
    if sound:
        return problem.slice(coefficients)
    inner = problem.s * problem.x  # elsewhere nothing is changed
    earlier = None if before is None else before.derivatives(inner)
    at = base.derivatives(inner)
    floor = np.zeros(inner.size) if earlier is None else np.minimum(earlier[0], at[0]) - TOUCH * problem.s**2
    shares = (1.0,) if earlier is None else (1.0, *BETWEEN)
    bounds = [butterfly(inner, *_mixed(earlier, at, share)) for share in shares]
    bounds = [np.minimum(_least_g(g), g) for g in bounds]
    for part in _PARTS:
        out = problem.slice(part * coefficients)
        at = out.derivatives(inner)
        if np.all(at[0] > 0.0) and np.all(at[0] >= floor):
            mixed = [_mixed(earlier, at, share) for share in shares]
            lacks = [butterfly(inner, *each) < bound for each, bound in zip(mixed, bounds, strict=True)]
            between = zip(lacks[1:], mixed[1:], strict=True)
            near = (lack.any() and np.any(lack & is_material(inner, each[0])) for lack, each in between)
            if not lacks[0].any() and not any(near):
                return out
    return base


def is_material(k: Array, variance: Array) -> NDArray[np.bool_]:
    """Whether strikes ``exp(k)`` matter by both ``MATERIAL_DEVIATIONS`` and ``LEAST_VALUE``, any shape."""
    deviation = np.sqrt(np.maximum(variance, 1e-16))
    out: NDArray[np.bool_] = (np.abs(k) <= MATERIAL_DEVIATIONS * deviation) & (
        out_of_the_money(k, deviation) >= LEAST_VALUE
    )
    return out


def _least_g(g: Array) -> Array:
    return np.maximum(LEAST_SHARE * g, LEAST_G)


def _mixed(
    earlier: tuple[Array, Array, Array] | None, later: tuple[Array, Array, Array], share: float
) -> tuple[Array, Array, Array]:
    """Total variance and derivatives ``share`` of the way from one expiry to the next."""
    if earlier is None or share == 1.0:
        return later
    w, slope, curvature = ((1.0 - share) * x + share * y for x, y in zip(earlier, later, strict=True))
    return w, slope, curvature
